package server

import (
	"context"
	"errors"
	"testing"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
)

// A token is good for its own list alone, and not once it was changed.
func TestPageTokens(t *testing.T) {
	token := pageToken("versions of hall", "42")
	var f faults
	if got := pageVersion("versions of hall", token, &f); got != 42 || f.any() {
		t.Fatalf("got %d, %v", got, f.list)
	}
	for _, bad := range []string{token + "A", token[:len(token)-1], "!", "AAAAAAAAAAAAAAAA", pageToken("versions of yard", "42"), pageToken("versions of hall", "x")} {
		var f faults
		if pageVersion("versions of hall", bad, &f); !f.any() {
			t.Errorf("%q was accepted", bad)
		}
	}
	for asked, want := range map[int32]int{0: 100, 1: 1, 1000: 1000, 1001: 1000, 1 << 30: 1000} {
		if got := pageSize(asked); got != want {
			t.Errorf("page size %d: %d, wanted %d", asked, got, want)
		}
	}
}

// A full house refuses at once what would not start in time.
func TestLanesShed(t *testing.T) {
	l := newLanes(1, 1, time.Hour)
	leave, err := l.enter(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	soon, cancel := context.WithTimeout(context.Background(), 40*time.Millisecond)
	defer cancel()
	if _, err := l.enter(soon); !errors.Is(err, errOverloaded) {
		t.Errorf("a call that cannot start before half its time is gone: %v, wanted %v", err, errOverloaded)
	}
	entered := make(chan error, 1)
	go func() {
		next, err := l.enter(context.Background())
		if err == nil {
			next()
		}
		entered <- err
	}()
	for l.waiting.Load() == 0 {
		time.Sleep(time.Millisecond)
	}
	if _, err := l.enter(context.Background()); !errors.Is(err, errOverloaded) {
		t.Errorf("beyond the queue: %v, wanted %v", err, errOverloaded)
	}
	leave()
	if err := <-entered; err != nil {
		t.Errorf("the one that waited: %v", err)
	}
	if n := l.waiting.Load(); n != 0 {
		t.Errorf("%d still count as waiting", n)
	}
}

// A version that a route was planned on is held for its time, and no longer.
func TestHolds(t *testing.T) {
	now := time.Unix(0, 0)
	h := newHolds(func() time.Time { return now })
	snap := func(v int64) *mapstore.Snapshot {
		return &mapstore.Snapshot{Info: mapstore.VersionInfo{Floor: "hall", Version: v}}
	}
	first := snap(1)
	h.keep(first, 10*time.Minute)
	now = now.Add(9 * time.Minute)
	h.keep(snap(2), 10*time.Minute)
	if h.get("hall", 1) != first || h.get("hall", 2) == nil || h.get("yard", 1) != nil {
		t.Fatal("versions 1 and 2 of hall should be held after nine minutes")
	}
	now = now.Add(time.Minute)
	h.keep(snap(3), 10*time.Minute)
	if h.get("hall", 1) != nil || h.get("hall", 2) == nil {
		t.Error("after ten minutes version 1 should be let go and 2 not")
	}
	for v := range int64(maxHolds + 10) {
		h.keep(snap(v+1), time.Hour)
	}
	if len(h.by) > maxHolds {
		t.Errorf("%d held, wanted at most %d", len(h.by), maxHolds)
	}
}

// Neighbouring rectangles become one; nothing is lost or added.
func TestMergeRects(t *testing.T) {
	in := []floor.CellRect{{X0: 64, Y0: 0, X1: 128, Y1: 64}, {X0: 0, Y0: 0, X1: 64, Y1: 64}, {X0: 0, Y0: 64, X1: 64, Y1: 128}, {X0: 64, Y0: 64, X1: 128, Y1: 128}, {X0: 200, Y0: 3, X1: 201, Y1: 4}}
	got := mergeRects(in)
	want := []floor.CellRect{{X0: 0, Y0: 0, X1: 128, Y1: 128}, {X0: 200, Y0: 3, X1: 201, Y1: 4}}
	if len(got) != 2 || got[0] != want[0] || got[1] != want[1] {
		t.Errorf("got %v, wanted %v", got, want)
	}
}
