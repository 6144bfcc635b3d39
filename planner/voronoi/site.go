package voronoi

import (
	"cmp"
	"math"
	"slices"
)

// vec is a place or a direction, in micrometres from a block's lower left corner.
type vec struct{ x, y float64 }

func (a vec) add(b vec) vec              { return vec{a.x + b.x, a.y + b.y} }
func (a vec) sub(b vec) vec              { return vec{a.x - b.x, a.y - b.y} }
func (a vec) dot(b vec) float64          { return float64(a.x*b.x) + float64(a.y*b.y) }
func (a vec) cross(b vec) float64        { return float64(a.x*b.y) - float64(a.y*b.x) }
func (a vec) along(d vec, t float64) vec { return vec{a.x + float64(t*d.x), a.y + float64(t*d.y)} }
func (a vec) times(t float64) vec        { return vec{a.x * t, a.y * t} }
func (a vec) left() vec                  { return vec{-a.y, a.x} }
func (a vec) length() float64            { return math.Sqrt(a.dot(a)) }

// source is what kind of solid a site belongs to, in the order that ties are broken in.
type source uint8

const (
	ofFeature source = iota
	ofZone
	ofCell
	ofBorder
)

// site is an element of the solids' outlines: a convex corner (or a disc's middle, or
// a point of a polyline), or the outer side of a straight piece of outline, both
// grown by grow. The elements of a convex piece have different nearest points
// everywhere but where they meet, so their bisectors are those of the pieces.
//
// A straight site owns the strip of places whose foot on it lies between its ends.
type site struct {
	a        vec // the corner, or the start of the straight piece
	t, n     vec // straight: unit vectors along it and outward
	l        float64
	straight bool
	grow     float64 // below 0 for a closed zone, whose distance counts from outside it
	from     source
	name     string // of the feature
}

// cornerSite is a point grown.
func cornerSite(a vec, grow float64) site { return site{a: a, grow: grow} }

// sideSite is the right-hand side of the way from a to b.
func sideSite(a, b vec, grow float64) site {
	d := b.sub(a)
	var t vec
	l := d.length()
	switch {
	case d.y == 0:
		t = vec{math.Copysign(1, d.x), 0}
	case d.x == 0:
		t = vec{0, math.Copysign(1, d.y)}
	default:
		t = vec{d.x / l, d.y / l}
	}
	return site{a: a, t: t, n: vec{t.y, -t.x}, l: l, straight: true, grow: grow}
}

// moved is s seen from o.
func (s site) moved(o vec) site {
	s.a = s.a.sub(o)
	return s
}

// end is the far end of a straight site, rounded.
func (s *site) end() vec { return s.a.along(s.t, s.l) }

// dist is the distance from p to the site as if a straight one had no ends, on its
// outer side; negative within the growth.
func (s *site) dist(p vec) float64 {
	d := p.sub(s.a)
	if s.straight {
		return d.dot(s.n) - s.grow
	}
	return d.length() - s.grow
}

// away is the unit vector in which dist grows.
func (s *site) away(p vec) vec {
	if s.straight {
		return s.n
	}
	d := p.sub(s.a)
	if l := d.length(); l > 0 {
		return vec{d.x / l, d.y / l}
	}
	return vec{1, 0}
}

// owns says whether p lies in the strip of a straight site, give or take tol.
func (s *site) owns(p vec, tol float64) bool {
	if !s.straight {
		return true
	}
	f := p.sub(s.a).dot(s.t)
	return f >= -tol && f <= s.l+tol
}

// closed is the distance from p to the site with its ends, seen from either side,
// the direction away from it, and the distance from the core.
func (s *site) closed(p vec) (dist float64, away vec, core float64) {
	d := p.sub(s.a)
	if s.straight {
		f := d.dot(s.t)
		switch {
		case f < 0:
		case f > s.l:
			d = p.sub(s.end())
		default:
			h := d.dot(s.n)
			if h < 0 {
				return -h - s.grow, s.n.times(-1), -h
			}
			return h - s.grow, s.n, h
		}
	}
	core = d.length()
	if core == 0 {
		return -s.grow, vec{1, 0}, 0
	}
	return core - s.grow, vec{d.x / core, d.y / core}, core
}

// foot is the place of the grown outline next to p, which the site owns.
func (s *site) foot(p vec) vec { return p.along(s.away(p), -s.dist(p)) }

// compare puts sites into one order for all blocks: by place, then features by name,
// closed zones, cells and the border. Of sites with the same nearest place the first
// counts.
func (s *site) compare(o *site) int {
	return cmp.Or(cmp.Compare(s.a.x, o.a.x), cmp.Compare(s.a.y, o.a.y),
		cmp.Compare(s.grow, o.grow), cmp.Compare(s.l, o.l),
		cmp.Compare(s.t.x, o.t.x), cmp.Compare(s.t.y, o.t.y),
		cmp.Compare(s.from, o.from), cmp.Compare(s.name, o.name))
}

func sortSites(v []site) []site {
	slices.SortFunc(v, func(a, b site) int { return a.compare(&b) })
	return slices.CompactFunc(v, func(a, b site) bool {
		// What differs in name alone has the same outline: the first speaks for it.
		return a.a == b.a && a.grow == b.grow && a.l == b.l && a.t == b.t && a.straight == b.straight
	})
}
