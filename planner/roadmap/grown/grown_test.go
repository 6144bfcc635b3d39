package grown

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"runtime"
	"slices"
	"testing"

	sf "github.com/peterstace/simplefeatures/geom"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/plainfloor"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/gen"
	"example.com/wideberth/planner/roadmap/internal/solids"
)

func outline(t testing.TB, f *floor.Map, r int64) *Outline {
	t.Helper()
	o, err := Of(context.Background(), f, roadmap.Need{ClearanceUm: r, Zones: true, ZoneUm: r})
	if err != nil {
		t.Fatal(err)
	}
	return o
}

// 1e-12 relative: the rounding of some dozen operations on areas that do not cancel.
func near(a, b float64) bool { return math.Abs(a-b) <= 1e-12*(math.Abs(a)+math.Abs(b)) }

func at(x, y float64) geom.Point { return geom.Point{X: x * 1e6, Y: y * 1e6} }

// TestConvexSolidsGrowAsSteinerSays: area A + P r + pi r², perimeter P + 2 pi r (Steiner,
// "Über parallele Flächen", 1840); for the unit square and r = 0.5 m 3.785398163 m²
// and 7.141592654 m.
func TestConvexSolidsGrowAsSteinerSays(t *testing.T) {
	f := gen.Empty(t, 200, 200, true)
	square := floor.NewPolygon([][]geom.Point{{at(4, 4), at(5, 4), at(5, 5), at(4, 5)}}, 0)
	const r = 500_000
	for name, c := range map[string]struct {
		f    *floor.Map
		a, p float64 // of the solid, m² and m
	}{
		"polygon":   {gen.Put(t, f, square), 1, 4},
		"clockwise": {gen.Put(t, f, floor.NewPolygon([][]geom.Point{{at(4, 5), at(5, 5), at(5, 4), at(4, 4)}}, 0)), 1, 4},
		"cells":     {gen.Apply(t, f, gen.Paint(80, 80, 100, 100)), 1, 4},
		"both":      {gen.Put(t, gen.Apply(t, f, gen.Paint(80, 80, 100, 100)), square, square), 1, 4},
		"in pieces": {gen.Put(t, f, square, floor.NewPolygon([][]geom.Point{{at(5, 4), at(6, 4), at(6, 5), at(5, 5)}}, 0)), 2, 6},
		"triangle":  {gen.Put(t, f, floor.NewPolygon([][]geom.Point{{at(1, 1), at(4, 1), at(4, 5)}}, 0)), 6, 12},
		"segment":   {gen.Put(t, f, floor.NewPolyline([]geom.Point{at(2, 2), at(5, 6)}, 200_000, 0)), 2*5*0.1 + math.Pi*0.01, 10 + 2*math.Pi*0.1},
		"there and back": {gen.Put(t, f, floor.NewPolyline([]geom.Point{at(2, 2), at(5, 6), at(2, 2), at(3.5, 4)}, 200_000, 0)),
			2*5*0.1 + math.Pi*0.01, 10 + 2*math.Pi*0.1},
		"disc": {gen.Put(t, f, floor.NewDisc(at(5, 5), 1_000_000, 0)), math.Pi, 2 * math.Pi},
	} {
		for _, um := range []float64{r, 1, 0} {
			o := outline(t, c.f, int64(um))
			k := um / 1e6
			a, p := c.a+c.p*k+math.Pi*k*k, c.p+2*math.Pi*k
			if len(o.Loops) != 1 || !near(o.AreaUm2, a*1e12) || !near(o.PerimeterUm, p*1e6) {
				t.Errorf("%s grown by %v: %d loops, %v m², %v m, wanted %v, %v", name, k, len(o.Loops), o.AreaUm2/1e12, o.PerimeterUm/1e6, a, p)
			}
		}
	}
	o := outline(t, gen.Put(t, f, square), r)
	if math.Abs(o.AreaUm2/1e12-3.785398163) > 1e-9 || math.Abs(o.PerimeterUm/1e6-7.141592654) > 1e-9 {
		t.Errorf("the unit square grown by 0.5 m: %v m², %v m", o.AreaUm2/1e12, o.PerimeterUm/1e6)
	}
}

// TestTwoDiscsMeetInALens: the union of two discs of radius R a distance d apart has
// the area 2 pi R² less that of the lens, 2R² acos(d/2R) - d/2 sqrt(4R² - d²)
// (elementary), and a hole shrinks by P r - 4 r² for a square one.
func TestTwoDiscsMeetInALens(t *testing.T) {
	f := gen.Empty(t, 400, 400, true)
	o := outline(t, gen.Put(t, f, floor.NewDisc(at(5, 5), 500_000, 0), floor.NewDisc(at(6.5, 7), 500_000, 0)), 1_000_000)
	const R, d = 1.5, 2.5
	area := 2*math.Pi*R*R - (2*R*R*math.Acos(d/2/R) - d/2*math.Sqrt(4*R*R-d*d))
	length := 2 * R * (2*math.Pi - 2*math.Acos(d/2/R))
	if len(o.Loops) != 1 || !near(o.AreaUm2, area*1e12) || !near(o.PerimeterUm, length*1e6) {
		t.Errorf("%d loops, %v m², %v m, wanted %v, %v", len(o.Loops), o.AreaUm2/1e12, o.PerimeterUm/1e6, area, length)
	}
	frame := floor.NewPolygon([][]geom.Point{
		{at(2, 2), at(8, 2), at(8, 8), at(2, 8)}, {at(3, 3), at(7, 3), at(7, 7), at(3, 7)},
	}, 0)
	o = outline(t, gen.Put(t, f, frame), 500_000)
	if len(o.Loops) != 2 || !near(o.Loops[1].AreaUm2, -9e12) || !near(o.Loops[1].PerimeterUm, 12e6) || !near(o.Loops[0].AreaUm2, (36+12+math.Pi/4)*1e12) {
		t.Errorf("a frame: %+v", o.Loops)
	}
	// A closed floor of 20 m with nothing on it leaves a square of 19 m.
	o = outline(t, gen.Empty(t, 400, 400, false), 500_000)
	if len(o.Loops) != 1 || !near(o.FreeUm2, 361e12) || !near(o.AreaUm2, 39e12) {
		t.Errorf("an empty hall: %v free, %v not", o.FreeUm2, o.AreaUm2)
	}
}

// TestPassagesOfExactlyTwiceTheRadiusStayOpen: as the planner's ways take them.
func TestPassagesOfExactlyTwiceTheRadiusStayOpen(t *testing.T) {
	f := gen.Apply(t, gen.Empty(t, 200, 200, false), gen.Paint(100, 0, 104, 91), gen.Paint(100, 109, 104, 200))
	for r, loops := range map[int64]int{449_000: 1, 450_000: 1, 450_001: 2} {
		if o := outline(t, f, r); len(o.Loops) != loops {
			t.Errorf("a door of 0.9 m at %d µm: %d loops, wanted %d", r, len(o.Loops), loops)
		}
	}
}

// checkLoops: every piece begins where the last ends, on the border of the grown solids,
// and arcs run about their centre.
func checkLoops(t *testing.T, f *floor.Map, o *Outline, field *clearance.Field, r int64) {
	t.Helper()
	for _, l := range o.Loops {
		for i, p := range l.Pieces {
			if q := l.Pieces[(i+1)%len(l.Pieces)]; geom.Dist(p.To, q.From) > 1 {
				t.Fatalf("a gap from %v to %v", p.To, q.From)
			}
			mid := geom.Point{X: (p.From.X + p.To.X) / 2, Y: (p.From.Y + p.To.Y) / 2}
			if p.RadiusUm > 0 {
				a := math.Atan2(p.From.Y-p.Center.Y, p.From.X-p.Center.X) + p.Turn()/2
				mid = geom.Point{X: p.Center.X + p.RadiusUm*math.Cos(a), Y: p.Center.Y + p.RadiusUm*math.Sin(a)}
			}
			for _, v := range []geom.Point{p.From, mid, p.To} {
				if !f.Bounds().Contains(v) {
					continue
				}
				// Crossings that are as good as tangent move far for little: what lies deeper than
				// some slacks is wrong.
				if d := field.At(v).Um - float64(r); math.Abs(d) > 4*o.SlackUm {
					t.Fatalf("%v of %+v is %v µm off the border at radius %d", v, p, d, r)
				}
			}
		}
	}
}

// TestRandomFloorsHaveTheAreaThatIsSampled: on random floors the outline closes, lies
// where the clearance is the radius, and has the area that a lattice of samples has,
// each decided by clearance alone; growing further, in two ways, is the same.
func TestRandomFloorsHaveTheAreaThatIsSampled(t *testing.T) {
	const seed = 11
	t.Logf("seed %d", seed)
	cases := 150
	if gen.Slow() {
		cases = 1500
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := gen.Floor(t, rng, 10+rng.IntN(60), 10+rng.IntN(60))
		field, err := clearance.Build(context.Background(), f)
		if err != nil {
			t.Fatal(err)
		}
		r := []int64{0, 1, 25_000, 50_000, 150_000, 250_000, 217_345}[rng.IntN(7)]
		o, err := Of(context.Background(), f, roadmap.Need{ClearanceUm: r})
		if err != nil {
			t.Fatalf("case %d at %d: %v", k, r, err)
		}
		if r > 0 {
			checkLoops(t, f, o, field, r)
		}
		if f.Settings().OpenBorder {
			continue
		}
		// Midpoint rule: the border passes through at most perimeter/step·(some) squares, each wrong by
		// at most half of it.
		const n = 120
		b := f.Bounds()
		dx, dy := b.Width()/n, b.Height()/n
		free := 0.0
		for i := range n {
			for j := range n {
				p := geom.Point{X: b.Min.X + (float64(i)+0.5)*dx, Y: b.Min.Y + (float64(j)+0.5)*dy}
				if um := field.At(p).Um; um >= float64(r) && um > 0 {
					free += dx * dy
				}
			}
		}
		tol := (o.PerimeterUm/min(dx, dy)+8)*dx*dy/2 + 1e6
		if math.Abs(free-o.FreeUm2) > tol {
			t.Fatalf("case %d at %d: free %v m², by samples %v, may differ by %v", k, r, o.FreeUm2/1e12, free/1e12, tol/1e12)
		}
	}
}

// TestUnionAgreesWithSimplefeatures: the union of every side's grown outline, arcs as
// chords inside and tangents outside of them, brackets ours (simplefeatures' Union, one
// after the other: its UnionMany, v0.50.0, loses a fiftieth of the area on some of these).
func TestUnionAgreesWithSimplefeatures(t *testing.T) {
	const seed = 12
	t.Logf("seed %d", seed)
	cases := 12
	if gen.Slow() {
		cases = 200
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := gen.Empty(t, 40, 40, true)
		for range 1 + rng.IntN(6) {
			f = gen.Put(t, f, gen.Shape(rng, f.Bounds()))
		}
		r := []int64{50_000, 217_345}[rng.IntN(2)]
		o := outline(t, f, r)
		const sides = 64
		union := func(factor float64) float64 {
			var gs []sf.Geometry
			for ft := range f.Features() {
				if ft.Shape.Kind == floor.Polygon {
					gs = append(gs, polygon(ft.Shape.Chains[0]))
				}
				for a, b := range ft.Shape.Edges {
					gs = append(gs, polygon(capsule(a, b, (float64(r)+ft.Shape.Grow)*factor, sides)))
				}
			}
			u := gs[0]
			for _, g := range gs[1:] {
				var err error
				if u, err = sf.Union(u, g); err != nil {
					t.Fatal(err)
				}
			}
			return u.Area() * 1e12
		}
		low, high := union(1), union(1/math.Cos(math.Pi/sides))
		// 1e-9 relative: the library's own rounding, from memory.
		if o.AreaUm2 < low*(1-1e-9) || o.AreaUm2 > high*(1+1e-9) {
			t.Errorf("case %d: %v m², simplefeatures %v to %v", k, o.AreaUm2/1e12, low/1e12, high/1e12)
		}
	}
}

func polygon(ring []geom.Point) sf.Geometry {
	var xy []float64
	for _, p := range append(ring[:len(ring):len(ring)], ring[0]) {
		xy = append(xy, p.X/1e6, p.Y/1e6)
	}
	return sf.NewPolygon([]sf.LineString{sf.NewLineString(sf.NewSequence(xy, sf.DimXY))}).AsGeometry()
}

// capsule is a segment grown by a regular polygon of that circumradius turned to it.
func capsule(a, b geom.Point, radius float64, sides int) []geom.Point {
	turn := math.Atan2(b.Y-a.Y, b.X-a.X)
	var out []geom.Point
	for k := range sides + 1 {
		c, end := b, turn-math.Pi/2
		if k > sides/2 {
			c = a
		}
		s, co := math.Sincos(end + 2*math.Pi*float64(k)/float64(sides))
		out = append(out, geom.Point{X: c.X + radius*co, Y: c.Y + radius*s})
		if k == sides/2 {
			out = append(out, geom.Point{X: a.X + radius*co, Y: a.Y + radius*s})
		}
	}
	return slices.Compact(out)
}

// TestOutsidePolylineStandsOffByAtMostTheError: and never lies inside.
func TestOutsidePolylineStandsOffByAtMostTheError(t *testing.T) {
	f := gen.Put(t, gen.Apply(t, gen.Empty(t, 200, 200, false), gen.Paint(50, 50, 70, 52)), floor.NewDisc(at(6, 6), 700_000, 0),
		floor.NewPolygon([][]geom.Point{{at(2, 7), at(3, 6.5), at(3.5, 8)}}, 0))
	field, err := clearance.Build(context.Background(), f)
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range []float64{10, 1000, 20_000} {
		most := 0.0
		for _, l := range outline(t, f, 450_000).Loops {
			pts := l.Outside(e)
			for i, p := range pts {
				q := pts[(i+1)%len(pts)]
				n := field.Segment(p, q)
				most = max(most, field.At(p).Um-450_000)
				if n.Um < 450_000-1e-6 || field.At(p).Um > 450_000+e+1e-6 {
					t.Fatalf("at error %v: %v to %v comes within %v µm; its first end is %v away", e, p, q, n.Um, field.At(p).Um)
				}
			}
		}
		if most < e/8 { // the fewest tangents: half as many stand off four times as far
			t.Errorf("at error %v nothing stands off by more than %v", e, most)
		}
	}
}

// TestSimplifiedIsBetweenTwoRadii: it holds all that is grown by r, and nothing that is
// not within r + error of a solid.
func TestSimplifiedIsBetweenTwoRadii(t *testing.T) {
	const seed = 13
	t.Logf("seed %d", seed)
	less := 0
	for k := range 60 {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := gen.Floor(t, rng, 20+rng.IntN(60), 20+rng.IntN(60))
		field, err := clearance.Build(context.Background(), f)
		if err != nil {
			t.Fatal(err)
		}
		const r, most = 217_345, 75_000
		exact := outline(t, f, r)
		o, err := Simplified(context.Background(), f, roadmap.Need{ClearanceUm: r}, most)
		if err != nil {
			t.Fatal(err)
		}
		if o.AreaUm2 < exact.AreaUm2-exact.PerimeterUm*SlackUm {
			t.Fatalf("case %d: %v m², %v before", k, o.AreaUm2/1e12, exact.AreaUm2/1e12)
		}
		pieces := func(o *Outline) (n int) {
			for _, l := range o.Loops {
				n += len(l.Pieces)
			}
			return n
		}
		if pieces(o) < pieces(exact) {
			less++
		}
		for _, l := range o.Loops {
			for _, p := range l.Outside(1) {
				if !f.Bounds().Contains(p) {
					continue
				}
				if um := field.At(p).Um; um < r-4*SlackUm || um > r+most+1 {
					t.Fatalf("case %d: %v is %v µm clear, at %d", k, p, um, int64(r))
				}
			}
		}
	}
	if less < 8 { // most have no gap or notch of that size
		t.Errorf("only %d of 60 outlines have fewer pieces", less)
	}
}

// A floor that is noise all over is refused before its outline fills the memory: 9 million
// cells have some 4.5 million turns, and a side of the outline takes hundreds of bytes.
func TestNoiseIsRefusedInLittleMemory(t *testing.T) {
	m, err := plainfloor.Random(rand.New(rand.NewPCG(1, 2)), 3000, 3000, 0.5).Floor()
	if err != nil {
		t.Fatal(err)
	}
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	_, err = Of(context.Background(), m, roadmap.Need{ClearanceUm: 100_000})
	runtime.ReadMemStats(&after)
	if !errors.Is(err, roadmap.ErrTooLarge) {
		t.Errorf("error %v, wanted too large", err)
	}
	if mb := (after.TotalAlloc - before.TotalAlloc) >> 20; mb > 20 {
		t.Errorf("%d MiB taken to find that out", mb)
	}
}

func BenchmarkRandomClutter(b *testing.B) {
	f, err := plainfloor.Random(rand.New(rand.NewPCG(1, 2)), 512, 512, 0.2).Floor()
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		outline(b, f, 100_000)
	}
	all, _ := solids.Of(f, false, solids.Simplification{})
	b.ReportMetric(float64(len(all[0].Chains)), "chains")
}
