package boltjournal

import (
	"encoding/binary"
	"fmt"
	"hash/fnv"
	"io"

	"example.com/wideberth/mapstore/journal"
)

// A bbolt file starts with two pages, written in turn, that each name a whole
// state of the file; the newer valid one counts. That makes commits atomic, but it
// also means that damage to the newer page takes the file back to the commit
// before, without a word. A crash cannot cause that damage: what counts of the page
// is 80 bytes within its first sector, and disks write sectors whole. So both pages
// must be valid, or the file is refused.
//
// The layout (bbolt 1.x, internal/common): a page header of 16 bytes, then magic,
// version, page size, flags (4 bytes each), root, sequence, free list, page count,
// transaction, and an FNV-64a over the 56 bytes before (8 bytes each), in the
// machine's byte order.
const (
	leadHeader = 16
	leadBytes  = 64
	leadMagic  = 0xED0CDAED
)

// checkLead says whether both leading pages are valid.
func checkLead(f io.ReaderAt, path string, pageSize int) error {
	for i := range 2 {
		var b [leadBytes]byte
		if _, err := f.ReadAt(b[:], int64(i*pageSize)+leadHeader); err != nil {
			return fmt.Errorf("journal %q: leading page %d: %w", path, i, err)
		}
		h := fnv.New64a()
		h.Write(b[:leadBytes-8])
		if binary.NativeEndian.Uint32(b[:]) != leadMagic || binary.NativeEndian.Uint64(b[leadBytes-8:]) != h.Sum64() {
			return fmt.Errorf("%w: %w", ErrLostCommit, &journal.CorruptError{File: path, What: fmt.Sprintf("leading page %d is damaged", i)})
		}
	}
	return nil
}
