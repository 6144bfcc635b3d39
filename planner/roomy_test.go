package planner_test

import (
	"math/rand/v2"
	"os"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	"example.com/wideberth/planner/check"
)

// A door of exactly 0.90 m lets a body through that needs exactly that, by every preference
// and wherever it lies against the grid, and none that needs two micrometres more.
func TestLaw6AlignedDoor(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 6))
	for range 12 {
		x, y := 5+float64(rnd.IntN(50_000))/m, 5+float64(rnd.IntN(50_000))/m
		deep := 0.1 + float64(rnd.IntN(1_000_000))/m
		set := settings(0, 0, 12, 12, 0.05)
		for _, cut := range []float64{0, 1e-6} {
			w := newWorld(t, newMap(t, set, solidBox("south", x, 0, x+deep, y), solidBox("north", x, y+0.9-cut, x+deep, 12)))
			for _, pref := range []planner.Preference{planner.Balanced, planner.Clearest, planner.Shortest} {
				q := planner.Request{Body: body(0.45), Start: pose(2, 3), Goal: pose(10, 9), Options: planner.Options{Preference: pref, TightWeight: 1}}
				q.Body.PreferredUm = 450_000 + int64(rnd.IntN(2))*650_000
				a := plan(t, w, q)
				if (a.Route != nil) != (cut == 0) {
					t.Fatalf("door at %g, %g, %g deep, less %g, preference %d: %+v", x, y, deep, cut, pref, a.Refusal)
				}
				if a.Route != nil && a.Route.SmallestUm != 450_000 {
					t.Errorf("keeps %d", a.Route.SmallestUm)
				}
				if a.Refusal != nil {
					if b := a.Refusal.Bottleneck; b.WidthUm != 899_999 || b.WidthShortUm != 1 || len(b.Features) != 2 {
						t.Errorf("gate %+v, want 0.899999 m between both walls", b)
					}
				}
			}
		}
	}
}

// Slanted passages: none lost that is 2 mm wider than the body, none let through that is
// narrower, by the roomy preferences.
func TestLaw6SlantedPassage(t *testing.T) {
	const seed, width = 66, 0.8
	t.Logf("seed %d", seed)
	n := 12
	if os.Getenv("WIDEBERTH_SLOW") != "" {
		n = 300
	}
	rnd := rand.New(rand.NewPCG(seed, 1))
	for range n {
		w, s, g := slanted(t, rnd, width)
		for _, pref := range []planner.Preference{planner.Balanced, planner.Clearest} {
			q := planner.Request{Start: s, Goal: g, Options: planner.Options{Preference: pref, TightWeight: 1}}
			q.Body = body(width/2 - 0.001)
			q.Body.PreferredUm += int64(rnd.IntN(2)) * 300_000
			r := mustRoute(t, w, q)
			if pref == planner.Clearest && (r.SmallestUm < 399_997 || r.SmallestUm > 400_003) {
				t.Errorf("clearest keeps %d, want 0.4 m", r.SmallestUm)
			}
			q.Body = body(width/2 + 5e-6) // the walls' rounding
			if a := plan(t, w, q); a.Route != nil {
				t.Fatalf("%d µm through", a.Route.SmallestUm)
			}
		}
	}
}

// Random floors with zones: whatever is found passes the check at what it says it keeps, no
// preference finds a way where another finds none, and clearest keeps the most.
func TestRoomyAgainstEachOther(t *testing.T) {
	const seed = 67
	t.Logf("seed %d", seed)
	n := 60
	if os.Getenv("WIDEBERTH_SLOW") != "" {
		n = 3000
	}
	found := 0
	for k := range n {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := cluttered(t, rng)
		w := newWorld(t, f)
		b := body(0.05 + float64(rng.IntN(300))/1000)
		b.MarginUm = int64(rng.IntN(60_000))
		b.PreferredUm = b.Required() + int64(rng.IntN(900_000))
		q := planner.Request{Body: b, Start: pose(8*rng.Float64(), 8*rng.Float64()), Goal: pose(8*rng.Float64(), 8*rng.Float64())}
		var got [3]planner.Answer
		for pref := range got {
			q.Options = planner.Options{Preference: planner.Preference(pref), TightWeight: 1}
			got[pref] = plan(t, w, q)
		}
		if (got[0].Route == nil) != (got[1].Route == nil) || (got[0].Route == nil) != (got[2].Route == nil) {
			t.Fatalf("floor %d: %+v", k, got)
		}
		if got[0].Route == nil {
			continue
		}
		found++
		for pref, a := range got {
			// The floor holds the discs, and the check its own arithmetic.
			if p := check.Way(f, points(a.Route), b.Required(), b.RadiusUm).Problem; p != "" {
				t.Errorf("floor %d, preference %d: %s", k, pref, p)
			}
			// What the ends leave is not counted, and is the least there can be anyway. Closed
			// zones count for clearest as solids do.
			if hasClosed(f) {
				continue
			}
			ends := min(bruteDist(f, q.Start.At), bruteDist(f, q.Goal.At))
			if c := got[planner.Clearest].Route; a.Route.SmallestUm > c.SmallestUm+1 && float64(c.SmallestUm) < ends-1 && c.Bound.Kind != planner.AtMostRoadmapOptimum {
				t.Errorf("floor %d: preference %d keeps %d, clearest %d", k, pref, a.Route.SmallestUm, c.SmallestUm)
			}
		}
		if s, b := got[planner.Shortest].Route, got[planner.Balanced].Route; s.LengthUm > b.LengthUm*(1+1e-9) && s.Bound.Kind == planner.AnyAngleOptimum && s.LengthUm > b.LengthUm+2000 {
			t.Errorf("floor %d: shortest %f, balanced %f", k, s.LengthUm, b.LengthUm)
		}
	}
	if found < n/3 {
		t.Errorf("%d found", found)
	}
}

// A wide hall with two doors: clearest takes the wider one however far, balanced the one
// that costs less.
func TestClearestTakesTheWiderDoor(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 20, 20, 0.05),
		solidBox("a", 10, 0, 10.2, 4), solidBox("b", 10, 5.2, 10.2, 15), solidBox("c", 10, 17, 10.2, 20)))
	b := body(0.3)
	b.PreferredUm = 800_000
	for _, c := range []struct {
		pref planner.Preference
		want int64
	}{{planner.Balanced, 500_000}, {planner.Clearest, 500_000}} {
		// From beside a wall: what that leaves is not counted.
		q := planner.Request{Body: b, Start: pose(0.5, 4.6), Goal: pose(17, 4.6), Options: planner.Options{Preference: c.pref, TightWeight: 1}}
		r := mustRoute(t, w, q)
		if r.SmallestUm != c.want {
			t.Errorf("preference %d keeps %d, want %d", c.pref, r.SmallestUm, c.want)
		}
		high := 0.0
		for _, p := range points(r) {
			high = max(high, p.Y)
		}
		if wide := high > 15*m; wide != (c.pref == planner.Clearest) {
			t.Errorf("preference %d goes up to %g m", c.pref, high/m)
		}
		if c.pref == planner.Clearest && r.CostUm != r.LengthUm {
			t.Errorf("clearest costs %f, is %f long", r.CostUm, r.LengthUm)
		}
	}
}

// A one-way zone over the roads' way: the route obeys it all the same.
func TestRoomyHeedsOneWayZones(t *testing.T) {
	lane := zone("lane", floor.OneWayZone, 4, 0, 6, 8)
	lane.Heading = 3.1
	w := newWorld(t, newMap(t, settings(0, 0, 20, 20, 0.05), solidBox("rack", 4.9, 8, 5.1, 16), put(&lane)))
	for _, pref := range []planner.Preference{planner.Balanced, planner.Clearest} {
		b := body(0.3)
		b.PreferredUm = 1_000_000
		r := mustRoute(t, w, planner.Request{Body: b, Start: pose(2, 7), Goal: pose(8, 7), Options: planner.Options{Preference: pref, TightWeight: 1}})
		if r.Bound.Kind != planner.AtMostRoadmapOptimum || geom.Metres(r.LengthUm) < 20 {
			t.Errorf("preference %d: %f long, %+v", pref, r.LengthUm, r.Bound)
		}
	}
}

func hasClosed(f *floor.Map) bool {
	for ft := range f.Features() {
		if ft.Kind == floor.ClosedZone {
			return true
		}
	}
	return false
}
