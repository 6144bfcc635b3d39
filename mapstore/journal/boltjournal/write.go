package boltjournal

import (
	"context"
	"fmt"

	"example.com/wideberth/mapstore/journal"
	bolt "go.etcd.io/bbolt"
)

// recordFill is how full pages of records are packed; they are only ever added at
// the end.
const recordFill = 0.9

// Append makes a record durable. When it returns nil the file has been synced.
func (j *Journal) Append(ctx context.Context, r journal.Record) error {
	value, err := journal.EncodeRecord(r)
	if err != nil {
		return err
	}
	return j.update(ctx, func(tx *bolt.Tx) error {
		p, err := j.part(tx, r.Floor)
		if err != nil {
			return err
		}
		at := int64(0)
		if p != nil {
			at = p.head.version
		}
		if r.Version != at+1 {
			return fmt.Errorf("%w: floor %q is at version %d, the record is version %d", journal.ErrConflict, r.Floor, at, r.Version)
		}
		if p == nil {
			if p, err = addPart(tx, r.Floor); err != nil {
				return err
			}
		}
		if r.Prev != p.head.hash {
			return fmt.Errorf("%w: the record is not chained to version %d of floor %q", journal.ErrInvalid, at, r.Floor)
		}
		if at > 0 {
			if err := p.checkHead(); err != nil {
				return err
			}
		}
		if r.RequestID != "" {
			id := []byte(r.RequestID)
			if p.requests.Get(id) != nil {
				return fmt.Errorf("%w: request id %q was used before on floor %q", journal.ErrInvalid, id, r.Floor)
			}
			if err := p.requests.Put(id, key(r.Version)); err != nil {
				return err
			}
			p.head.requests.add(id, r.Version)
		}
		p.records.FillPercent = recordFill
		if err := p.records.Put(key(r.Version), value); err != nil {
			return err
		}
		p.head.version, p.head.hash = r.Version, r.Hash
		return p.top.Put(headKey, p.head.encode())
	})
}

// PutSnapshot keeps a version's content and lets go of the snapshots that
// journal.Spare names.
func (j *Journal) PutSnapshot(ctx context.Context, s journal.Snapshot) error {
	value, err := journal.EncodeSnapshot(s)
	if err != nil {
		return err
	}
	return j.update(ctx, func(tx *bolt.Tx) error {
		p, err := j.part(tx, s.Floor)
		if err != nil {
			return err
		}
		if p == nil || s.Version > p.head.version {
			return fmt.Errorf("%w: floor %q has no version %d to keep a snapshot of", journal.ErrInvalid, s.Floor, s.Version)
		}
		r, err := p.record(s.Version)
		if err != nil {
			return err
		}
		if r.Digest != s.Digest {
			return fmt.Errorf("%w: the snapshot's digest is not that of version %d of floor %q", journal.ErrInvalid, s.Version, s.Floor)
		}
		if err := p.snapshots.Put(key(s.Version), value); err != nil {
			return err
		}
		var held []int64
		c := p.snapshots.Cursor()
		for k, _ := c.First(); k != nil; k, _ = c.Next() {
			v, ok := versionOf(k)
			if !ok {
				return p.damage(0, "a snapshot is kept under the key %x", k)
			}
			held = append(held, v)
		}
		if v, ok := journal.Spare(held); ok {
			return p.snapshots.Delete(key(v))
		}
		return nil
	})
}
