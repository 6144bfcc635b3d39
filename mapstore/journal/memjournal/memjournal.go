// Package memjournal keeps a journal in memory, for tests and for trying things
// out. Nothing outlives the process. It keeps encoded values, so that what passes
// here has been through the same codec as on disk.
package memjournal

import (
	"context"
	"fmt"
	"maps"
	"slices"
	"sync"

	"example.com/wideberth/mapstore/journal"
)

// Storage is what a disk is to other journals: it stays when a Journal on it is
// closed. The zero value is empty and ready. It is safe for concurrent use, by any
// number of Journals, which then are each other's further writers.
type Storage struct {
	mu     sync.RWMutex
	floors map[string]*floorPart
}

type floorPart struct {
	records   [][]byte // of version i+1
	hash      [32]byte // of the newest
	requests  map[string]int64
	snapshots map[int64][]byte
}

// Open gives a journal on the storage.
func (s *Storage) Open() *Journal { return &Journal{storage: s} }

// Journal is one handle on a Storage. It implements journal.Journal.
type Journal struct {
	storage *Storage
	mu      sync.RWMutex
	closed  bool
}

var _ journal.Journal = (*Journal)(nil)

func (j *Journal) enter(ctx context.Context) error {
	j.mu.RLock()
	defer j.mu.RUnlock()
	if j.closed {
		return journal.ErrClosed
	}
	return ctx.Err()
}

// read runs fn on a floor's part under the read lock; not at all when there is none.
func (j *Journal) read(ctx context.Context, floor string, fn func(*floorPart) error) error {
	if err := j.enter(ctx); err != nil {
		return err
	}
	j.storage.mu.RLock()
	defer j.storage.mu.RUnlock()
	if p := j.storage.floors[floor]; p != nil {
		return fn(p)
	}
	return nil
}

// Floors are the ids that have records.
func (j *Journal) Floors(ctx context.Context) ([]string, error) {
	if err := j.enter(ctx); err != nil {
		return nil, err
	}
	j.storage.mu.RLock()
	defer j.storage.mu.RUnlock()
	return slices.Sorted(maps.Keys(j.storage.floors)), nil
}

// Head is the newest version.
func (j *Journal) Head(ctx context.Context, floor string) (version int64, err error) {
	err = j.read(ctx, floor, func(p *floorPart) error {
		version = int64(len(p.records))
		return nil
	})
	return version, err
}

// Read gives records from a version on.
func (j *Journal) Read(ctx context.Context, floor string, from int64, limit int) (recs []journal.Record, err error) {
	from = max(from, 1)
	err = j.read(ctx, floor, func(p *floorPart) error {
		chain := journal.Chain{Floor: floor, Version: from - 1}
		if from > 1 && from <= int64(len(p.records)) {
			before, err := journal.DecodeRecord(p.records[from-2])
			if err != nil {
				return err
			}
			chain.Hash = before.Hash
		}
		payload := 0
		for v := from; v <= int64(len(p.records)) && len(recs) < limit; v++ {
			r, err := journal.DecodeRecord(p.records[v-1])
			if err != nil {
				return err
			}
			if err := chain.Next(&r); err != nil {
				return err
			}
			if payload += len(r.Payload); payload > journal.MaxReadBytes && len(recs) > 0 {
				return nil
			}
			recs = append(recs, r)
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	return recs, nil
}

// Latest is the newest snapshot at or below a version.
func (j *Journal) Latest(ctx context.Context, floor string, version int64) (s journal.Snapshot, ok bool, err error) {
	err = j.read(ctx, floor, func(p *floorPart) (err error) {
		best := int64(0)
		for v := range p.snapshots {
			if v <= version {
				best = max(best, v)
			}
		}
		if best > 0 {
			s, err = journal.DecodeSnapshot(p.snapshots[best])
			ok = err == nil
		}
		return err
	})
	return s, ok, err
}

// Find is the version that a request id was carried out as.
func (j *Journal) Find(ctx context.Context, floor, requestID string) (version int64, err error) {
	err = j.read(ctx, floor, func(p *floorPart) error {
		version = p.requests[requestID]
		return nil
	})
	return version, err
}

// Append adds a record.
func (j *Journal) Append(ctx context.Context, r journal.Record) error {
	value, err := journal.EncodeRecord(r)
	if err != nil {
		return err
	}
	if err := j.enter(ctx); err != nil {
		return err
	}
	j.storage.mu.Lock()
	defer j.storage.mu.Unlock()
	p := j.storage.floors[r.Floor]
	if p == nil {
		p = &floorPart{requests: map[string]int64{}, snapshots: map[int64][]byte{}}
	}
	switch at := int64(len(p.records)); {
	case r.Version != at+1:
		return fmt.Errorf("%w: floor %q is at version %d, the record is version %d", journal.ErrConflict, r.Floor, at, r.Version)
	case r.Prev != p.hash:
		return fmt.Errorf("%w: the record is not chained to version %d of floor %q", journal.ErrInvalid, at, r.Floor)
	case r.RequestID != "" && p.requests[r.RequestID] != 0:
		return fmt.Errorf("%w: request id %q was used before on floor %q", journal.ErrInvalid, r.RequestID, r.Floor)
	}
	p.records, p.hash = append(p.records, value), r.Hash
	if r.RequestID != "" {
		p.requests[r.RequestID] = r.Version
	}
	if j.storage.floors == nil {
		j.storage.floors = map[string]*floorPart{}
	}
	j.storage.floors[r.Floor] = p
	return nil
}

// PutSnapshot keeps a version's content.
func (j *Journal) PutSnapshot(ctx context.Context, s journal.Snapshot) error {
	value, err := journal.EncodeSnapshot(s)
	if err != nil {
		return err
	}
	if err := j.enter(ctx); err != nil {
		return err
	}
	j.storage.mu.Lock()
	defer j.storage.mu.Unlock()
	p := j.storage.floors[s.Floor]
	if p == nil || s.Version > int64(len(p.records)) {
		return fmt.Errorf("%w: floor %q has no version %d to keep a snapshot of", journal.ErrInvalid, s.Floor, s.Version)
	}
	r, err := journal.DecodeRecord(p.records[s.Version-1])
	if err != nil {
		return err
	}
	if r.Digest != s.Digest {
		return fmt.Errorf("%w: the snapshot's digest is not that of version %d of floor %q", journal.ErrInvalid, s.Version, s.Floor)
	}
	p.snapshots[s.Version] = value
	if v, ok := journal.Spare(slices.Sorted(maps.Keys(p.snapshots))); ok {
		delete(p.snapshots, v)
	}
	return nil
}

// Close ends the handle; the storage stays.
func (j *Journal) Close() error {
	j.mu.Lock()
	defer j.mu.Unlock()
	j.closed = true
	return nil
}
