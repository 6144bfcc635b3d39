package geom

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

func TestRectEmptiness(t *testing.T) {
	e := EmptyRect()
	if !e.IsEmpty() || (Rect{}).IsEmpty() || BoundsOf(Point{3, 4}).IsEmpty() {
		t.Error("EmptyRect is empty, a rectangle of one point is not")
	}
	one := Rect{Point{0, 0}, Point{2, 3}}
	if e.Union(one) != one || one.Union(e) != one || e.Add(Point{5, 6}) != BoundsOf(Point{5, 6}) {
		t.Error("an empty rectangle adds nothing")
	}
	if e.Intersects(one) || one.Intersects(e) || e.Contains(Point{}) || !e.Grow(1e9).IsEmpty() {
		t.Error("an empty rectangle holds nothing, however grown")
	}
	if e.Width() != 0 || e.Height() != 0 || !math.IsInf(e.Dist(Point{}), 1) || !math.IsInf(RectSegmentDist(e, Point{}, Point{}), 1) {
		t.Error("an empty rectangle has no extent and is infinitely far")
	}
	if !one.Grow(-1.5).IsEmpty() || one.Grow(-1).IsEmpty() {
		t.Error("a rectangle 2 wide shrinks to a line by 1 a side, to nothing by more")
	}
}

// +--+     common borders and corners count
// |  +--+
// +--+  |
//
//	+--+
func TestRectRelations(t *testing.T) {
	side := rapid.IntRange(0, 6)
	rapid.Check(t, func(t *rapid.T) {
		draw := func(name string) Rect {
			x, y := side.Draw(t, name+" x"), side.Draw(t, name+" y")
			w, h := side.Draw(t, name+" w"), side.Draw(t, name+" h")
			return Rect{Point{float64(x), float64(y)}, Point{float64(x + w), float64(y + h)}}
		}
		r, o := draw("r"), draw("o")
		common, union := EmptyRect(), EmptyRect()
		for x := range 14 {
			for y := range 14 {
				p := Point{float64(x), float64(y)}
				inR := r.Min.X <= p.X && p.X <= r.Max.X && r.Min.Y <= p.Y && p.Y <= r.Max.Y
				if r.Contains(p) != inR || inR != (r.Dist(p) == 0) {
					t.Fatalf("%v contains %v: %v, distance %v", r, p, r.Contains(p), r.Dist(p))
				}
				if r.Contains(p) && o.Contains(p) {
					common = common.Add(p)
				}
				if r.Contains(p) || o.Contains(p) {
					union = union.Add(p)
				}
			}
		}
		if got := r.Intersect(o); got != common || r.Intersects(o) == common.IsEmpty() {
			t.Fatalf("%v and %v share %v, by points %v", r, o, got, common)
		}
		if got := r.Union(o); got != union {
			t.Fatalf("union %v, by points %v", got, union)
		}
	})
}
