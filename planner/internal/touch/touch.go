// Package touch decides where a point body may go, one that needs no clearance: it may
// touch solids, slide along them and turn at their corners, but neither enter one
// nor pass between two that touch. This is the limit of ever smaller discs.
//
// About every place the solids that touch it take up closed sectors of directions;
// what they leave are its free sectors. A way may come to a place and leave it within
// the closure of one free sector. A place with none cannot be stood on, and one with two
// or more is a pinch. Solids have an inside everywhere: no walls without width.
//
// Answers are exact for cells and polygons. At round outlines, touching is told apart
// from passing by to within RoundSlackUm.
package touch

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// RoundSlackUm is how near, in micrometres, a round outline counts as touched.
const RoundSlackUm = 1e-3

// Solids are the solids near what is asked about.
type Solids struct {
	Bounds geom.Rect      // of the floor
	Shut   bool           // the border is solid
	Cells  []geom.Rect    // solid cells, or boxes of such
	Shapes []*floor.Shape // polygons, discs, thick polylines

	contacts []contact
}

// side of a segment: +1 left, -1 right.
type contact struct {
	side   int
	lo, hi float64 // along the segment's longer axis
	slack  float64
}

// Stands says whether a point body may be at p, and whether p is a pinch.
func (s *Solids) Stands(p geom.Point) (ok, pinch bool) {
	if !s.Bounds.Contains(p) {
		return false, false
	}
	a, full := s.sectors(p)
	if full {
		return false, false
	}
	n := a.free()
	return n > 0, n > 1
}

// Clear says whether a point body may go straight from a to b. Whether it may go on from
// there is another matter when an end is a pinch.
func (s *Solids) Clear(a, b geom.Point) bool {
	if !s.Bounds.Contains(a) || !s.Bounds.Contains(b) {
		return false
	}
	if a == b {
		ok, _ := s.Stands(a)
		return ok
	}
	for _, end := range [2][2]geom.Point{{a, b}, {b, a}} {
		sec, full := s.sectors(end[0])
		if full || sec.holds(minus(end[1], end[0])) {
			return false
		}
	}
	w := walk{a: a, b: b, contacts: s.contacts[:0]}
	defer func() { s.contacts = w.contacts }()
	for _, c := range s.Cells {
		if !w.cell(c) {
			return false
		}
	}
	for _, f := range s.Shapes {
		if !w.shape(f) {
			return false
		}
	}
	if s.Shut {
		w.border(s.Bounds)
	}
	return !w.squeezed()
}

func minus(p, q geom.Point) geom.Point { return geom.Point{X: p.X - q.X, Y: p.Y - q.Y} }

// EntersRect says, exactly, whether the closed segment ab comes into the open rectangle.
func EntersRect(r geom.Rect, a, b geom.Point) bool {
	if min(a.X, b.X) >= r.Max.X || max(a.X, b.X) <= r.Min.X || min(a.Y, b.Y) >= r.Max.Y || max(a.Y, b.Y) <= r.Min.Y {
		return false
	}
	if a == b {
		return true
	}
	lo, hi := 1, -1
	for _, c := range r.Corners() {
		o := geom.Orient(a, b, c)
		lo, hi = min(lo, o), max(hi, o)
	}
	return lo < 0 && hi > 0
}

// walk goes over the solids along the segment ab and collects what it touches between
// its ends.
type walk struct {
	a, b     geom.Point
	contacts []contact
}

// along is p's coordinate along the segment's longer axis.
func (w *walk) along(p geom.Point) float64 {
	if math.Abs(w.b.X-w.a.X) >= math.Abs(w.b.Y-w.a.Y) {
		return p.X
	}
	return p.Y
}

func (w *walk) add(side int, p, q geom.Point, slack float64) {
	u, v := w.along(p), w.along(q)
	w.contacts = append(w.contacts, contact{side, min(u, v), max(u, v), slack})
}

// squeezed says whether something is touched on either side of one place between the ends.
func (w *walk) squeezed() bool {
	from, to := w.along(w.a), w.along(w.b)
	from, to = min(from, to), max(from, to)
	for i, l := range w.contacts {
		for _, r := range w.contacts[:i] {
			slack := max(l.slack, r.slack)
			lo, hi := max(l.lo, r.lo), min(l.hi, r.hi)
			if l.side != r.side && lo <= hi+slack && hi > from+slack && lo < to-slack {
				return true
			}
		}
	}
	return false
}

// cell is false when the segment enters the cell.
func (w *walk) cell(c geom.Rect) bool {
	if EntersRect(c, w.a, w.b) {
		return false
	}
	if !c.Intersects(geom.BoundsOf(w.a, w.b)) {
		return true
	}
	side := 0
	var room [4]geom.Point
	on := room[:0]
	for _, p := range c.Corners() {
		switch o := geom.Orient(w.a, w.b, p); {
		case o == 0:
			if geom.OnSegment(p, w.a, w.b) {
				on = append(on, p)
			} else {
				// The line goes on past the end along a side of the cell.
				on = append(on, nearer(p, w.a, w.b))
			}
		case side == 0:
			side = o
		case side != o:
			return true // only ahead of an end
		}
	}
	if len(on) > 0 {
		w.add(side, on[0], on[len(on)-1], 0)
	}
	return true
}

func nearer(p, a, b geom.Point) geom.Point {
	if geom.Dist(p, a) < geom.Dist(p, b) {
		return a
	}
	return b
}

// border notes a slide along the floor's border.
func (w *walk) border(r geom.Rect) {
	c := r.Corners()
	for i, p := range c {
		q, inside := c[(i+1)%4], c[(i+2)%4]
		if geom.Orient(p, q, w.a) == 0 && geom.Orient(p, q, w.b) == 0 {
			w.add(-geom.Orient(w.a, w.b, inside), w.a, w.b, 0)
		}
	}
}

// shape is false when the segment enters the shape, but for entering at an end.
func (w *walk) shape(s *floor.Shape) bool {
	box := geom.BoundsOf(w.a, w.b)
	if s.Grow > 0 {
		for c, d := range s.Edges {
			if !box.Intersects(geom.BoundsOf(c, d).Grow(s.Grow + RoundSlackUm)) {
				continue
			}
			if !geom.SegmentSegmentDistAtLeast(w.a, w.b, c, d, s.Grow) {
				return false
			}
			w.round(c, d, s.Grow)
		}
		return true
	}
	for ring, chain := range s.Chains {
		left := (geom.Ring(chain).SignedArea() > 0) == (ring == 0) // the inside is
		for i := range chain {
			c, d := geom.Ring(chain).Edge(i)
			if !box.Intersects(geom.BoundsOf(c, d)) {
				continue
			}
			if geom.SegmentsCross(w.a, w.b, c, d) {
				return false
			}
			oc, od := geom.Orient(w.a, w.b, c), geom.Orient(w.a, w.b, d)
			if oc == 0 && od == 0 {
				w.slide(c, d, left)
				continue
			}
			if oc == 0 && geom.OnSegment(c, w.a, w.b) {
				w.add(od, c, c, 0)
			}
			if od == 0 && geom.OnSegment(d, w.a, w.b) {
				w.add(oc, d, d, 0)
			}
		}
	}
	return true
}

// slide notes an edge on the segment's line. left says that the inside is to the left of it.
func (w *walk) slide(c, d geom.Point, left bool) {
	side := 1
	if !left {
		side = -1
	}
	a, b := w.along(w.a), w.along(w.b)
	u, v := w.along(c), w.along(d)
	if (a < b) != (u < v) {
		side = -side
	}
	lo, hi := max(min(a, b), min(u, v)), min(max(a, b), max(u, v))
	if lo < hi {
		w.contacts = append(w.contacts, contact{side, lo, hi, 0})
	}
}

// round notes where the segment touches the outline of cd grown.
func (w *walk) round(c, d geom.Point, grow float64) {
	dist, on, at := geom.SegmentSegmentDist(w.a, w.b, c, d)
	if dist > grow+RoundSlackUm {
		return
	}
	side := geom.Orient(w.a, w.b, at)
	if side == 0 {
		return // straight ahead of an end
	}
	// Distance to a convex core is a convex function along the segment.
	reach := func(end geom.Point) geom.Point {
		lo, hi := 0.0, 1.0
		place := func(t float64) geom.Point {
			return geom.Point{X: on.X + float64(t*(end.X-on.X)), Y: on.Y + float64(t*(end.Y-on.Y))}
		}
		near := func(t float64) bool {
			v, _ := geom.SegmentDist(place(t), c, d)
			return v <= grow+RoundSlackUm
		}
		if near(1) {
			return end
		}
		for range 50 {
			if mid := (lo + hi) / 2; near(mid) {
				lo = mid
			} else {
				hi = mid
			}
		}
		return place(lo)
	}
	w.add(side, reach(w.a), reach(w.b), RoundSlackUm)
}
