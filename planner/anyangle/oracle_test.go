package anyangle

import (
	"cmp"
	"container/heap"
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// The oracle shares nothing with the package: visibility graphs among convex
// polygons inscribed in, and circumscribed about, the cores of the solids grown by a
// radius, every solid cell and every side of a polygon being a core of its own.

// oracleSides is how many sides the polygons in place of a disc have.
const oracleSides = 48

// cores are the convex cores of a floor's solids and their own growth.
type core struct {
	pts  []geom.Point
	grow float64
}

func coresOf(f *floor.Map) []core {
	s := f.Settings()
	var out []core
	for r := range s.Rows {
		for c := range s.Columns {
			if f.Solid(c, r) {
				b := s.CellBounds(floor.CellRect{X0: c, Y0: r, X1: c + 1, Y1: r + 1}).Corners()
				out = append(out, core{b[:], 0})
			}
		}
	}
	if !s.OpenBorder {
		b := s.Bounds().Corners()
		for i := range b {
			out = append(out, core{[]geom.Point{b[i], b[(i+1)%4]}, 0})
		}
	}
	for ft := range f.Features() {
		if ft.Kind == floor.Solid {
			for a, b := range ft.Shape.Edges {
				out = append(out, core{[]geom.Point{a, b}, ft.Shape.Grow})
			}
		}
	}
	return out
}

// trueClearance is the distance to the nearest solid.
func trueClearance(f *floor.Map, cores []core, p geom.Point) float64 {
	best := math.Inf(1)
	s := f.Settings()
	if c, r, ok := s.CellAt(p); !ok || f.Solid(c, r) {
		return 0
	}
	for _, c := range cores {
		best = min(best, coreDist(c, p, p))
	}
	for ft := range f.Features() {
		if ft.Kind == floor.Solid {
			d, _ := ft.Shape.Dist(p)
			best = min(best, d)
		}
	}
	return best
}

// coreDist is the distance of the segment pq from a core's border.
func coreDist(c core, p, q geom.Point) float64 {
	best := math.Inf(1)
	for i := range c.pts {
		d, _, _ := geom.SegmentSegmentDist(p, q, c.pts[i], c.pts[(i+1)%len(c.pts)])
		best = min(best, d)
	}
	return best - c.grow
}

// around is the Minkowski sum of a core and a regular polygon of that circumradius.
func (c core) around(radius float64) []geom.Point {
	var pts []geom.Point
	for _, p := range c.pts {
		for k := range oracleSides {
			s, co := math.Sincos(2 * math.Pi * float64(k) / oracleSides)
			pts = append(pts, geom.Point{X: p.X + radius*co, Y: p.Y + radius*s})
		}
	}
	slices.SortFunc(pts, func(a, b geom.Point) int { return cmp.Or(cmp.Compare(a.X, b.X), cmp.Compare(a.Y, b.Y)) })
	half := func(pts []geom.Point) []geom.Point {
		var h []geom.Point
		for _, p := range pts {
			for len(h) >= 2 && (h[len(h)-1].X-h[len(h)-2].X)*(p.Y-h[len(h)-2].Y)-(h[len(h)-1].Y-h[len(h)-2].Y)*(p.X-h[len(h)-2].X) <= 1e-3 {
				h = h[:len(h)-1]
			}
			h = append(h, p)
		}
		return h[:len(h)-1]
	}
	low := half(pts)
	slices.Reverse(pts)
	return append(low, half(pts)...)
}

// cuts says whether the segment ab passes through the inside of a convex polygon,
// more than tol deep.
func cutsPolygon(poly []geom.Point, a, b geom.Point, tol float64) bool {
	t0, t1 := 0.0, 1.0
	for i, p := range poly {
		q := poly[(i+1)%len(poly)]
		l := geom.Dist(p, q)
		da := ((q.X-p.X)*(a.Y-p.Y)-(q.Y-p.Y)*(a.X-p.X))/l - tol
		db := ((q.X-p.X)*(b.Y-p.Y)-(q.Y-p.Y)*(b.X-p.X))/l - tol
		switch {
		case da <= 0 && db <= 0:
			return false
		case da < 0:
			t0 = max(t0, da/(da-db))
		case db < 0:
			t1 = min(t1, da/(da-db))
		}
	}
	return t0 < t1
}

// oracle is the shortest way among polygons, +Inf when there is none.
func oracle(polys [][]geom.Point, bounds geom.Rect, s, g geom.Point) float64 {
	// 0.01 µm: rounding of the polygons' corners; it lets a way touch them.
	const tol = 0.01
	blocked := func(a, b geom.Point) bool {
		r := geom.BoundsOf(a, b)
		for _, p := range polys {
			if r.Intersects(geom.BoundsOf(p...)) && cutsPolygon(p, a, b, tol) {
				return true
			}
		}
		return false
	}
	vs := []geom.Point{s, g}
	for _, p := range polys {
		for _, v := range p {
			if bounds.Contains(v) && !blocked(v, v) {
				vs = append(vs, v)
			}
		}
	}
	return overGraph(vs, func(a, b geom.Point) bool { return !blocked(a, b) })
}

// overGraph is A* from vs[0] to vs[1] over all pairs of vs that see one another; +Inf
// when there is no way.
func overGraph(vs []geom.Point, sees func(a, b geom.Point) bool) float64 {
	d, done := make([]float64, len(vs)), make([]bool, len(vs))
	for i := range d {
		d[i] = math.Inf(1)
	}
	d[0] = 0
	h := &graphHeap{{geom.Dist(vs[0], vs[1]), 0}}
	for h.Len() > 0 {
		i := heap.Pop(h).(graphItem).i
		if i == 1 {
			return d[1]
		}
		if done[i] {
			continue
		}
		done[i] = true
		for k := range vs {
			if nd := d[i] + geom.Dist(vs[i], vs[k]); nd < d[k] && sees(vs[i], vs[k]) {
				d[k] = nd
				heap.Push(h, graphItem{nd + geom.Dist(vs[k], vs[1]), k})
			}
		}
	}
	return math.Inf(1)
}

// randomFloor has a few solids of every kind, raster cells among them.
func randomFloor(t testing.TB, rng *rand.Rand, w, h int) *floor.Map {
	m := newMask(w, h)
	for range rng.IntN(4) {
		x, y := rng.IntN(w), rng.IntN(h)
		m.fill(x, y, x+1+rng.IntN(6), y+1+rng.IntN(6), true)
	}
	f := m.floor(t, rng.IntN(4) == 0)
	var edits []floor.Edit
	for i := range 1 + rng.IntN(5) {
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: randomSolid(rng, fmt.Sprintf("s%d", i), f.Bounds())})
	}
	f, err := f.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func randomPoint(rng *rand.Rand, b geom.Rect) geom.Point {
	return geom.Point{X: math.Floor(b.Min.X + rng.Float64()*b.Width()), Y: math.Floor(b.Min.Y + rng.Float64()*b.Height())}
}

func randomSolid(rng *rand.Rand, name string, b geom.Rect) *floor.Feature {
	f := &floor.Feature{Name: name, Kind: floor.Solid}
	if rng.IntN(3) == 0 {
		f.ToleranceUm = int64(rng.IntN(30_000))
	}
	size := 100_000 + rng.Float64()*900_000
	at := randomPoint(rng, b)
	clip := func(x, y float64) geom.Point {
		p := b.Nearest(geom.Point{X: at.X + math.Round(x), Y: at.Y + math.Round(y)})
		return p
	}
	switch rng.IntN(4) {
	case 0:
		f.RadiusUm = int64(size / 3)
		f.Shape = floor.NewDisc(at, f.RadiusUm, f.ToleranceUm)
	case 1:
		f.WidthUm = 1 + int64(rng.IntN(200_000))
		pts := []geom.Point{at}
		for range 1 + rng.IntN(3) { // whole µm, as floors want them
			if p := b.Nearest(randomPoint(rng, b.Intersect(geom.BoundsOf(at).Grow(size)))); p != pts[len(pts)-1] {
				pts = append(pts, p)
			}
		}
		if len(pts) < 2 {
			pts = append(pts, geom.Point{X: b.Min.X, Y: b.Min.Y})
		}
		f.Shape = floor.NewPolyline(pts, f.WidthUm, f.ToleranceUm)
	case 2: // a rectangle, turned or not
		a := 0.0
		if rng.IntN(2) == 0 {
			a = rng.Float64() * math.Pi
		}
		s, c := math.Sincos(a)
		w, h := size/2, size/2*rng.Float64()+10_000
		var ring []geom.Point
		for _, k := range [4][2]float64{{-w, -h}, {w, -h}, {w, h}, {-w, h}} {
			ring = append(ring, clip(k[0]*c-k[1]*s, k[0]*s+k[1]*c))
		}
		f.Shape = floor.NewPolygon([][]geom.Point{ring}, f.ToleranceUm)
	default: // a star, seldom convex
		n := 3 + rng.IntN(7)
		var ring []geom.Point
		for k := range n {
			s, c := math.Sincos(2 * math.Pi * float64(k) / float64(n))
			l := size / 2 * (0.2 + 0.8*rng.Float64())
			ring = append(ring, clip(l*c, l*s))
		}
		f.Shape = floor.NewPolygon([][]geom.Point{ring}, f.ToleranceUm)
	}
	if f.Shape.Kind == floor.Polygon && geom.CheckPolygon(f.Shape.Chains) != nil {
		return randomSolid(rng, name, b)
	}
	return f
}

// slow says whether the long variants are asked for.
func slow() bool { return os.Getenv("WIDEBERTH_SLOW") == "1" }

// TestLaw7OptimalMeansOptimal checks L*(r) <= length <= L*(r + delta) from both
// sides, law 5 along each way, and law 6 for its ends.
func TestLaw7OptimalMeansOptimal(t *testing.T) {
	const seed = 4
	t.Logf("seed %d", seed)
	cases := 40
	if slow() {
		cases = 500
	}
	ways, refused := 0, 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := randomFloor(t, rng, 20+rng.IntN(60), 20+rng.IntN(60))
		r := []int64{1, 50_000, 150_000, 217_345, 333_333}[rng.IntN(5)]
		g, err := Build(context.Background(), f, Need{ClearanceUm: r})
		if err != nil {
			t.Fatal(err)
		}
		cores := coresOf(f)
		polys := func(radius float64) [][]geom.Point {
			var out [][]geom.Point
			for _, c := range cores {
				out = append(out, c.around(radius+c.grow))
			}
			return out
		}
		in := polys(float64(r))
		var outer [][]geom.Point
		for _, c := range cores {
			outer = append(outer, c.around((float64(r)+DeltaUm+c.grow)/math.Cos(math.Pi/oracleSides)))
		}
		for range 2 {
			s, e := randomPoint(rng, f.Bounds()), randomPoint(rng, f.Bounds())
			cs, ce := trueClearance(f, cores, s), trueClearance(f, cores, e)
			if min(cs, ce) < float64(r)+DeltaUm {
				if min(cs, ce) < float64(r) {
					if _, ok, _ := g.Shortest(context.Background(), s, e); ok {
						t.Fatalf("case %d: a way from %v (%v µm clear) to %v (%v µm clear) at %d µm", k, s, cs, e, ce, r)
					}
				}
				continue
			}
			if !g.Contains(s) || !g.Contains(e) {
				t.Fatalf("case %d: %v (%v µm clear) or %v (%v µm clear) is not in the mesh at %d µm", k, s, cs, e, ce, r)
			}
			way, ok, err := g.Shortest(context.Background(), s, e)
			if err != nil {
				t.Fatal(err)
			}
			low := oracle(in, f.Bounds(), s, e)
			high := oracle(outer, f.Bounds(), s, e)
			if !ok {
				refused++
				if !math.IsInf(high, 1) {
					t.Fatalf("case %d: no way from %v to %v at %d µm, one of %v µm is there", k, s, e, r, high)
				}
				continue
			}
			ways++
			// 0.1 µm: the rounding and the tolerance of the oracle, at some hundred bends.
			if way.LengthUm < low-0.1 || way.LengthUm > high+0.1 {
				t.Fatalf("case %d: length %v from %v to %v at %d µm, wanted %v to %v\n%v", k, way.LengthUm, s, e, r, low, high, way.Points)
			}
			for i := 1; i < len(way.Points); i++ {
				for _, c := range cores {
					// 1e-6 µm: rounding of a distance.
					if d := coreDist(c, way.Points[i-1], way.Points[i]); d < float64(r)-1e-6 {
						t.Fatalf("case %d: clearance %v on the way, wanted %d µm", k, d, r)
					}
				}
			}
		}
	}
	t.Logf("%d ways, %d refused", ways, refused)
	if ways < cases/4 {
		t.Errorf("only %d ways", ways)
	}
}
