package voronoi

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
)

// TestLaw6NoPassageIsLost checks passages of exactly known width, axis-aligned in
// raster and vector, oblique between round ends, in one feature, and shadowed by a third solid:
// the bottleneck is that width, a way is found at the clearance and none above it.
func TestLaw6NoPassageIsLost(t *testing.T) {
	const seed = 6
	t.Logf("seed %d", seed)
	cases, tried := 150, map[string]int{}
	if slow() {
		cases = 10_000
	}
	const n = 120
	const side = float64(n * testCell)
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		var edits []floor.Edit
		var beta float64
		r := float64(1 + rng.IntN(500_000))
		if rng.IntN(3) == 0 {
			r = float64(1 + rng.IntN(40))
		}
		x := math.Floor(side/4 + rng.Float64()*side/2)
		y0 := math.Floor(side/4 + rng.Float64()*side/4)
		y1 := math.Floor(y0 + 1 + rng.Float64()*side/4)
		if rng.IntN(2) == 0 { // the middle on a border between blocks, or nearly
			x = 64*testCell + float64(rng.IntN(3)-1)
		}
		if side-x-r < testCell || x-r < testCell {
			continue
		}
		kind := []string{"vector", "raster", "one feature", "oblique", "shadowed"}[rng.IntN(5)]
		s, e := geom.Point{X: side / 2, Y: 650_000}, geom.Point{X: side / 2, Y: side - 650_000}
		switch kind {
		case "vector", "shadowed":
			beta = r
			edits = append(edits, put("a", rectUm(0, y0, x-r, y1)), put("b", rectUm(x+r, y0, side, y1)))
			if kind == "shadowed" { // a post beyond the door that leaves 2r and more to both jambs
				q := math.Ceil(2.5*r) + 2
				edits = append(edits, put("c", floor.NewDisc(geom.Point{X: x, Y: y1 + q}, int64(max(1, r/8)), 0)))
			}
		case "raster":
			h := float64(testCell)
			r = float64(1+rng.IntN(8)) * h / 2
			x = math.Floor(x/h) * h
			lo, hi := int((x-r)/h), int((x-r)/h)+int(2*r/h)
			beta = r
			edits = append(edits, paint(0, int(y0/h), lo, int(y1/h)+1, floor.Occupied), paint(hi, int(y0/h), n, int(y1/h)+1, floor.Occupied))
		case "one feature":
			// A slotted plate: two arms of one polygon, joined round the outside by the border.
			beta = r
			edits = append(edits, put("a", polygonUm(0, y0, x-r, y0, x-r, y1, 1, y1, 1, side-2, side-1, side-2, side-1, y1, x+r, y1, x+r, y0, side, y0, side, side-1, 0, side-1)))
			e.Y -= 100_000
		case "oblique":
			a := geom.Point{X: 0, Y: y0}
			b := geom.Point{X: side, Y: math.Floor(side/4 + rng.Float64()*side/2)}
			at := func(s float64) geom.Point {
				return geom.Point{X: math.Round(a.X + s*(b.X-a.X)), Y: math.Round(a.Y + s*(b.Y-a.Y))}
			}
			s0 := 0.3 + 0.3*rng.Float64()
			p, q := at(s0), at(s0+0.001+0.1*rng.Float64())
			width := int64(1 + rng.IntN(60_000))
			beta = (geom.Dist(p, q) - float64(width)) / 2
			if beta < 1 {
				continue
			}
			edits = append(edits, put("a", floor.NewPolyline([]geom.Point{a, p}, width, 0)), put("b", floor.NewPolyline([]geom.Point{q, b}, width, 0)))
		}
		m, err := newFloor(t, n, n, 2_000_000, false).Apply(edits)
		if err != nil {
			t.Fatalf("case %d, %s: %v", k, kind, err)
		}
		g := graphOf(t, m, Need{MostUm: 2_000_000})
		w := roadsOf(t, g, int64(max(600_000, math.Ceil(beta)+1)))
		got, ok, err := w.Widest(context.Background(), s, e)
		if err != nil {
			t.Fatal(err)
		}
		// The ends have more, unless a wall is near them.
		ends := min(g.f.At(s).Um, g.f.At(e).Um)
		if ends <= beta {
			continue
		}
		tried[kind]++
		// 1e-6 relative, and what ties are told apart by.
		if !ok || math.Abs(got.ClearanceUm-beta) > 1e-6*beta+1e-5 {
			t.Fatalf("case %d, %s: bottleneck %+v (%v), wanted %v", k, kind, got, ok, beta)
		}
		need := int64(math.Floor(beta + 1e-6))
		path, ok, err := w.Balanced(context.Background(), s, e, need, 1)
		if err != nil || !ok {
			t.Fatalf("case %d, %s: no way at %d µm through %v (%v)", k, kind, need, 2*beta, err)
		}
		if f := check.Way(m, path.points(), need, 1); f.Problem != "" {
			t.Fatalf("case %d, %s: %s", k, kind, f.Problem)
		}
		if _, ok, _ = w.Balanced(context.Background(), s, e, need+1, 1); ok {
			t.Fatalf("case %d, %s: a way at %d µm through %v", k, kind, need+1, 2*beta)
		}
	}
	t.Log(tried)
	for _, kind := range []string{"vector", "raster", "one feature", "oblique", "shadowed"} {
		if tried[kind] < cases/30 {
			t.Errorf("%s: %d passages tried", kind, tried[kind])
		}
	}
}

// TestClosedZonesAreKept checks that ways stay clear of closed zones by the radius, and
// of solids by radius and margin.
func TestClosedZonesAreKept(t *testing.T) {
	const seed = 12
	t.Logf("seed %d", seed)
	cases, found, near := 25, 0, 0
	if slow() {
		cases = 500
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 40+rng.IntN(100), 40+rng.IntN(100))
		var edits []floor.Edit
		for i := range 1 + rng.IntN(3) {
			for {
				z := randomSolid(rng, "zone-"+string(rune('a'+i)), m.Bounds())
				if z.Shape.Kind == floor.Polygon {
					z.Kind, z.ToleranceUm, z.Shape.Grow = floor.ClosedZone, 0, 0
					edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: z})
					break
				}
			}
		}
		m, err := m.Apply(edits)
		if err != nil {
			t.Fatal(err)
		}
		margin, radius := int64(1+rng.IntN(100_000)), int64(1+rng.IntN(200_000))
		r := margin + radius
		g := graphOf(t, m, Need{LeastUm: margin, MostUm: 2_000_000, Zones: true, MarginUm: margin})
		w := roadsOf(t, g, r+int64(rng.IntN(500_000)))
		for range 4 {
			s, e := randomPoint(rng, m.Bounds()), randomPoint(rng, m.Bounds())
			path, ok, err := w.Balanced(context.Background(), s, e, r, 1)
			if err != nil {
				t.Fatal(err)
			}
			want := dijkstra(t, w, s, e, float64(r), 1)
			if ok != !math.IsInf(want, 1) || ok && math.Abs(path.CostUm-want) > 1e-9*want+1e-6 {
				t.Fatalf("case %d: cost %v (%v), Dijkstra's %v", k, path.CostUm, ok, want)
			}
			free := func(p geom.Point) bool { return check.Way(m, []geom.Point{p, p}, r, radius).Problem == "" }
			if !ok {
				if b, joined, _ := w.Widest(context.Background(), s, e); joined && b.ClearanceUm >= float64(r) {
					t.Fatalf("case %d: refused, bottleneck %+v", k, b)
				}
				if free(s) && free(e) {
					near++
				}
				continue
			}
			found++
			if f := check.Way(m, path.points(), r, radius); f.Problem != "" {
				t.Fatalf("case %d: %s", k, f.Problem)
			}
		}
	}
	t.Logf("%d found, %d refused between free places", found, near)
	if found < cases {
		t.Errorf("%d found", found)
	}
}
