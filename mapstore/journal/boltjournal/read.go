package boltjournal

import (
	"context"

	"example.com/wideberth/mapstore/journal"
	bolt "go.etcd.io/bbolt"
)

// viewFloor runs fn on a floor's part, or does nothing when there is none.
func (j *Journal) viewFloor(ctx context.Context, floor string, fn func(*floorPart) error) error {
	return j.view(ctx, func(tx *bolt.Tx) error {
		p, err := j.part(tx, floor)
		if err != nil || p == nil {
			return err
		}
		return fn(p)
	})
}

// Floors are the ids that have records.
func (j *Journal) Floors(ctx context.Context) (ids []string, err error) {
	err = j.view(ctx, func(tx *bolt.Tx) error {
		floors := tx.Bucket(floorsBucket)
		if floors == nil {
			return &journal.CorruptError{What: "the list of floors is missing"}
		}
		return floors.ForEach(func(id, _ []byte) error {
			ids = append(ids, string(id))
			return nil
		})
	})
	return ids, err
}

// Head is the newest version.
func (j *Journal) Head(ctx context.Context, floor string) (version int64, err error) {
	err = j.viewFloor(ctx, floor, func(p *floorPart) error {
		version = p.head.version
		return p.checkHead()
	})
	if err != nil {
		return 0, err
	}
	return version, nil
}

// Read gives records from a version on.
func (j *Journal) Read(ctx context.Context, floor string, from int64, limit int) (recs []journal.Record, err error) {
	from = max(from, 1)
	err = j.viewFloor(ctx, floor, func(p *floorPart) error {
		if from > p.head.version {
			return nil
		}
		chain := journal.Chain{Floor: floor, Version: from - 1}
		if from > 1 {
			before, err := p.record(from - 1)
			if err != nil {
				return err
			}
			chain.Hash = before.Hash
		}
		payload := 0
		for v := from; v <= p.head.version && len(recs) < limit; v++ {
			if err := ctx.Err(); err != nil {
				return err
			}
			r, err := p.record(v)
			if err != nil {
				return err
			}
			if err := chain.Next(&r); err != nil {
				return p.about(v, err)
			}
			if v == p.head.version && r.Hash != p.head.hash {
				return p.damage(v, "the record is not the one that was appended last")
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
	if version < 1 {
		return s, false, ctx.Err()
	}
	err = j.viewFloor(ctx, floor, func(p *floorPart) error {
		c := p.snapshots.Cursor()
		k, b := c.Seek(key(version))
		switch {
		case k == nil:
			k, b = c.Last()
		case string(k) != string(key(version)):
			k, b = c.Prev()
		}
		if k == nil {
			return nil
		}
		at, valid := versionOf(k)
		if !valid || at > version {
			return p.damage(0, "a snapshot is kept under the key %x", k)
		}
		var err error
		if s, err = journal.DecodeSnapshot(b); err != nil {
			return p.about(at, err)
		}
		if s.Floor != floor || s.Version != at {
			return p.damage(at, "the snapshot says that it is version %d of floor %q", s.Version, s.Floor)
		}
		ok = true
		return nil
	})
	if err != nil {
		return journal.Snapshot{}, false, err
	}
	return s, ok, nil
}

// Find is the version that a request id was carried out as.
func (j *Journal) Find(ctx context.Context, floor, requestID string) (version int64, err error) {
	if requestID == "" {
		return 0, ctx.Err()
	}
	err = j.viewFloor(ctx, floor, func(p *floorPart) error {
		v := p.requests.Get([]byte(requestID))
		if v == nil {
			return nil
		}
		at, ok := versionOf(v)
		if !ok {
			return p.damage(0, "request id %q names no version", requestID)
		}
		r, err := p.record(at)
		if err != nil {
			return err
		}
		if r.RequestID != requestID {
			return p.damage(at, "the record does not have the request id %q that leads to it", requestID)
		}
		version = at
		return nil
	})
	if err != nil {
		return 0, err
	}
	return version, nil
}
