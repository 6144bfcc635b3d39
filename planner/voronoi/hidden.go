package voronoi

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// worthHiding says whether hidden sites are to be looked for among n, by pairs: in every box that
// is traced, in those that cutting has not helped, and in small ones; where there are many sites,
// after every fourth cut.
func worthHiding(n, depth, stuck int) bool {
	switch {
	case n < 3:
		return false
	case n <= leafSites:
		return true
	case n <= 64:
		return stuck > 0 || depth >= 6
	}
	return n <= 256 && depth >= 6 && depth%4 == 0
}

// unhidden leaves out of sites, in place, those that another one hides throughout the
// box of radius rad about mid. No edge is lost: a hidden site is nearest only where what
// hides it is as near, with the same nearest place.
//
// What is left cannot tie for long in numbers. Sites that are equally far all along a
// stretch of an edge have one of two feet there. Of those with one foot, sides are on one
// line, and of them two come past the box on one end at most; of circles that touch in it, each but
// the largest is within another.
func (t *tracer) unhidden(ids []int32, mid vec, rad float64) []int32 {
	out := ids[:0]
next:
	for n, i := range ids {
		s := &t.near[i]
		for _, k := range out {
			if t.near[k].hides(s, mid, rad) {
				continue next
			}
		}
		for _, k := range ids[n+1:] {
			if o := &t.near[k]; o.hides(s, mid, rad) && !s.hides(o, mid, rad) {
				continue next
			}
		}
		out = append(out, i)
	}
	return out
}

// hides says whether s hides o, to the last tie.
func (s *site) hides(o *site, mid vec, rad float64) bool {
	switch {
	case s.straight && o.straight:
		return s.spans(o, mid, rad)
	case s.straight:
		return s.passes(o)
	}
	return !o.straight && s.holds(o)
}

// spans says whether side s is at least all of side o in the box of radius rad about mid.
func (s *site) spans(o *site, mid vec, rad float64) bool {
	if s.n.dot(o.n) < 0.5 {
		return false // the common case
	}
	p, q := mid.sub(s.a), mid.sub(o.a)
	if math.Abs(p.dot(s.n)-s.grow-q.dot(o.n)+o.grow) > tieUm/2 || rad*s.n.sub(o.n).length() > tieUm/4 {
		return false
	}
	from, to := -p.dot(s.t), s.l-p.dot(s.t) // of s along its line, from the middle
	return from <= max(-q.dot(o.t), -rad)+tieUm && to >= min(o.l-q.dot(o.t), rad)-tieUm
}

// passes says whether corner o is a place within side s, grown no more. Different places on
// a line are a micrometre apart.
func (s *site) passes(o *site) bool {
	d := o.a.sub(s.a)
	if math.Abs(d.dot(s.n)) > tieUm || o.grow > s.grow {
		return false
	}
	f := d.dot(s.t)
	return f > 0.25 && f < s.l-0.25
}

// holds says whether corner s, grown, has all of o in it.
func (s *site) holds(o *site) bool {
	most := s.grow - o.grow + leastFocusUm
	return o.grow <= s.grow && math.Abs(o.a.x-s.a.x) <= most && o.a.sub(s.a).length() <= most
}

// depth is how far p is within a shape at least; below 0 where it may be outside.
func depth(s *floor.Shape, p geom.Point) float64 {
	d := math.Inf(1)
	if s.Kind != floor.Polygon {
		d = geom.Dist(p, s.Chains[0][0])
	}
	for a, b := range s.Edges {
		v, _ := geom.SegmentDist(p, a, b)
		d = min(d, v)
	}
	switch {
	case s.Kind != floor.Polygon:
		return s.Grow - d
	case geom.InPolygon(s.Chains, p):
		return d
	}
	return -d
}
