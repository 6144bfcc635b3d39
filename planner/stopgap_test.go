package planner

import (
	"context"
	"math"
	"testing"
	"testing/synctest"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/voronoi"
)

// A hall with a rack across it: round its upper end is the only way.
func rackWorld(t *testing.T) (*World, Request) {
	t.Helper()
	m, err := floor.New(floor.Settings{ResolutionUm: 50_000, Columns: 200, Rows: 200, CapUm: 2_000_000})
	if err == nil {
		m, err = m.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: 90, Y0: 0, X1: 110, Y1: 150}}})
	}
	if err != nil {
		t.Fatal(err)
	}
	w, err := NewWorld(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	return w, Request{
		Body:  Body{RadiusUm: 300_000, PreferredUm: 1_000_000, MaxSpeed: 1, Braking: 1, Reaction: 1},
		Start: Pose{At: geom.Point{X: 2e6, Y: 2e6}}, Goal: Pose{At: geom.Point{X: 8e6, Y: 2e6}},
		Options: Options{TightWeight: 1},
	}
}

// When the time budget ends while what a preference rests on is in the making, the best
// way known is given: the any-angle optimum when its mesh is there, else one over cells.
// The time in the test passes when everything waits.
func TestTimeBudgetGivesTheBestKnown(t *testing.T) {
	for _, c := range []struct {
		name string
		pref Preference
		mesh bool // is there
	}{
		{"balanced, the mesh being there", Balanced, true}, {"balanced, with nothing", Balanced, false},
		{"clearest, the mesh being there", Clearest, true}, {"clearest, with nothing", Clearest, false},
		{"shortest, with nothing", Shortest, false},
	} {
		synctest.Test(t, func(t *testing.T) {
			w, q := rackWorld(t)
			short := q
			short.Options.Preference = Shortest
			fresh, err := NewWorld(context.Background(), w.m)
			if err != nil {
				t.Fatal(err)
			}
			best, err := fresh.Plan(context.Background(), short)
			if err != nil {
				t.Fatal(err)
			}
			if c.mesh {
				if _, err := w.Plan(context.Background(), short); err != nil {
					t.Fatal(err)
				}
			}
			let := make(chan struct{})
			roads, mesh := w.ways.roads.make, w.ways.meshes.make
			w.ways.roads.make = func(ctx context.Context, k roadKey) (*voronoi.Roads, error) { <-let; return roads(ctx, k) }
			w.ways.meshes.make = func(ctx context.Context, k meshKey) (*anyangle.Mesh, error) { <-let; return mesh(ctx, k) }
			q.Options.Preference = c.pref
			ctx, cancel := context.WithTimeoutCause(context.Background(), time.Second, ErrTimeBudget)
			defer cancel()
			a, err := w.Plan(ctx, q)
			close(let)
			if err != nil || a.Route == nil {
				t.Fatalf("%s: %+v, %v", c.name, a, err)
			}
			b, long := a.Route.Bound, best.Route.LengthUm
			if !b.CutShort || b.GapShare < 0 || a.Route.CostUm > long*(1+b.GapShare)*(1+1e-9) {
				t.Errorf("%s: %+v, cost %f; the shortest is %f long", c.name, b, a.Route.CostUm, long)
			}
			if c.mesh && math.Abs(a.Route.LengthUm-long) > 1e-9*long {
				t.Errorf("%s: %f long, the shortest is %f", c.name, a.Route.LengthUm, long)
			}
			// The making went on; the next answer is whole, and no dearer.
			full, err := w.Plan(context.Background(), q)
			if err != nil || full.Route == nil || full.Route.Bound.CutShort {
				t.Fatalf("%s: %+v, %v", c.name, full, err)
			}
			if c.pref == Balanced && full.Route.CostUm > a.Route.CostUm {
				t.Errorf("%s: costs %f, cut short %f", c.name, full.Route.CostUm, a.Route.CostUm)
			}
		})
	}
}
