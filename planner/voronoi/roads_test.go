package voronoi

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"sync"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/check"
)

// TestRoadsAreTheEdgesBelowP checks which places of edges are tight: all below p, none
// that is certainly in Open; and that portals are in Open, at p or within the mesh's
// shortfall above it.
func TestRoadsAreTheEdgesBelowP(t *testing.T) {
	const seed = 13
	t.Logf("seed %d", seed)
	tight, open, portals := 0, 0, 0
	for k := range 40 {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 40+rng.IntN(100), 40+rng.IntN(100))
		g := graphOf(t, m, Need{MostUm: 2_000_000})
		w := roadsOf(t, g, []int64{300_000, 1_000_000, 2_000_000}[rng.IntN(3)])
		g.eachArc(func(b, i int32) {
			a := &g.blocks[b].arcs[i]
			first, end := w.piecesOf(b, i)
			for q := range 20 {
				s := a.s0 + (a.s1-a.s0)*(float64(q)+0.5)/20
				um, on := a.clearance(s), 0
				for _, v := range w.roads[first:end] {
					if s > min(v.s0, v.s1) && s < max(v.s0, v.s1) {
						on++
					}
				}
				switch {
				case um < w.p-1e-3 && on != 1:
					t.Fatalf("case %d: clearance %v below %v is on %d roads", k, um, w.p, on)
				case um > w.p+anyangle.DeltaUm+1e-3 && on != 0 && w.open.Contains(g.place(b, a.at(s))):
					t.Fatalf("case %d: clearance %v in Open from %v is on %d roads", k, um, w.p, on)
				case on > 1:
					t.Fatalf("case %d: a place on %d roads", k, on)
				case on == 1:
					tight++
				default:
					open++
				}
			}
		})
		for _, part := range w.portals {
			for _, n := range part {
				portals++
				v := w.nodes[n]
				if !w.open.Contains(v.at) || v.um < w.p-1e-3 || v.um > w.p+anyangle.DeltaUm+1e-3 {
					t.Fatalf("case %d: portal %+v of %v", k, v, w.p)
				}
				if !w.open.Connected(v.at, w.nodes[part[0]].at) {
					t.Fatalf("case %d: portals %v and %v are not of one part", k, v, w.nodes[part[0]])
				}
			}
		}
	}
	t.Logf("%d places tight, %d open, %d portals", tight, open, portals)
	if tight == 0 || open == 0 || portals == 0 {
		t.Error("too few of a kind")
	}
}

// TestEndsGoStraightAway checks an end's way in: it goes straight away from the nearest
// solid, to the first edge or place of Open.
func TestEndsGoStraightAway(t *testing.T) {
	const seed = 14
	t.Logf("seed %d", seed)
	road, open := 0, 0
	for k := range scaled(25, 600) {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 40+rng.IntN(100), 40+rng.IntN(100))
		o := plainOf(m)
		g := graphOf(t, m, Need{MostUm: 2_000_000})
		w := roadsOf(t, g, []int64{300_000, 1_000_000, 2_000_000}[rng.IntN(3)])
		for range 20 {
			s := randomPoint(rng, m.Bounds())
			d, foot := o.nearest(s)
			if d < 1 || w.open.Contains(s) {
				continue
			}
			e, ok := w.enter(s)
			if !ok {
				// An edge with little more than p may be neither a road nor in Open.
				rises := func(t float64) bool {
					c, _ := o.nearest(geom.Point{X: s.X + t/d*(s.X-foot.X), Y: s.Y + t/d*(s.Y-foot.Y)})
					return c > d+t-1e-3
				}
				far := 0.0
				for step := 1e6; step > 0.1; step /= 2 {
					if rises(far + step) {
						far += step
					}
				}
				if c := d + far; c < w.p || c > w.p+anyangle.DeltaUm {
					t.Fatalf("case %d: no way in from %v, to an edge of clearance %v", k, s, c)
				}
				continue
			}
			if math.Abs(e.um-d) > 1e-3 {
				t.Fatalf("case %d: clearance %v at %v, wanted %v", k, e.um, s, d)
			}
			for _, share := range []float64{0.3, 0.9, 1} {
				p := geom.Point{X: s.X + share*(e.to.X-s.X), Y: s.Y + share*(e.to.Y-s.Y)}
				c, _ := o.nearest(p)
				// Straight away: clearance rises by all that is gone. An edge that runs nearly
				// alike is met to within enterUm.
				if math.Abs(c-d-share*e.length) > enterUm || geom.Dist(p, foot)-c > 1e-3+2*enterUm*share {
					t.Fatalf("case %d: from %v (%v) %v of the way to %v: clearance %v", k, s, d, share, e.to, c)
				}
				if share < 1 && c < w.p && e.length > 100*joinUm && g.onEdges(p) < 1e-4*e.length {
					t.Fatalf("case %d: from %v to %v across an edge at %v", k, s, e.to, p)
				}
			}
			if e.road >= 0 {
				road++
				if off := g.onEdges(e.to); off > 1e-3 {
					t.Fatalf("case %d: %v is %v off the edges", k, e.to, off)
				}
			} else {
				open++
				if !w.open.Contains(e.to) {
					t.Fatalf("case %d: %v is not in Open", k, e.to)
				}
			}
		}
	}
	t.Logf("%d to edges, %d to Open", road, open)
	if road < 50 || open < 50 {
		t.Error("too few of a kind")
	}
}

// Coordinates far from 0, and very small and large cells.
func TestOtherFrames(t *testing.T) {
	const seed = 15
	t.Logf("seed %d", seed)
	found := 0
	for k := range scaled(12, 240) {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		h := []int64{1_000, 7_777, 1_000_000, 10_000_000}[k%4]
		n := 40 + rng.IntN(60)
		set := floor.Settings{ResolutionUm: h, Columns: n, Rows: n, CapUm: 40 * h, OpenBorder: k%3 == 0,
			OriginX: 1_234_567_890_123, OriginY: -987_654_321_987}
		m, err := floor.New(set)
		if err != nil {
			t.Fatal(err)
		}
		var edits []floor.Edit
		for i := range 6 {
			x, y := rng.IntN(n-9), rng.IntN(n-9)
			edits = append(edits, paint(x, y, x+1+rng.IntN(8), y+1+rng.IntN(8), floor.Occupied))
			p := randomPoint(rng, m.Bounds().Grow(float64(-8*h)))
			q := geom.Point{X: p.X + float64(rng.Int64N(8*h)), Y: p.Y + float64(rng.Int64N(8*h))}
			edits = append(edits, put(string(rune('a'+i)), floor.NewPolyline([]geom.Point{p, q}, 1+rng.Int64N(min(h, 90_000_000)), 0)))
		}
		if m, err = m.Apply(edits); err != nil {
			t.Fatal(err)
		}
		g := graphOf(t, m, Need{MostUm: 40 * h})
		g.checkEnds(t, k)
		w := roadsOf(t, g, 5*h)
		for range 8 {
			s, e := randomPoint(rng, m.Bounds()), randomPoint(rng, m.Bounds())
			r := h
			path, ok, err := w.Balanced(context.Background(), s, e, r, 1)
			if err != nil {
				t.Fatal(err)
			}
			if !ok {
				continue
			}
			found++
			if f := check.Way(m, path.points(), r, 1); f.Problem != "" {
				t.Fatalf("case %d: cells of %d µm: %s", k, h, f.Problem)
			}
		}
	}
	if found < 24 {
		t.Errorf("%d ways found", found)
	}
}

// Two solids that touch in a point close the gap between them, at any clearance.
func TestPointContactIsClosed(t *testing.T) {
	m := newFloor(t, 100, 100, 2_000_000, false, paint(0, 50, 40, 51, floor.Occupied), paint(40, 51, 100, 52, floor.Occupied))
	w := roadsOf(t, graphOf(t, m, Need{MostUm: 2_000_000}), 500_000)
	s, e := geom.Point{X: 2e6, Y: 1e6}, geom.Point{X: 2e6, Y: 4e6}
	if b, ok, _ := w.Widest(context.Background(), s, e); ok {
		t.Errorf("a way through a point: %+v", b)
	}
	if _, ok, _ := w.Balanced(context.Background(), s, e, 0, 1); ok {
		t.Error("a way through a point at clearance 0")
	}
}

func TestSearchStopsAndManySearchAtOnce(t *testing.T) {
	w := roadsOf(t, graphOf(t, hallFloor(t, 256, 0.1, true), Need{MostUm: 2_000_000}), 1_600_000)
	s, e := geom.Point{X: 600_000, Y: 600_000}, geom.Point{X: 12_100_000, Y: 12_100_000}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, ok, err := w.Balanced(ctx, s, e, 400_000, 1); ok || !errors.Is(err, context.Canceled) {
		t.Errorf("found %v, error %v after the asker had gone", ok, err)
	}
	want, ok, err := w.Balanced(context.Background(), s, e, 400_000, 1)
	if !ok || err != nil {
		t.Fatal(ok, err)
	}
	var wg sync.WaitGroup
	for range 4 {
		wg.Go(func() {
			for r := int64(300_000); r <= 400_000; r += 10_000 {
				p, ok, err := w.Balanced(context.Background(), s, e, r, 1)
				if !ok || err != nil || r == 400_000 && p.CostUm != want.CostUm {
					t.Errorf("cost %v (%v, %v), wanted %v", p.CostUm, ok, err, want.CostUm)
				}
			}
		})
	}
	wg.Wait()
}
