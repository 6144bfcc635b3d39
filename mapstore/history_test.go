package mapstore_test

import (
	"context"
	"errors"
	"reflect"
	"sync"
	"sync/atomic"
	"testing"
	"testing/synctest"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/memjournal"
)

// counting counts the records that are read, and can make each read take a while.
type counting struct {
	journal.Journal
	records atomic.Int64
	wait    time.Duration
}

func (c *counting) Read(ctx context.Context, floor string, from int64, limit int) ([]journal.Record, error) {
	select {
	case <-time.After(c.wait):
	case <-ctx.Done():
		return nil, ctx.Err()
	}
	recs, err := c.Journal.Read(ctx, floor, from, limit)
	c.records.Add(int64(len(recs)))
	return recs, err
}

// TestOldVersions has more versions than are held in memory; each can be had, with
// its record, in any order.
func TestOldVersions(t *testing.T) {
	r := seeded(t)
	s, disk := memory(t, mapstore.Options{KeepVersions: 5, SnapshotEvery: 10})
	full := openStore(t, disk.Open(), mapstore.Options{})
	for range 12 {
		grow(t, s, "hall", r, 10)
		must(t, full.Sync(t.Context()))
	}
	for _, i := range r.Perm(121) {
		a, err := s.At(t.Context(), "hall", int64(i+1))
		must(t, err)
		b, err := full.At(t.Context(), "hall", int64(i+1))
		must(t, err)
		wantSameVersion(t, a, b)
	}
	for _, v := range []int64{0, -1} {
		_, err := s.At(t.Context(), "hall", v)
		wantErr(t, "below the oldest", err, mapstore.ErrGone)
	}
	_, err := s.At(t.Context(), "hall", 122)
	wantErr(t, "above the head", err, mapstore.ErrFutureVersion)
	_, err = s.Edits(t.Context(), "hall", 122)
	wantErr(t, "edits above the head", err, mapstore.ErrFutureVersion)

	// Pages of records, from memory and journal alike.
	for _, limit := range []int{1, 3, 7, 200} {
		next := int64(121)
		for before := int64(0); ; {
			page, err := s.Versions(t.Context(), "hall", before, limit)
			must(t, err)
			if len(page) == 0 {
				break
			}
			for _, info := range page {
				want, err := full.At(t.Context(), "hall", next)
				must(t, err)
				if info != want.Info {
					t.Fatalf("limit %d: version %d is listed as %+v, want %+v", limit, next, info, want.Info)
				}
				next--
			}
			before = page[len(page)-1].Version
		}
		if next != 0 {
			t.Errorf("limit %d: the list ends above version %d", limit, next)
		}
	}
	if page, err := s.Versions(t.Context(), "hall", 1<<60, 2); err != nil || page[0].Version != 121 {
		t.Errorf("before a version above the head: %+v, %v", page, err)
	}
	for _, bad := range [][2]int64{{-1, 1}, {0, 0}} {
		if _, err := s.Versions(t.Context(), "hall", bad[0], int(bad[1])); err == nil {
			t.Errorf("before %d, limit %d is accepted", bad[0], bad[1])
		}
	}
}

// TestRebuildIsShared asks for one old version from many goroutines: it is built
// once, also when whoever began it gives up.
func TestRebuildIsShared(t *testing.T) {
	disk := new(memjournal.Storage)
	s := openStore(t, disk.Open(), mapstore.Options{})
	create(t, s, "hall")
	grow(t, s, "hall", seeded(t), 40)
	want := head(t, s, "hall")
	must(t, s.Close())
	synctest.Test(t, func(t *testing.T) {
		j := &counting{Journal: noSnapshots{disk.Open()}, wait: time.Second}
		s := openStore(t, j, mapstore.Options{KeepVersions: 1})
		j.records.Store(0)
		var got [9]*mapstore.Snapshot
		var errs [9]error
		var wg sync.WaitGroup
		for i := range got {
			wg.Go(func() {
				ctx := t.Context()
				if i == 0 {
					var cancel func()
					ctx, cancel = context.WithTimeout(ctx, 1500*time.Millisecond)
					defer cancel()
				} else {
					time.Sleep(time.Duration(i) * time.Millisecond)
				}
				got[i], errs[i] = s.At(ctx, "hall", 30)
			})
		}
		wg.Wait()
		wantErr(t, "the first to ask", errs[0], context.DeadlineExceeded)
		for i := 1; i < len(got); i++ {
			if errs[i] != nil || got[i] != got[1] {
				t.Fatalf("goroutine %d: %v", i, errs[i])
			}
		}
		// Twice the records up to version 30 at most: looking for restores, carrying out.
		if n := j.records.Load(); n > 3*31 {
			t.Errorf("%d records were read for 9 calls", n)
		}
		before := j.records.Load()
		if again, err := s.At(t.Context(), "hall", 30); err != nil || again != got[1] || j.records.Load() != before {
			t.Errorf("asked again, %d records were read, %v", j.records.Load()-before, err)
		}
		if h := head(t, s, "hall"); h.Info != want.Info {
			t.Errorf("head is %+v", h.Info)
		}
	})
}

// TestRestoresOfRestores chains restores of restored versions that have left memory:
// rebuilding one does not go through all that it passes by.
func TestRestoresOfRestores(t *testing.T) {
	s, disk := memory(t, mapstore.Options{KeepVersions: 1, SnapshotEvery: 1_000})
	var digests [][32]byte
	digests = append(digests, head(t, s, "hall").Info.Digest)
	note := func(v mapstore.VersionInfo) { digests = append(digests, v.Digest) }
	note(push(t, s, "hall", trolley("t", 1_000_000, 1_000_000)))
	for i := range 60 {
		h := head(t, s, "hall").Info.Version
		v, _, err := s.Restore(t.Context(), "hall", mapstore.Restore{Version: h - int64(i%2), Base: h, Author: "a", Reason: "r"})
		must(t, err)
		note(v)
		note(push(t, s, "hall", trolley("t", 1_000_000+int64(i), 1_000_000)))
	}
	j := &counting{Journal: disk.Open()}
	s = openStore(t, j, mapstore.Options{KeepVersions: 1})
	for v := len(digests); v > 0; v -= 13 {
		j.records.Store(0)
		snap, err := s.At(t.Context(), "hall", int64(v))
		must(t, err)
		if snap.Map.Digest() != digests[v-1] {
			t.Fatalf("version %d is another one", v)
		}
		if n := j.records.Load(); n > 2*int64(v)+2 {
			t.Errorf("version %d took %d records", v, n)
		}
	}
}

func TestKeepVersions(t *testing.T) {
	s, disk := memory(t, mapstore.Options{KeepVersions: 4})
	for i := range 9 {
		push(t, s, "hall", paint(i, 0, i+1, 1, floor.Occupied))
	}
	held, err := s.At(t.Context(), "hall", 7)
	must(t, err)
	if again, err := s.At(t.Context(), "hall", 7); again != held || err != nil {
		t.Error("a version within KeepVersions is not held")
	}
	// A store opened anew holds as many.
	j := &counting{Journal: disk.Open()}
	s = openStore(t, j, mapstore.Options{KeepVersions: 4})
	j.records.Store(0)
	for v := int64(7); v <= 10; v++ {
		_, err := s.At(t.Context(), "hall", v)
		must(t, err)
	}
	if n := j.records.Load(); n != 0 {
		t.Errorf("%d records were read for versions that ought to be held", n)
	}
}

func TestEditsOfEveryKind(t *testing.T) {
	s, _ := memory(t, mapstore.Options{})
	r := seeded(t)
	for range 30 {
		h := head(t, s, "hall")
		edits := randomEdits(r, h.Map)
		v := push(t, s, "hall", edits...)
		got, err := s.Edits(t.Context(), "hall", v.Version)
		if err != nil || !reflect.DeepEqual(got, edits) {
			t.Fatalf("edits of version %d are %+v, %v, want %+v", v.Version, got, err, edits)
		}
		if v.EditCount != len(edits) || v.Touched != floor.TouchedBy(edits, h.Map) {
			t.Errorf("version %d counts %d edits touching %v", v.Version, v.EditCount, v.Touched)
		}
	}
	_, err := s.Edits(t.Context(), "dock", 1)
	if !errors.Is(err, mapstore.ErrNoFloor) {
		t.Errorf("edits of no floor: %v", err)
	}
}
