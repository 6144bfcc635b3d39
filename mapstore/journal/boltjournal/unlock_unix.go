//go:build linux || darwin || freebsd || netbsd || openbsd || dragonfly

package boltjournal

import (
	"os"
	"syscall"
)

// unlock lets go of bbolt's lock on a file that is still mapped: closing it alone
// would not.
func unlock(f *os.File) { syscall.Flock(int(f.Fd()), syscall.LOCK_UN) }
