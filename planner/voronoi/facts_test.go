package voronoi

import (
	"math"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// The check values in this file follow from the definition: the places that are
// equally far from two sides of a plan, worked out by hand. (Bend and crossing also as
// maxima of a Euclidean distance transform.)

// wantUm is 1e-6 relative on lengths of a metre.
const wantUm = 1.0

func within(a, b, tol float64) bool { return math.Abs(a-b) <= tol }

func branches(g *Graph) (out []End) {
	seen := map[geom.Point]bool{}
	for e := range g.Edges {
		for _, v := range [2]End{e.From, e.To} {
			k := geom.Point{X: math.Round(v.At.X), Y: math.Round(v.At.Y)}
			if v.Kind == Branch && !seen[k] {
				seen[k] = true
				out = append(out, v)
			}
		}
	}
	return out
}

func has(t *testing.T, ends []End, at geom.Point, um float64) {
	t.Helper()
	for _, e := range ends {
		if geom.Dist(e.At, at) < wantUm && within(e.ClearanceUm, um, wantUm) {
			return
		}
	}
	t.Errorf("no branch point at %v with clearance %v; there are %+v", at, um, ends)
}

// plan is a floor of 20 m with rectangles given in units of w about its middle.
func plan(t *testing.T, vector bool, w float64, rects ...[4]float64) (*Graph, geom.Point) {
	t.Helper()
	const n = 400
	mid := geom.Point{X: n / 2 * testCell, Y: n / 2 * testCell}
	var edits []floor.Edit
	for i, r := range rects {
		x0, y0, x1, y1 := mid.X+r[0]*w, mid.Y+r[1]*w, mid.X+r[2]*w, mid.Y+r[3]*w
		if vector {
			edits = append(edits, put(string(rune('a'+i)), rectUm(x0, y0, x1, y1)))
		} else {
			edits = append(edits, paint(int(x0/testCell), int(y0/testCell), int(x1/testCell), int(y1/testCell), floor.Occupied))
		}
	}
	m := newFloor(t, n, n, 5_000_000, false, edits...)
	return graphOf(t, m, Need{MostUm: 5_000_000}), mid
}

func TestTJunction(t *testing.T) {
	for _, vector := range []bool{true, false} {
		const w = 1_600_000
		// The line of the inner corners is y = 0, the stem runs down, the bar along y in [0, w].
		g, mid := plan(t, vector, w, [4]float64{-4, -4, -0.5, 0}, [4]float64{0.5, -4, 4, 0}, [4]float64{-4, 1, 4, 2})
		has(t, branches(g), geom.Point{X: mid.X, Y: mid.Y + 3.0/8*w}, 5.0/8*w)
		// On the arc |x| <= w/2: y = w/2 - (w/2-|x|)²/(2w); at x = w/4 clearance is 0.53125 w.
		for _, x := range []float64{-0.45, -0.25, 0.1, 0.25, 0.4} {
			y := 0.5 - (0.5-math.Abs(x))*(0.5-math.Abs(x))/2
			p := geom.Point{X: mid.X + x*w, Y: mid.Y + y*w}
			if d := g.onEdges(p); d > wantUm {
				t.Errorf("vector %v: no edge at x = %v w, the next is %v µm away", vector, x, d)
			}
		}
		if _, um := g.edgeNear(geom.Point{X: mid.X + w/4, Y: mid.Y + (0.5-0.03125)*w}); !within(um, 0.53125*w, wantUm) {
			t.Errorf("vector %v: clearance %v at x = w/4, wanted %v", vector, um, 0.53125*w)
		}
	}
}

func TestBend(t *testing.T) {
	for _, vector := range []bool{true, false} {
		const w = 1_500_000
		// Inner corner (0, 0), outer corner (w, w): corridors to the left and down.
		g, mid := plan(t, vector, w, [4]float64{-4, -4, 0, 0}, [4]float64{-4, 1, 2, 2}, [4]float64{1, -4, 2, 1})
		c := (2 - math.Sqrt2) * w
		has(t, branches(g), geom.Point{X: mid.X + w - c, Y: mid.Y + w - c}, c)
	}
}

func TestCrossing(t *testing.T) {
	for _, vector := range []bool{true, false} {
		const w = 1_500_000
		g, mid := plan(t, vector, w, [4]float64{-3, -3, -0.5, -0.5}, [4]float64{0.5, -3, 3, -0.5},
			[4]float64{-3, 0.5, -0.5, 3}, [4]float64{0.5, 0.5, 3, 3})
		has(t, branches(g), mid, w/math.Sqrt2)
		for e := range g.Edges {
			if e.From.At == mid && e.From.Kind != Branch {
				t.Errorf("the middle is %+v", e.From)
			}
		}
	}
}

// A rectangular room of W x H: length W - H + 2 sqrt2 H, largest clearance H/2.
func TestRectangle(t *testing.T) {
	for _, c := range [][2]int{{60, 20}, {200, 60}, {64, 63}} {
		w, h := float64(c[0])*testCell, float64(c[1])*testCell
		m := newFloor(t, c[0], c[1], 5_000_000, false)
		g := graphOf(t, m, Need{MostUm: 5_000_000})
		length, most, n := 0.0, 0.0, 0
		for e := range g.Edges {
			length += e.LengthUm
			most = max(most, e.From.ClearanceUm, e.To.ClearanceUm)
			n++
		}
		// Edges begin leastUm of clearance from the corners.
		length += 4 * leastUm * math.Sqrt2
		if want := w - h + 2*math.Sqrt2*h; !within(length, want, 1e-6*want) {
			t.Errorf("%v x %v: length %v, wanted %v", w, h, length, want)
		}
		if !within(most, h/2, 1e-6*h) {
			t.Errorf("%v x %v: largest clearance %v, wanted %v", w, h, most, h/2)
		}
		if n != 5 {
			t.Errorf("%v x %v: %d edges, wanted 5", w, h, n)
		}
	}
}

// Regular polygons about one place: all edges meet in it.
func TestManySitesMeetInOnePlace(t *testing.T) {
	for _, n := range []int{5, 12, 60, 300} {
		mid := geom.Point{X: 3_200_000, Y: 3_200_000}
		var edits []floor.Edit
		for k := range n {
			s, c := math.Sincos(2 * math.Pi * float64(k) / float64(n))
			p := geom.Point{X: math.Round(mid.X + 1_500_000*c), Y: math.Round(mid.Y + 1_500_000*s)}
			edits = append(edits, put(string(rune('a'+k%26))+string(rune('a'+k/26)), floor.NewDisc(p, 10_000, 0)))
		}
		m := newFloor(t, 128, 128, 5_000_000, false, edits...)
		g := graphOf(t, m, Need{MostUm: 5_000_000})
		g.checkEnds(t, n)
		// Places are whole micrometres, so the middle is one only to about that.
		if d := g.onEdges(mid); d > 2 {
			t.Errorf("%d posts: the nearest edge is %v µm from the middle", n, d)
		}
		gates := 0
		for range g.Gates {
			gates++
		}
		if gates < n {
			t.Errorf("%d posts in a ring: %d gates", n, gates)
		}
	}
}

func TestGates(t *testing.T) {
	// A wall with a door of 0.9 m, one with a slit of 0.1 m, and a round-ended oblique gap.
	m := newFloor(t, 200, 200, 3_000_000, false,
		put("west", rectUm(0, 5_000_000, 4_037_123, 5_100_000)), put("east", rectUm(4_937_123, 5_000_000, 10_000_000, 5_100_000)),
		paint(0, 140, 80, 142, floor.Occupied), paint(82, 140, 200, 142, floor.Occupied),
		put("a", floor.NewPolyline([]geom.Point{{X: 0, Y: 1_000_000}, {X: 3_000_000, Y: 2_000_000}}, 200_000, 0)),
		put("b", floor.NewPolyline([]geom.Point{{X: 4_000_000, Y: 2_700_000}, {X: 10_000_000, Y: 3_000_000}}, 100_000, 0)))
	g := graphOf(t, m, Need{MostUm: 3_000_000})
	for _, want := range []struct {
		width float64
		at    geom.Point
		names [2]string
	}{
		{900_000, geom.Point{X: 4_487_123, Y: 5_050_000}, [2]string{"west", "east"}},
		{100_000, geom.Point{X: 4_050_000, Y: 7_050_000}, [2]string{"", ""}},
		{math.Hypot(1_000_000, 700_000) - 150_000, geom.Point{}, [2]string{"a", "b"}},
	} {
		ok := false
		for v := range g.Gates {
			ok = ok || within(v.WidthUm, want.width, 1e-6*want.width) && v.Features == want.names &&
				(want.at == geom.Point{} || geom.Dist(v.At, want.at) < 1)
		}
		if !ok {
			t.Errorf("no gate of %v at %v between %q", want.width, want.at, want.names)
		}
	}
}

// A steep hyperbola and the parabola that it goes over into at the corner of a cell: what is
// cut off as nothing is told by its length, not by its parameters.
func TestSteepCurvesJoin(t *testing.T) {
	m := newFloor(t, 64, 130, 2_000_000, false, paint(33, 112, 34, 113, floor.Occupied),
		put("disc", floor.NewDisc(geom.Point{X: 1_531_581, Y: 5_281_843}, 385_557, 0)))
	graphOf(t, m, Need{MostUm: 1_000_000}).checkEnds(t, 0)
}
