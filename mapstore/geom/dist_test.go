package geom

import (
	"math"
	"math/big"
	"testing"

	"github.com/paulmach/orb"
	"github.com/paulmach/orb/planar"
	"pgregory.net/rapid"
)

// drawCoord draws whole micrometres from small to the size of the largest floor
// at the farthest origin.
func drawCoord() *rapid.Generator[float64] {
	return rapid.Map(rapid.OneOf(
		rapid.Int64Range(-4, 4),
		rapid.Int64Range(-50_000_000, 50_000_000),
		rapid.Int64Range(999_999_999_000_000, 1_000_000_600_000_000),
	), func(v int64) float64 { return float64(v) })
}

func drawPoint() *rapid.Generator[Point] {
	return rapid.Custom(func(t *rapid.T) Point { return Point{drawCoord().Draw(t, "x"), drawCoord().Draw(t, "y")} })
}

// exactDist2 is the squared distance from p to ab in rational numbers, by the
// textbook projection.
func exactDist2(p, a, b Point) *big.Rat {
	r := func(v float64) *big.Rat { return new(big.Rat).SetFloat64(v) }
	sub := func(x, y *big.Rat) *big.Rat { return new(big.Rat).Sub(x, y) }
	mul := func(x, y *big.Rat) *big.Rat { return new(big.Rat).Mul(x, y) }
	add := func(x, y *big.Rat) *big.Rat { return new(big.Rat).Add(x, y) }
	dx, dy := sub(r(b.X), r(a.X)), sub(r(b.Y), r(a.Y))
	t := new(big.Rat)
	if l := add(mul(dx, dx), mul(dy, dy)); l.Sign() > 0 {
		t.Quo(add(mul(sub(r(p.X), r(a.X)), dx), mul(sub(r(p.Y), r(a.Y)), dy)), l)
	}
	if t.Sign() < 0 {
		t.SetInt64(0)
	}
	if one := big.NewRat(1, 1); t.Cmp(one) > 0 {
		t = one
	}
	ex := sub(r(p.X), add(r(a.X), mul(t, dx)))
	ey := sub(r(p.Y), add(r(a.Y), mul(t, dy)))
	return add(mul(ex, ex), mul(ey, ey))
}

// within says whether d is the root of d2 to a relative error of rel.
func within(d float64, d2 *big.Rat, rel float64) bool {
	if d2.Sign() == 0 {
		return d == 0
	}
	root := new(big.Float).SetPrec(300).SetRat(d2)
	root.Sqrt(root)
	diff := new(big.Float).SetPrec(300).SetFloat64(d)
	diff.Sub(diff, root).Quo(diff, root)
	e, _ := diff.Float64()
	return math.Abs(e) <= rel
}

func TestSegmentDistIsWithinItsBound(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p, a, b := drawPoint().Draw(t, "p"), drawPoint().Draw(t, "a"), drawPoint().Draw(t, "b")
		d, at := SegmentDist(p, a, b)
		d2 := exactDist2(p, a, b)
		if !within(d, d2, RelativeError) {
			t.Fatalf("distance %v, its square should be %v", d, d2.FloatString(6))
		}
		// The nearest point is rounded to float64: half a unit in the last place of
		// the largest coordinate, a few roundings.
		ulp := 4 * 0x1p-53 * max(math.Abs(a.X), math.Abs(a.Y), math.Abs(b.X), math.Abs(b.Y), 1)
		if got := Dist(p, at); math.Abs(got-d) > 4*ulp+2*RelativeError*d {
			t.Fatalf("nearest point %v is %v away, distance is %v", at, got, d)
		}
		if back, _ := SegmentDist(at, a, b); back > 4*ulp {
			t.Fatalf("nearest point %v is %v off the segment", at, back)
		}
	})
}

// Against the distance that a library kept by others computes, in metres. Its own
// rounding, of squares, decides the tolerance.
func TestSegmentDistAgainstOrb(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.Float64Range(-50, 50)
		pt := func(name string) Point {
			return Point{FromMetres(c.Draw(t, name+".x")), FromMetres(c.Draw(t, name+".y"))}
		}
		p, a, b := pt("p"), pt("a"), pt("b")
		got, _ := SegmentDist(p, a, b)
		want := planar.DistanceFromSegment(orb.Point{a.X, a.Y}, orb.Point{b.X, b.Y}, orb.Point{p.X, p.Y})
		if math.Abs(got-want) > 1e-7*(1+want) {
			t.Fatalf("%v, orb %v", got, want)
		}
	})
}

// What decides whether a truck fits must not depend on rounding.
func TestAxisAlignedDistancesAreExact(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		d := rapid.Int64Range(0, 100_000_000).Draw(t, "distance")
		x0, x1 := drawCoord().Draw(t, "x0"), drawCoord().Draw(t, "x1")
		y, f := drawCoord().Draw(t, "y"), rapid.Float64Range(0, 1).Draw(t, "along")
		lo, hi := min(x0, x1), max(x0, x1)
		x := min(hi, lo+math.Floor(f*(hi-lo)))
		if got, at := SegmentDist(Point{x, y + float64(d)}, Point{x0, y}, Point{x1, y}); got != float64(d) || at != (Point{x, y}) {
			t.Fatalf("level segment: %v at %v, wanted %d", got, at, d)
		}
		if got, at := SegmentDist(Point{y - float64(d), x}, Point{y, x0}, Point{y, x1}); got != float64(d) || at != (Point{y, x}) {
			t.Fatalf("upright segment: %v at %v, wanted %d", got, at, d)
		}
		r := Rect{Point{lo, y}, Point{hi, y + 1000}}
		if got := r.Dist(Point{x, y - float64(d)}); got != float64(d) {
			t.Fatalf("rectangle: %v, wanted %d", got, d)
		}
		if got := RectSegmentDist(r, Point{x0, y - float64(d)}, Point{x1, y - float64(d)}); got != float64(d) {
			t.Fatalf("rectangle to segment: %v, wanted %d", got, d)
		}
	})
}

// 3-4-5 and 5-12-13 triangles have whole distances to oblique walls.
func TestWholeObliqueDistances(t *testing.T) {
	for _, c := range []struct {
		p, a, b Point
		want    float64
	}{
		{Point{0, 0}, Point{-400_000, 300_000}, Point{-400_000 + 3*9, 300_000 + 4*9}, 500_000}, // end of a wall
		{Point{450_000 * 4, -450_000 * 3}, Point{-3000, -4000}, Point{3_000_000, 4_000_000}, 450_000 * 5},
		{Point{35_000 * 12, -35_000 * 5}, Point{-5, -12}, Point{5_000_000, 12_000_000}, 35_000 * 13},
	} {
		if got, _ := SegmentDist(c.p, c.a, c.b); got != c.want {
			t.Errorf("SegmentDist(%v, %v, %v) = %v, wanted %v", c.p, c.a, c.b, got, c.want)
		}
		if !SegmentDistAtLeast(c.p, c.a, c.b, c.want) || SegmentDistAtLeast(c.p, c.a, c.b, math.Nextafter(c.want, math.Inf(1))) {
			t.Errorf("SegmentDistAtLeast(%v, %v, %v) does not turn at %v", c.p, c.a, c.b, c.want)
		}
	}
}

func TestSegmentDistAtLeastIsExact(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p, a, b := drawPoint().Draw(t, "p"), drawPoint().Draw(t, "a"), drawPoint().Draw(t, "b")
		if rapid.Bool().Draw(t, "fractional") {
			p.X += rapid.Float64Range(0, 1).Draw(t, "fraction")
		}
		d, _ := SegmentDist(p, a, b)
		r := rapid.SampledFrom([]float64{
			d, math.Nextafter(d, 0), math.Nextafter(d, math.Inf(1)), math.Floor(d), math.Ceil(d),
			d * (1 + RelativeError), d * (1 - RelativeError), 450_000, 0, -1,
		}).Draw(t, "r")
		r2 := new(big.Rat).SetFloat64(r)
		want := r <= 0 || exactDist2(p, a, b).Cmp(r2.Mul(r2, r2)) >= 0
		if got := SegmentDistAtLeast(p, a, b, r); got != want {
			t.Fatalf("at least %v: %v, distance is about %v", r, got, d)
		}
	})
}

func TestSegmentSegmentDist(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := rapid.OneOf(latticePoint(6), drawPoint())
		a, b, c, d := p.Draw(t, "a"), p.Draw(t, "b"), p.Draw(t, "c"), p.Draw(t, "d")
		got, ab, cd := SegmentSegmentDist(a, b, c, d)
		touch := SegmentsTouch(a, b, c, d)
		if touch != (got == 0) {
			t.Fatalf("distance %v, touch %v", got, touch)
		}
		if back, x, y := SegmentSegmentDist(d, c, b, a); math.Abs(back-got) > 2*RelativeError*got || !touch && math.Abs(Dist(x, y)-Dist(ab, cd)) > 2 {
			t.Fatalf("%v, the other way round %v", got, back)
		}
		// Apart, no two points of the segments are nearer; an end is among the nearest.
		for i := range 17 {
			s := float64(i) / 16
			q := Point{a.X + s*(b.X-a.X), a.Y + s*(b.Y-a.Y)}
			if v, _ := SegmentDist(q, c, d); v < got*(1-1e-9)-1 { // q is rounded, up to 0.5 µm at the farthest origin
				t.Fatalf("%v of ab is %v from cd, the segments %v", q, v, got)
			}
		}
		if touch {
			for _, s := range [][2]Point{{a, b}, {c, d}} {
				if v, _ := SegmentDist(ab, s[0], s[1]); v > 1 { // as above
					t.Fatalf("common point %v is %v off", ab, v)
				}
			}
		}
		for _, r := range []float64{got, 450_000, got + 1} {
			if r > 0 && math.Abs(got-r) > 1e-3 && SegmentSegmentDistAtLeast(a, b, c, d, r) != (got >= r) {
				t.Fatalf("at least %v is wrong, distance %v", r, got)
			}
		}
	})
}

// The rectangle's distance is that of its filled square: four edges and an inside.
func TestRectSegmentDistAgainstEdges(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := rapid.OneOf(latticePoint(6), drawPoint())
		r := BoundsOf(p.Draw(t, "corner"), p.Draw(t, "corner"))
		a, b := p.Draw(t, "a"), p.Draw(t, "b")
		want := math.Inf(1)
		corners := r.Corners()
		for i := range corners {
			d, _, _ := SegmentSegmentDist(a, b, corners[i], corners[(i+1)%4])
			want = min(want, d)
		}
		if r.Contains(a) {
			want = 0
		}
		if got := RectSegmentDist(r, a, b); got != want {
			t.Fatalf("%v to %v %v: %v, edges say %v", r, a, b, got, want)
		}
	})
}
