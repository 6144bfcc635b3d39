package planner_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// The way past A below B is the shortest while B keeps the body from the other side of A,
// although B is nowhere near the way: r = 0.5 m.
func TestReplanSeesThatAnotherSideBecameShorter(t *testing.T) {
	a, b := solidBox("a", 4.99, -0.52, 5.01, -0.5), solidBox("b", 4.99, 0.45, 5.01, 3)
	before := newMap(t, settings(-10, -10, 30, 20, 0.05), a, b)
	w := newWorld(t, before)
	q := shortest(body(0.5), pose(0, -0.4), pose(10, -0.4))
	old := mustRoute(t, w, q)
	// Optima at r, and at r plus the 1 mm that the optimum is within; computed by hand from
	// tangents and arcs about A's corners.
	if got := geom.Metres(old.LengthUm); got < 10.0772 || got > 10.0778 {
		t.Fatalf("%.6f m before", got)
	}
	after := newMapFrom(t, before, []floor.Edit{{Kind: floor.RemoveFeature, Name: "b"}})
	w, err := w.Advance(context.Background(), after)
	if err != nil {
		t.Fatal(err)
	}
	if got := replan(t, w, again(old, before, q, q.Start.At)); got.Kept || got.Cause != planner.Cheaper || geom.Metres(got.Route.LengthUm) > 10.0325 {
		t.Errorf("kept %v, cause %v, %.6f m; want a new route of 10.032 m", got.Kept, got.Cause, geom.Metres(got.Route.LengthUm))
	}
}

func TestReplanKeepsWithoutASearch(t *testing.T) {
	rack, far := solidBox("rack", 8, 2, 9, 10), solidBox("pallet", 16, 1, 17, 2)
	before := newMap(t, settings(0, 0, 20, 10, 0.05), rack, far, solidBox("crate", 1, 9, 2, 9.5))
	w := newWorld(t, before)
	q := shortest(body(0.3), pose(2, 5), pose(15, 5))
	old := mustRoute(t, w, q)
	turned := zone("lane", floor.OneWayZone, 2, 0, 15, 1.9)
	for _, c := range []struct {
		name string
		edit floor.Edit
		kept bool
	}{
		{"taken away far off", floor.Edit{Kind: floor.RemoveFeature, Name: "crate"}, true},
		{"taken away behind the goal", floor.Edit{Kind: floor.RemoveFeature, Name: "pallet"}, true},
		{"added beside the way", solidBox("new", 11, 6, 12, 7), true},
		{"cells added and cleared elsewhere", floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: 10, Y0: 10, X1: 20, Y1: 20}}, true},
		{"a one-way zone with the way", put(&turned), true},
		{"what it goes round", floor.Edit{Kind: floor.RemoveFeature, Name: "rack"}, false},
	} {
		after := newMapFrom(t, before, []floor.Edit{c.edit})
		v, err := w.Advance(context.Background(), after)
		if err != nil {
			t.Fatal(err)
		}
		at := along(old, 0.25)
		got := replan(t, v, again(old, before, q, at))
		if got.Kept != c.kept || c.kept && (got.Counters.Expanded != 0 || got.Counters.Queued != 0 || got.Route.Bound.Kind != planner.AnyAngleOptimum) {
			t.Errorf("%s: kept %v, counters %+v, bound %+v", c.name, got.Kept, got.Counters, got.Route.Bound)
		}
		// Without knowing that it was an optimum there is a search.
		r := again(old, before, q, at)
		r.OldBound = 0
		if got := replan(t, v, r); c.kept && got.Counters.Expanded == 0 {
			t.Errorf("%s: kept without a search although nothing was known of the route", c.name)
		}
	}
}

// Whether a version was made from the one before, with all that was in use, or from scratch
// does not show in what a replan answers, kept without a search or not.
func TestLaw8ReplanDoesNotTellWhatWasThere(t *testing.T) {
	before := newMap(t, settings(0, 0, 40, 10, 0.05), solidBox("rack", 8, 2, 9, 10), solidBox("crate", 38, 9, 39, 9.5))
	w := newWorld(t, before)
	for pref := range planner.Clearest + 1 {
		q := shortest(body(0.3), pose(2, 5), pose(15, 5))
		q.Options.Preference, q.Options.TightWeight = pref, 1
		old := mustRoute(t, w, q)
		for _, edit := range []floor.Edit{{Kind: floor.RemoveFeature, Name: "crate"}, {Kind: floor.RemoveFeature, Name: "rack"}} {
			after := newMapFrom(t, before, []floor.Edit{edit})
			v, err := w.Advance(context.Background(), after)
			if err != nil {
				t.Fatal(err)
			}
			r := again(old, before, q, along(old, 0.25))
			if got, want := replan(t, v, r), replan(t, newWorld(t, after), r); !reflect.DeepEqual(got, want) {
				t.Errorf("preference %d, without %s: %+v, bound %+v; from scratch %+v, bound %+v", pref, edit.Name, got, got.Route.Bound, want, want.Route.Bound)
			}
		}
	}
}

// Random floors, changes and poses: a replanned route is as short as a fresh plan, kept
// or not, over several versions. WIDEBERTH_SLOW=1 tries ten times as many.
func TestLaw7ReplannedShortestIsShortest(t *testing.T) {
	const seed = 77
	t.Logf("seed %d", seed)
	floors := 350
	if os.Getenv("WIDEBERTH_SLOW") != "" {
		floors *= 10
	}
	tried, kept, worst := 0, 0, 0.0
	for k := range floors {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := cluttered(t, rng)
		w := newWorld(t, m)
		bd := body(float64(rng.IntN(4)) * 0.12)
		spot := func() planner.Pose { return pose(0.2+7.6*rng.Float64(), 0.2+7.6*rng.Float64()) }
		q := shortest(bd, spot(), spot())
		a := plan(t, w, q)
		for range 10 {
			if a.Route == nil {
				break
			}
			old, from := m, along(a.Route, rng.Float64()*rng.Float64())
			if rng.IntN(4) == 0 {
				from.X += float64(rng.IntN(2001) - 1000)
				from.Y += float64(rng.IntN(2001) - 1000)
			}
			m = newMapFrom(t, m, clutterChange(rng, m))
			var err error
			if w, err = w.Advance(context.Background(), m); err != nil {
				t.Fatal(err)
			}
			r := again(a.Route, old, q, from)
			q = r.Request
			got, fresh := replan(t, w, r), plan(t, w, q)
			if (got.Route == nil) != (fresh.Route == nil) {
				t.Fatalf("floor %d: replan %+v, plan %+v", k, got.Answer, fresh)
			}
			if a = got.Answer; a.Route == nil {
				break
			}
			tried++
			if got.Kept && got.Counters.Expanded == 0 {
				kept++
			}
			more := got.Route.LengthUm/fresh.Route.LengthUm - 1
			if worst = max(worst, more); got.Route.LengthUm > 0 && more > 1e-9 {
				t.Errorf("floor %d: %f µm, kept %v; a fresh plan has %f (%g more)\n%v\n%v", k, got.Route.LengthUm, got.Kept, fresh.Route.LengthUm, more, points(got.Route), points(fresh.Route))
			}
		}
	}
	t.Logf("%d replans, %d kept without a search, at worst %g longer", tried, kept, worst)
	if tried < 2000*floors/350 || kept < tried/5 {
		t.Errorf("%d replans, %d kept without a search: want 2000 and a fifth of them", tried, kept)
	}
}

// The same for the roomy preferences. A fresh plan may draw what it shares with the old
// route otherwise: chords are shorter than a bent edge by up to 3.4e-4 of it (half a
// millimetre off, where it bends with a radius of 0.5 m; from memory, no source), and a
// pose on a chord is off the edge by up to half a millimetre, at either weight.
// WIDEBERTH_SLOW=1 makes some 2,000 replans.
func TestLaw7ReplannedRoomyCostsNoMore(t *testing.T) {
	const seed = 78
	t.Logf("seed %d", seed)
	floors := 60
	if os.Getenv("WIDEBERTH_SLOW") != "" {
		floors *= 10
	}
	tried, kept, worst := [3]int{}, [3]int{}, 0.0
	for k := range floors {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := cluttered(t, rng)
		w := newWorld(t, m)
		bd := body(0.05 + float64(rng.IntN(3))*0.1)
		bd.MarginUm = int64(rng.IntN(2) * 30_000)
		bd.PreferredUm = bd.Required() + 1 + int64(rng.IntN(200_000))
		spot := func() planner.Pose { return pose(0.2+7.6*rng.Float64(), 0.2+7.6*rng.Float64()) }
		q := shortest(bd, spot(), spot())
		q.Options = planner.Options{Preference: planner.Balanced, TightWeight: []float64{0, 0.2, 1}[rng.IntN(3)]}
		if k%4 == 0 {
			q.Options.Preference = planner.Clearest
		}
		a := plan(t, w, q)
		for range 10 {
			if a.Route == nil {
				break
			}
			old, from := m, along(a.Route, rng.Float64()*rng.Float64())
			if rng.IntN(4) == 0 {
				from.X += float64(rng.IntN(2001) - 1000)
				from.Y += float64(rng.IntN(2001) - 1000)
			}
			m = newMapFrom(t, m, clutterChange(rng, m))
			var err error
			if w, err = w.Advance(context.Background(), m); err != nil {
				t.Fatal(err)
			}
			r := again(a.Route, old, q, from)
			q = r.Request
			got, fresh := replan(t, w, r), plan(t, w, q)
			if (got.Route == nil) != (fresh.Route == nil) {
				t.Fatalf("floor %d: replan %+v, plan %+v", k, got.Answer, fresh)
			}
			if a = got.Answer; a.Route == nil {
				break
			}
			tried[q.Options.Preference]++
			if got.Kept && got.Counters.Expanded == 0 && got.Route.Bound.Kind == planner.RoadmapOptimum {
				kept[q.Options.Preference]++
			}
			slack := 3.4e-4*fresh.Route.CostUm + 2*500*(1+q.Options.TightWeight)
			more := got.Route.CostUm - fresh.Route.CostUm
			if q.Options.Preference == planner.Clearest && w.RoomOf(q, points(got.Route)) > w.RoomOf(q, points(fresh.Route))+2 {
				more = 0 // room comes first; whole micrometres may take two off it
			}
			if worst = max(worst, more/slack); more > slack || q.Options.Preference == planner.Clearest && got.Route.SmallestUm < fresh.Route.SmallestUm-2 {
				t.Errorf("floor %d: costs %f, keeps %d, kept %v; a fresh plan %f and %d\n%v\n%v", k, got.Route.CostUm, got.Route.SmallestUm, got.Kept,
					fresh.Route.CostUm, fresh.Route.SmallestUm, points(got.Route), points(fresh.Route))
			}
		}
	}
	t.Logf("%d replans, %d kept without a search, at worst %g of what is allowed dearer", tried, kept, worst)
	if kept[planner.Balanced] < tried[planner.Balanced]/20 || kept[planner.Clearest] == 0 {
		t.Errorf("%d replans, %d kept without a search", tried, kept)
	}
}

// cluttered is a floor of 8 by 8 m with walls, discs, polygons, cells and zones about.
func cluttered(t testing.TB, rng *rand.Rand) *floor.Map {
	s := settings(0, 0, 8, 8, 0.05)
	s.CapUm = 2 * m
	var es []floor.Edit
	for i := range 3 + rng.IntN(8) {
		es = append(es, clutter(rng, fmt.Sprintf("s%d", i)))
	}
	return newMap(t, s, es...)
}

func clutter(rng *rand.Rand, name string) floor.Edit {
	at := func() geom.Point {
		return geom.Point{X: float64(rng.IntN(8_000_001)), Y: float64(rng.IntN(8_000_001))}
	}
	mid := at()
	near := func(most float64) geom.Point {
		return geom.Point{X: math.Round(min(max(mid.X+(2*rng.Float64()-1)*most, 0), 8e6)), Y: math.Round(min(max(mid.Y+(2*rng.Float64()-1)*most, 0), 8e6))}
	}
	switch rng.IntN(6) {
	case 0:
		c, r := rng.IntN(150), rng.IntN(150)
		return floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: c, Y0: r, X1: min(160, c+1+rng.IntN(30)), Y1: min(160, r+1+rng.IntN(30))}}
	case 1:
		um := int64(20_000 + rng.IntN(600_000))
		return put(&floor.Feature{Name: name, Kind: floor.Solid, RadiusUm: um, Shape: floor.NewDisc(mid, um, 0)})
	case 2:
		x, y := 100_000+float64(rng.IntN(1_500_000)), 100_000+float64(rng.IntN(1_500_000))
		ring := []geom.Point{mid, {X: min(mid.X+x, 8e6), Y: mid.Y}, {X: min(mid.X+x, 8e6), Y: min(mid.Y+y, 8e6)}, {X: mid.X, Y: min(mid.Y+y, 8e6)}}
		if ring[1].X == mid.X || ring[3].Y == mid.Y {
			ring[0], ring[1], ring[2] = geom.Point{}, geom.Point{X: 1e6}, geom.Point{X: 1e6, Y: 1e6}
			ring[3] = geom.Point{Y: 1e6}
		}
		kind := floor.Solid
		if rng.IntN(3) == 0 {
			kind = floor.ClosedZone
		}
		return put(&floor.Feature{Name: name, Kind: kind, Shape: floor.NewPolygon([][]geom.Point{ring}, 0)})
	case 3:
		ring := []geom.Point{near(1.5e6), near(1.5e6), near(1.5e6)}
		if geom.Orient(ring[0], ring[1], ring[2]) != 0 {
			return put(&floor.Feature{Name: name, Kind: floor.Solid, Shape: floor.NewPolygon([][]geom.Point{ring}, 0)})
		}
	}
	um := int64(50_000 + rng.IntN(150_000))
	b := near(3e6)
	if b == mid {
		b = geom.Point{X: 1, Y: 1}
	}
	return put(&floor.Feature{Name: name, Kind: floor.Solid, WidthUm: um, Shape: floor.NewPolyline([]geom.Point{mid, b}, um, 0)})
}

// clutterChange takes something away, adds something, moves something or clears cells.
func clutterChange(rng *rand.Rand, f *floor.Map) []floor.Edit {
	var names []string
	for ft := range f.Features() {
		names = append(names, ft.Name)
	}
	switch {
	case len(names) > 2 && rng.IntN(2) == 0:
		return []floor.Edit{{Kind: floor.RemoveFeature, Name: names[rng.IntN(len(names))]}}
	case rng.IntN(4) == 0:
		c, r := rng.IntN(150), rng.IntN(150)
		return []floor.Edit{{Kind: floor.ClearRect, Rect: floor.CellRect{X0: c, Y0: r, X1: min(160, c+40), Y1: min(160, r+40)}}}
	case rng.IntN(8) == 0:
		z := zone("lane", floor.OneWayZone, 2, 2, 6, 6)
		z.Heading = 6*rng.Float64() - 3
		return []floor.Edit{put(&z)}
	}
	return []floor.Edit{clutter(rng, fmt.Sprintf("s%d", rng.IntN(10)))}
}
