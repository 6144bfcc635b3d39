package anyangle

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// round takes n on through the triangles of a fan to the last one, as expand and run would one by
// one, but without a look at the queue: there is one way on from each, since what else the first
// one leads to is in line with where n comes from. It stops short where a
// triangle is the goal's, and where more than one node, or none, would come of a step.
func (s *search) round(n *node, b *block, ox, oy float64) {
	step := b.alongFan(n.cell, n.fromCell)
	if step == 0 {
		return
	}
	of := b.of[n.cell]
	for _, p := range b.portals[of.first : of.first+of.count] {
		if p.dir != inside {
			return // a side on the block's border leads on, too
		}
	}
	at := &b.fan[b.cells[n.cell].row0]
	e := rounder{s: s, eps: s.g.eps, px: ox + float64(at[0].x), py: oy + float64(at[0].y), left: step > 0}
	e.from(n)
	for {
		next := n.cell + step
		if s.isGoal(n.block, next) {
			break
		}
		t := &b.fan[b.cells[n.cell].row0]
		v := t[1] // the chain's corner that this triangle shares with the next
		if step < 0 {
			v = t[2]
		}
		if !e.pass(ox+float64(v.x), oy+float64(v.y)) {
			break
		}
		n.fromCell, n.cell, n.fromBlock = n.cell, next, n.block
		if b.alongFan(next, n.fromCell) != step {
			break
		}
	}
	e.to(n)
}

// alongFan is the step from a triangle to the next one of its fan for one who comes from a cell; 0
// when there is none.
func (b *block) alongFan(cell, from int32) int32 {
	if next := cell + 1; next != from && b.sameFan(cell, next) {
		return 1
	}
	if next := cell - 1; next != from && b.sameFan(next, cell) {
		return -1
	}
	return 0
}

// sameFan says whether cell b follows cell a in a fan.
func (c *cut) sameFan(a, b int32) bool {
	if a < 0 || int(b) >= len(c.cells) {
		return false
	}
	t, u := c.triangleOf(a), c.triangleOf(b)
	return t != nil && u != nil && t[0] == u[0] && t[1] == u[2]
}

// rounder goes round a corner: the fan's apex on the inner side, the corner's chain on the outer
// one, to the left or to the right.
type rounder struct {
	s      *search
	eps    float64
	px, py float64 // the apex
	left   bool    // the chain is on the left
	inner  edgeOf
	outer  edgeOf
	apex   int32
}

// edgeOf is an end of a node's stretch, the root that sees it, and the direction from there.
type edgeOf struct {
	x, y   float64
	root   int32
	turn   bool
	rx, ry float64
	ux, uy float64
}

func (e *edgeOf) aim(s *search, root int32, x, y float64, turn bool) {
	p := &s.roots[root]
	e.root, e.x, e.y, e.turn = root, x, y, turn
	e.rx, e.ry = p.x, p.y
	dx, dy := x-p.x, y-p.y
	d := math.Sqrt(float64(dx*dx) + float64(dy*dy))
	e.ux, e.uy = dx/d, dy/d
}

// off is how far a place is to the left of the ray.
func (e *edgeOf) off(x, y float64) float64 {
	return float64(e.ux*(y-e.ry)) - float64(e.uy*(x-e.rx))
}

func (e *rounder) from(n *node) {
	e.apex = n.apex
	in, out := &e.inner, &e.outer
	if !e.left {
		in, out = out, in
	}
	in.aim(e.s, n.rootR, n.rx, n.ry, n.flags&turnR != 0)
	out.aim(e.s, n.rootL, n.lx, n.ly, n.flags&turnL != 0)
}

func (e *rounder) to(n *node) {
	r, l := &e.inner, &e.outer
	if !e.left {
		r, l = l, r
	}
	n.rx, n.ry, n.rootR = r.x, r.y, r.root
	n.lx, n.ly, n.rootL = l.x, l.y, l.root
	n.apex, n.flags = e.apex, 0
	if r.turn {
		n.flags |= turnR
	}
	if l.turn {
		n.flags |= turnL
	}
}

// fan is the node's fan of roots.
func (e *rounder) fan() node {
	if e.left {
		return node{rootR: e.inner.root, rootL: e.outer.root, apex: e.apex}
	}
	return node{rootR: e.outer.root, rootL: e.inner.root, apex: e.apex}
}

// sees is the root of a fan that sees a place on the outer side or the inner one, which becomes
// the apex where it is one of those that see the other side.
func (e *rounder) sees(n *node, x, y float64, outer bool) int32 {
	r, side := e.s.sees(n, x, y)
	if (outer == e.left) == (side < 0) && side != 0 {
		e.apex = r
	}
	return r
}

// pass goes through the portal between the apex and the chain's corner c, as look.portal does; it
// is false, and nothing is changed, where that would not make one node of it.
func (e *rounder) pass(cx, cy float64) bool {
	in, out := &e.inner, &e.outer
	side := 1.0
	if !e.left {
		side = -1
	}
	// Distances to the chain's side of the two rays.
	ia, ic := side*in.off(e.px, e.py), side*in.off(cx, cy)
	oa, oc := side*out.off(e.px, e.py), side*out.off(cx, cy)
	if ic <= e.eps || ia < e.eps && in.turn || oa >= -e.eps {
		return false
	}
	t0, t1 := 0.0, 1.0 // what is seen, from the apex to the chain
	if ia < -e.eps {
		t0 = ia / (ia - ic)
	}
	past := false
	if oc > e.eps {
		t1 = oa / (oa - oc)
	} else {
		past = oc > -e.eps && out.turn && side*float64(geom.Orient(geom.Point{X: out.rx, Y: out.ry}, geom.Point{X: out.x, Y: out.y}, geom.Point{X: cx, Y: cy})) > 0
	}
	if t0 >= t1 {
		return false
	}
	root := out.root
	bent := false
	if t1 < 1 || past {
		if out.turn {
			if r := e.s.bend(out.root, out.x, out.y); r != none {
				root, t1, bent = r, 1, true
			}
		}
	}
	dx, dy := cx-e.px, cy-e.py
	if t0 > 0 || t1 < 1 {
		if part := t1 - t0; float64(part*part)*(float64(dx*dx)+float64(dy*dy)) <= float64(e.eps*e.eps) {
			return false
		}
	}
	fan := e.fan()
	if !bent && !past && t1 == 1 {
		root = e.sees(&fan, cx, cy, true)
	}
	switch {
	case t0 > 0:
		in.x, in.y, in.turn = e.px+float64(t0*dx), e.py+float64(t0*dy), false
	case in.x != e.px || in.y != e.py:
		in.aim(e.s, e.sees(&fan, e.px, e.py, false), e.px, e.py, false)
	}
	if t1 < 1 {
		out.x, out.y, out.turn = e.px+float64(t1*dx), e.py+float64(t1*dy), false
	} else {
		out.aim(e.s, root, cx, cy, true)
	}
	return true
}
