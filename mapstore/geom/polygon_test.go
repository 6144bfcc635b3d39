package geom

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"github.com/paulmach/orb"
	"github.com/paulmach/orb/planar"
	sf "github.com/peterstace/simplefeatures/geom"
	"pgregory.net/rapid"
)

// ring reads "x,y x,y ..." in micrometres.
func ring(s string) []Point {
	var out []Point
	for _, f := range strings.Fields(s) {
		var p Point
		if _, err := fmt.Sscanf(f, "%f,%f", &p.X, &p.Y); err != nil {
			panic(err)
		}
		out = append(out, p)
	}
	return out
}

// A courtyard:
//
//	8 +-----------+
//	  |  +-----+  |
//	4 |  |hole |  |
//	  |  +-----+  |
//	0 +-----------+
//	  0  3     9  12
var courtyard = [][]Point{ring("0,0 12,0 12,8 0,8"), ring("3,2 3,6 9,6 9,2")}

func TestInPolygonBoundary(t *testing.T) {
	for _, c := range []struct {
		name string
		p    Point
		want bool
	}{
		{"outside", Point{13, 4}, false},
		{"outside, level with the floor line", Point{-1, 0}, false},
		{"outside, level with a hole's edge", Point{13, 6}, false},
		{"in the wall", Point{1, 4}, true},
		{"in the wall, level with a hole's edge", Point{1, 6}, true},
		{"on the outer border", Point{6, 0}, true},
		{"on an outer corner", Point{12, 8}, true},
		{"on the hole's border", Point{3, 4}, true},
		{"on a hole's corner", Point{9, 6}, true},
		{"in the hole", Point{6, 4}, false},
		{"in the hole, just off its border", Point{math.Nextafter(3, 4), 4}, false},
		{"just outside", Point{12, math.Nextafter(8, 9)}, false},
	} {
		if got := InPolygon(courtyard, c.p); got != c.want {
			t.Errorf("%s %v: %v", c.name, c.p, got)
		}
	}
	if InPolygon(nil, Point{}) || InPolygon([][]Point{nil}, Point{}) {
		t.Error("a polygon of no points holds a point")
	}
}

// star is a simple polygon about the origin; corners at whole micrometres.
func star(t *rapid.T, n int, least, most float64) []Point {
	var out []Point
	for i := range n {
		a := 2 * math.Pi * float64(i) / float64(n)
		r := rapid.Float64Range(least, most).Draw(t, "r")
		out = append(out, Point{math.Round(r * math.Cos(a)), math.Round(r * math.Sin(a))})
	}
	return out
}

func drawStars() *rapid.Generator[[][]Point] {
	return rapid.Custom(func(t *rapid.T) [][]Point {
		chains := [][]Point{star(t, rapid.IntRange(3, 20).Draw(t, "n"), 5e6, 20e6)}
		if rapid.Bool().Draw(t, "hole") {
			chains = append(chains, star(t, rapid.IntRange(3, 9).Draw(t, "m"), 0.1e6, 2e6))
		}
		return chains
	})
}

func toSF(chains [][]Point) sf.Polygon {
	var rings []sf.LineString
	for _, c := range chains {
		var xy []float64
		for _, p := range append(c[:len(c):len(c)], c[0]) {
			xy = append(xy, p.X, p.Y)
		}
		rings = append(rings, sf.NewLineString(sf.NewSequence(xy, sf.DimXY)))
	}
	return sf.NewPolygon(rings)
}

func toOrb(chains [][]Point) orb.Polygon {
	var out orb.Polygon
	for _, c := range chains {
		var r orb.Ring
		for _, p := range append(c[:len(c):len(c)], c[0]) {
			r = append(r, orb.Point{p.X, p.Y})
		}
		out = append(out, r)
	}
	return out
}

// Against two libraries kept by others, on random polygons with holes. Points near
// the border, where their float64 arithmetic may differ, are left to the
// boundary table above.
func TestInPolygonAndDistanceAgainstOthers(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		chains := drawStars().Draw(t, "polygon")
		c := rapid.Float64Range(-25e6, 25e6)
		p := Point{math.Round(c.Draw(t, "x")), math.Round(c.Draw(t, "y"))}
		border, at := BorderDist(chains, p)
		if border < 1 {
			t.Skip("on the border")
		}
		in := InPolygon(chains, p)
		if want := planar.PolygonContains(toOrb(chains), orb.Point{p.X, p.Y}); in != want {
			t.Fatalf("inside %v, orb %v", in, want)
		}
		// Tolerance: float64 squares of up to 1e15 in the other library, 1e-7 relative.
		dist := border
		if in {
			dist = 0
		}
		want, ok := sf.Distance(toSF(chains).AsGeometry(), sf.XY{X: p.X, Y: p.Y}.AsPoint().AsGeometry())
		if !ok || math.Abs(want-dist) > 1e-7*(1+want) {
			t.Fatalf("distance %v, simplefeatures %v", dist, want)
		}
		if math.Abs(Dist(p, at)-border) > 1e-6 {
			t.Fatalf("nearest point %v is %v away, not %v", at, Dist(p, at), border)
		}
	})
}

// The other library follows the rules of the OGC Simple Feature Access standard, which
// let rings touch at a point; ours do not touch. So what we accept it accepts,
// and what it accepts and we refuse has a touching pair of edges.
func TestCheckPolygonAgainstSimplefeatures(t *testing.T) {
	accepted, refused := 0, 0
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.Map(rapid.IntRange(0, 1000), func(i int) float64 { return float64(i) * 9973 })
		p := rapid.Custom(func(t *rapid.T) Point { return Point{c.Draw(t, "x"), c.Draw(t, "y")} })
		chains := [][]Point{rapid.SliceOfN(p, 3, 7).Draw(t, "outer")}
		if rapid.Bool().Draw(t, "hole") {
			chains = append(chains, rapid.SliceOfN(p, 3, 4).Draw(t, "hole"))
		}
		ours, theirs := CheckPolygon(chains), toSF(chains).Validate()
		switch {
		case ours == nil && theirs != nil:
			t.Fatalf("accepted, but simplefeatures: %v", theirs)
		case ours != nil && theirs == nil && !strings.Contains(ours.Error(), "touches") && !strings.Contains(ours.Error(), "meets") &&
			!strings.Contains(ours.Error(), "repeats"):
			t.Fatalf("refused (%v), accepted by simplefeatures", ours)
		case ours == nil:
			accepted++
		default:
			refused++
		}
	})
	t.Logf("%d accepted, %d refused", accepted, refused)
}

func TestSignedArea(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		r := Ring(star(t, rapid.IntRange(3, 20).Draw(t, "n"), 5e6, 20e6))
		want := planar.Area(toOrb([][]Point{r}))
		if got := r.SignedArea(); got <= 0 || math.Abs(got-want) > 1e-9*want { // sums of 20 products, each rounded
			t.Fatalf("area %v, orb %v; the ring runs counter-clockwise", got, want)
		}
	})
	if got := Ring(courtyard[1]).SignedArea(); got != -24 {
		t.Errorf("clockwise 6 by 4 hole: %v", got)
	}
	if got := Ring(ring("0,0 4,0")).SignedArea(); got != 0 {
		t.Errorf("two points: %v", got)
	}
}

func TestCheckPolygonNamesTheFault(t *testing.T) {
	square := "0,0 9000000,0 9000000,9000000 0,9000000"
	for _, c := range []struct {
		name   string
		chains [][]Point
		want   string // "" when valid
	}{
		{"none", nil, "outer ring: no points, wanted at least 3"},
		{"two points", [][]Point{ring("0,0 1,0")}, "outer ring: 2 points, wanted at least 3"},
		{"a square", [][]Point{ring(square)}, ""},
		{"clockwise", [][]Point{ring("0,0 0,9 9,9 9,0")}, ""},
		{"a corner in line with its neighbours", [][]Point{ring("0,0 4,0 9,0 9,9")}, ""},
		{"closed by hand", [][]Point{ring("0,0 9,0 9,9 0,0")}, "outer ring, point 3: repeats the first point; the last point joins the first by itself"},
		{"a point twice", [][]Point{ring("0,0 9,0 9,0 9,9")}, "outer ring, point 2: repeats the point before it"},
		{"not a number", [][]Point{{{0, 0}, {math.NaN(), 0}, {9, 9}}}, "outer ring, point 1: not a finite place"},
		{"infinite", [][]Point{{{0, 0}, {9, 0}, {9, math.Inf(-1)}}}, "outer ring, point 2: not a finite place"},
		{"on one line", [][]Point{ring("0,0 3,3 9,9 5,5")}, "outer ring: encloses no area: all points lie on one line"},
		// +--+
		// |  +----  (a hair that goes out and straight back)
		// +--+
		{"hair", [][]Point{ring("0,0 4,0 4,2 9,2 5,2 4,4 0,4")}, "outer ring, point 3: the ring turns straight back at (9e-06, 2e-06) m"},
		// \/
		// /\  bow tie
		{"bow tie", [][]Point{ring("0,0 4000000,4000000 4000000,0 0,4000000")}, "outer ring, point 2: the edge from here meets the edge from point 0 of the outer ring at (2, 2) m"},
		// ><  pinched: two corners in one place
		{"pinched", [][]Point{ring("0,0 2,2 4,0 4,4 2,2 0,4")}, "outer ring, point 4: touches point 1 of the outer ring at (2e-06, 2e-06) m"},
		// a corner on another edge
		{"corner on edge", [][]Point{ring("0,0 8,0 8,8 4,0 0,8")}, "outer ring, point 3: the edge from here meets the edge from point 0 of the outer ring at (4e-06, 0) m"},
		{"hole", [][]Point{ring(square), ring("1000000,1000000 2000000,1000000 2000000,2000000")}, ""},
		{"hole outside", [][]Point{ring(square), ring("10000000,0 11000000,0 11000000,1000000")}, "hole 0, point 0: lies outside the outer ring at (10, 0) m"},
		{"hole round the outer ring", [][]Point{ring("1,1 2,1 2,2 1,2"), ring("0,0 9,0 9,9 0,9")}, "hole 0, point 0: lies outside the outer ring at (0, 0) m"},
		{"hole touching the border", [][]Point{ring(square), ring("0,1000000 2000000,1000000 2000000,2000000")}, "hole 0, point 0: the edge from here meets the edge from point 3 of the outer ring at (0, 1) m"},
		{"hole in a hole", [][]Point{ring(square), ring("1000000,1000000 8000000,1000000 8000000,8000000 1000000,8000000"), ring("3000000,3000000 4000000,3000000 4000000,4000000")}, "hole 1, point 0: lies inside hole 0 at (3, 3) m"},
		{"holes crossing", [][]Point{ring(square), ring("1000000,1000000 5000000,1000000 5000000,5000000"), ring("4000000,2000000 8000000,2000000 8000000,3000000")}, "hole 1, point 0: the edge from here meets the edge from point 1 of hole 0 at (5, 2) m"},
		{"a gap of a micrometre", [][]Point{ring(square), ring("1,1 8999999,1 8999999,8999999 1,8999999")}, ""},
		{"zeroes of either sign", [][]Point{{{0, 0}, {9, 0}, {9, 9}, {math.Copysign(0, -1), math.Copysign(0, -1)}}}, "outer ring, point 3: repeats the first point; the last point joins the first by itself"},
	} {
		err := CheckPolygon(c.chains)
		got := ""
		if err != nil {
			got = err.Error()
		}
		if got != c.want {
			t.Errorf("%s:\n got %s\nwant %s", c.name, got, c.want)
		}
	}
}

// Shapes for which all pairs of edges, or all pairs with overlapping bounds, are
// far too many.
func TestCheckPolygonManyVertices(t *testing.T) {
	for name, chains := range bigPolygons(10_000) {
		if err := CheckPolygon(chains); err != nil {
			t.Errorf("%s: %v", name, err)
		}
		// One corner moved far out to the right makes it cross itself.
		c := chains[0]
		third := len(c) / 3
		was := c[third]
		c[third] = Point{3e9, 1.7e9}
		if CheckPolygon(chains) == nil {
			t.Errorf("%s: a crossing went unseen", name)
		}
		c[third] = was
	}
}

// bigPolygons are a circle, a comb, and a diagonal stair folded back on itself.
func bigPolygons(n int) map[string][][]Point {
	var circle, comb, stair []Point
	for i := range n {
		a := 2 * math.Pi * float64(i) / float64(n)
		circle = append(circle, Point{math.Round(1e9 * math.Cos(a)), math.Round(1e9 * math.Sin(a))})
	}
	comb = append(comb, Point{0, 1e9})
	for i := range (n - 2) / 2 {
		comb = append(comb, Point{float64(i) * 2000, 0}, Point{float64(i)*2000 + 1000, 999e6})
	}
	comb = append(comb, Point{float64(n) * 1000, 1e9})
	for i := range n / 2 {
		v := float64(i) * 1000
		stair = append(stair, Point{v + float64(i%2)*900, v})
	}
	for i := n/2 - 1; i >= 0; i-- {
		v := float64(i) * 1000
		stair = append(stair, Point{v + float64(i%2)*900 + 50, v - 20})
	}
	return map[string][][]Point{"circle": {circle}, "comb": {comb}, "stair": {stair}}
}

// Reports how many times longer all pairs of edges take.
func BenchmarkCheckPolygon(b *testing.B) {
	for name, chains := range bigPolygons(2_000) {
		b.Run(name, func(b *testing.B) {
			start := time.Now()
			if !plainCheck(chains) {
				b.Fatal("all pairs refuse")
			}
			plain := time.Since(start)
			for b.Loop() {
				if err := CheckPolygon(chains); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(plain)/(float64(b.Elapsed())/float64(b.N)), "x-all-pairs")
		})
	}
}

// FuzzCheckPolygon reads rings from bytes and wants the verdict of all pairs.
func FuzzCheckPolygon(f *testing.F) {
	f.Add([]byte{0, 0, 9, 0, 9, 9, 0, 9})
	f.Add([]byte{0, 0, 4, 4, 4, 0, 0, 4})
	f.Add([]byte{0, 0, 99, 0, 99, 99, 0, 99, 255, 255, 10, 10, 20, 10, 20, 20})
	f.Add([]byte{0, 0, 4, 0, 4, 2, 9, 2, 5, 2, 4, 4, 0, 4})
	f.Fuzz(func(t *testing.T, data []byte) {
		if len(data) > 128 {
			return
		}
		chains := [][]Point{nil}
		for ; len(data) >= 2; data = data[2:] {
			if data[0] == 255 {
				chains = append(chains, nil)
				continue
			}
			last := len(chains) - 1
			chains[last] = append(chains[last], Point{float64(data[0]), float64(data[1])})
		}
		if err := CheckPolygon(chains); (err == nil) != plainCheck(chains) {
			t.Fatalf("%v, all pairs: valid %v for %v", err, plainCheck(chains), chains)
		}
	})
}
