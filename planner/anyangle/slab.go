package anyangle

import "math"

// slab cuts the space between two heights with no bend of an obstacle between
// them. Each connected free part of it is then convex: where the same obstacles
// are left of a gap below as of a gap above, the trapezoid between the two is
// free. Where sides cross, the slab is halved there, down to a height of 1 µm.
func (c *cutter) slab(y0, y1 int64, s0, s1 *section) {
	mark := len(c.fresh)
	split := int64(none)
	i, j := 0, 0
	for split < 0 && (i < len(s0.gaps) || j < len(s1.gaps)) {
		switch {
		case i < len(s0.gaps) && j < len(s1.gaps) && sameSide(s0, s1, i, j):
			a, b := &s0.gaps[i], &s1.gaps[j]
			if split = c.bend(y0, y1, a, b); split < 0 {
				c.emit(y0, y1, a, b)
			}
			i++
			j++
		case j >= len(s1.gaps) || i < len(s0.gaps) && s0.left[i] <= s1.left[j]:
			split = c.closing(y0, y1, &s0.gaps[i], false)
			i++
		default:
			split = c.closing(y0, y1, &s1.gaps[j], true)
			j++
		}
	}
	if split < 0 {
		split = c.pocket(y0, y1, s0, s1)
	}
	if split < 0 {
		c.advance(y0, c.fresh[mark:])
		c.fresh = c.fresh[:mark]
		c.free = append(c.free, s0, s1)
		return
	}
	if len(c.fresh) > mark {
		c.traps = c.traps[:c.fresh[mark]]
	}
	c.fresh = c.fresh[:mark]
	below, above := c.sweep(split, c.active, false), c.sweep(split, c.active, true)
	c.slab(y0, split, s0, below)
	c.slab(split, y1, above, s1)
}

// leastPocketUm is how high, in micrometres, free space must be that shows at neither end of
// a slab to be looked for: as little as cells' sides may be off anyway.
const leastPocketUm = 2 * snapUm

// pocket is a height within a slab at which there may be free space that shows at neither
// end; negative when there is none. Sides are straight within a slab, so what covers a
// stretch between gaps at one end covers it as long as its obstacles, one after the other,
// overlap.
func (c *cutter) pocket(y0, y1 int64, s0, s1 *section) int64 {
	if y1-y0 <= leastPocketUm {
		return none
	}
	up, down := c.holds(s0, s1), c.holds(s1, s0)
	h := float64(y1 - y0)
	if from, to := up*h, h-down*h; to-from > leastPocketUm {
		return min(max(y0+int64((from+to)/2), y0+1), y1-1)
	}
	return none
}

// holds is for how much of the way from section a to section b of a slab the chain of a
// covers what it does.
func (c *cutter) holds(a, b *section) float64 {
	share := 1.0
	for i := 1; i < len(a.chain); i++ {
		p, q := a.chain[i-1], a.chain[i]
		if p == gapHere || q == gapHere {
			continue
		}
		// By how much q begins within p, at either end.
		var in0, in1 int64
		switch {
		case p == none && q == none:
			continue
		case p == none:
			in0, in1 = -a.lo[q], -b.lo[q]
		case q == none:
			in0, in1 = a.hi[p]-c.w, b.hi[p]-c.w
		default:
			in0, in1 = a.hi[p]-a.lo[q], b.hi[p]-b.lo[q]
		}
		if in1 < 0 {
			share = min(share, float64(in0)/float64(in0-in1))
		}
	}
	return share
}

// closing is the height at which to halve a slab for a gap at its bottom (or at
// its top) that has no like at the other end; negative when there is no need.
func (c *cutter) closing(y0, y1 int64, g *gap, atTop bool) int64 {
	if y1-y0 <= 1 || g.lo == g.hi {
		return none // a mere touch leads nowhere
	}
	y := y0 + (y1-y0)/2
	l, r := c.line(g.el, 0), c.line(g.er, c.w)
	if at, ok := crossing(l, r, y0); ok && at >= float64(y0) && at <= float64(y1) {
		y = int64(math.Floor(at))
		if atTop {
			y = int64(math.Ceil(at))
		}
	}
	return min(max(y, y0+1), y1-1)
}

// line is an edge, or the border at x, as a line.
func (c *cutter) line(e int32, x int64) edge {
	if e == none {
		return edge{xa: x, xb: x, ya: 0, yb: c.h}
	}
	return c.edges[e]
}

// crossing is about where two lines cross; y0 keeps the numbers small.
func crossing(a, b edge, y0 int64) (y float64, ok bool) {
	sa := float64(a.xb-a.xa) / float64(a.yb-a.ya)
	sb := float64(b.xb-b.xa) / float64(b.yb-b.ya)
	if sa == sb {
		return 0, false
	}
	xa := float64(a.xa) + float64(sa*float64(y0-a.ya))
	xb := float64(b.xa) + float64(sb*float64(y0-b.ya))
	return float64(y0) + (xb-xa)/(sa-sb), true
}

// bend is the height at which to halve a slab because a side of the trapezoid
// between a and b would stand off from the obstacles; negative when it does not
// by more than snapUm.
func (c *cutter) bend(y0, y1 int64, a, b *gap) int64 {
	if y1-y0 <= 1 {
		return none
	}
	if y := c.bendSide(y0, y1, a.el, b.el, 0, false); y >= 0 {
		return y
	}
	return c.bendSide(y0, y1, a.er, b.er, c.w, true)
}

// at is where edge e meets height y, rounded to the obstacle's outside.
func (c *cutter) at(e int32, y int64, right bool) int64 {
	if right {
		return c.edges[e].floorAt(y) // the left side of an obstacle ends a gap on its right
	}
	return c.edges[e].ceilAt(y)
}

// bendSide looks at one side: e0 ends the gap at y0, e1 that at y1.
func (c *cutter) bendSide(y0, y1 int64, e0, e1 int32, border int64, right bool) int64 {
	switch {
	case e0 == e1:
		return none
	case e0 == none:
		return c.leaveBorder(y0, y1, e1, border, right, 1)
	case e1 == none:
		return c.leaveBorder(y1, y0, e0, border, right, -1)
	case c.edges[e0].piece == c.edges[e1].piece:
		return min(max(c.edges[e0].yb, y0+1), y1-1)
	}
	if near(c.at(e0, y0, right), c.at(e1, y0, right)) || near(c.at(e0, y1, right), c.at(e1, y1, right)) {
		return none
	}
	at, ok := crossing(c.edges[e0], c.edges[e1], y0)
	if !ok || !(at >= float64(y0) && at <= float64(y1)) {
		return y0 + (y1-y0)/2
	}
	y := int64(math.Floor(at))
	if y <= y0 || y < y1-1 && !near(c.at(e0, y, right), c.at(e1, y, right)) && near(c.at(e0, y+1, right), c.at(e1, y+1, right)) {
		y++
	}
	return min(max(y, y0+1), y1-1)
}

func near(a, b int64) bool { return a-b <= snapUm && b-a <= snapUm }

// leaveBorder is for a side that is the block's border at height from and edge e
// at height to, dir being the way from one to the other. The border's part is kept to
// the last whole height, so that both blocks at that border agree on it.
func (c *cutter) leaveBorder(from, to int64, e int32, border int64, right bool, dir int64) int64 {
	onBorder := func(y int64) bool {
		if right {
			return c.at(e, y, right) >= border
		}
		return c.at(e, y, right) <= border
	}
	// onBorder holds at one end and not at the other, or e is not the first edge
	// met; the search narrows either way.
	lo, hi := int64(0), (to-from)*dir // onBorder(from+lo*dir) is taken to hold
	for hi-lo > 1 {
		mid := lo + (hi-lo)/2
		if onBorder(from + mid*dir) {
			lo = mid
		} else {
			hi = mid
		}
	}
	if lo == 0 {
		if near(c.at(e, from, right), border) {
			return none
		}
		lo = 1
	}
	return from + lo*dir
}

// emit adds the trapezoid between two gaps.
func (c *cutter) emit(y0, y1 int64, a, b *gap) {
	if a.lo == a.hi && b.lo == b.hi {
		// A passage of no width, between two obstacles that touch; on the left border it
		// is the left neighbour's.
		onBorder := a.er == none || b.er == none
		if !c.thin || onBorder && !(a.twoSided && b.twoSided) || a.el == none || b.el == none {
			return
		}
	}
	c.fresh = append(c.fresh, int32(len(c.traps)))
	c.traps = append(c.traps, trap{y0: y0, y1: y1, bottom: *a, top: *b, up: none, down: none})
}

// advance joins the trapezoids above height y to those below it.
func (c *cutter) advance(y int64, fresh []int32) {
	j := 0
	for _, t := range fresh {
		b := &c.traps[t].bottom
		for j < len(c.front) && c.traps[c.front[j]].top.hi < b.lo {
			j++
		}
		for k := j; k < len(c.front) && c.traps[c.front[k]].top.lo <= b.hi; k++ {
			a := &c.traps[c.front[k]].top
			c.join(c.front[k], t, y, max(a.lo, b.lo), min(a.hi, b.hi))
		}
	}
	if c.level && c.thin && y > 0 {
		c.slits(y, c.straddle, fresh)
	}
	c.level = false
	c.front = append(c.front[:0], fresh...)
}

// join links trapezoid a to b above it.
func (c *cutter) join(a, b int32, y, lo, hi int64) {
	if lo == hi && !c.thin {
		return
	}
	c.links = append(c.links, link{a: a, b: b, y: int32(y), l: int32(lo), r: int32(hi)})
	c.traps[a].up, c.traps[b].down = b, a
	c.traps[a].upCount++
	c.traps[b].downCount++
}

// slits adds, as cells of no height, what is free at height y but no trapezoid's.
func (c *cutter) slits(y int64, straddle, fresh []int32) {
	s := c.sweep(y, straddle, true)
	for _, g := range s.gaps {
		from := g.lo
		i, j := 0, 0
		for from < g.hi {
			// The next stretch that is some trapezoid's.
			for i < len(c.front) && c.traps[c.front[i]].top.hi <= from {
				i++
			}
			for j < len(fresh) && c.traps[fresh[j]].bottom.hi <= from {
				j++
			}
			to, then := g.hi, g.hi
			if i < len(c.front) {
				if t := &c.traps[c.front[i]].top; t.lo < to {
					to, then = max(t.lo, from), t.hi
				}
			}
			if j < len(fresh) {
				if t := &c.traps[fresh[j]].bottom; t.lo < to || t.lo <= to && t.hi > then {
					to, then = max(t.lo, from), t.hi
				}
			}
			if to > from {
				c.slit(y, from, to, fresh)
			}
			from = then
		}
	}
	c.free = append(c.free, s)
}

func (c *cutter) slit(y, lo, hi int64, fresh []int32) {
	t := int32(len(c.traps))
	g := gap{lo: lo, hi: hi, el: none, er: none}
	c.traps = append(c.traps, trap{y0: y, y1: y, bottom: g, top: g, up: none, down: none, upCount: 2, downCount: 2})
	for _, f := range c.front {
		if a := &c.traps[f].top; a.lo <= hi && a.hi >= lo {
			c.join(f, t, y, max(a.lo, lo), min(a.hi, hi))
		}
	}
	for _, f := range fresh {
		if b := &c.traps[f].bottom; b.lo <= hi && b.hi >= lo {
			c.join(t, f, y, max(b.lo, lo), min(b.hi, hi))
		}
	}
}

// lid looks at the block's top for passages of no height along it.
func (c *cutter) lid() {
	if !c.thin {
		return
	}
	c.straddle, c.above = c.straddle[:0], c.above[:0]
	for _, p := range c.order {
		k := &c.span[p]
		if k.lo <= c.h && k.hi > c.h {
			c.above = append(c.above, p)
			if k.lo < c.h {
				c.straddle = append(c.straddle, p)
			}
		}
	}
	if len(c.above) == len(c.straddle) {
		return // nothing begins there
	}
	s := c.sweep(c.h, c.above, true)
	// What lies above belongs to the neighbour; it only covers.
	mark := len(c.traps)
	var over []int32
	for _, g := range s.gaps {
		over = append(over, int32(len(c.traps)))
		c.traps = append(c.traps, trap{y0: c.h, y1: c.h, bottom: g, top: g})
	}
	c.free = append(c.free, s)
	links := len(c.links)
	c.slits(c.h, c.straddle, over)
	// Take the neighbour's out again.
	n := int32(len(over))
	keep := c.links[:links]
	for _, l := range c.links[links:] {
		if l.b >= int32(mark) && l.b < int32(mark)+n {
			continue
		}
		if l.b >= int32(mark) {
			l.b -= n
		}
		keep = append(keep, l)
	}
	c.links = keep
	for _, f := range c.front {
		if t := &c.traps[f]; t.up >= int32(mark) {
			t.up -= n
		}
	}
	c.traps = append(c.traps[:mark], c.traps[mark+int(n):]...)
}
