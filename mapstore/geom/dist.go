package geom

import "math"

// RelativeError bounds the rounding of Dist, SegmentDist, SegmentSegmentDist and
// RectSegmentDist: between points whose coordinates are whole numbers below 2^53 in
// size, as are their differences, a distance d is off the true one by at most
// RelativeError*d, and is 0 only when the truth is. A distance that is taken along
// x alone or y alone is exact; so, between axis-aligned segments, rectangles
// and points, only one from corner to corner is rounded at all. Where rounding must
// not decide, use SegmentDistAtLeast.
//
// The bound is, in units of 2^-53, the sum of the errors of a difference of
// products (2; Jeannerod, Louvet & Muller 2013), of a sum of squares (2, halved by
// the root), of the root (1) and of a division (1), with room to spare.
const RelativeError = 0x1p-50

// Dist is the distance between p and q.
func Dist(p, q Point) float64 { return hypot(p.X-q.X, p.Y-q.Y) }

// hypot is not math.Hypot because that gives different bits on different
// processors. Coordinates stay far from the range where squares overflow.
func hypot(x, y float64) float64 {
	switch {
	case x == 0:
		return math.Abs(y)
	case y == 0:
		return math.Abs(x)
	}
	return math.Sqrt(float64(x*x) + float64(y*y))
}

// diffOfProducts is a*b - c*d with a relative error of at most 2^-52 (Kahan's
// algorithm; Jeannerod, Louvet & Muller, Math. Comp. 82, 2013).
func diffOfProducts(a, b, c, d float64) float64 {
	w := float64(c * d)
	e := math.FMA(-c, d, w)
	return math.FMA(a, b, -w) + e
}

// SegmentDist is the distance from p to the closed segment ab, and the point of ab
// that is nearest to p. a may equal b. The nearest point is exact where it is an
// end or ab is axis-aligned, else rounded to float64.
func SegmentDist(p, a, b Point) (float64, Point) {
	if a.X == b.X || a.Y == b.Y {
		n := Point{
			clamp(p.X, min(a.X, b.X), max(a.X, b.X)),
			clamp(p.Y, min(a.Y, b.Y), max(a.Y, b.Y)),
		}
		return Dist(p, n), n
	}
	// The signs of fromA and fromB are exact, each measured from its own end.
	dx, dy := b.X-a.X, b.Y-a.Y
	wx, wy := p.X-a.X, p.Y-a.Y
	fromA := diffOfProducts(wx, dx, -wy, dy)
	if fromA <= 0 {
		return Dist(p, a), a
	}
	fromB := diffOfProducts(b.X-p.X, dx, p.Y-b.Y, dy)
	if fromB <= 0 {
		return Dist(p, b), b
	}
	length2 := float64(dx*dx) + float64(dy*dy)
	var n Point
	if fromA <= fromB {
		t := fromA / length2
		n = Point{a.X + float64(t*dx), a.Y + float64(t*dy)}
	} else {
		t := fromB / length2
		n = Point{b.X - float64(t*dx), b.Y - float64(t*dy)}
	}
	return math.Abs(diffOfProducts(dx, wy, dy, wx)) / math.Sqrt(length2), n
}

// SegmentSegmentDist is the distance between the closed segments ab and cd, with
// a nearest point on each. It is exactly 0 when they share a point, and never 0
// otherwise. Of several nearest pairs the first in the order a, b, c, d of the
// end concerned is given.
func SegmentSegmentDist(a, b, c, d Point) (dist float64, onAB, onCD Point) {
	if SegmentsTouch(a, b, c, d) {
		p := touchPoint(a, b, c, d)
		return 0, p, p
	}
	dist = math.Inf(1)
	for _, end := range [2]Point{a, b} {
		if v, n := SegmentDist(end, c, d); v < dist {
			dist, onAB, onCD = v, end, n
		}
	}
	for _, end := range [2]Point{c, d} {
		if v, n := SegmentDist(end, a, b); v < dist {
			dist, onAB, onCD = v, n, end
		}
	}
	return dist, onAB, onCD
}

// touchPoint is a common point of two segments that touch: an end when an end
// lies on the other, else the crossing, rounded.
func touchPoint(a, b, c, d Point) Point {
	switch {
	case OnSegment(a, c, d):
		return a
	case OnSegment(b, c, d):
		return b
	case OnSegment(c, a, b):
		return c
	case OnSegment(d, a, b):
		return d
	}
	t := crossingParam(a, b, c, d)
	p := Point{a.X + float64(t*(b.X-a.X)), a.Y + float64(t*(b.Y-a.Y))}
	// Keep what is known exactly, and stay within both segments' bounds.
	r := BoundsOf(a, b).Intersect(BoundsOf(c, d))
	return r.Nearest(p)
}

// crossingParam is where the line cd cuts ab, as a share of the way from a to b.
// The lines must not be parallel; where rounding of fractional coordinates makes
// them seem so, the answer is 0.
func crossingParam(a, b, c, d Point) float64 {
	ex, ey := d.X-c.X, d.Y-c.Y
	num := diffOfProducts(c.X-a.X, ey, c.Y-a.Y, ex)
	den := diffOfProducts(b.X-a.X, ey, b.Y-a.Y, ex)
	if den == 0 {
		return 0
	}
	return clamp(num/den, 0, 1)
}

// RectTouchesSegment says, exactly, whether the closed rectangle r and the closed
// segment ab share a point (separating axes: x, y and the segment's normal).
func RectTouchesSegment(r Rect, a, b Point) bool {
	if !r.Intersects(BoundsOf(a, b)) {
		return false
	}
	if a == b {
		return true
	}
	lo, hi := 1, -1
	for _, c := range r.Corners() {
		s := Orient(a, b, c)
		lo, hi = min(lo, s), max(hi, s)
	}
	return lo <= 0 && hi >= 0
}

// RectSegmentDist is the distance between the closed rectangle r and the closed
// segment ab: exactly 0 when they share a point, never 0 otherwise, +Inf when r
// is empty.
func RectSegmentDist(r Rect, a, b Point) float64 {
	switch {
	case r.IsEmpty():
		return math.Inf(1)
	case RectTouchesSegment(r, a, b):
		return 0
	}
	dist := min(r.Dist(a), r.Dist(b))
	for _, c := range r.Corners() {
		v, _ := SegmentDist(c, a, b)
		dist = min(dist, v)
	}
	return dist
}
