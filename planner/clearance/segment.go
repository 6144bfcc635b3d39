package clearance

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// Segment is the smallest distance from any point of the closed segment ab to a
// solid, exact but for geom.RelativeError, at most the cap, and where on the segment
// it is reached. Ties as in At.
func (f *Field) Segment(a, b geom.Point) Nearest {
	return f.SegmentBetween(a, b, f.At(a), f.At(b))
}

// SegmentBetween is Segment when At of a and of b is known.
func (f *Field) SegmentBetween(a, b geom.Point, na, nb Nearest) Nearest {
	n := na
	if nb.Um < n.Um {
		n = nb
	}
	// The border's distance is concave inside the floor: least at an end.
	if n.Um == 0 || a == b {
		return n
	}
	var buf [16]stretch
	need := n.Um
	doubtful, _ := f.doubtful(a, b, &need, false, buf[:0])
	if len(doubtful) > 0 && need < n.Um-f.h/2 {
		doubtful, _ = f.doubtful(a, b, &need, false, buf[:0])
	}
	f.pieces(a, b, doubtful, need, func(s *solid, p *piece) bool {
		d, on, q := geom.SegmentSegmentDist(a, b, p.a, p.b)
		if d -= s.grow; d < n.Um {
			n = nearFeature(s, max(0, d), on, q)
		}
		return n.Um > 0
	})
	for _, s := range doubtful {
		if n.Um > 0 {
			f.cellsNear(a, b, along(a, b, s.from), along(a, b, s.to), need, &n)
		}
	}
	return n
}

// SegmentClear says, exactly but for geom.RelativeError, whether every point of the closed
// segment ab has at least um micrometres of clearance; touching is clear. At um =
// 0 it says whether the segment touches no solid. For um above the cap the answer
// is no.
func (f *Field) SegmentClear(a, b geom.Point, um int64) bool {
	if !finite(a) || !finite(b) || um > f.cap {
		return false
	}
	if !f.open && !(f.borderClear(a, um) && f.borderClear(b, um)) {
		return false
	}
	need := float64(max(um, 1))
	var buf [16]stretch
	doubtful, ok := f.doubtful(a, b, &need, true, buf[:0])
	if !ok {
		return um <= 0 && f.Segment(a, b).Um > 0
	}
	if len(doubtful) == 0 {
		return true
	}
	for _, p := range [2]geom.Point{a, b} {
		if f.insideArea(p) {
			return false
		}
	}
	blocks := func(d float64) bool { return d < float64(um) || d <= 0 }
	ok = true
	f.pieces(a, b, doubtful, need, func(s *solid, p *piece) bool {
		// As geom.SegmentSegmentDist, without the places.
		d, _, _ := geom.SegmentSegmentDist(a, b, p.a, p.b)
		ok = !blocks(d - s.grow)
		return ok
	})
	for i := 0; ok && i < len(doubtful); i++ {
		n := Nearest{Um: need}
		f.cellsNear(a, b, along(a, b, doubtful[i].from), along(a, b, doubtful[i].to), need, &n)
		ok = !n.Cell || !blocks(n.Um)
	}
	return ok
}

// borderClear says whether p is um or more inside the floor.
func (f *Field) borderClear(p geom.Point, um int64) bool {
	d := min(p.X-f.bounds.Min.X, f.bounds.Max.X-p.X, p.Y-f.bounds.Min.Y, f.bounds.Max.Y-p.Y)
	return d >= float64(um) && d >= 0 && (um > 0 || d > 0)
}

// insideArea says whether a polygon holds p.
func (f *Field) insideArea(p geom.Point) bool {
	x, y, _, _ := f.bucketRange(geom.Rect{Min: p, Max: p})
	for _, e := range f.buckets.at(x, y) {
		if e.area && e.s.holds(p) {
			return true
		}
	}
	return false
}

// along is the point at share t of the way from a to b.
func along(a, b geom.Point, t float64) geom.Point {
	return geom.Point{X: a.X + float64(t*(b.X-a.X)), Y: a.Y + float64(t*(b.Y-a.Y))}
}

// pieces calls do with the pieces of vector solids that may be nearer than need to the
// stretches of ab, some more than once, until do says no.
func (f *Field) pieces(a, b geom.Point, ss []stretch, need float64, do func(*solid, *piece) bool) {
	length := geom.Dist(a, b)
	side := blockSize * f.h
	for _, st := range ss {
		parts := 1
		if a.X != b.X && a.Y != b.Y {
			// Cut oblique stretches, whose bounds would hold much else.
			parts = int(min(math.Ceil((st.to-st.from)*length/side), float64(f.buckets.nx+f.buckets.ny))) + 1
		}
		for k := range parts {
			share := (st.to - st.from) / float64(parts)
			box := geom.BoundsOf(along(a, b, st.from+float64(k)*share), along(a, b, st.from+float64(k+1)*share)).Grow(need + roundSlack)
			x0, y0, x1, y1 := f.bucketRange(box)
			for y := y0; y <= y1; y++ {
				for x := x0; x <= x1; x++ {
					for _, e := range f.buckets.at(x, y) {
						if !box.Intersects(e.s.bounds) {
							continue
						}
						for _, i := range e.pieces {
							p := &e.s.pieces[i]
							if box.Intersects(geom.BoundsOf(p.a, p.b).Grow(e.s.grow)) && !do(e.s, p) {
								return
							}
						}
					}
				}
			}
		}
	}
}
