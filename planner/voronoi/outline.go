package voronoi

import (
	"cmp"
	"math/bits"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// featureSites are the elements of a solid's or closed zone's outline, from the
// floor's corner. Sides that go on from one another, or lie on one another where a polyline
// turns back, are one side; a corner within a side is none.
func (f *frame) featureSites(ft *floor.Feature) []site {
	grow, from := ft.Shape.Grow, ofFeature
	switch {
	case ft.Kind == floor.Solid:
	case ft.Kind == floor.ClosedZone && f.need.Zones:
		grow, from = grow-float64(f.need.MarginUm), ofZone
	default:
		return nil
	}
	local := func(p geom.Point) vec { return vec{p.X - f.o.X, p.Y - f.o.Y} }
	var out []site
	add := func(s site) {
		s.from, s.name = from, ft.Name
		out = append(out, s)
	}
	var o outline
	if ft.Shape.Kind != floor.Polygon {
		chain := ft.Shape.Chains[0]
		for i, p := range chain {
			if i > 0 {
				o.add(local(chain[i-1]), local(p))
				o.add(local(p), local(chain[i-1]))
			}
		}
		o.unite()
		for _, p := range chain {
			if q := local(p); !o.within[q] {
				add(cornerSite(q, grow))
				o.within[q] = true
			}
		}
	} else {
		for k, ring := range ft.Shape.Chains {
			// Solid on the left of every side: outer rings counter-clockwise, holes clockwise.
			flip := (geom.Ring(ring).SignedArea() < 0) == (k == 0)
			n := len(ring)
			for i, p := range ring {
				q, before := ring[(i+1)%n], ring[(i+n-1)%n]
				if flip {
					o.add(local(q), local(p))
				} else {
					o.add(local(p), local(q))
				}
				if turn := geom.Orient(before, p, q); turn > 0 != flip && turn != 0 {
					add(cornerSite(local(p), grow))
				}
			}
		}
		o.unite()
	}
	for _, s := range o.sides {
		add(sideSite(s.a, s.b, grow))
	}
	return out
}

// outline unites the straight sides of one feature that lie on one line. Coordinates are
// whole micrometres and below 2^40 from the floor's corner, so that lines are told apart exactly.
type outline struct {
	sides  []side
	within map[vec]bool // ends of sides that lie within another one
}

type side struct {
	a, b vec
	// The line: its direction in lowest terms and its cross product with a place on it, in
	// 128 bits.
	dx, dy int64
	hi, lo uint64
}

func (o *outline) add(a, b vec) {
	if a == b {
		return
	}
	dx, dy := int64(b.x-a.x), int64(b.y-a.y)
	n := gcd(max(dx, -dx), max(dy, -dy))
	s := side{a: a, b: b, dx: dx / n, dy: dy / n}
	s.hi, s.lo = cross128(s.dx, s.dy, int64(a.x), int64(a.y))
	o.sides = append(o.sides, s)
}

// unite joins sides on one line, in one direction, that touch or overlap. Time is
// O(n log n).
func (o *outline) unite() {
	o.within = map[vec]bool{}
	slices.SortFunc(o.sides, func(p, q side) int {
		return cmp.Or(cmp.Compare(p.dx, q.dx), cmp.Compare(p.dy, q.dy), cmp.Compare(p.hi, q.hi), cmp.Compare(p.lo, q.lo),
			cmp.Compare(p.start(), q.start()), cmp.Compare(p.end(), q.end()))
	})
	var out []side
	var ends []vec // of the sides that make up the last one
	settle := func() {
		for _, e := range ends {
			if l := out[len(out)-1]; e != l.a && e != l.b {
				o.within[e] = true
			}
		}
		ends = ends[:0]
	}
	for _, s := range o.sides {
		n := len(out) - 1
		if n >= 0 && out[n].sameLine(&s) && s.start() <= out[n].end() {
			if s.end() > out[n].end() {
				out[n].b = s.b
			}
		} else {
			settle()
			out = append(out, s)
		}
		ends = append(ends, s.a, s.b)
	}
	settle()
	o.sides = out
}

func (s *side) sameLine(o *side) bool {
	return s.dx == o.dx && s.dy == o.dy && s.hi == o.hi && s.lo == o.lo
}

// along is where a place is on the side's line, rising from a to b.
func (s *side) along(p vec) float64 {
	switch {
	case s.dx > 0:
		return p.x
	case s.dx < 0:
		return -p.x
	case s.dy > 0:
		return p.y
	}
	return -p.y
}

func (s *side) start() float64 { return s.along(s.a) }
func (s *side) end() float64   { return s.along(s.b) }

func gcd(a, b int64) int64 {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

// cross128 is dx·y - dy·x in two's complement of 128 bits.
func cross128(dx, dy, x, y int64) (hi, lo uint64) {
	h0, l0 := product(dx, y)
	h1, l1 := product(dy, x)
	lo, borrow := bits.Sub64(l0, l1, 0)
	hi, _ = bits.Sub64(h0, h1, borrow)
	return hi, lo
}

func product(a, b int64) (hi, lo uint64) {
	hi, lo = bits.Mul64(uint64(a), uint64(b))
	if a < 0 {
		hi -= uint64(b)
	}
	if b < 0 {
		hi -= uint64(a)
	}
	return hi, lo
}
