package mapstore_test

import (
	"context"
	"math/rand/v2"
	"sync"
	"testing"
	"testing/synctest"
	"time"

	"example.com/wideberth/mapstore"
)

func next(t *testing.T, w *mapstore.Watch) mapstore.Event {
	t.Helper()
	e, err := w.Next(t.Context())
	must(t, err)
	return e
}

// wantNone sees a watch wait, in a synctest bubble.
func wantNone(t *testing.T, w *mapstore.Watch) {
	t.Helper()
	ctx, cancel := context.WithTimeout(t.Context(), time.Hour)
	defer cancel()
	e, err := w.Next(ctx)
	if err != context.DeadlineExceeded {
		t.Errorf("watch gives %+v, %v, want nothing", e, err)
	}
}

func TestWatch(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		s, _ := memory(t, mapstore.Options{})
		v2 := push(t, s, "hall", trolley("t", 1_000_000, 1_000_000))
		fromHead, err := s.Watch("hall", 0)
		must(t, err)
		after1, err := s.Watch("hall", 1)
		must(t, err)
		after2, err := s.Watch("hall", 2)
		must(t, err)
		for name, w := range map[string]*mapstore.Watch{"from the head": fromHead, "after 1": after1} {
			if e := next(t, w); e.Info != v2 || e.Skipped != 0 {
				t.Errorf("%s: first event is %+v", name, e)
			}
		}
		wantNone(t, fromHead)
		wantNone(t, after2)
		go func() {
			time.Sleep(time.Minute)
			push(t, s, "hall", trolley("t", 2_000_000, 1_000_000))
		}()
		for _, w := range []*mapstore.Watch{fromHead, after1, after2} {
			if e := next(t, w); e.Info.Version != 3 || e.Skipped != 0 {
				t.Errorf("event is %+v, want version 3", e)
			}
		}
		go func() {
			time.Sleep(time.Minute)
			fromHead.Close()
			fromHead.Close()
		}()
		_, err = fromHead.Next(t.Context())
		wantErr(t, "a closed watch", err, mapstore.ErrClosed)

		_, err = s.Watch("hall", 4)
		wantErr(t, "after a version above the head", err, mapstore.ErrFutureVersion)
		_, err = s.Watch("dock", 0)
		wantErr(t, "no floor", err, mapstore.ErrNoFloor)
		if _, err = s.Watch("hall", -1); err == nil {
			t.Error("after version -1 is accepted")
		}
	})
}

// TestSlowWatch falls behind by as much as is allowed, and by more.
func TestSlowWatch(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		s, _ := memory(t, mapstore.Options{})
		w, err := s.Watch("hall", 1)
		must(t, err)
		for range mapstore.WatchBacklog {
			push(t, s, "hall", trolley("t", 1_000_000, 1_000_000))
		}
		for v := int64(2); v <= 1+mapstore.WatchBacklog; v++ {
			if e := next(t, w); e.Info.Version != v || e.Skipped != 0 {
				t.Fatalf("event is %+v, want version %d", e, v)
			}
		}
		for range mapstore.WatchBacklog + 1 {
			push(t, s, "hall", trolley("t", 1_000_000, 1_000_000))
		}
		if e := next(t, w); e.Info.Version != 2+2*mapstore.WatchBacklog || e.Skipped != mapstore.WatchBacklog {
			t.Errorf("event is %+v, want the head, with %d skipped", e, mapstore.WatchBacklog)
		}
		wantNone(t, w)
	})
}

// TestWatchesCountEveryVersion has watches of different speed beside two writers: each
// sees versions rise, and given and skipped ones add up.
func TestWatchesCountEveryVersion(t *testing.T) {
	r := seeded(t)
	s, _ := memory(t, mapstore.Options{KeepVersions: 20})
	const n = 400
	var wg sync.WaitGroup
	for i := range 6 {
		w, err := s.Watch("hall", 1)
		must(t, err)
		seed := r.Uint64()
		wg.Go(func() {
			r := rand.New(rand.NewPCG(seed, 0))
			last := int64(1)
			for last < 1+n {
				e, err := w.Next(t.Context())
				if err != nil {
					t.Errorf("watch %d: %v", i, err)
					return
				}
				if e.Info.Version != last+1+e.Skipped {
					t.Errorf("watch %d: version %d after %d, %d skipped", i, e.Info.Version, last, e.Skipped)
				}
				last = e.Info.Version
				if i%2 == 1 && r.IntN(4) == 0 {
					time.Sleep(time.Duration(r.IntN(2000)) * time.Microsecond)
				}
			}
		})
	}
	for w := range 2 {
		wg.Go(func() {
			for range n / 2 {
				p := patch(head(t, s, "hall").Info.Version, trolley(string(rune('a'+w)), 1_000_000, 1_000_000))
				p.AllowRebase = true
				if _, _, err := s.Push(t.Context(), "hall", p); err != nil {
					t.Error(err)
				}
			}
		})
	}
	wg.Wait()
}

func TestAwait(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		s, _ := memory(t, mapstore.Options{})
		if h, err := s.Await(t.Context(), "hall", 1); err != nil || h.Info.Version != 1 {
			t.Errorf("a version that is there: %v", err)
		}
		go func() {
			for range 3 {
				time.Sleep(time.Minute)
				push(t, s, "hall", trolley("t", 1_000_000, 1_000_000))
			}
		}()
		began := time.Now()
		if h, err := s.Await(t.Context(), "hall", 3); err != nil || h.Info.Version != 3 || time.Since(began) != 2*time.Minute {
			t.Errorf("after %v: %+v, %v", time.Since(began), h, err)
		}
		ctx, cancel := context.WithTimeout(t.Context(), time.Hour)
		defer cancel()
		_, err := s.Await(ctx, "hall", 5)
		wantErr(t, "a version that does not come", err, context.DeadlineExceeded)
		_, err = s.Await(t.Context(), "dock", 1)
		wantErr(t, "no floor", err, mapstore.ErrNoFloor)
	})
}
