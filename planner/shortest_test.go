package planner_test

import (
	"context"
	"errors"
	"math"
	"reflect"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	"example.com/wideberth/planner/anyangle"
)

// aroundDisc and pastSquare give the optimum at any clearance, so that both sides of
// L*(r) <= length <= L*(r + delta) are known.
func TestShortestIsTheAnyAngleOptimum(t *testing.T) {
	const delta = anyangle.DeltaUm / 1e6
	for _, c := range []struct {
		name   string
		edit   floor.Edit
		radius float64
		a      float64 // from (-a, 0) to (a, 0)
		best   func(r float64) float64
	}{
		{"disc, r 0.2", disc("x", 0, 0, 1), 0.2, 5, func(r float64) float64 { return aroundDisc(5, 5, math.Pi, 1+r) }},
		{"disc, r 0.5", disc("x", 0, 0, 1), 0.5, 5, func(r float64) float64 { return aroundDisc(5, 5, math.Pi, 1+r) }},
		{"square, r 0", solidBox("x", -1, -1, 1, 1), 0, 5, func(r float64) float64 { return pastSquare(5, 1, r) }},
		{"square, r 0.25", solidBox("x", -1, -1, 1, 1), 0.25, 5, func(r float64) float64 { return pastSquare(5, 1, r) }},
		{"square, r 0.8", solidBox("x", -1, -1, 1, 1), 0.8, 4, func(r float64) float64 { return pastSquare(4, 1, r) }},
	} {
		w := newWorld(t, newMap(t, settings(-12, -12, 24, 24, 0.05), c.edit))
		for _, rm := range []planner.Roadmap{planner.Auto, planner.ConvexCells} {
			q := shortest(body(c.radius), pose(-c.a, 0), pose(c.a, 0))
			q.Options.Roadmap = rm
			r := mustRoute(t, w, q)
			got := geom.Metres(r.LengthUm)
			if lo, hi := c.best(c.radius), c.best(c.radius+delta); got < lo*(1-1e-9) || got > hi*(1+1e-9) {
				t.Errorf("%s: %.9f m, want %.9f to %.9f", c.name, got, lo, hi)
			}
			if b := r.Bound; b.Kind != planner.AnyAngleOptimum || b.OptimumWithinUm != anyangle.DeltaUm || b.WidthBiasUm != 2*anyangle.DeltaUm {
				t.Errorf("%s: bound %+v", c.name, b)
			}
		}
	}
}

// The same floor with the shortest side one way: with the traffic it is the optimum
// still, against it the roadmap's way is given and said to be no more than that.
func TestShortestHeedsOneWayZones(t *testing.T) {
	lane := func(heading float64) floor.Edit {
		z := zone("lane", floor.OneWayZone, -2, 0.5, 2, 3)
		z.Heading = heading
		return put(&z)
	}
	rack := solidBox("rack", -1, -3, 1, 1)
	for _, c := range []struct {
		name    string
		heading float64
		kind    planner.BoundKind
		within  [2]float64
	}{
		{"with", 0, planner.AnyAngleOptimum, [2]float64{8.4, 8.7}},
		{"against", math.Pi, planner.AtMostRoadmapOptimum, [2]float64{10, 12}},
	} {
		w := newWorld(t, newMap(t, settings(-10, -10, 20, 20, 0.05), rack, lane(c.heading)))
		r := mustRoute(t, w, shortest(body(0.3), pose(-4, 0), pose(4, 0)))
		if got := geom.Metres(r.LengthUm); r.Bound.Kind != c.kind || got < c.within[0] || got > c.within[1] {
			t.Errorf("%s: %.3f m, bound %+v", c.name, got, r.Bound)
		}
	}
}

// An end may be clear by less than the mesh can tell: here beside a slanting wall, and in
// the corner between two.
func TestShortestFromBesideASlantingWall(t *testing.T) {
	wall := func(name string, a, b geom.Point) floor.Edit {
		return put(&floor.Feature{Name: name, Kind: floor.Solid, WidthUm: 100_000, Shape: floor.NewPolyline([]geom.Point{a, b}, 100_000, 0)})
	}
	f := newMap(t, settings(0, 0, 20, 20, 0.05), wall("low", pt(2, 2), pt(18, 5)), wall("high", pt(2, 2.5), pt(18, 12)), solidBox("rack", 11, 5.5, 12, 7.5))
	w := newWorld(t, f)
	const r = 300_000
	// The first whole micrometre going by dy from a place with too little that is clear.
	away := func(from geom.Point, dy float64) geom.Point {
		at := func(k float64) geom.Point { return geom.Point{X: from.X, Y: from.Y + k*dy} }
		lo, hi := 0.0, 300_000.0
		for hi-lo > 1 {
			if mid := math.Floor((lo + hi) / 2); bruteDist(f, at(mid)) >= r {
				hi = mid
			} else {
				lo = mid
			}
		}
		return at(hi)
	}
	for _, s := range []geom.Point{away(pt(6.9, 3.1), 1), away(pt(9.3, 3.5), 1), away(pt(7.7, 5.6), -1)} {
		if d := bruteDist(f, s); d < r || d > r+2 {
			t.Fatalf("the start has %f µm", d)
		}
		q := shortest(body(0.3), planner.Pose{At: s}, pose(16, 9))
		got := mustRoute(t, w, q)
		if b := got.Bound; b.Kind != planner.AtMostRoadmapOptimum || b.WidthBiasUm != 2*anyangle.DeltaUm || got.SmallestUm < r {
			t.Errorf("from %v: %+v", s, got.Bound)
		}
		q.Start, q.Goal = q.Goal, q.Start
		if back := mustRoute(t, w, q); math.Abs(back.LengthUm-got.LengthUm) > 1 {
			t.Errorf("%f there, %f back", got.LengthUm, back.LengthUm)
		}
	}
}

// isOneWay says whether a one-way zone has that name.
func (s *scene) isOneWay(name string) bool {
	f, ok := s.m.Feature(name)
	return ok && f.Kind == floor.OneWayZone
}

// No plain grid, straightened, does better than the optimum at the same clearance plus
// what the optimum is within.
func TestLaw7ShortestIsShortest(t *testing.T) {
	compared := 0
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		sc.q.Options = planner.Options{Preference: planner.Shortest}
		a := plan(t, sc.w, sc.q)
		wider := sc.q
		wider.Body.RadiusUm += anyangle.DeltaUm // solids and closed zones both
		wider.Body.PreferredUm = max(wider.Body.PreferredUm, wider.Body.Required())
		if wider.Body.PreferredUm > sc.m.Settings().CapUm {
			return
		}
		for _, rm := range []planner.Roadmap{planner.Grid8, planner.Quadtree} {
			wider.Options.Roadmap = rm
			b := plan(t, sc.w, wider)
			if b.Route == nil {
				continue
			}
			if a.Route == nil {
				// The optimum may go against a one-way zone, and cells, which are asked then, may miss
				// a narrow way past it that the wider body's optimum takes by itself.
				if b := a.Refusal.Bottleneck; b != nil && sc.isOneWay(b.Zone) {
					continue
				}
				t.Fatalf("refused, with more clearance there is a way: %+v", a.Refusal)
			}
			if k := a.Route.Bound.Kind; k == planner.AnyAngleOptimum || k == planner.Straight {
				compared++
				if a.Route.LengthUm > b.Route.LengthUm*(1+1e-9) {
					t.Fatalf("%f µm long, roadmap %d finds %f", a.Route.LengthUm, rm, b.Route.LengthUm)
				}
			}
		}
	})
	if compared == 0 {
		t.Error("nothing compared")
	}
}

func TestConvexCellsAreForShortest(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 5, 5, 0.05)))
	q := shortest(body(0.3), pose(1, 1), pose(4, 4))
	q.Options.Preference, q.Options.Roadmap = planner.Balanced, planner.ConvexCells
	var re *planner.RequestError
	if _, err := w.Plan(context.Background(), q); !errors.As(err, &re) || re.Field != "options.roadmap" {
		t.Errorf("%v, want a fault in options.roadmap", err)
	}
}

// Many robots ask at once on a version where no mesh is made yet; later, and on a world
// advanced from another version with its meshes, the answers are the same.
func TestLaw8ShortestFromManyAtOnce(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		sc.q.Options.Preference, sc.q.Options.Roadmap, sc.q.Options.KeepRoadmapPath = planner.Shortest, planner.Auto, false
		other := newMapFrom(t, sc.m, drawChange(t, sc.m.Settings(), sc.m))
		from := newWorld(t, other)
		plan(t, from, sc.q) // makes the mesh
		advanced, err := from.Advance(context.Background(), sc.m)
		if err != nil {
			t.Fatal(err)
		}
		got := make(chan planner.Answer, 6)
		for range 6 {
			go func() {
				a, _ := sc.w.Plan(context.Background(), sc.q)
				got <- a
			}()
		}
		want := plan(t, advanced, sc.q)
		for range 6 {
			if a := <-got; !reflect.DeepEqual(a, want) {
				t.Fatalf("advanced:\n%+v\nat once, from scratch:\n%+v", want, a)
			}
		}
	})
}
