package meadow

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/internal/testfloor"
	"example.com/wideberth/planner/roadmap"
)

func build(t testing.TB, m *floor.Map, need roadmap.Need) *Roadmap {
	t.Helper()
	r, err := Build(context.Background(), testfloor.Field(t, m), need)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// TestWorkedExamples has rooms whose regions can be counted by hand, in strips of 64 cells that
// must not show:
//
//	+-------+        +-----+---+---+   a wall goes up or down from each inner corner;
//	|       |        |     | a |   |   where two stand above one another it is one
//	|   +---+        |     +---+   |
//	|   |            |     |###|   |
//	|   |            |     +---+   |
//	+---+            |     | c |   |
//	 L: 2            +-----+---+---+  ring: 4
func TestWorkedExamples(t *testing.T) {
	occupied := floor.Occupied
	for _, c := range []struct {
		name             string
		edits            []floor.Edit
		regions, borders int
	}{
		{"one room", nil, 1, 0},
		{"L", []floor.Edit{testfloor.Paint(100, 0, 200, 50, occupied)}, 2, 1},
		{"ring", []floor.Edit{testfloor.Paint(50, 30, 150, 70, occupied)}, 4, 4},
		{"T", []floor.Edit{testfloor.Paint(0, 0, 70, 50, occupied), testfloor.Paint(130, 0, 200, 50, occupied)}, 3, 2},
		{"two rooms and a door", []floor.Edit{testfloor.Paint(98, 0, 102, 40, occupied), testfloor.Paint(98, 60, 102, 100, occupied)}, 3, 2},
	} {
		m := testfloor.New(t, 200, 100, false, c.edits...)
		d := build(t, m, roadmap.Need{}).Describe()
		if len(d.Cells) != c.regions || len(d.Nodes) != c.borders {
			t.Errorf("%s: %d regions and %d borders, wanted %d and %d", c.name, len(d.Cells), len(d.Nodes), c.regions, c.borders)
		}
	}
}

// TestConvexBendsAreMerged is a room widened and narrowed again by slanting walls, 8-cornered: its
// 3 trapezoids are one region, since no corner of it is an inner one.
func TestConvexBendsAreMerged(t *testing.T) {
	m := testfloor.New(t, 200, 100, false)
	m = testfloor.Apply(t, m,
		testfloor.Solid(m, "a", [2]float64{0, 0}, [2]float64{3e6, 0}, [2]float64{0, 1e6}),
		testfloor.Solid(m, "b", [2]float64{7e6, 0}, [2]float64{10e6, 0}, [2]float64{10e6, 2e6}),
		testfloor.Solid(m, "c", [2]float64{0, 5e6}, [2]float64{0, 4e6}, [2]float64{3e6, 5e6}),
		testfloor.Solid(m, "d", [2]float64{10e6, 5e6}, [2]float64{7e6, 5e6}, [2]float64{10e6, 4e6}))
	r := build(t, m, roadmap.Need{})
	if len(r.s.Cells) != 3 || len(r.regions) != 1 {
		t.Fatalf("%d trapezoids, %d regions, wanted 3 and 1", len(r.s.Cells), len(r.regions))
	}
	if ring := r.Describe().Cells[0].Ring; len(ring) != 8 {
		t.Errorf("outline %v, wanted 8 corners", ring)
	}
}

// inside says whether p lies in a convex ring, by more than d.
func inside(ring []geom.Point, p geom.Point, d float64) bool {
	for i, a := range ring {
		b := ring[(i+1)%len(ring)]
		if (b.X-a.X)*(p.Y-a.Y)-(b.Y-a.Y)*(p.X-a.X) <= d*geom.Dist(a, b) {
			return false
		}
	}
	return true
}

// TestRegionsAreConvexDisjointAndAll checks the regions of random floors: convex within the
// micrometre that corners are rounded to, no place in two, and every place that
// the trapezoids have in one. Inner corners have two walls each at most, so there are
// at most twice as many regions as inner corners, and one for each connected part.
func TestRegionsAreConvexDisjointAndAll(t *testing.T) {
	const seed = 3
	t.Logf("seed %d", seed)
	cases, merged := 40, 0
	if testfloor.Slow() {
		cases = 2000
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := testfloor.Random(t, rng, 30+rng.IntN(180), 30+rng.IntN(80))
		r := build(t, m, roadmap.Need{ClearanceUm: []int64{0, 1, 50_000, 123_457, 300_000}[k%5]})
		merged += len(r.s.Cells) - len(r.regions)
		d := r.Describe()
		area, want := 0.0, 0.0
		for i := range r.s.Cells {
			want += r.s.Cells[i].Area()
		}
		for _, c := range d.Cells {
			n := len(c.Ring)
			for i, p := range c.Ring {
				q, s := c.Ring[(i+1)%n], c.Ring[(i+2)%n]
				if geom.Orient(p, q, s) < 0 {
					if off, _ := geom.SegmentDist(q, p, s); off > 1.5 {
						t.Fatalf("case %d: %v is %v µm inside of %v %v", k, q, off, p, s)
					}
				}
				area += (p.X*q.Y - q.X*p.Y) / 2
			}
		}
		// Twice the area is a sum of products of up to 1e7: rounding of 1e-16 of 1e14 each.
		if math.Abs(area-want) > 1e-9*want+float64(len(d.Cells)) {
			t.Fatalf("case %d: regions of %v µm², trapezoids of %v", k, area, want)
		}
		for range 200 {
			p := testfloor.Point(rng, m.Bounds())
			in := 0
			for _, c := range d.Cells {
				if inside(c.Ring, p, 2) {
					in++
				}
			}
			if located := len(r.s.Locate(p)) > 0; in > 1 || in == 1 && !located {
				t.Fatalf("case %d: %v is in %d regions, in a trapezoid: %v", k, p, in, located)
			}
		}
	}
	if merged == 0 {
		t.Error("no cells were merged")
	}
}

// TestFewRegionsAroundPolygons holds the number of regions about random polygons to what
// inner corners allow: each has two walls at most, and an optimal partition has
// at least one more region than half of them, less one for each polygon (Hertel &
// Mehlhorn 1983 argue so for triangulations).
func TestFewRegionsAroundPolygons(t *testing.T) {
	const seed = 8
	t.Logf("seed %d", seed)
	for k := range 50 {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := testfloor.New(t, 240, 160, false)
		inner := 0
		var rings [][]geom.Point
		for range 6 {
			b := m.Bounds().Grow(-100_000)
			ring := testfloor.Star(rng, testfloor.Point(rng, b), 900_000, b.Grow(1e6))
			if geom.CheckPolygon([][]geom.Point{ring}) != nil || b.Union(geom.BoundsOf(ring...)) != b {
				continue
			}
			apart := true
			for _, o := range rings {
				apart = apart && geom.BoundsOf(o...).Grow(1000).Intersect(geom.BoundsOf(ring...)).IsEmpty()
			}
			if !apart {
				continue
			}
			rings = append(rings, ring)
			for i, p := range ring {
				if geom.Orient(ring[(i+len(ring)-1)%len(ring)], p, ring[(i+1)%len(ring)]) > 0 {
					inner++
				}
			}
			m = testfloor.Apply(t, m, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "p" + string(rune('a'+len(rings))),
				Kind: floor.Solid, Shape: floor.NewPolygon([][]geom.Point{ring}, 0)}})
		}
		r := build(t, m, roadmap.Need{})
		if most := 2*inner + 1 - len(rings); len(r.regions) > most {
			t.Fatalf("case %d: %d regions, %d inner corners and %d polygons allow %d", k, len(r.regions), inner, len(rings), most)
		}
	}
}

// TestRelaxationShortens checks the ways of random floors: no longer than before relaxation, no
// shorter than the any-angle optimum, and right in the eyes of the independent checker.
func TestRelaxationShortens(t *testing.T) {
	const seed = 17
	t.Logf("seed %d", seed)
	cases, found, shorter, worst, sum := 50, 0, 0, 1.0, 0.0
	if testfloor.Slow() {
		cases = 3000
	}
	ctx := context.Background()
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := testfloor.Random(t, rng, 30+rng.IntN(180), 30+rng.IntN(80))
		um := []int64{0, 1000, 50_000, 123_457, 300_000}[k%5]
		r := build(t, m, roadmap.Need{ClearanceUm: um})
		// The mesh falls short by up to DeltaUm, so its way at that much less is a lower bound.
		g, err := anyangle.Build(ctx, m, anyangle.Need{ClearanceUm: max(0, um-anyangle.DeltaUm)})
		if err != nil {
			t.Fatal(err)
		}
		f := r.s.Field()
		for range 6 {
			s, e := testfloor.Point(rng, m.Bounds()), testfloor.Point(rng, m.Bounds())
			if f.At(s).Um < float64(um)+1 || f.At(e).Um < float64(um)+1 {
				continue
			}
			w, ok, err := r.Search(ctx, s, e)
			plain, okPlain, errPlain := r.SearchWith(ctx, s, e, Options{Unrelaxed: true})
			if err != nil || errPlain != nil || ok != okPlain {
				t.Fatalf("case %d: %v, %v; unrelaxed %v, %v", k, ok, err, okPlain, errPlain)
			}
			if !ok {
				continue
			}
			found++
			for _, pts := range [][]geom.Point{w.Points, plain.Points} {
				if pts[0] != s || pts[len(pts)-1] != e {
					t.Fatalf("case %d: from %v to %v, wanted %v to %v", k, pts[0], pts[len(pts)-1], s, e)
				}
				if c := check.Way(m, pts, um, 0); c.Problem != "" {
					t.Fatalf("case %d, clearance %d µm, %v: %s", k, um, pts, c.Problem)
				}
			}
			if w.LengthUm > plain.LengthUm+1e-3 {
				t.Fatalf("case %d: %v µm relaxed, %v before", k, w.LengthUm, plain.LengthUm)
			}
			if w.LengthUm < plain.LengthUm-1 {
				shorter++
			}
			if !g.Contains(s) || !g.Contains(e) {
				continue
			}
			best, ok, err := g.Shortest(ctx, s, e)
			if err != nil {
				t.Fatal(err)
			}
			// 1e-9 relative is what the mesh promises. At 0 there is no mesh at less: its outline error
			// times the turning, of which few ways have more than 10 radians.
			slack := 1e-9 * best.LengthUm
			if um == 0 {
				slack += 10 * anyangle.DeltaUm
			}
			if !ok || w.LengthUm < best.LengthUm-slack {
				t.Fatalf("case %d: %v µm relaxed, the optimum has %v (%v)", k, w.LengthUm, best.LengthUm, ok)
			}
			if best.LengthUm > 0 {
				worst, sum = max(worst, w.LengthUm/best.LengthUm), sum+w.LengthUm/best.LengthUm-1
			}
		}
	}
	if found < cases || shorter == 0 {
		t.Errorf("%d ways found, %d of them shorter than before relaxation", found, shorter)
	}
	t.Logf("%d ways, at most %.4f times the optimum, %.5f on average", found, worst, 1+sum/float64(found))
}

// TestRelaxedWayTouchesTheCorner leads round one corner of a square: the middle of the border is
// far from it, the relaxed way passes the grown corner. The length for a disc round a
// point is two tangents and an arc; outlines stand off by at most OutlineErrorUm.
func TestRelaxedWayTouchesTheCorner(t *testing.T) {
	m := testfloor.New(t, 200, 200, false, testfloor.Paint(80, 0, 120, 120, floor.Occupied)) // x 4 to 6, up to y = 6 m
	const r = 0.45
	o := m.Settings().Vertex(0, 0)
	at := func(x, y float64) geom.Point { return geom.Point{X: o.X + x*1e6, Y: o.Y + y*1e6} }
	w, ok, err := build(t, m, roadmap.Need{ClearanceUm: r * 1e6}).Search(context.Background(), at(2, 5), at(8, 5))
	if err != nil || !ok {
		t.Fatal(ok, err)
	}
	// Round both corners (4,6) and (6,6): from 2 m left of and 1 m below the first.
	d := math.Hypot(2, 1)
	tangent := math.Sqrt(d*d - r*r)
	turn := math.Atan2(1, 2) + math.Asin(r/d)
	want := 2*(tangent+r*turn) + 2
	if got := w.LengthUm / 1e6; got < want-1e-6 || got > want+2*turn*OutlineErrorUm/1e6 {
		t.Errorf("%v m, wanted %v and at most the outline's error times the turning more", got, want)
	}
}

func TestLaw4PatchedEqualsRebuilt(t *testing.T) {
	const seed = 4
	t.Logf("seed %d", seed)
	sequences := 4
	if testfloor.Slow() {
		sequences = 200
	}
	ctx := context.Background()
	for k := range sequences {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := testfloor.Random(t, rng, 100+rng.IntN(150), 50+rng.IntN(100))
		field := testfloor.Field(t, m)
		var r roadmap.Roadmap = build(t, m, roadmap.Need{ClearanceUm: 150_000, Zones: true, ZoneUm: 80_000})
		for step := range 6 {
			next := testfloor.Apply(t, m, testfloor.Edits(rng, m)...)
			change := floor.Diff(m, next)
			var err error
			if field, err = field.Advance(ctx, next, change); err != nil {
				t.Fatal(err)
			}
			if r, err = r.Advance(ctx, field, change); err != nil {
				t.Fatal(err)
			}
			a, b := r.(*Roadmap), build(t, next, r.Need())
			if !reflect.DeepEqual(a.regions, b.regions) || !reflect.DeepEqual(a.borders, b.borders) || !reflect.DeepEqual(a.at, b.at) {
				t.Fatalf("sequence %d, step %d: regions differ", k, step)
			}
			p, q := a.Describe(), b.Describe()
			p.Bytes, q.Bytes = 0, 0 // slices may have room to spare
			if !reflect.DeepEqual(p, q) {
				t.Fatalf("sequence %d, step %d: patched differs from rebuilt", k, step)
			}
			m = next
		}
	}
}

// TestDescribeInAnArea checks that what an area shows is part of the whole, and that Size counts
// the whole.
func TestDescribeInAnArea(t *testing.T) {
	m := testfloor.New(t, 200, 100, false, testfloor.Paint(50, 30, 150, 70, floor.Occupied))
	r := build(t, m, roadmap.Need{})
	all := r.Describe()
	if got, want := r.Size(), all.Size(); got != want {
		t.Errorf("size %+v, the description has %+v", got, want)
	}
	o := m.Settings().Vertex(0, 0)
	at := geom.Point{X: o.X + 1e6, Y: o.Y + 2.5e6} // in the region on the left
	d, err := r.DescribeIn(context.Background(), geom.BoundsOf(at))
	if err != nil || len(d.Cells) != 1 || len(d.Nodes) != 2 || len(d.Edges) != 1 {
		t.Fatalf("%d regions, %d nodes, %d edges (%v), wanted 1, 2 and 1", len(d.Cells), len(d.Nodes), len(d.Edges), err)
	}
	if !inside(d.Cells[0].Ring, at, 0) {
		t.Errorf("%v is not in %v", at, d.Cells[0].Ring)
	}
}

// TestWindowLimitsEdges: a room with posts along its walls has one region of many borders, each
// pair of them an edge; more edges than a description may have are refused, and a window of
// few is not.
func TestWindowLimitsEdges(t *testing.T) {
	defer func(old int) { maxWindowEdges = old }(maxWindowEdges)
	var edits []floor.Edit
	for x := 5; x < 195; x += 10 {
		edits = append(edits, testfloor.Paint(x, 20, x+4, 24, floor.Occupied), testfloor.Paint(x, 70, x+4, 74, floor.Occupied))
	}
	r := build(t, testfloor.New(t, 200, 100, false, edits...), roadmap.Need{})
	bounds := r.s.Field().Bounds()
	d, err := r.DescribeIn(context.Background(), bounds)
	if err != nil || int64(len(d.Edges)) != r.Size().Edges {
		t.Fatalf("%d edges of %d, error %v", len(d.Edges), r.Size().Edges, err)
	}
	maxWindowEdges = len(d.Edges)
	if _, err := r.DescribeIn(context.Background(), bounds); err != nil {
		t.Errorf("as many edges as may be: %v", err)
	}
	maxWindowEdges--
	cut, err := r.DescribeIn(context.Background(), bounds)
	if !errors.Is(err, roadmap.ErrTooLarge) || len(cut.Edges) > maxWindowEdges {
		t.Errorf("%d edges, at most %d: error %v", len(cut.Edges), maxWindowEdges, err)
	}
	part := geom.Rect{Min: bounds.Min, Max: geom.Point{X: bounds.Min.X + 100_000, Y: bounds.Min.Y + 100_000}}
	if few, err := r.DescribeIn(context.Background(), part); err != nil || len(few.Edges) >= len(d.Edges) {
		t.Errorf("%d edges in a corner, error %v", len(few.Edges), err)
	}
	ctx, stop := context.WithCancel(context.Background())
	stop()
	if _, err := r.DescribeIn(ctx, bounds); !errors.Is(err, context.Canceled) {
		t.Errorf("ended: %v", err)
	}
}
