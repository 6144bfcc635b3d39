package planner_test

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner"
	"example.com/wideberth/planner/roadmap"
)

var classics = []planner.Roadmap{planner.VisibilityGraph, planner.MeadowMap, planner.VoronoiGraph, planner.ExactCells}

// grower is a floor of 12 by 12 m with a bench of 2 by 2 m in its middle.
func grower(t testing.TB, more ...floor.Edit) *floor.Map {
	return newMap(t, settings(0, 0, 12, 12, 0.05), append([]floor.Edit{solidBox("bench", 5, 5, 7, 7)}, more...)...)
}

// TestClassicRoadmapsPlan: the shortest way round a square of half side 1 grown by 0.5, from 5 to
// the left of its middle to 5 to its right, is 10.551898456870 m long (elementary geometry).
func TestClassicRoadmapsPlan(t *testing.T) {
	w := newWorld(t, grower(t))
	q := shortest(body(0.5), pose(1, 6), pose(11, 6))
	for _, k := range classics {
		for _, keep := range []bool{true, false} {
			q.Options.Roadmap, q.Options.KeepRoadmapPath = k, keep
			r := mustRoute(t, w, q)
			long := r.LengthUm / 1e6
			if long < 10.551898456 || r.SmallestUm < 500_000 {
				t.Errorf("roadmap %d: %.9f m with %d µm of clearance", k, long, r.SmallestUm)
			}
			// Drawn 50 µm outside the arcs of 0.5 m: a few tens of micrometres longer.
			if k == planner.VisibilityGraph && long > 10.551898456+100e-6 {
				t.Errorf("visibility graph: %.9f m", long)
			}
			// Straightening leaves what cuts of corners by less than a fiftieth of a cell may save.
			if !keep && long > 10.5519*1.01 {
				t.Errorf("roadmap %d, straightened: %.9f m", k, long)
			}
			if k == planner.VoronoiGraph && keep && r.SmallestUm < 1_000_000 {
				t.Errorf("Voronoi graph: comes within %d µm, there is room for 1 m at both ends and 2.5 m between", r.SmallestUm)
			}
			if again := mustRoute(t, newWorld(t, w.Map()), q); !reflect.DeepEqual(again, r) {
				t.Errorf("roadmap %d: another world answers another route", k)
			}
		}
	}
}

// TestClassicRoadmapsFollowPatches: after a patch they answer as from scratch.
func TestClassicRoadmapsFollowPatches(t *testing.T) {
	w := newWorld(t, grower(t))
	q := shortest(body(0.3), pose(1, 6), pose(11, 6))
	q.Options.KeepRoadmapPath = true
	for _, k := range classics {
		q.Options.Roadmap = k
		mustRoute(t, w, q)
	}
	after, err := w.Map().Apply([]floor.Edit{solidBox("trolleys", 5.5, 7, 6, 11.5), solidBox("buckets", 2, 3, 2.5, 8)})
	if err != nil {
		t.Fatal(err)
	}
	v, err := w.Advance(context.Background(), after)
	if err != nil {
		t.Fatal(err)
	}
	fresh := newWorld(t, after)
	for _, k := range classics {
		q.Options.Roadmap = k
		if got, want := mustRoute(t, v, q), mustRoute(t, fresh, q); !reflect.DeepEqual(got, want) {
			t.Errorf("roadmap %d: %.6f m after the patch, from scratch %.6f m", k, got.LengthUm/1e6, want.LengthUm/1e6)
		}
	}
}

// TestClassicRoadmapsRefuse: no way through a wall, none against a one-way zone.
func TestClassicRoadmapsRefuse(t *testing.T) {
	oneWay := zone("aisle", floor.OneWayZone, 4, 0, 8, 12)
	oneWay.Heading = math.Pi
	for name, c := range map[string]struct {
		more floor.Edit
		zone string
	}{"wall": {more: solidBox("wall", 8, 0, 8.2, 12)}, "one way": {more: put(&oneWay), zone: "aisle"}} {
		w := newWorld(t, grower(t, c.more))
		q := shortest(body(0.3), pose(1, 6), pose(11, 6))
		for _, k := range classics {
			q.Options.Roadmap = k
			a := plan(t, w, q)
			if a.Refusal == nil || a.Refusal.Reason != planner.NoPassage || a.Refusal.Bottleneck == nil || a.Refusal.Bottleneck.Zone != c.zone {
				t.Errorf("%s, roadmap %d: %+v %+v", name, k, a.Route, a.Refusal)
			}
		}
		q.Options.Roadmap, q.Options.Preference = planner.MeadowMap, planner.Balanced
		var bad *planner.RequestError
		if _, err := w.Plan(context.Background(), q); !errors.As(err, &bad) || bad.Field != "options.roadmap" {
			t.Errorf("balanced over a meadow map: %v", err)
		}
	}
}

// TestClassicRoadmapTooLarge: a roadmap that is too large for the floor is no fault of the request.
func TestClassicRoadmapTooLarge(t *testing.T) {
	f := randomFloor(t, rand.New(rand.NewPCG(5, 6)), 300, 300, 0.1)
	free := func(row int) planner.Pose { // the first free cell of a row from above
		col := 0
		for f.Solid(col, f.Settings().Rows-1-row) {
			col++
		}
		return cellPose(f, row, col)
	}
	q := shortest(body(0.1), free(1), free(298))
	q.Options.Roadmap = planner.VisibilityGraph
	var bad *planner.RequestError
	_, err := newWorld(t, f).Plan(context.Background(), q)
	if !errors.Is(err, roadmap.ErrTooLarge) || errors.As(err, &bad) {
		t.Errorf("%v, wanted roadmap.ErrTooLarge", err)
	}
}

// TestProfile: down the middle of a room 4 m wide, from 1 m before one wall to 1 m before the
// other, clearance rises for a metre, is 2 m for 6 m, and falls for one.
func TestProfile(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 10, 4, 0.05)))
	r := mustRoute(t, w, shortest(body(0.3), pose(1, 2), pose(9, 2)))
	p := w.Profile(r)
	if want := (1.5*2 + 2*6) * 1e6 / 8; math.Abs(p.MeanUm-want) > 1 {
		t.Errorf("mean %v µm, want %v", p.MeanUm, want)
	}
	if p.InnerSmallestUm != 2_000_000 || math.Abs(p.EndReachUm-2e6) > 1e5 {
		t.Errorf("%+v, want 2 m of room between two stretches of a metre", p)
	}
}
