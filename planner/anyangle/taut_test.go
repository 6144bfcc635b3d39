package anyangle

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// tautFloor is 15 m by 15 m with an open border and these solids.
func tautFloor(t *testing.T, shapes ...floor.Shape) *floor.Map {
	t.Helper()
	var edits []floor.Edit
	for i, s := range shapes {
		f := &floor.Feature{Name: string(rune('a' + i)), Kind: floor.Solid, Shape: s}
		if s.Kind == floor.Disc {
			f.RadiusUm = int64(s.Grow)
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: f})
	}
	m, err := newMask(300, 300).floor(t, true).Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// TestTautAnalytic compares with closed forms for the shortest way round a disc, and round
// a square grown by a radius: two tangents, and an arc or two. The values were computed from the
// forms and confirmed by hulls of outlines grown with GEOS. Tolerance: their digits,
// 1e-12 relative.
func TestTautAnalytic(t *testing.T) {
	const mid = 7_500_000
	disc := floor.NewDisc(geom.Point{X: mid, Y: mid}, 1_000_000, 0)
	// block is in metres from the start, 5 m left of the middle.
	block := func(x0, y0, x1, y1 float64) floor.Shape {
		at := func(x, y float64) geom.Point { return geom.Point{X: mid + (x-5)*1e6, Y: mid + y*1e6} }
		return floor.NewPolygon([][]geom.Point{{at(x0, y0), at(x1, y0), at(x1, y1), at(x0, y1)}}, 0)
	}
	square := block(4, -1, 6, 1)
	cells := newMask(300, 300)
	cells.fill(130, 130, 170, 170, true)
	for _, c := range []struct {
		name string
		m    *floor.Map
		r    int64
		from float64 // either end's distance from the middle, in metres
		want float64
		arcs int
	}{
		// sqrt(d²-R²) twice and R(pi - 2 acos(R/d)).
		{"disc 0.5, radius 0.5", tautFloor(t, floor.NewDisc(geom.Point{X: mid, Y: mid}, 500_000, 0)), 500_000, 2, 2*math.Sqrt(3) + math.Pi/3, 1},
		{"disc 1, radius 0.5", tautFloor(t, disc), 500_000, 5, 10.453469976216, 1},
		// 2(sqrt(d²-r²) + r(alpha+beta)) + 2h.
		{"square, radius 0.5", tautFloor(t, square), 500_000, 5, 10.551898456870, 2},
		{"square, radius 0.25", tautFloor(t, square), 250_000, 5, 10.383863708635, 2},
		{"square of cells, radius 0.5", cells.floor(t, true), 500_000, 5, 10.551898456870, 2},
		{"square of cells, radius 0.25", cells.floor(t, true), 250_000, 5, 10.383863708635, 2},
		{"blocks in turn", tautFloor(t, block(2, -1, 4, 3), block(6, -3, 8, 1)), 0, 5, 2*math.Sqrt(5) + 4 + 2*math.Sqrt2, 4},
		{"blocks, one passed by", tautFloor(t, block(2, -1, 4, 2), block(6, -2, 8, 1)), 0, 5, 2*math.Sqrt2 + 2 + math.Sqrt(17) + math.Sqrt(5), 3},
		{"square of cells, radius 0", cells.floor(t, true), 0, 5, 2 + 2*math.Sqrt(17), 2},
	} {
		g := build(t, c.m, c.r)
		s, e := geom.Point{X: mid - c.from*1e6, Y: mid}, geom.Point{X: mid + c.from*1e6, Y: mid}
		way, ok, err := g.Shortest(context.Background(), s, e)
		if !ok || err != nil {
			t.Fatalf("%s: %v, %v", c.name, ok, err)
		}
		taut, ok := g.Taut(way)
		if !ok || !taut.Whole || len(taut.Arcs) != c.arcs {
			t.Errorf("%s: %v, %+v, wanted %d arcs", c.name, ok, taut.Arcs, c.arcs)
			continue
		}
		if got := taut.LengthUm / 1e6; math.Abs(got-c.want) > 1e-12*c.want {
			t.Errorf("%s: %.15g m, wanted %.15g", c.name, got, c.want)
		}
		// The same from the arcs given out.
		at, long := s, 0.0
		for _, a := range taut.Arcs {
			long += geom.Dist(at, a.From) + a.RadiusUm*math.Abs(a.Turn)
			for _, p := range []geom.Point{a.From, a.To} {
				if d := geom.Dist(p, a.Centre); math.Abs(d-a.RadiusUm) > 1e-6 {
					t.Errorf("%s: an arc's end is %v from its middle, wanted %v", c.name, d, a.RadiusUm)
				}
			}
			at = a.To
		}
		if long += geom.Dist(at, e); math.Abs(long-taut.LengthUm) > 1e-6 {
			t.Errorf("%s: the parts add up to %v, wanted %v", c.name, long, taut.LengthUm)
		}
		if c.r == 0 {
			continue
		}
		// As a polyline within 10 µm of the arcs: 2/3 of that a radian, and the room for rounding.
		pts := taut.Points(10, func(a, b geom.Point) bool { return true })
		if got := lengthOf(pts); got < taut.LengthUm || got > taut.LengthUm+(10*2/3.0+2*roomUm)*math.Pi {
			t.Errorf("%s: a polyline of %v, the arcs' %v", c.name, got, taut.LengthUm)
		}
	}
}

// TestLaw7TautIsOptimal checks taut ways and their polylines against visibility graphs from both
// sides (see TestLaw7OptimalMeansOptimal) and the clearance of every piece.
func TestLaw7TautIsOptimal(t *testing.T) {
	const seed = 70
	t.Logf("seed %d", seed)
	cases := 60
	if slow() {
		cases = 1500
	}
	ways, drawn := 0, 0
	var found, exact, before, after float64
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := randomFloor(t, rng, 20+rng.IntN(60), 20+rng.IntN(60))
		if k%2 == 0 {
			f = stairFloor(t, rng, 40+rng.IntN(60), 40+rng.IntN(60))
		}
		r := []int64{1, 50_000, 150_000, 217_345, 333_333}[rng.IntN(5)]
		g, cores := build(t, f, r), coresOf(f)
		clear := func(a, b geom.Point) bool {
			for _, c := range cores {
				// 1e-6 µm: rounding of a distance.
				if coreDist(c, a, b) < float64(r)-1e-6 {
					return false
				}
			}
			return true
		}
		for range 4 {
			s, e := randomPoint(rng, f.Bounds()), randomPoint(rng, f.Bounds())
			way, ok, err := g.Shortest(context.Background(), s, e)
			if err != nil {
				t.Fatal(err)
			}
			if !ok || len(way.Points) < 3 {
				continue
			}
			ways++
			taut, ok := g.Taut(way)
			if !ok || taut.LengthUm > way.LengthUm {
				t.Fatalf("case %d: %v, %v µm of %v µm", k, ok, taut.LengthUm, way.LengthUm)
			}
			found, exact = found+way.LengthUm, exact+taut.LengthUm
			off := []float64{0, 50, 500}[rng.IntN(3)]
			pts := taut.Points(off, clear)
			if pts == nil {
				continue
			}
			drawn++
			before, after = before+float64(len(way.Points)), after+float64(len(pts))
			low := 0.0
			if k%8 == 1 { // slow; cells have too many cores
				var in [][]geom.Point
				for _, c := range cores {
					in = append(in, c.around(float64(r)+c.grow))
				}
				low = oracle(in, f.Bounds(), s, e)
			}
			// 0.1 µm as in TestLaw7OptimalMeansOptimal.
			if long := lengthOf(pts); long > way.LengthUm || long < taut.LengthUm || long < low-0.1 {
				t.Fatalf("case %d: a polyline of %v, wanted %v, %v to %v", k, long, low, taut.LengthUm, way.LengthUm)
			}
			if pts[0] != s || pts[len(pts)-1] != e {
				t.Fatalf("case %d: from %v to %v, wanted %v to %v", k, pts[0], pts[len(pts)-1], s, e)
			}
			for i, p := range pts {
				if p.X != math.Round(p.X) || p.Y != math.Round(p.Y) {
					t.Fatalf("case %d: %v is not in whole micrometres", k, p)
				}
				if i > 0 && !clear(pts[i-1], p) {
					t.Fatalf("case %d: %v to %v is not clear", k, pts[i-1], p)
				}
			}
		}
	}
	t.Logf("%d ways, %d drawn; %.3g longer than taut; points %v, drawn %v", ways, drawn, found/exact-1, before, after)
	if drawn < ways/2 || ways < cases/4 {
		t.Errorf("%d of %d ways drawn", drawn, ways)
	}
}

// BenchmarkTaut reports the time of searching over that of solving the bends again
// (search/taut), and the latter's for a bend.
func BenchmarkTaut(b *testing.B) {
	for _, vector := range []bool{false, true} {
		turn := 0.0
		name := "hall1024"
		if vector {
			name, turn = "turned1024-vector", 7*math.Pi/180
		}
		b.Run(name, func(b *testing.B) {
			g := build(b, hallFloor(b, 1024, turn, vector), 450_000)
			rng := rand.New(rand.NewPCG(11, 11))
			type task struct{ s, e geom.Point }
			var tasks []task
			for len(tasks) < 100 {
				k := task{randomPoint(rng, g.m.Bounds()), randomPoint(rng, g.m.Bounds())}
				if g.Contains(k.s) && g.Contains(k.e) && g.Connected(k.s, k.e) {
					tasks = append(tasks, k)
				}
			}
			var search, taut time.Duration
			bends, drawn := 0, 0
			for b.Loop() {
				for _, k := range tasks {
					t0 := time.Now()
					way, _, _ := g.Shortest(context.Background(), k.s, k.e)
					t1 := time.Now()
					t, ok := g.Taut(way)
					if ok {
						drawn += len(t.Points(DeltaUm/2, func(a, b geom.Point) bool { return true }))
					}
					taut += time.Since(t1)
					search += t1.Sub(t0)
					bends += len(way.Points) - 2
				}
			}
			b.ReportMetric(float64(search)/float64(taut), "search/taut")
			b.ReportMetric(float64(taut.Nanoseconds())/float64(bends), "ns/bend")
			b.ReportMetric(float64(drawn)/float64(bends), "drawn/bend")
		})
	}
}
