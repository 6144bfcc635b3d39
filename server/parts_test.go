package server

import (
	"context"
	"errors"
	"strings"
	"testing"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
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

// Hints that come on just below the cap can go off again: the default threshold for
// that is the cap, not beyond it where no clearance gets.
func TestQuietStaysWithinTheCap(t *testing.T) {
	set := wire.SettingsIn(&pb.FloorSettings{Columns: 200, Rows: 100}) // a cap of 5 m
	for below, want := range map[float64]int64{1: 1_100_000, 4.95: 5_000_000, 5: 5_000_000} {
		got := guideSetupIn(&pb.GuideSetup{Route: oldRoute(), HintBelowM: below}, set)
		if got.QuietAboveUm != want {
			t.Errorf("on below %v m, off above %d um, wanted %d", below, got.QuietAboveUm, want)
		}
	}
	if got := guideSetupIn(&pb.GuideSetup{Route: oldRoute()}, set); got.HintBelowUm != 800_000 || got.QuietAboveUm != 900_000 {
		t.Errorf("on below %d, off above %d um; wanted the preferred clearance, 800000, and 0.1 m more", got.HintBelowUm, got.QuietAboveUm)
	}
}

// Words say no more room than there is and no less than is needed.
func TestRefusalInWords(t *testing.T) {
	narrow := refusalOut(&planner.Refusal{Reason: planner.NoPassage, Bottleneck: &planner.Bottleneck{Exists: true, WidthUm: 899_999, NeededUm: 1_300_001}}, 1)
	if want := "the widest way narrows to 0.89 m, needed 1.31 m"; narrow.Explanation != want {
		t.Errorf("%q, wanted %q", narrow.Explanation, want)
	}
	door := refusalOut(&planner.Refusal{Reason: planner.NoPassage, Bottleneck: &planner.Bottleneck{Exists: true, WidthUm: 900_000, NeededUm: 1_300_000}}, 1)
	if want := "the widest way narrows to 0.90 m, needed 1.30 m"; door.Explanation != want {
		t.Errorf("%q, wanted %q", door.Explanation, want)
	}
	missed := refusalOut(&planner.Refusal{Reason: planner.NoPassage, Bottleneck: &planner.Bottleneck{Exists: true, WidthUm: 1_300_000, NeededUm: 1_300_000}}, 1)
	if want := "1.30 m, enough for the 1.30 m needed, but the roadmap asked for misses it"; !strings.Contains(missed.Explanation, want) {
		t.Errorf("%q does not say %q", missed.Explanation, want)
	}
	end := refusalOut(&planner.Refusal{Reason: planner.GoalBlocked, Blocked: &planner.BlockedEnd{ClearanceUm: 59_999, RequiredUm: 60_001, Nearest: "rail"}}, 1)
	if want := `goal: clearance 0.05 m from "rail", needed 0.07 m`; end.Explanation != want {
		t.Errorf("%q, wanted %q", end.Explanation, want)
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
