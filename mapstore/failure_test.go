package mapstore_test

import (
	"context"
	"errors"
	"sync"
	"testing"
	"testing/synctest"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/memjournal"
)

// faulty is a journal whose k-th write fails, counted from 1, and every one after it
// while broken is set. When applied is set the write takes place all the same, as
// when the answer of a remote journal is lost.
type faulty struct {
	journal.Journal
	mu      sync.Mutex
	writes  int
	k       int
	broken  bool
	applied bool
}

var errMedium = errors.New("input/output error")

func (f *faulty) write(do func() error) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.writes++
	if f.writes == f.k || f.broken && f.writes > f.k {
		if f.applied {
			if err := do(); err != nil {
				return err
			}
		}
		return errMedium
	}
	return do()
}

func (f *faulty) Append(ctx context.Context, r journal.Record) error {
	return f.write(func() error { return f.Journal.Append(ctx, r) })
}

func (f *faulty) PutSnapshot(ctx context.Context, s journal.Snapshot) error {
	return f.write(func() error { return f.Journal.PutSnapshot(ctx, s) })
}

// TestFailedWrites fails the k-th write of a run, for all k, with and without effect:
// what failed is not acknowledged and changes nothing in memory, reads go on, and the
// next push works.
func TestFailedWrites(t *testing.T) {
	const pushes = 12
	for _, applied := range []bool{false, true} {
		for k := 1; k <= pushes+4; k++ {
			var reported []error
			var mu sync.Mutex
			disk := new(memjournal.Storage)
			j := &faulty{Journal: disk.Open(), k: k, applied: applied}
			s := openStore(t, j, mapstore.Options{SnapshotEvery: 4, Report: func(err error) {
				mu.Lock()
				defer mu.Unlock()
				reported = append(reported, err)
			}})
			failed := 0
			if _, err := s.CreateFloor(t.Context(), "hall", hall, "surveyor", "made"); err != nil {
				failed++
				wantErr(t, "creating", err, mapstore.ErrJournal)
				wantErr(t, "creating", err, errMedium)
				if _, err := s.Head("hall"); !errors.Is(err, mapstore.ErrNoFloor) {
					t.Errorf("write %d: the floor is there: %v", k, err)
				}
				create(t, s, "hall")
			}
			for i := range pushes {
				before := head(t, s, "hall")
				p := patch(before.Info.Version, trolley("t", 1_000_000+int64(i), 1_000_000))
				p.RequestID = string(rune('a' + i))
				v, _, err := s.Push(t.Context(), "hall", p)
				if err != nil {
					failed++
					wantErr(t, "push", err, mapstore.ErrJournal)
					wantErr(t, "push", err, errMedium)
					if head(t, s, "hall") != before {
						t.Errorf("write %d: a push that failed changed the head", k)
					}
					if _, err := s.At(t.Context(), "hall", 1); err != nil {
						t.Errorf("write %d: reading: %v", k, err)
					}
					// The same request again finds out.
					var repeated bool
					if v, repeated, err = s.Push(t.Context(), "hall", p); err != nil || repeated != applied {
						t.Errorf("write %d: again: repeated %v, %v", k, repeated, err)
					}
				}
				if v.Version != before.Info.Version+1 || head(t, s, "hall").Info != v {
					t.Errorf("write %d: version is %d, head %d, want %d", k, v.Version, head(t, s, "hall").Info.Version, before.Info.Version+1)
				}
			}
			must(t, s.Close())                                              // waits for snapshots that are being written
			if n := failed + len(reported); n > 1 || n < 1 && k <= pushes { // a later one may be a snapshot that Close calls off
				t.Errorf("write %d failed, and %d calls failed and %d were reported", k, failed, len(reported))
			}
			again := openStore(t, disk.Open(), mapstore.Options{})
			if h := head(t, again, "hall"); h.Info.Version != 1+pushes {
				t.Errorf("write %d: opened again, the head is %d, want %d", k, h.Info.Version, 1+pushes)
			}
			if good, err := journal.Verify(t.Context(), disk.Open(), "hall"); good != 1+pushes || err != nil {
				t.Errorf("write %d: the journal checks out up to %d, %v", k, good, err)
			}
		}
	}
}

// TestBrokenJournal keeps all writes failing: reads, waits and watches go on.
func TestBrokenJournal(t *testing.T) {
	disk := new(memjournal.Storage)
	j := &faulty{Journal: disk.Open(), k: 5, broken: true}
	s := openStore(t, j, mapstore.Options{})
	create(t, s, "hall")
	for range 3 {
		push(t, s, "hall", trolley("t", 1_000_000, 1_000_000))
	}
	for range 5 {
		_, _, err := s.Push(t.Context(), "hall", patch(4, trolley("t", 1_000_000, 1_000_000)))
		wantErr(t, "push", err, mapstore.ErrJournal)
	}
	if h, err := s.Await(t.Context(), "hall", 4); err != nil || h.Info.Version != 4 {
		t.Errorf("await: %v", err)
	}
	w, err := s.Watch("hall", 1)
	must(t, err)
	if e, err := w.Next(t.Context()); err != nil || e.Info.Version != 2 {
		t.Errorf("watch: %+v, %v", e, err)
	}
}

// stuck is a journal whose appends wait until they are let go.
type stuck struct {
	journal.Journal
	held chan struct{}
}

func (s *stuck) Append(ctx context.Context, r journal.Record) error {
	select {
	case <-s.held:
	case <-ctx.Done():
		return ctx.Err()
	}
	return s.Journal.Append(ctx, r)
}

// TestReadersDoNotWaitForTheJournal reads while an append hangs; and a writer that
// waits for its turn heeds its context.
func TestReadersDoNotWaitForTheJournal(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		disk := new(memjournal.Storage)
		create(t, openStore(t, disk.Open(), mapstore.Options{}), "hall")
		j := &stuck{Journal: disk.Open(), held: make(chan struct{})}
		s := openStore(t, j, mapstore.Options{})
		done := make(chan error)
		go func() {
			_, _, err := s.Push(t.Context(), "hall", patch(1, trolley("t", 1_000_000, 1_000_000)))
			done <- err
		}()
		synctest.Wait()
		if h := head(t, s, "hall"); h.Info.Version != 1 {
			t.Errorf("head is %d before the append returned", h.Info.Version)
		}
		if _, err := s.Versions(t.Context(), "hall", 0, 10); err != nil {
			t.Error(err)
		}
		if len(s.Floors()) != 1 {
			t.Error("floors")
		}
		ctx, cancel := context.WithTimeout(t.Context(), time.Second)
		defer cancel()
		_, _, err := s.Push(ctx, "hall", patch(1, trolley("u", 1_000_000, 1_000_000)))
		wantErr(t, "a writer whose time is up", err, context.DeadlineExceeded)
		if errors.Is(err, mapstore.ErrJournal) {
			t.Error("a writer whose time is up blames the journal")
		}
		close(j.held)
		must(t, <-done)
		if h := head(t, s, "hall"); h.Info.Version != 2 {
			t.Errorf("head is %d", h.Info.Version)
		}
	})
}

// TestTwoWriters has two stores push to one journal, each seeing what the other did
// only by its conflicts.
func TestTwoWriters(t *testing.T) {
	disk := new(memjournal.Storage)
	a, b := openStore(t, disk.Open(), mapstore.Options{}), openStore(t, disk.Open(), mapstore.Options{})
	create(t, a, "hall")
	if _, err := b.Head("hall"); !errors.Is(err, mapstore.ErrNoFloor) {
		t.Errorf("b knows already: %v", err)
	}
	create(t, b, "hall") // finds a's
	v := push(t, a, "hall", trolley("a", 1_000_000, 1_000_000))

	// b's base is its head, but not the journal's.
	_, _, err := b.Push(t.Context(), "hall", patch(1, trolley("a", 2_000_000, 1_000_000)))
	if e, ok := errors.AsType[*mapstore.StaleBaseError](err); !ok || e.Head != v || len(e.Conflicts) != 1 {
		t.Errorf("b's push: %v", err)
	}
	if h := head(t, b, "hall"); h.Info != v {
		t.Errorf("b has not caught up: %+v", h.Info)
	}
	push(t, a, "hall", trolley("a", 1_000_000, 1_500_000))
	p := patch(2, trolley("b", 2_000_000, 1_000_000))
	p.AllowRebase, p.RequestID = true, "by b"
	v, repeated, err := b.Push(t.Context(), "hall", p)
	if err != nil || repeated || v.Version != 4 {
		t.Errorf("b's rebased push: %+v, %v, %v", v, repeated, err)
	}
	// a is sent the same request.
	if w, repeated, err := a.Push(t.Context(), "hall", p); err != nil || !repeated || w != v || head(t, a, "hall").Info != v {
		t.Errorf("the same to a: %+v, %v, %v", w, repeated, err)
	}
	create(t, b, "dock")
	push(t, b, "hall", remove("b"))
	must(t, a.Sync(t.Context()))
	if _, err := a.Head("dock"); err != nil {
		t.Errorf("a after sync: %v", err)
	}
	wantSame(t, "hall", a, b)

	// Both at once, with one request each of them.
	var wg sync.WaitGroup
	for i := range 20 {
		p := patch(1, trolley(string(rune('c'+i)), 1_000_000, 1_000_000))
		p.AllowRebase, p.RequestID = true, string(rune('c'+i))
		for _, s := range []*mapstore.Store{a, b} {
			wg.Go(func() {
				if _, _, err := s.Push(t.Context(), "hall", p); err != nil {
					t.Errorf("request %s: %v", p.RequestID, err)
				}
			})
		}
	}
	wg.Wait()
	must(t, a.Sync(t.Context()))
	must(t, b.Sync(t.Context()))
	if h := head(t, a, "hall"); h.Info.Version != 5+20 {
		t.Errorf("20 requests, each sent to both, made versions up to %d, want 25", h.Info.Version)
	}
	wantSame(t, "hall", a, b)
}
