package voronoi

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// entry is how an end of a route gets to the edges or into Open: straight away from the
// nearest solid, so that clearance rises all the way.
type entry struct {
	from, to geom.Point
	um       float64 // clearance at from
	foot     geom.Point
	name     string // of the nearest feature
	length   float64
	toUm     float64 // clearance at to
	road     int32   // to lies on this road, -1: to is in Open
	s        float64 // and there
	part     int32   // of Open; -1: of one without portals
}

// enterUm is how far from an edge the place may be computed at which a way straight
// away from a solid meets it, where that way and the edge run nearly alike.
const enterUm = 10.0

// enter finds the way in from p. ok is false when p is off the floor, touches a solid, or
// lies in one, and where the way ends on an edge of less than anyangle.DeltaUm above the
// preferred clearance that Open misses: one place in ten thousand, on random floors.
func (w *Roads) enter(p geom.Point) (entry, bool) {
	g := w.g
	e := entry{from: p, to: p, road: -1, part: -1}
	if !g.f.Bounds().Contains(p) {
		return e, false
	}
	n := g.f.At(p)
	e.um, e.foot = n.Um, n.At
	if n.Feature != nil {
		e.name = n.Feature.Name
	}
	if n.Um <= 0 {
		return e, false
	}
	if w.open.Contains(p) {
		e.toUm, e.part = max(e.um, w.p), w.partOf(p)
		if g.need.Zones {
			w.closest(&e)
		}
		return e, true
	}
	if !w.closest(&e) {
		return e, false
	}
	q := vec{p.X - g.o.X, p.Y - g.o.Y}
	gone := 0.0
	for range 4 * (g.nx + g.ny) {
		i := g.blockAt(q)
		if done, ok := w.cross(&e, i, &q, &gone); done {
			return e, ok
		}
	}
	return e, false
}

// blockAt is the block whose box holds p, which is seen from the floor's corner.
func (g *Graph) blockAt(p vec) int {
	at := func(v float64, n int) int { return int(max(0, min(math.Floor((v-shiftUm)/g.side), float64(n-1)))) }
	return at(p.y, g.ny)*g.nx + at(p.x, g.nx)
}

// closest puts in what is nearest to an entry's place as the graph's sites have it, closed
// zones among them. It says whether there is anything, and the place not inside it.
func (w *Roads) closest(e *entry) bool {
	g := w.g
	q := vec{e.from.X - g.o.X, e.from.Y - g.o.Y}
	i := g.blockAt(q)
	l := q.sub(g.corner(i))
	near := g.blocks[i].near
	k := nearestSite(near, l)
	if k < 0 {
		return false
	}
	d, away, _ := near[k].closed(l)
	if d >= e.um && e.um >= g.most-1 {
		return true // beyond what the graph's sites tell
	}
	e.um = d
	e.foot = g.place(int32(i), l.along(away, -d))
	e.name = near[k].name
	return d > 0 && !g.inZone(e.from)
}

func (g *Graph) inZone(p geom.Point) bool {
	if g.need.Zones {
		for _, z := range g.zones {
			if z.Bounds().Contains(p) && geom.InPolygon(z.Shape.Chains, p) {
				return true
			}
		}
	}
	return false
}

func nearestSite(near []site, p vec) int {
	best, at := inf, -1
	for k := range near {
		if d, _, _ := near[k].closed(p); d < best {
			best, at = d, k
		}
	}
	return at
}

// cross follows the way straight away from the nearest site through block i, from q
// on. done says that it came to an edge or into Open (ok), or nowhere.
func (w *Roads) cross(e *entry, i int, q *vec, gone *float64) (done, ok bool) {
	g := w.g
	o := g.corner(i)
	near := g.blocks[i].near
	p := q.sub(o)
	k := nearestSite(near, p)
	if k < 0 {
		return true, false
	}
	um, u, _ := near[k].closed(p)
	t := meets(near, k, p, u, um)
	// Out of the block, or the floor.
	b := g.box(i)
	out := inf
	leave := func(v, d, lo, hi float64) {
		if d > 0 {
			out = min(out, (hi-v)/d)
		} else if d < 0 {
			out = min(out, (lo-v)/d)
		}
	}
	leave(p.x, u.x, b.x0, b.x1)
	leave(p.y, u.y, b.y0, b.y1)
	out = max(out, 0)
	last := min(t, out)
	// Into Open first?
	if um+last >= w.p-tieUm {
		at := func(t float64) geom.Point { return g.place(int32(i), p.along(u, t)) }
		lo := min(max(0, w.p-um), last)
		hi := min(last, lo+2*slackUm)
		if w.open.Contains(at(hi)) {
			first := lo
			if w.open.Contains(at(lo)) {
				hi = lo
			}
			for n := 0; n < 60 && hi > lo; n++ {
				m := (lo + hi) / 2
				if w.open.Contains(at(m)) {
					hi = m
				} else {
					lo = m
				}
			}
			if hi > first {
				hi = stepTo(hi, last)
			}
			e.to, e.length, e.toUm = at(hi), *gone+hi, um+hi
			e.part = w.partOf(e.to)
			return true, true
		}
	}
	if t <= out {
		e.toUm = um + t
		return true, w.touch(e, i, p.along(u, t))
	}
	if g.set.OpenBorder {
		// The floor ends here, and its border is an edge.
		end := p.along(u, out).add(o)
		if end.x <= 0 || end.y <= 0 || end.x >= g.w || end.y >= g.ht {
			e.toUm = um + out
			return true, w.touch(e, i, p.along(u, out))
		}
	}
	// A little further, so as to be in the next block.
	step := out + joinUm
	*gone += step
	*q = p.along(u, step).add(o)
	return false, false
}

// meets is how far from p along u, straight away from site k with clearance um, another
// site is as near.
func meets(near []site, k int, p, u vec, um float64) float64 {
	best := inf
	for j := range near {
		if j == k {
			continue
		}
		s := &near[j]
		var t float64
		if s.straight {
			d := s.dist(p)
			den := 1 - s.n.dot(u)
			if d < um-tieUm || den < leastTurn {
				continue
			}
			t = max(0, d-um) / den
		} else {
			v := p.sub(s.a)
			r := um + s.grow
			den := 2 * (r - v.dot(u))
			if den < leastTurn*r {
				continue
			}
			t = max(0, (v.dot(v)-float64(r*r))/den)
		}
		if t < best && s.owns(p.along(u, t), tieUm) {
			best = t
		}
	}
	return best
}

// touch puts in the edge that holds p, a place seen from block i.
func (w *Roads) touch(e *entry, i int, p vec) bool {
	g := w.g
	best := enterUm
	at := p.add(g.corner(i))
	x0, y0, x1, y1 := g.blocksNear(box{at.x, at.y, at.x, at.y}, enterUm)
	var in step
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			b := y*g.nx + x
			l := at.sub(g.corner(b))
			for k := range g.blocks[b].arcs {
				a := &g.blocks[b].arcs[k]
				s := min(max(a.param(l), min(a.s0, a.s1)), max(a.s0, a.s1))
				if d := a.at(s).sub(l).length(); d < best {
					best, in, e.s = d, step{int32(b), int32(k), false}, s
				}
			}
		}
	}
	if best == enterUm {
		return false
	}
	e.to = g.place(in.block, g.arc(in).at(e.s))
	e.length = geom.Dist(e.from, e.to)
	first, end := w.piecesOf(in.block, in.arc)
	for r := first; r < end; r++ {
		v := &w.roads[r]
		if e.s >= min(v.s0, v.s1)-joinUm && e.s <= max(v.s0, v.s1)+joinUm {
			e.s = min(max(e.s, min(v.s0, v.s1)), max(v.s0, v.s1))
			e.road = r
			return true
		}
	}
	// A part of the edge that Open holds.
	if q, ok := w.open.Nearest(e.to, 1); ok {
		e.to, e.part, e.length = q, w.partOf(q), geom.Dist(e.from, q)
		return true
	}
	return false
}
