package visibility

import (
	"cmp"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/judge"
)

// A node is an arc with the sense in which a way goes along it: 2·arc for counter-clockwise
// (the centre on the left), 2·arc + 1 for clockwise.

// link is a tangent from a node to another: where along the two it leaves and
// arrives, as angles in the way's sense.
type link struct {
	to            int32
	leave, arrive float64
	length        float64
}

// tangent is a directed common tangent of two circles, from p to q; v and w are the
// directions from the circles' centres to p and q.
type tangent struct {
	p, q, v, w geom.Point
	length     float64
}

// sense is +1 for a node whose centre is on the left, -1 on the right.
func sense(node int32) float64 { return 1 - 2*float64(node&1) }

// along is the angle from where a node's arc begins, in its sense, to direction v.
func (g *Graph) along(node int32, v geom.Point) float64 {
	a := &g.arcs[node>>1]
	if node&1 == 0 {
		return a.along(v)
	}
	return a.long - a.along(v)
}

// between is the tangent from one node to another.
func (g *Graph) between(i, j int32) (tangent, bool) {
	a, b := &g.arcs[i>>1], &g.arcs[j>>1]
	t, ok := touching(a, b, sense(i), sense(j))
	if !ok || !a.holds(t.v) || !b.holds(t.w) {
		return t, false
	}
	return t, true
}

// touching is the directed line that has a's circle on its left when s is +1, on its right
// when -1, and b's alike by z. Lines along x and y touch the circles themselves, others
// circles wider by slackUm. An end of a way is an arc of no radius.
func touching(a, b *arc, s, z float64) (tangent, bool) {
	dx, dy := b.c.X-a.c.X, b.c.Y-a.c.Y
	if off := math.Abs(z*b.radius - s*a.radius); (math.Abs(dx) == off || math.Abs(dy) == off) && (dx != 0 || dy != 0) {
		for _, n := range [4]geom.Point{{X: 0, Y: 1}, {X: 0, Y: -1}, {X: -1}, {X: 1}} {
			// n is the line's left; it runs along (n.Y, -n.X).
			length := float64(n.Y*dx) - float64(n.X*dy)
			if length >= 0 && float64(n.X*dx)+float64(n.Y*dy) == z*b.radius-s*a.radius {
				return straight(a, b, n, s, z, a.radius, b.radius, length), true
			}
		}
	}
	ra, rb := a.wide(), b.wide()
	k := z*rb - s*ra
	d2 := float64(dx*dx) + float64(dy*dy)
	l2 := d2 - k*k
	if l2 < 0 || d2 == 0 {
		return tangent{}, false
	}
	l := math.Sqrt(l2)
	// D = l·d + k·n with n to the left of d; solved for d.
	ux, uy := (float64(l*dx)+float64(k*dy))/d2, (float64(l*dy)-float64(k*dx))/d2
	return straight(a, b, geom.Point{X: -uy, Y: ux}, s, z, ra, rb, l), true
}

func straight(a, b *arc, n geom.Point, s, z, ra, rb, length float64) tangent {
	v, w := geom.Point{X: -s * n.X, Y: -s * n.Y}, geom.Point{X: -z * n.X, Y: -z * n.Y}
	return tangent{
		p: geom.Point{X: a.c.X + float64(ra*v.X), Y: a.c.Y + float64(ra*v.Y)},
		q: geom.Point{X: b.c.X + float64(rb*w.X), Y: b.c.Y + float64(rb*w.Y)},
		v: v, w: w, length: length,
	}
}

// fromEnd is the tangent from an end of the way to a node. An end nearer to the
// centre than oblique tangents go lies on the arc itself.
func (g *Graph) fromEnd(p geom.Point, node int32) (tangent, bool) {
	a, b := &arc{c: p}, &g.arcs[node>>1]
	t, ok := touching(a, b, 1, sense(node))
	if d := geom.Dist(p, b.c); !ok && d >= b.radius && d > 0 {
		w := unit(b.c, p)
		t, ok = tangent{p: p, q: p, v: w, w: w}, true
	}
	return t, ok && b.holds(t.w)
}

// toEnd is the tangent from a node to an end of the way.
func (g *Graph) toEnd(node int32, p geom.Point) (tangent, bool) {
	t, ok := g.fromEnd(p, node^1)
	return tangent{p: t.q, q: t.p, v: t.w, w: t.v, length: t.length}, ok
}

// linksOf are a node's tangents in the order of nodes, found when first asked for. A
// tangent that is known the other way round is not looked at again.
func (g *Graph) linksOf(node int32, j *judge.Judge) []link {
	if l := g.links[node].Load(); l != nil {
		return *l
	}
	var out []link
	for to := range int32(len(g.links)) {
		if to>>1 == node>>1 {
			continue
		}
		t, ok := g.between(node, to)
		if !ok {
			continue
		}
		if back := g.links[to^1].Load(); back != nil {
			_, ok = slices.BinarySearchFunc(*back, node^1, func(l link, n int32) int { return cmp.Compare(l.to, n) })
		} else {
			ok = sight(j, t)
		}
		if ok {
			out = append(out, g.link(node, to, t))
		}
	}
	g.keep(node, out)
	return out
}

// keep remembers a node's tangents, unless there is no room left.
func (g *Graph) keep(node int32, l []link) {
	if n := int64(len(l)); g.kept.Add(n) > MaxKept || !g.links[node].CompareAndSwap(nil, &l) {
		g.kept.Add(-n)
	}
}

// sight is the same for a tangent and its reverse, bit for bit.
func sight(j *judge.Judge, t tangent) bool {
	if cmp.Or(cmp.Compare(t.p.Y, t.q.Y), cmp.Compare(t.p.X, t.q.X)) > 0 {
		return j.Sight(t.q, t.p)
	}
	return j.Sight(t.p, t.q)
}

func (g *Graph) link(node, to int32, t tangent) link {
	return link{to: to, leave: g.along(node, t.v), arrive: g.along(to, t.w), length: t.length}
}

func twoPoints(t tangent) []geom.Point { return []geom.Point{t.p, t.q} }
