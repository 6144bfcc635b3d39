package journal

import (
	"context"
	"fmt"
)

// Chain is a place in a floor's chain of records: after Version, whose record has
// that Hash. The zero Version and Hash stand before the first record. An
// implementation of Reader moves a Chain along the records that it reads; so may
// anyone who wants to be sure of what a Reader gave.
type Chain struct {
	Floor   string
	Version int64
	Hash    [32]byte
}

// Next moves the chain on by r, which must be the record that follows. The error
// is a *CorruptError, and the chain stays where it was. It does not compute r's
// hash again; DecodeRecord has done so.
func (c *Chain) Next(r *Record) error {
	bad := func(format string, args ...any) error {
		return &CorruptError{Floor: c.Floor, Version: c.Version + 1, What: fmt.Sprintf(format, args...)}
	}
	switch {
	case r.Floor != c.Floor:
		return bad("the record says that it is of floor %q", r.Floor)
	case r.Version != c.Version+1:
		return bad("the record says that it is version %d", r.Version)
	case r.Prev != c.Hash:
		return bad("the record is chained to another record than version %d", c.Version)
	}
	c.Version, c.Hash = r.Version, r.Hash
	return nil
}

// walkPage is how many records Walk asks for at a time.
const walkPage = 256

// Walk calls do for every record of a floor from version from up to and including
// version to, in order; to 0 means up to the head. It stops at the first error,
// which may be do's.
func Walk(ctx context.Context, r Reader, floor string, from, to int64, do func(*Record) error) error {
	from = max(from, 1)
	for to == 0 || from <= to {
		n := int64(walkPage)
		if to > 0 {
			n = min(n, to-from+1)
		}
		page, err := r.Read(ctx, floor, from, int(n))
		if err != nil {
			return err
		}
		if len(page) == 0 {
			return nil
		}
		for i := range page {
			if err := do(&page[i]); err != nil {
				return err
			}
		}
		from += int64(len(page))
	}
	return nil
}

// Verify reads every record and every snapshot of a floor and gives the newest
// version up to which all records check out, with the first fault of a record, or
// else the first of a snapshot. It does not carry the records out.
func Verify(ctx context.Context, r Reader, floor string) (good int64, err error) {
	_, headErr := r.Head(ctx, floor)
	err = Walk(ctx, r, floor, 1, 0, func(rec *Record) error { good = rec.Version; return nil })
	if err != nil {
		// A page with a fault gives no records at all: go through it one by one.
		err = nil
		for err == nil {
			var one []Record
			if one, err = r.Read(ctx, floor, good+1, 1); err == nil {
				if len(one) == 0 {
					return good, headErr
				}
				good = one[0].Version
			}
		}
		return good, err
	}
	if headErr != nil {
		return good, headErr
	}
	for at := good; at > 0; {
		s, ok, err := r.Latest(ctx, floor, at)
		if err != nil || !ok {
			return good, err
		}
		at = s.Version - 1
	}
	return good, nil
}

// KeepSnapshots is how many snapshots of a floor a journal keeps.
const KeepSnapshots = 12

// keepNewest is how many of the newest snapshots are never spared.
const keepNewest = 3

// Spare says which of a floor's snapshots to let go of: versions are those held, in
// rising order; ok is false when they are not more than KeepSnapshots. Of all but
// the newest few it picks the one that is missed least: the one for which the gap
// that it leaves is smallest in relation to its age. So the gaps grow with age, and
// rebuilding a version from the snapshot below it costs in proportion to its age at
// worst.
func Spare(versions []int64) (version int64, ok bool) {
	n := len(versions)
	if n <= KeepSnapshots {
		return 0, false
	}
	best := -1
	var bestGap, bestAge int64
	for i := 0; i < n-keepNewest; i++ {
		below := int64(0)
		if i > 0 {
			below = versions[i-1]
		}
		gap, age := versions[i+1]-below, versions[n-1]-below
		// gap/age < bestGap/bestAge, in whole numbers; versions stay far below 2^31.
		if best < 0 || gap*bestAge < bestGap*age {
			best, bestGap, bestAge = i, gap, age
		}
	}
	return versions[best], true
}
