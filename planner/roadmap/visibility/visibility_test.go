package visibility

import (
	"cmp"
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/plainfloor"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/gen"
)

func at(x, y float64) geom.Point { return geom.Point{X: x * 1e6, Y: y * 1e6} }

func field(t testing.TB, f *floor.Map) *clearance.Field {
	t.Helper()
	c, err := clearance.Build(context.Background(), f)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func build(t testing.TB, f *floor.Map, r int64) *Graph {
	t.Helper()
	g, err := Build(context.Background(), field(t, f), roadmap.Need{ClearanceUm: r, Zones: true, ZoneUm: r})
	if err != nil {
		t.Fatal(err)
	}
	return g
}

func find(t testing.TB, g roadmap.Roadmap, s, e geom.Point) (roadmap.Way, bool) {
	t.Helper()
	w, ok, err := g.Search(context.Background(), s, e)
	if err != nil {
		t.Fatal(err)
	}
	return w, ok
}

func square(x0, y0, x1, y1 float64) floor.Shape {
	return floor.NewPolygon([][]geom.Point{{at(x0, y0), at(x1, y0), at(x1, y1), at(x0, y1)}}, 0)
}

// TestAnalyticShortestWays: round a disc (two tangents and an arc), round a square grown by
// r, and past two blocks, all by elementary geometry; figures to 1e-12 of the worked
// examples that the project checks itself against.
func TestAnalyticShortestWays(t *testing.T) {
	f := gen.Empty(t, 480, 480, false) // 24 m, the examples about (12, 12)
	p := func(x, y float64) geom.Point { return at(12+x, 12+y) }
	block := func(x0, y0, x1, y1 float64) floor.Shape { return square(12+x0, 12+y0, 12+x1, 12+y1) }
	cells := func(x0, y0, x1, y1 float64) floor.Edit {
		return gen.Paint(int((12+x0)*20), int((12+y0)*20), int((12+x1)*20), int((12+y1)*20))
	}
	for name, c := range map[string]struct {
		f    *floor.Map
		r    int64
		s, e geom.Point
		want float64
	}{
		"disc 1":        {gen.Put(t, f, floor.NewDisc(p(0, 0), 1_000_000, 0)), 0, p(-2, 0), p(2, 0), 2*math.Sqrt(3) + math.Pi/3},
		"disc 1, by r":  {gen.Put(t, f, floor.NewDisc(p(0, 0), 600_000, 0)), 400_000, p(-2, 0), p(2, 0), 4.511299166334},
		"disc 1.5":      {gen.Put(t, f, floor.NewDisc(p(0, 0), 1_000_000, 0)), 500_000, p(-5, 0), p(5, 0), 10.453469976216},
		"square, point": {gen.Put(t, f, block(-1, -1, 1, 1)), 0, p(-5, 0), p(5, 0), 10.246211251235},
		"square 0.5":    {gen.Put(t, f, block(-1, -1, 1, 1)), 500_000, p(-5, 0), p(5, 0), 10.551898456870},
		"square 0.25":   {gen.Put(t, f, block(-1, -1, 1, 1)), 250_000, p(-5, 0), p(5, 0), 10.383863708635},
		"cells, point":  {gen.Apply(t, f, cells(-1, -1, 1, 1)), 0, p(-5, 0), p(5, 0), 10.246211251235},
		"cells 0.5":     {gen.Apply(t, f, cells(-1, -1, 1, 1)), 500_000, p(-5, 0), p(5, 0), 10.551898456870},
		"two blocks":    {gen.Put(t, f, block(-3, -1, -1, 3), block(1, -3, 3, 1)), 0, p(-5, 0), p(5, 0), 11.300563079746},
		"two blocks a":  {gen.Put(t, f, block(-3, -1, -1, 2), block(1, -2, 3, 1)), 0, p(-5, 0), p(5, 0), 11.187600727864},
		"two in cells":  {gen.Apply(t, f, cells(-3, -1, -1, 3), cells(1, -3, 3, 1)), 0, p(-5, 0), p(5, 0), 11.300563079746},
	} {
		w, ok := find(t, build(t, c.f, c.r), c.s, c.e)
		// 1e-6 relative: what the examples are given for, and less than what ArcErrorUm amounts to:
		// about a third of it over each metre of arc.
		if got := w.LengthUm / 1e6; !ok || math.Abs(got-c.want) > 1e-6*c.want && got-c.want > 60e-6 || got < c.want*(1-1e-9) {
			t.Errorf("%s: %.12f m, wanted %.12f", name, w.LengthUm/1e6, c.want)
		}
		if math.Abs(w.ExactUm/1e6-c.want) > 1e-6*c.want {
			t.Errorf("%s: %.12f m along the arcs, wanted %.12f", name, w.ExactUm/1e6, c.want)
		}
		if ok {
			if v := check.Way(c.f, w.Points, c.r, c.r); v.Problem != "" {
				t.Errorf("%s: %s", name, v.Problem)
			}
		}
	}
}

// TestAgainstTheAnyAngleOptimum: on random floors a way is no shorter than the any-angle
// optimum L*(r) and no longer than L*(r + error) where that is to be had; it passes the
// independent check. The optima are package anyangle's, within its DeltaUm.
func TestAgainstTheAnyAngleOptimum(t *testing.T) {
	const seed = 21
	t.Logf("seed %d", seed)
	cases := 120
	if gen.Slow() {
		cases = 2000
	}
	ways, none, short := 0, 0, 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := gen.Floor(t, rng, 20+rng.IntN(80), 20+rng.IntN(80))
		r := []int64{0, 30_000, 50_000, 150_000, 217_345, 333_333}[rng.IntN(6)]
		g := build(t, f, r)
		mesh := func(r int64) *anyangle.Mesh {
			m, err := anyangle.Build(context.Background(), f, anyangle.Need{ClearanceUm: r, Zones: true, ZoneUm: r})
			if err != nil {
				t.Fatal(err)
			}
			return m
		}
		exact, wider := mesh(r), mesh(r+int64(g.errUm))
		closer := exact
		if r > 2*anyangle.DeltaUm {
			closer = mesh(r - anyangle.DeltaUm) // no longer than the true optimum at r
		}
		for range 3 {
			s, e := gen.Within(rng, f.Bounds()), gen.Within(rng, f.Bounds())
			w, ok := find(t, g, s, e)
			if ok {
				ways++
				if v := check.Way(f, w.Points, r, r); v.Problem != "" {
					t.Fatalf("case %d: %s: %v", k, v.Problem, w.Points)
				}
			}
			// At 0 the mesh may stand off from round solids, and is no bound from below.
			if low, had, _ := closer.Shortest(context.Background(), s, e); r > 0 && had && ok && w.LengthUm < low.LengthUm*(1-1e-9) {
				t.Fatalf("case %d: %v µm from %v to %v at %d, the optimum is %v", k, w.LengthUm, s, e, r, low.LengthUm)
			} else if ok && !had && r > 2*anyangle.DeltaUm {
				t.Fatalf("case %d: a way from %v to %v at %d, and none at a millimetre less", k, s, e, r)
			}
			high, had, _ := wider.Shortest(context.Background(), s, e)
			if !had {
				if !ok {
					none++
				}
				continue
			}
			if !ok {
				t.Fatalf("case %d: no way from %v to %v at %d, one of %v at %v more", k, s, e, r, high.LengthUm, g.errUm)
			}
			// ArcErrorUm: a third of it for each radian, at most about 30 a way here.
			if w.LengthUm > high.LengthUm+10*ArcErrorUm {
				t.Fatalf("case %d: %v µm from %v to %v at %d, %v with %v µm more room", k, w.LengthUm, s, e, r, high.LengthUm, g.errUm)
			}
			if best, had, _ := exact.Shortest(context.Background(), s, e); had && w.LengthUm < best.LengthUm {
				short++
			}
		}
	}
	t.Logf("%d ways, %d pairs without one, %d shorter than the mesh's", ways, none, short)
	if ways < cases {
		t.Errorf("only %d ways", ways)
	}
}

// corners of a floor of polygons for the brute-force twin.
func polygonFloor(t testing.TB, rng *rand.Rand) (*floor.Map, [][]geom.Point) {
	f := gen.Empty(t, 100, 100, true)
	var rings [][]geom.Point
	for len(rings) < 2+rng.IntN(5) {
		s := gen.Shape(rng, f.Bounds().Grow(-200_000))
		if s.Kind != floor.Polygon {
			continue
		}
		box := s.CoreBounds()
		free := true
		for _, r := range rings {
			free = free && !geom.BoundsOf(r...).Grow(1000).Intersects(box)
		}
		if !free {
			continue
		}
		c := s.Chains[0]
		if geom.Ring(c).SignedArea() < 0 {
			for i, j := 0, len(c)-1; i < j; i, j = i+1, j-1 {
				c[i], c[j] = c[j], c[i]
			}
		}
		rings = append(rings, c)
		f = gen.Put(t, f, floor.NewPolygon([][]geom.Point{c}, 0))
	}
	return f, rings
}

// TestVisibilityEdgesEqualABruteForceTwin: on random polygons, for a point, the edges are
// all pairs of convex corners that see one another and are locally taut: neither end's
// polygon has its two sides on both sides of the line. The twin goes over all
// sides of all polygons for each pair.
func TestVisibilityEdgesEqualABruteForceTwin(t *testing.T) {
	const seed = 22
	t.Logf("seed %d", seed)
	cases := 60
	if gen.Slow() {
		cases = 1000
	}
	type pair struct{ a, b geom.Point }
	edges := 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f, rings := polygonFloor(t, rng)
		got := map[pair]bool{}
		for _, e := range build(t, f, 0).Describe().Edges {
			p, q := e.Points[0], e.Points[1]
			got[pair{p, q}], got[pair{q, p}] = true, true
		}
		type corner struct{ before, p, after geom.Point }
		var cs []corner
		for _, c := range rings {
			for i, p := range c {
				v := corner{c[(i+len(c)-1)%len(c)], p, c[(i+1)%len(c)]}
				if geom.Orient(v.before, p, v.after) > 0 {
					cs = append(cs, v)
				}
			}
		}
		taut := func(v corner, q geom.Point) bool {
			return geom.Orient(v.p, q, v.before)*geom.Orient(v.p, q, v.after) >= 0
		}
		enters := func(p, q geom.Point) bool {
			on := []geom.Point{p, q} // corners along it: between two it is inside or not
			for _, c := range rings {
				for i, a := range c {
					if geom.SegmentsCross(p, q, a, c[(i+1)%len(c)]) {
						return true
					}
					if geom.OnSegment(a, p, q) {
						on = append(on, a)
					}
				}
			}
			slices.SortFunc(on, func(a, b geom.Point) int { return cmp.Compare(geom.Dist(p, a), geom.Dist(p, b)) })
			for i := 1; i < len(on); i++ {
				mid := geom.Point{X: (on[i-1].X + on[i].X) / 2, Y: (on[i-1].Y + on[i].Y) / 2}
				for _, c := range rings {
					if d, _ := geom.BorderDist([][]geom.Point{c}, mid); d > 1e-3 && geom.InPolygon([][]geom.Point{c}, mid) {
						return true
					}
				}
			}
			return false
		}
		for i, v := range cs {
			for _, w := range cs[:i] {
				want := taut(v, w.p) && taut(w, v.p) && !enters(v.p, w.p)
				if want {
					edges++
				}
				if has := got[pair{v.p, w.p}]; has != want {
					t.Fatalf("case %d: edge %v %v: %v, wanted %v; %v", k, v.p, w.p, has, want, rings)
				}
			}
		}
	}
	t.Logf("%d edges", edges)
}

// same compares graphs in all they hold and give.
func same(t *testing.T, a, b *Graph) {
	t.Helper()
	if !reflect.DeepEqual(a.arcs, b.arcs) {
		t.Fatalf("%d arcs, rebuilt %d, or other ones", len(a.arcs), len(b.arcs))
	}
	if x, y := a.Describe(), b.Describe(); !reflect.DeepEqual(x, y) {
		t.Fatalf("%d edges, rebuilt %d, or other ones", len(x.Edges), len(y.Edges))
	}
}

// TestPatchedEqualsRebuilt: over sequences of random changes, all tangents found before or some.
func TestPatchedEqualsRebuilt(t *testing.T) {
	const seed = 23
	t.Logf("seed %d", seed)
	cases := 25
	if gen.Slow() {
		cases = 400
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := gen.Floor(t, rng, 20+rng.IntN(50), 20+rng.IntN(50))
		need := roadmap.Need{ClearanceUm: []int64{0, 60_000, 150_000}[rng.IntN(3)], Zones: true, ZoneUm: 100_000}
		fd := field(t, f)
		g, err := Build(context.Background(), fd, need)
		if err != nil {
			t.Fatal(err)
		}
		for range 4 {
			if rng.IntN(2) == 0 {
				if err := g.Complete(context.Background()); err != nil {
					t.Fatal(err)
				}
			} else {
				find(t, g, gen.Within(rng, f.Bounds()), gen.Within(rng, f.Bounds()))
			}
			x, y := rng.IntN(f.Settings().Columns), rng.IntN(f.Settings().Rows)
			e := []floor.Edit{gen.Paint(x, y, x+1, y+1)}
			switch rng.IntN(3) {
			case 0:
				e[0].Fill = floor.Free
			case 1:
				kind := []floor.FeatureKind{floor.Solid, floor.ClosedZone}[rng.IntN(2)]
				s := gen.Shape(rng, f.Bounds())
				if kind == floor.ClosedZone && s.Kind != floor.Polygon {
					kind = floor.Solid
				}
				e[0] = floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "new", Kind: kind, Shape: s}}
				if kind == floor.ClosedZone {
					e[0].Feature.Shape.Grow = 0
				}
				describeWidths(e[0].Feature)
			}
			next := gen.Apply(t, f, e...)
			change := floor.Diff(f, next)
			fd, err = fd.Advance(context.Background(), next, change)
			if err != nil {
				t.Fatal(err)
			}
			r, err := g.Advance(context.Background(), fd, change)
			if err != nil {
				t.Fatal(err)
			}
			fresh, err := Build(context.Background(), field(t, next), need)
			if err != nil {
				t.Fatal(err)
			}
			g, f = r.(*Graph), next
			s, e2 := gen.Within(rng, f.Bounds()), gen.Within(rng, f.Bounds())
			w1, ok1 := find(t, g, s, e2)
			w2, ok2 := find(t, fresh, s, e2)
			if ok1 != ok2 || !reflect.DeepEqual(w1.Points, w2.Points) {
				t.Fatalf("case %d: patched %v %v, rebuilt %v %v", k, ok1, w1, ok2, w2)
			}
			if rng.IntN(2) == 0 {
				same(t, g, fresh)
			}
		}
	}
}

func describeWidths(f *floor.Feature) {
	switch f.Shape.Kind {
	case floor.Polyline:
		f.WidthUm = int64(2 * f.Shape.Grow)
	case floor.Disc:
		f.RadiusUm = int64(f.Shape.Grow)
	case floor.Polygon:
		f.ToleranceUm = int64(f.Shape.Grow)
	}
}

// TestPassagesOfExactlyTwiceTheRadius: between sides along the axes, of cells and of
// outlines, a passage of 2 r lets a body of r through and none a micrometre wider, also
// one that turns in it.
func TestPassagesOfExactlyTwiceTheRadius(t *testing.T) {
	f := gen.Empty(t, 200, 200, false)
	for name, m := range map[string]*floor.Map{
		"cells":         gen.Apply(t, f, gen.Paint(100, 0, 104, 91), gen.Paint(100, 109, 104, 200)),
		"outlines":      gen.Put(t, f, square(5, 0, 5.2, 4.55), square(5, 5.45, 5.2, 10)),
		"two corners":   gen.Put(t, f, square(5, 0, 5.2, 4.55), square(4.8, 5.45, 5, 10)),
		"corner to arc": gen.Put(t, f, square(5, 0, 5.2, 4.55), square(5, 5.95, 5.2, 10), floor.NewDisc(at(5.1, 5.95), 500_000, 0)),
	} {
		for _, ends := range [][2]geom.Point{{at(1, 5), at(9, 5)}, {at(1, 9), at(9, 9)}, {at(4, 1), at(6.3, 9)}} {
			for r, want := range map[int64]bool{449_999: true, 450_000: true, 450_001: false} {
				w, ok := find(t, build(t, m, r), ends[0], ends[1])
				if ok != want {
					t.Errorf("%s: %d µm from %v to %v: %v", name, r, ends[0], ends[1], ok)
				}
				if ok {
					if v := check.Way(m, w.Points, r, r); v.Problem != "" {
						t.Errorf("%s: %s", name, v.Problem)
					}
				}
			}
		}
	}
}

// TestClosedZonesHaveCornersOfTheirOwn: a way keeps the zone's radius from a zone, which
// is less than the clearance.
func TestClosedZonesHaveCornersOfTheirOwn(t *testing.T) {
	f := gen.Apply(t, gen.Empty(t, 200, 200, false), floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{
		Name: "z", Kind: floor.ClosedZone, Shape: square(4, 4, 6, 6)}})
	for zone, want := range map[int64]float64{0: 2*math.Hypot(3, 1) + 2, 250_000: 0} {
		g, err := Build(context.Background(), field(t, f), roadmap.Need{ClearanceUm: 500_000, Zones: true, ZoneUm: zone})
		if err != nil {
			t.Fatal(err)
		}
		if want == 0 { // as the square of the analytic example, half side 1 at distance 4
			d, r := math.Hypot(3, 1), 0.25
			want = 2*(math.Sqrt(d*d-r*r)+r*(math.Atan2(1, 3)+math.Asin(r/d))) + 2
		}
		w, ok := find(t, g, at(1, 5), at(9, 5))
		if !ok || w.LengthUm/1e6 < want*(1-1e-9) || w.LengthUm/1e6 > want+60e-6 {
			t.Errorf("zone radius %d: %v m, wanted %v", zone, w.LengthUm/1e6, want)
		}
		if v := check.Way(f, w.Points, 500_000, zone); v.Problem != "" {
			t.Error(v.Problem)
		}
	}
	g, err := Build(context.Background(), field(t, f), roadmap.Need{ClearanceUm: 500_000})
	if err != nil {
		t.Fatal(err)
	}
	if w, ok := find(t, g, at(1, 5), at(9, 5)); !ok || w.LengthUm != 8e6 {
		t.Errorf("zones not asked for: %v", w)
	}
}

func TestLimitsAreErrors(t *testing.T) {
	f, err := plainfloor.Random(rand.New(rand.NewPCG(5, 6)), 400, 400, 0.1).Floor()
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Build(context.Background(), field(t, f), roadmap.Need{}); !errors.Is(err, roadmap.ErrTooLarge) {
		t.Errorf("a floor of clutter: %v", err)
	}
	if _, err := Build(context.Background(), field(t, f), roadmap.Need{ClearanceUm: 5_000_001}); err == nil {
		t.Error("a clearance above the cap is accepted")
	}
	ctx, stop := context.WithCancel(context.Background())
	stop()
	if _, err := Build(ctx, field(t, f), roadmap.Need{ClearanceUm: 1000}); !errors.Is(err, context.Canceled) {
		t.Errorf("ended: %v", err)
	}
}
