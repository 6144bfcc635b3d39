package planner_test

import (
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner"
)

// Where the wide berth does not fit, a balanced route keeps to the middle: of a door that it
// comes to from the side, and of a passage with walls of different lengths.
func TestTightStretchesKeepToTheMiddle(t *testing.T) {
	b := body(0.65)
	b.PreferredUm = 1_200_000
	for _, c := range []struct {
		name        string
		edits       []floor.Edit
		start, goal planner.Pose
		want        int64 // half the narrowest place's width
	}{
		{"a door of 1.6 m", []floor.Edit{solidBox("south", 10, 0, 10.2, 8.2), solidBox("north", 10, 9.8, 10.2, 20)}, pose(3, 4), pose(17, 13), 800_000},
		{"a passage of 1.8 m", []floor.Edit{solidBox("south", 6, 0, 14, 8.1), solidBox("north", 5, 9.9, 15, 20)}, pose(3, 3), pose(17, 3), 900_000},
		{"between round columns", []floor.Edit{solidBox("south", 10, 0, 10.2, 8), disc("a", 10.1, 8, 0.4), solidBox("north", 10, 10, 10.2, 20), disc("b", 10.1, 10, 0.3)}, pose(3, 4), pose(17, 13), 650_000},
	} {
		q := shortest(b, c.start, c.goal)
		q.Options = planner.Options{Preference: planner.Balanced, TightWeight: 1, TightBelowUm: b.PreferredUm}
		w := newWorld(t, newMap(t, settings(0, 0, 20, 20, 0.05), c.edits...))
		r := mustRoute(t, w, q)
		// Bent edges are drawn by chords, off them by half a millimetre at most.
		if r.SmallestUm < c.want-500 {
			t.Errorf("%s: %d µm, the middle has %d", c.name, r.SmallestUm, c.want)
		}
	}
}

// Straightened, a route costs no more than the roadmap's own, and
// keeps as much.
func TestStraightenedCostsNoMore(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		o := &sc.q.Options
		o.Preference, o.TightWeight, o.Roadmap, o.KeepRoadmapPath = planner.Balanced, rapid.SampledFrom([]float64{0.5, 2, 10}).Draw(t, "tight weight"), planner.Grid8, true
		raw := plan(t, sc.w, sc.q)
		o.KeepRoadmapPath = false
		r := plan(t, sc.w, sc.q)
		if raw.Route == nil || r.Route == nil { // the straight way needs no roadmap
			return
		}
		// A tight stretch is known to a millimetre at either end, a level at a time.
		slack := 2000 * o.TightWeight * float64(len(points(raw.Route)))
		if r.Route.CostUm > raw.Route.CostUm+slack {
			t.Fatalf("costs %f, the roadmap's own %f", r.Route.CostUm, raw.Route.CostUm)
		}
		if open := float64(sc.q.Body.PreferredUm); float64(r.Route.SmallestUm) < min(open, float64(raw.Route.SmallestUm))-1 {
			t.Fatalf("keeps %d, the roadmap's own %d", r.Route.SmallestUm, raw.Route.SmallestUm)
		}
	})
}
