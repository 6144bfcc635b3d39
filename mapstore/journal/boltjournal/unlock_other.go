//go:build !linux && !darwin && !freebsd && !netbsd && !openbsd && !dragonfly

package boltjournal

import "os"

// unlock does nothing: closing the file lets go of its lock here.
func unlock(*os.File) {}
