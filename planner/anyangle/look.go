package anyangle

import (
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// expand finds the successors of n: what its fan sees of the other portals of its
// cell, and what is seen from the ends of n where a way may bend (Cui, Harabor & Grastien, IJCAI
// 2017, section 3). What is seen from an end joins the fan.
func (s *search) expand(n *node) {
	g := s.g
	b := g.blocks[n.block]
	ox := float64(int(n.block)%g.bx) * g.side
	oy := float64(int(n.block)/g.bx) * g.side
	if b.cells[n.cell].rows == 0 && n.flags&point == 0 && n.fromBlock == n.block {
		s.round(n, b, ox, oy)
	}
	s.out, s.fs = s.out[:0], s.fs[:0]
	of := b.of[n.cell]
	c := s.lookFrom(n)
	if n.fromBlock == none {
		c.loose = !b.covers(n.cell, c.rx-ox, c.ry-oy)
	}
	portals := b.portals[of.first : of.first+of.count]
	first := s.portals(n.block, n.cell, of.count)
	for i := range portals {
		p := &portals[i]
		c.block = n.block + s.step[p.dir]
		c.cell = p.to
		if c.cell == n.fromCell && c.block == n.fromBlock {
			continue
		}
		// The way into a dead end is the way out of none.
		if p.dir == inside && b.dead[c.cell] == n.cell && !s.opened(c.block, c.cell) {
			continue
		}
		c.ax, c.ay = ox+float64(p.ax), oy+float64(p.ay)
		c.bx, c.by = ox+float64(p.bx), oy+float64(p.by)
		c.turns = p.turns
		c.portalAt = first + int32(i)
		switch {
		case n.flags&point != 0:
			c.fromPoint()
		case p.ax == p.bx && p.ay == p.by:
			c.toPoint()
		default:
			c.portal()
		}
	}
}

// lookFrom is a look from a node.
func (s *search) lookFrom(n *node) look {
	c := look{s: s, n: n, eps: s.g.eps, right: none, left: none}
	c.rx, c.ry = s.roots[n.rootR].x, s.roots[n.rootR].y
	c.lx, c.ly = s.roots[n.rootL].x, s.roots[n.rootL].y
	if n.flags&point == 0 {
		dr, dl := dist(c.rx, c.ry, n.rx, n.ry), dist(c.lx, c.ly, n.lx, n.ly)
		c.urx, c.ury = (n.rx-c.rx)/dr, (n.ry-c.ry)/dr
		c.ulx, c.uly = (n.lx-c.lx)/dl, (n.ly-c.ly)/dl
	}
	return c
}

func (s *search) opened(block, cell int32) bool {
	if block < s.openLow || block > s.openHigh {
		return false
	}
	for _, t := range s.open {
		if t.block == block && t.cell == cell {
			return true
		}
	}
	return false
}

// look is one portal as seen from a node.
type look struct {
	s                  *search
	n                  *node
	eps                float64
	rx, ry, lx, ly     float64 // the roots that see the node's ends
	urx, ury, ulx, uly float64 // directions from there to the ends
	block, cell        int32
	ax, ay, bx, by     float64 // the portal, from right to left
	turns              uint8
	portalAt           int32 // in the search's list

	pastRight, pastLeft bool // see portal
	// loose says that the start is outside its cell, by rounding: what lies along a
	// side of the cell is then seen at an angle, and a way may have to bend at any end.
	loose bool

	right, left           int32 // roots at the node's ends, once asked for
	askedRight, askedLeft bool
}

// atRight and atLeft are the root at an end of the node, none when no way may bend
// there or a way as good is known.
func (c *look) atRight() int32 {
	if !c.askedRight {
		c.askedRight = true
		if c.n.flags&turnR != 0 {
			c.right = c.s.bend(c.n.rootR, c.n.rx, c.n.ry)
		}
	}
	return c.right
}

func (c *look) atLeft() int32 {
	if !c.askedLeft {
		c.askedLeft = true
		if c.n.flags&turnL != 0 {
			c.left = c.s.bend(c.n.rootL, c.n.lx, c.n.ly)
		}
	}
	return c.left
}

// portal is a portal of some length before a node of some length.
func (c *look) portal() {
	// Distances of the portal's ends from the two rays, positive to the left.
	ra := float64(c.urx*(c.ay-c.ry)) - float64(c.ury*(c.ax-c.rx))
	rb := float64(c.urx*(c.by-c.ry)) - float64(c.ury*(c.bx-c.rx))
	la := float64(c.ulx*(c.ay-c.ly)) - float64(c.uly*(c.ax-c.lx))
	lb := float64(c.ulx*(c.by-c.ly)) - float64(c.uly*(c.bx-c.lx))
	var tr, tl float64 // shares of the way from a to b at which the rays meet it
	// An end of the portal on a ray, within rounding, is seen. When it is past the ray by
	// however little, though, what follows may be past it by more: the way has to bend.
	c.pastRight, c.pastLeft = false, false
	switch {
	case rb <= c.eps: // first, as a portal seen from behind has its ends swapped
		tr = 1
	case ra >= -c.eps:
		tr = 0
		c.pastRight = ra < c.eps && c.n.flags&turnR != 0 &&
			geom.Orient(geom.Point{X: c.rx, Y: c.ry}, geom.Point{X: c.n.rx, Y: c.n.ry}, geom.Point{X: c.ax, Y: c.ay}) < 0
	default:
		tr = ra / (ra - rb)
	}
	switch {
	case la >= -c.eps:
		tl = 0
	case lb <= c.eps:
		tl = 1
		c.pastLeft = lb > -c.eps && c.n.flags&turnL != 0 &&
			geom.Orient(geom.Point{X: c.lx, Y: c.ly}, geom.Point{X: c.n.lx, Y: c.n.ly}, geom.Point{X: c.bx, Y: c.by}) > 0
	default:
		tl = la / (la - lb)
	}
	switch {
	case tr < tl:
		c.seen(tr, tl)
	case tr == 1 && tl == 1:
		if c.n.flags&turnR != 0 {
			c.from(c.atRight(), 0, 1)
		} else if rb >= -c.eps {
			c.graze(c.n.rootR, ra >= -c.eps && ra <= c.eps, turnB, c.bx, c.by)
		}
		if c.pastLeft { // and the node's stretch is all but in line with the rays
			c.from(c.atLeft(), 0, 1)
		}
	case tr == 0 && tl == 0:
		if c.n.flags&turnL != 0 {
			c.from(c.atLeft(), 0, 1)
		} else if la <= c.eps {
			c.graze(c.n.rootL, lb >= -c.eps && lb <= c.eps, turnA, c.ax, c.ay)
		}
		if c.pastRight {
			c.from(c.atRight(), 0, 1)
		}
	default:
		// The rays cross on the portal or before it, within rounding: a fan of no width.
		c.from(c.atRight(), 0, tr)
		c.from(c.atLeft(), tl, 1)
	}
}

// seen is a portal of which the fan sees t0 to t1; what is right and left of that is
// seen from the node's ends, if from anywhere.
func (c *look) seen(t0, t1 float64) {
	n := node{rootR: none, rootL: none, apex: c.n.apex}
	if t0 > 0 || c.pastRight {
		if r := c.atRight(); r != none {
			n.rootR, t0 = r, 0
		} else {
			n.rootR = c.n.rootR
		}
	}
	if t1 < 1 || c.pastLeft {
		if l := c.atLeft(); l != none {
			n.rootL, t1 = l, 1
		} else {
			n.rootL = c.n.rootL
		}
	}
	if n.rootR == none {
		var side int
		if n.rootR, side = c.s.sees(c.n, c.ax, c.ay); side > 0 {
			n.apex = n.rootR
		}
	}
	if n.rootL == none {
		var side int
		if n.rootL, side = c.s.sees(c.n, c.bx, c.by); side < 0 {
			n.apex = n.rootL
		}
	}
	c.stretch(n, t0, t1)
}

// sees is the root of n's fan that sees (x, y) beyond n's stretch, and the chain that it is in: -1
// the right one, 0 the apex, 1 the left one.
func (s *search) sees(n *node, x, y float64) (r int32, side int) {
	for r = n.rootR; r != n.apex; r = s.roots[r].parent {
		q := &s.roots[r]
		p := &s.roots[q.parent]
		if float64((q.x-p.x)*(y-p.y))-float64((q.y-p.y)*(x-p.x)) <= 0 {
			return r, -1
		}
	}
	for r = n.rootL; r != n.apex; r = s.roots[r].parent {
		q := &s.roots[r]
		p := &s.roots[q.parent]
		if float64((q.x-p.x)*(y-p.y))-float64((q.y-p.y)*(x-p.x)) >= 0 {
			return r, 1
		}
	}
	return r, 0
}

// graze is a portal with an end on the ray along an obstacle's side, past an end of the
// node where no way bends: a way may bend at the portal's end.
func (c *look) graze(r int32, inLine bool, turn uint8, x, y float64) {
	if inLine {
		c.from(r, 0, 1)
	} else if c.turns&turn != 0 {
		c.arrive(c.s.bend(r, x, y))
	}
}

// from is the stretch t0 to t1 of the portal as seen from a root on the cell's border.
func (c *look) from(r int32, t0, t1 float64) {
	if r == none {
		return
	}
	p := &c.s.roots[r]
	dx, dy := c.bx-c.ax, c.by-c.ay
	l := math.Sqrt(float64(dx*dx) + float64(dy*dy))
	wx, wy := p.x-c.ax, p.y-c.ay
	if (float64(dx*wy)-float64(dy*wx))/l > c.eps {
		c.stretch(node{rootR: r, rootL: r, apex: r}, t0, t1)
		return
	}
	// In line with the portal: the way goes along it to the nearer end and bends
	// there, unless the root is on the portal.
	switch along := (float64(dx*wx) + float64(dy*wy)) / l; {
	case along < -c.eps:
		if c.turns&turnA != 0 {
			c.arrive(c.s.bend(r, c.ax, c.ay))
		}
	case along > l+c.eps:
		if c.turns&turnB != 0 {
			c.arrive(c.s.bend(r, c.bx, c.by))
		}
	case c.n.fromCell != none || !slices.Contains(c.s.starts, at{c.block, c.cell}): // that is begun with
		c.arrive(r)
	}
}

// fromPoint is a portal of the cell on which the root lies.
func (c *look) fromPoint() {
	if c.ax == c.bx && c.ay == c.by {
		if dist(c.rx, c.ry, c.ax, c.ay) > c.eps {
			c.arrive(c.s.bend(c.n.apex, c.ax, c.ay))
		} else if c.n.fromCell != none {
			c.arrive(c.n.apex)
		}
		return
	}
	c.from(c.n.apex, 0, 1)
}

// toPoint is a portal of one point before a node of some length.
func (c *look) toPoint() {
	r := float64(c.urx*(c.ay-c.ry)) - float64(c.ury*(c.ax-c.rx))
	l := float64(c.ulx*(c.ay-c.ly)) - float64(c.uly*(c.ax-c.lx))
	switch {
	case r >= -c.eps && l <= c.eps:
		by, _ := c.s.sees(c.n, c.ax, c.ay)
		c.arrive(c.s.bend(by, c.ax, c.ay))
	case r < 0:
		if p := c.atRight(); p != none {
			c.arrive(c.via(p))
		}
	default:
		if p := c.atLeft(); p != none {
			c.arrive(c.via(p))
		}
	}
}

// via is the portal's one point as a root reached from root r, which may be it.
func (c *look) via(r int32) int32 {
	if p := &c.s.roots[r]; p.x == c.ax && p.y == c.ay {
		return r
	}
	return c.s.bend(r, c.ax, c.ay)
}

// arrive adds the node of a root that lies on the next cell.
func (c *look) arrive(r int32) {
	if r == none {
		return
	}
	if _, found := c.s.visited.find(float64(r), float64(c.block)*(1<<24)+float64(c.cell)); found {
		return
	}
	p := &c.s.roots[r]
	c.put(node{lx: p.x, ly: p.y, rx: p.x, ry: p.y, rootR: r, rootL: r, apex: r, flags: point},
		p.g+dist(p.x, p.y, c.s.tx, c.s.ty))
}

// stretch adds a node with the fan of n and the stretch t0 to t1 of the portal.
func (c *look) stretch(n node, t0, t1 float64) {
	n.rx, n.ry, n.lx, n.ly = c.ax, c.ay, c.bx, c.by
	dx, dy := c.bx-c.ax, c.by-c.ay
	if t0 > 0 {
		n.rx, n.ry = c.ax+float64(t0*dx), c.ay+float64(t0*dy)
	} else if c.turns&turnA != 0 || c.loose {
		n.flags |= turnR
	}
	if t1 < 1 {
		n.lx, n.ly = c.ax+float64(t1*dx), c.ay+float64(t1*dy)
	} else if c.turns&turnB != 0 || c.loose {
		n.flags |= turnL
	}
	if t0 > 0 || t1 < 1 {
		if ex, ey := n.lx-n.rx, n.ly-n.ry; float64(ex*ex)+float64(ey*ey) <= float64(c.eps*c.eps) {
			return
		}
	}
	n.portal = c.portalAt
	c.measure(&n, t0, t1)
	if c.s.undercut(&n) {
		return
	}
	c.put(n, c.s.estimate(&n))
}

func (c *look) put(n node, f float64) {
	n.block, n.cell = c.block, c.cell
	n.fromBlock, n.fromCell = c.n.block, c.n.cell
	c.s.out = append(c.s.out, n)
	c.s.fs = append(c.s.fs, f)
}
