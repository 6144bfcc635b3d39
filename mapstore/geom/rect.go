package geom

import "math"

// EmptyRect holds nothing; adding a point to it gives that point's rectangle.
func EmptyRect() Rect {
	inf := math.Inf(1)
	return Rect{Min: Point{inf, inf}, Max: Point{-inf, -inf}}
}

// BoundsOf is the smallest rectangle that holds all points, empty when there are none.
func BoundsOf(points ...Point) Rect {
	r := EmptyRect()
	for _, p := range points {
		r = r.Add(p)
	}
	return r
}

// IsEmpty says whether r holds no point. A rectangle of zero width or height
// holds points and is not empty.
func (r Rect) IsEmpty() bool { return !(r.Min.X <= r.Max.X && r.Min.Y <= r.Max.Y) }

// Add is the smallest rectangle that holds r and p.
func (r Rect) Add(p Point) Rect { return r.Union(Rect{p, p}) }

// Union is the smallest rectangle that holds r and o.
func (r Rect) Union(o Rect) Rect {
	switch {
	case r.IsEmpty():
		return o
	case o.IsEmpty():
		return r
	}
	return Rect{
		Min: Point{min(r.Min.X, o.Min.X), min(r.Min.Y, o.Min.Y)},
		Max: Point{max(r.Max.X, o.Max.X), max(r.Max.Y, o.Max.Y)},
	}
}

// Intersect is what r and o have in common, empty when they are apart.
func (r Rect) Intersect(o Rect) Rect {
	c := Rect{
		Min: Point{max(r.Min.X, o.Min.X), max(r.Min.Y, o.Min.Y)},
		Max: Point{min(r.Max.X, o.Max.X), min(r.Max.Y, o.Max.Y)},
	}
	if c.IsEmpty() {
		return EmptyRect()
	}
	return c
}

// Intersects says whether r and o share a point; a common border is enough.
func (r Rect) Intersects(o Rect) bool {
	return !r.IsEmpty() && !o.IsEmpty() &&
		r.Min.X <= o.Max.X && o.Min.X <= r.Max.X && r.Min.Y <= o.Max.Y && o.Min.Y <= r.Max.Y
}

// Contains says whether p lies in r, its border included.
func (r Rect) Contains(p Point) bool {
	return r.Min.X <= p.X && p.X <= r.Max.X && r.Min.Y <= p.Y && p.Y <= r.Max.Y
}

// Grow moves each side outward by d, inward when d is negative. An empty
// rectangle stays empty; one that shrinks to less than nothing becomes empty.
func (r Rect) Grow(d float64) Rect {
	if r.IsEmpty() {
		return EmptyRect()
	}
	g := Rect{Point{r.Min.X - d, r.Min.Y - d}, Point{r.Max.X + d, r.Max.Y + d}}
	if g.IsEmpty() {
		return EmptyRect()
	}
	return g
}

// Width is the extent along x, 0 when r is empty.
func (r Rect) Width() float64 { return max(0, r.Max.X-r.Min.X) }

// Height is the extent along y, 0 when r is empty.
func (r Rect) Height() float64 { return max(0, r.Max.Y-r.Min.Y) }

// Nearest is the point of r nearest to p: p itself when r contains it. r must not
// be empty.
func (r Rect) Nearest(p Point) Point {
	return Point{clamp(p.X, r.Min.X, r.Max.X), clamp(p.Y, r.Min.Y, r.Max.Y)}
}

// Dist is the distance from p to r, 0 inside and on the border, +Inf when r is empty.
func (r Rect) Dist(p Point) float64 {
	if r.IsEmpty() {
		return math.Inf(1)
	}
	return Dist(p, r.Nearest(p))
}

// Corners are r's corners, counter-clockwise from the lower left.
func (r Rect) Corners() [4]Point {
	return [4]Point{r.Min, {r.Max.X, r.Min.Y}, r.Max, {r.Min.X, r.Max.Y}}
}

func clamp(v, lo, hi float64) float64 { return max(lo, min(v, hi)) }
