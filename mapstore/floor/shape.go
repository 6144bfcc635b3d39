package floor

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// NewPolygon is a filled polygon, its outer ring first, then its holes, grown by a
// survey tolerance. The slices are kept, not copied.
func NewPolygon(chains [][]geom.Point, toleranceUm int64) Shape {
	return Shape{Kind: Polygon, Chains: chains, Grow: float64(toleranceUm)}
}

// NewPolyline is an open chain of points with a full thickness and round ends,
// grown by a survey tolerance. Half of an odd width is not a whole micrometre;
// it is exact all the same.
func NewPolyline(points []geom.Point, widthUm, toleranceUm int64) Shape {
	return Shape{Kind: Polyline, Chains: [][]geom.Point{points}, Grow: float64(widthUm)/2 + float64(toleranceUm)}
}

// NewDisc is a disc grown by a survey tolerance.
func NewDisc(center geom.Point, radiusUm, toleranceUm int64) Shape {
	return Shape{Kind: Disc, Chains: [][]geom.Point{{center}}, Grow: float64(radiusUm + toleranceUm)}
}

// CoreBounds is the smallest rectangle that holds the core, before growing.
func (s Shape) CoreBounds() geom.Rect {
	r := geom.EmptyRect()
	for _, c := range s.Chains {
		r = r.Union(geom.BoundsOf(c...))
	}
	return r
}

// Bounds is the smallest rectangle that holds the shape.
func (s Shape) Bounds() geom.Rect { return s.CoreBounds().Grow(s.Grow) }

// Vertices is how many points the core has.
func (s Shape) Vertices() int {
	n := 0
	for _, c := range s.Chains {
		n += len(c)
	}
	return n
}

// Edges yields the segments of the core; a disc's is its middle, twice.
func (s Shape) Edges(yield func(a, b geom.Point) bool) {
	for _, c := range s.Chains {
		switch {
		case len(c) == 0:
			continue
		case len(c) == 1 || s.Kind == Polygon:
			a := c[len(c)-1]
			for _, b := range c {
				if !yield(a, b) {
					return
				}
				a = b
			}
		default:
			for i := 1; i < len(c); i++ {
				if !yield(c[i-1], c[i]) {
					return
				}
			}
		}
	}
}

// coreContains says whether p lies in the core, its border included. Only polygons
// have an inside: for the other kinds it is false.
func (s Shape) coreContains(p geom.Point) bool {
	return s.Kind == Polygon && geom.InPolygon(s.Chains, p)
}

// Dist is the distance from p to the shape, 0 inside and on the outline, and the
// point of the outline nearest to p, or p itself when the distance is 0. Time is
// linear in the vertices. It is as exact as geom.SegmentDist, less the rounding of one
// subtraction.
func (s Shape) Dist(p geom.Point) (float64, geom.Point) {
	if s.coreContains(p) {
		return 0, p
	}
	best, at := math.Inf(1), p
	for a, b := range s.Edges {
		if d, n := geom.SegmentDist(p, a, b); d < best {
			best, at = d, n
		}
	}
	if best <= s.Grow {
		return 0, p
	}
	return best - s.Grow, towards(at, p, s.Grow, best)
}

// towards is the point at a distance step from a on the way to b, which is dist away.
func towards(a, b geom.Point, step, dist float64) geom.Point {
	dx, dy := b.X-a.X, b.Y-a.Y
	switch {
	case step == 0:
		return a
	case dx == 0:
		return geom.Point{X: a.X, Y: a.Y + math.Copysign(step, dy)}
	case dy == 0:
		return geom.Point{X: a.X + math.Copysign(step, dx), Y: a.Y}
	}
	t := step / dist
	return geom.Point{X: a.X + float64(t*dx), Y: a.Y + float64(t*dy)}
}

// SegmentDist is the smallest distance from a point of the segment ab to the
// shape, and that point of ab. It is 0 when the segment meets the shape.
func (s Shape) SegmentDist(a, b geom.Point) (float64, geom.Point) {
	if s.coreContains(a) {
		return 0, a
	}
	best, at := math.Inf(1), a
	for c, d := range s.Edges {
		if v, on, _ := geom.SegmentSegmentDist(a, b, c, d); v < best {
			best, at = v, on
		}
	}
	return max(0, best-s.Grow), at
}

// DistAtLeast says, exactly, whether p is at least um from the shape: the test for
// "clearance >= required, equality admitted". um must be a whole number.
func (s Shape) DistAtLeast(p geom.Point, um float64) bool {
	if um <= 0 {
		return true
	}
	if s.coreContains(p) {
		return false
	}
	for a, b := range s.Edges {
		if !geom.SegmentDistAtLeast(p, a, b, s.Grow+um) {
			return false
		}
	}
	return true
}

// SegmentDistAtLeast says, exactly, whether every point of the segment ab is at
// least um from the shape. um must be a whole number.
func (s Shape) SegmentDistAtLeast(a, b geom.Point, um float64) bool {
	if um <= 0 {
		return true
	}
	if s.coreContains(a) {
		return false
	}
	for c, d := range s.Edges {
		if !geom.SegmentSegmentDistAtLeast(a, b, c, d, s.Grow+um) {
			return false
		}
	}
	return true
}

// RectDist is the distance between the shape and the closed rectangle r, 0 when
// they share a point, +Inf when r is empty.
func (s Shape) RectDist(r geom.Rect) float64 {
	if r.IsEmpty() {
		return math.Inf(1)
	}
	if s.coreContains(r.Min) {
		return 0
	}
	best := math.Inf(1)
	for a, b := range s.Edges {
		best = min(best, geom.RectSegmentDist(r, a, b))
	}
	return max(0, best-s.Grow)
}
