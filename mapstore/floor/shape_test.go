package floor

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/geom"
)

func pts(xy ...float64) []geom.Point {
	var out []geom.Point
	for i := 0; i < len(xy); i += 2 {
		out = append(out, geom.Point{X: xy[i], Y: xy[i+1]})
	}
	return out
}

// Walls of a doorway 0.90 m wide, a column and a block, at places that no grid
// of 0.05 m has lines at. What is axis-aligned is exact.
//
//	  wall        wall      column      block
//	========....========      o       +------+
//	       1.0123456 m                +------+
func TestShapeDistances(t *testing.T) {
	left := NewPolyline(pts(0, 2_000_003, 987_654, 2_000_003), 100_001, 0)
	column := NewDisc(geom.Point{X: 3_000_000, Y: 1_000_000}, 250_000, 7_000)
	block := NewPolygon([][]geom.Point{pts(5_000_000, 0, 7_000_000, 0, 7_000_000, 1_000_000, 5_000_000, 1_000_000)}, 20_000)
	for _, c := range []struct {
		name string
		s    Shape
		p    geom.Point
		want float64
		at   geom.Point
	}{
		{"before the wall's round end", left, geom.Point{X: 1_500_000, Y: 2_000_003}, 1_500_000 - 987_654 - 50_000.5, geom.Point{X: 987_654 + 50_000.5, Y: 2_000_003}},
		{"above the wall", left, geom.Point{X: 500_000, Y: 2_500_003}, 449_999.5, geom.Point{X: 500_000, Y: 2_050_003.5}},
		{"on the wall's face", left, geom.Point{X: 500_000, Y: 2_050_003.5}, 0, geom.Point{X: 500_000, Y: 2_050_003.5}},
		{"inside the wall", left, geom.Point{X: 500_000, Y: 2_000_000}, 0, geom.Point{X: 500_000, Y: 2_000_000}},
		{"right of the column", column, geom.Point{X: 4_000_000, Y: 1_000_000}, 743_000, geom.Point{X: 3_257_000, Y: 1_000_000}},
		{"3-4-5 from the column", column, geom.Point{X: 3_600_000, Y: 1_800_000}, 743_000, geom.Point{X: 3_154_200, Y: 1_205_600}},
		{"in the column", column, geom.Point{X: 3_000_000, Y: 1_000_000}, 0, geom.Point{X: 3_000_000, Y: 1_000_000}},
		{"left of the block", block, geom.Point{X: 4_500_000, Y: 500_000}, 480_000, geom.Point{X: 4_980_000, Y: 500_000}},
		{"in the block", block, geom.Point{X: 6_000_000, Y: 500_000}, 0, geom.Point{X: 6_000_000, Y: 500_000}},
		{"in the block's tolerance", block, geom.Point{X: 4_980_000, Y: 500_000}, 0, geom.Point{X: 4_980_000, Y: 500_000}},
	} {
		d, at := c.s.Dist(c.p)
		if d != c.want || geom.Dist(at, c.at) > 1e-6 { // the nearest point of the oblique one is rounded
			t.Errorf("%s: %v at %v, wanted %v at %v", c.name, d, at, c.want, c.at)
		}
		whole := math.Floor(c.want)
		if !c.s.DistAtLeast(c.p, whole) || c.s.DistAtLeast(c.p, whole+1) {
			t.Errorf("%s: DistAtLeast does not turn at %v", c.name, whole)
		}
		if got := c.s.RectDist(geom.Rect{Min: c.p, Max: c.p}); got != c.want {
			t.Errorf("%s: RectDist of the point alone is %v", c.name, got)
		}
		if got, on := c.s.SegmentDist(c.p, c.p); got != c.want || on != c.p {
			t.Errorf("%s: SegmentDist of the point alone is %v at %v", c.name, got, on)
		}
	}
}

// A courtyard is open inside: its hole is not solid, and a rectangle or segment in
// it is as far from the shape as from the hole's border.
func TestHoleIsOpen(t *testing.T) {
	court := NewPolygon([][]geom.Point{pts(0, 0, 12, 0, 12, 8, 0, 8), pts(3, 2, 9, 2, 9, 6, 3, 6)}, 0)
	if d, _ := court.SegmentDist(geom.Point{X: 5, Y: 4}, geom.Point{X: 7, Y: 4}); d != 2 {
		t.Errorf("segment in the hole: %v", d)
	}
	if d := court.RectDist(geom.Rect{Min: geom.Point{X: 4, Y: 3}, Max: geom.Point{X: 8, Y: 5}}); d != 1 {
		t.Errorf("rectangle in the hole: %v", d)
	}
	if d := court.RectDist(geom.Rect{Min: geom.Point{X: -5, Y: -5}, Max: geom.Point{X: 20, Y: 20}}); d != 0 {
		t.Errorf("rectangle round it all: %v", d)
	}
	if d, _ := court.SegmentDist(geom.Point{X: 1, Y: 4}, geom.Point{X: 2, Y: 4}); d != 0 {
		t.Errorf("segment inside the wall: %v", d)
	}
}

// No sampled point is nearer than the whole, and the shape's bounds hold it.
func TestShapeDistancesAgainstSamples(t *testing.T) {
	s := hall
	rapid.Check(t, func(t *rapid.T) {
		shape := drawFeature(s, "x").Filter(func(f *Feature) bool { return f.Kind != Station }).Draw(t, "feature").Shape
		a, b := drawPoint(s).Draw(t, "a"), drawPoint(s).Draw(t, "b")
		const rounding = 1e-3 // µm; coordinates here have 25 bits before the point
		da, at := shape.Dist(a)
		if math.Abs(geom.Dist(a, at)-da) > rounding {
			t.Fatalf("nearest point %v is %v away, not %v", at, geom.Dist(a, at), da)
		}
		if back, _ := shape.Dist(at); back > rounding {
			t.Fatalf("nearest point %v is %v off the shape", at, back)
		}
		if da > 0 && shape.Bounds().Dist(a) > da+rounding {
			t.Fatalf("bounds %v are farther than the shape", shape.Bounds())
		}
		seg, on := shape.SegmentDist(a, b)
		if d, _ := shape.Dist(on); math.Abs(d-seg) > rounding {
			t.Fatalf("segment's nearest point is %v from the shape, not %v", d, seg)
		}
		r := geom.BoundsOf(a, b)
		rect := shape.RectDist(r)
		for i := range 33 {
			u := float64(i) / 32
			q := geom.Point{X: a.X + u*(b.X-a.X), Y: a.Y + u*(b.Y-a.Y)}
			d, _ := shape.Dist(q)
			if d < seg-rounding || d < rect-rounding {
				t.Fatalf("%v is %v from the shape, the segment %v, the rectangle %v", q, d, seg, rect)
			}
		}
		if seg < rect {
			t.Fatalf("the segment is nearer (%v) than the rectangle that holds it (%v)", seg, rect)
		}
		for _, um := range []float64{math.Floor(seg), math.Floor(seg) + 1} {
			if um > 0 && math.Abs(um-seg) > rounding && shape.SegmentDistAtLeast(a, b, um) != (seg >= um) {
				t.Fatalf("SegmentDistAtLeast(%v) is wrong, the distance is %v", um, seg)
			}
		}
	})
}
