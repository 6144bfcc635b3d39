package planner_test

import (
	"math"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

func around(d1, d2, angle, r float64) float64 {
	return math.Sqrt(d1*d1-r*r) + math.Sqrt(d2*d2-r*r) + r*(angle-math.Acos(r/d1)-math.Acos(r/d2))
}

func pastSquare(a, h, r float64) float64 {
	d := math.Hypot(a-h, h)
	return 2*(math.Sqrt(d*d-r*r)+r*(math.Atan2(h, a-h)+math.Asin(r/d))) + 2*h
}

func TestStraightenedAgainstTrueOptimum(t *testing.T) {
	for _, c := range []struct {
		name   string
		edits  []floor.Edit
		radius float64
		s, g   planner.Pose
		want   float64
	}{
		{"1a", []floor.Edit{disc("d", 0, 0, 1)}, 0, pose(-2, 0), pose(2, 0), 4.511299166334},
		{"1b", []floor.Edit{disc("d", 0, 0, 1)}, 0.5, pose(-5, 0), pose(5, 0), 10.453469976216},
		{"2a", []floor.Edit{solidBox("b", -1, -1, 1, 1)}, 0, pose(-5, 0), pose(5, 0), 10.246211251235},
		{"2b", []floor.Edit{solidBox("b", -1, -1, 1, 1)}, 0.5, pose(-5, 0), pose(5, 0), 10.551898456870},
		{"2b25", []floor.Edit{solidBox("b", -1, -1, 1, 1)}, 0.25, pose(-5, 0), pose(5, 0), 10.383863708635},
		{"3", []floor.Edit{solidBox("b", 2, -1, 4, 3), solidBox("c", 6, -3, 8, 1)}, 0, pose(0, 0), pose(10, 0), 11.300563079746},
		{"3a", []floor.Edit{solidBox("b", 2, -1, 4, 2), solidBox("c", 6, -2, 8, 1)}, 0, pose(0, 0), pose(10, 0), 11.187600727864},
	} {
		w := newWorld(t, newMap(t, settings(-12, -12, 24, 24, 0.05), c.edits...))
		for _, rm := range []planner.Roadmap{planner.Grid8, planner.Grid4, planner.Quadtree} {
			q := shortest(body(c.radius), c.s, c.g)
			q.Options.Roadmap = rm
			r := mustRoute(t, w, q)
			got := geom.Metres(r.LengthUm)
			t.Logf("%s %d: %.6f want %.6f: +%.4f%%  %d points small %d", c.name, rm, got, c.want, 100*(got/c.want-1), len(points(r)), r.SmallestUm)
		}
	}
}
