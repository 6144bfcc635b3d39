package planner_test

import (
	"math"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// aroundDisc is the way round a disc of radius r between places d1 and d2 from its
// middle and angle apart.
func aroundDisc(d1, d2, angle, r float64) float64 {
	return math.Sqrt(d1*d1-r*r) + math.Sqrt(d2*d2-r*r) + r*(angle-math.Acos(r/d1)-math.Acos(r/d2))
}

// pastSquare is the way from (-a, 0) to (a, 0) past a square of half side h grown by r.
func pastSquare(a, h, r float64) float64 {
	d := math.Hypot(a-h, h)
	return 2*(math.Sqrt(d*d-r*r)+r*(math.Atan2(h, a-h)+math.Asin(r/d))) + 2*h
}

// Straightened routes against true optima: round a disc, round a square and past two blocks, computed from
// tangents and arcs (the hull of the grown obstacle). No route may be shorter than
// its optimum. How much longer one may be comes from where straightening stops: a
// bend is not moved for less than a fiftieth of a cell, 1 mm here, which on ways of
// 4.5 to 11 m with up to a dozen bends is 0.3 %.
func TestStraightenedAgainstTrueOptimum(t *testing.T) {
	square := []floor.Edit{solidBox("square", -1, -1, 1, 1)}
	round := []floor.Edit{disc("disc", 0, 0, 1)}
	for _, c := range []struct {
		name   string
		edits  []floor.Edit
		radius float64
		s, g   planner.Pose
		want   float64
		by     float64 // the formula, where there is one
	}{
		{"1a", round, 0, pose(-2, 0), pose(2, 0), 4.511299166334, aroundDisc(2, 2, math.Pi, 1)},
		{"1b", round, 0.5, pose(-5, 0), pose(5, 0), 10.453469976216, aroundDisc(5, 5, math.Pi, 1.5)},
		{"2a", square, 0, pose(-5, 0), pose(5, 0), 10.246211251235, pastSquare(5, 1, 0)},
		{"2b, 0.5 m", square, 0.5, pose(-5, 0), pose(5, 0), 10.551898456870, pastSquare(5, 1, 0.5)},
		{"2b, 0.25 m", square, 0.25, pose(-5, 0), pose(5, 0), 10.383863708635, pastSquare(5, 1, 0.25)},
		{"3", []floor.Edit{solidBox("left", 2, -1, 4, 3), solidBox("right", 6, -3, 8, 1)}, 0,
			pose(0, 0), pose(10, 0), 11.300563079746, 2*math.Sqrt(5) + 4 + 2*math.Sqrt2},
		{"3a", []floor.Edit{solidBox("left", 2, -1, 4, 2), solidBox("right", 6, -2, 8, 1)}, 0,
			pose(0, 0), pose(10, 0), 11.187600727864, 2*math.Sqrt2 + 2 + math.Sqrt(17) + math.Sqrt(5)},
	} {
		if math.Abs(c.by-c.want) > 1e-11 {
			t.Errorf("%s: formula gives %.12f, listed %.12f", c.name, c.by, c.want)
		}
		w := newWorld(t, newMap(t, settings(-12, -12, 24, 24, 0.05), c.edits...))
		for _, rm := range []planner.Roadmap{planner.Auto, planner.Grid4, planner.Grid8, planner.Quadtree} {
			q := shortest(body(c.radius), c.s, c.g)
			q.Options.Roadmap = rm
			r := mustRoute(t, w, q)
			got := geom.Metres(r.LengthUm)
			if got < c.want*(1-1e-9) || got > c.want*1.003 {
				t.Errorf("%s, roadmap %d: %.6f m, the optimum is %.6f", c.name, rm, got, c.want)
			}
			kind := planner.AtMostRoadmapOptimum
			if rm == planner.Auto {
				kind = planner.AnyAngleOptimum
			}
			if r.Bound.Kind != kind || r.Bound.LowerUm > r.LengthUm {
				t.Errorf("%s: bound %+v", c.name, r.Bound)
			}
			q.Options.KeepRoadmapPath = true
			if raw := mustRoute(t, w, q); raw.LengthUm < r.LengthUm {
				t.Errorf("%s, roadmap %d: straightened from %.0f to %.0f µm", c.name, rm, raw.LengthUm, r.LengthUm)
			}
		}
	}
}
