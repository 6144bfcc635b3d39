package anyangle

import (
	"cmp"
	"context"
	"slices"
)

// none stands for the border of the block where an edge is wanted.
const none = -1

// gapHere stands for a gap in a section's chain.
const gapHere = -2

// gap is a free stretch of a horizontal line, closed, and the edges that end it.
type gap struct {
	lo, hi   int64
	el, er   int32
	twoSided bool // hi is on the right border, and an obstacle beyond begins there
}

// section is the free space on a line. Obstacle i of the active ones is to the
// right of the first rank[i] gaps and to the left of the others.
type section struct {
	gaps []gap
	rank []int32
	left []int32 // how many obstacles are left of each gap
	// What covers the rest, from the left border to the right one (none): each obstacle
	// begins within the one before it, but for those that have gapHere between them.
	// lo and hi are where all obstacles begin and end.
	chain  []int32
	lo, hi []int64
}

// trap is a trapezoid between two heights.
type trap struct {
	y0, y1             int64
	bottom, top        gap
	up, down           int32 // a link's other end, when there is one
	upCount, downCount int32
	merged             bool
}

// levelsPolled is how many heights pass between looks at the context.
const levelsPolled = 64

// cutter makes cuts. It may be used again but not by two at once. Once ctx has ended
// what it makes is not to be used.
type cutter struct {
	ctx   context.Context
	w, h  int64
	thin  bool // passages of no width count
	edges []edge
	span  []chain
	order []int32

	active   []int32 // obstacles at the current height
	sorted   []int32 // the same from left to right at the top of the slab
	straddle []int32 // those that are below the current height as well as above
	above    []int32
	ivs      []interval
	free     []*section

	coarse  []piece // the pieces, mitred
	whole   [][]pt  // their corners, all mitred
	fans    []fan   // what that took too much
	refused []pt    // corners not to be mitred

	traps []trap
	front []int32 // traps whose top is at the current height, from left to right
	fresh []int32
	links []link
	level bool // the current height is one where obstacles begin or end
}

// chain is a piece's two sides as edges, from the lowest up.
type chain struct {
	l0, l1, r0, r1 int32
	lo, hi         int64
}

type interval struct {
	lo, hi int64
	el, er int32
	at     int32 // index among the active
}

// cut finds the complement of the pieces in [0,w] x [0,h]. It cuts along rows or along
// columns, whichever leaves fewer cells at the block's border: what a search sees
// through the border is then in fewer parts.
func (c *cutter) cut(w, h int64, pieces []piece, thin bool) *cut {
	rows := c.cutMitred(w, h, pieces, thin, false)
	rows.findContacts()
	if len(rows.cells) < 2 {
		return rows
	}
	columns := c.cutMitred(w, h, pieces, thin, true)
	columns.findContacts()
	if columns.borders() < rows.borders() {
		return columns
	}
	return rows
}

// cutMitred cuts along rows, or turned, along columns.
func (c *cutter) cutMitred(w, h int64, pieces []piece, thin, turned bool) *cut {
	c.refused = c.refused[:0]
	for {
		c.mitred(pieces, w, h)
		turn := func() {
			for i := range c.coarse {
				c.coarse[i].mirror()
			}
		}
		var out *cut
		if turned {
			turn()
			out = c.cutRows(h, w, c.coarse, thin)
			turn()
			out.turned, out.w, out.h = true, int32(w), int32(h)
		} else {
			out = c.cutRows(w, h, c.coarse, thin)
		}
		misfits := out.addFans(c.fans)
		if len(misfits) == 0 || c.ctx.Err() != nil {
			out.numberComps()
			return out
		}
		c.refused = append(c.refused, misfits...)
	}
}

// borders is how many stretches of the block's border have a cell of their own.
func (c *cut) borders() int {
	return len(c.contact[1]) + len(c.contact[2]) + len(c.contact[3]) + len(c.contact[4])
}

func (c *cutter) cutRows(w, h int64, pieces []piece, thin bool) *cut {
	c.w, c.h, c.thin = w, h, thin
	c.edges, c.span, c.order = c.edges[:0], c.span[:0], c.order[:0]
	c.traps, c.front, c.links = c.traps[:0], c.front[:0], c.links[:0]
	levels := []int64{0, h}
	for i := range pieces {
		p := &pieces[i]
		if !p.touches(0, 0, w, h) || p.lo.y == p.hi.y || p.lo.x == p.hi.x {
			continue
		}
		c.addChain(p.v)
		k := &c.span[len(c.span)-1]
		level := func(y int64) {
			if y > 0 && y < h {
				levels = append(levels, y)
			}
		}
		level(k.lo)
		level(k.hi)
		// A bend does not show in the block where all of the piece is beyond the border.
		for _, e := range c.edges[k.l0 : k.l1-1] {
			if e.xb <= w {
				level(e.yb)
			}
		}
		for _, e := range c.edges[k.r0 : k.r1-1] {
			if e.xb >= 0 {
				level(e.yb)
			}
		}
	}
	slices.Sort(levels)
	levels = slices.Compact(levels)
	for i := range c.span {
		c.order = append(c.order, int32(i))
	}
	slices.SortStableFunc(c.order, func(a, b int32) int { return cmp.Compare(c.span[a].lo, c.span[b].lo) })

	c.sorted = c.sorted[:0]
	next := 0
	for i := 0; i+1 < len(levels); i++ {
		if i%levelsPolled == 0 && c.ctx.Err() != nil {
			break // nobody will look at the cut
		}
		y0, y1 := levels[i], levels[i+1]
		c.straddle = c.straddle[:0]
		for _, p := range c.sorted {
			if c.span[p].hi > y0 {
				c.straddle = append(c.straddle, p)
			}
		}
		c.active = append(c.active[:0], c.straddle...)
		for ; next < len(c.order) && c.span[c.order[next]].lo <= y0; next++ {
			if p := c.order[next]; c.span[p].hi > y0 {
				c.active = append(c.active, p)
				if c.span[p].lo < y0 {
					c.straddle = append(c.straddle, p)
				}
			}
		}
		c.level = true
		s0, s1 := c.sweep(y0, c.active, true), c.sweep(y1, c.active, false)
		c.sorted = c.sorted[:0]
		for _, v := range c.ivs {
			c.sorted = append(c.sorted, c.active[v.at])
		}
		c.slab(y0, y1, s0, s1)
	}
	c.lid()
	return c.finish()
}

// addChain splits a convex polygon, counter-clockwise, into its two sides.
func (c *cutter) addChain(v []pt) {
	n := len(v)
	low, high := 0, 0
	for i, p := range v {
		if p.y < v[low].y || p.y == v[low].y && p.x > v[low].x {
			low = i
		}
		if p.y > v[high].y || p.y == v[high].y && p.x > v[high].x {
			high = i
		}
	}
	id := int32(len(c.span))
	s := chain{r0: int32(len(c.edges)), lo: v[low].y, hi: v[high].y}
	i := low
	for ; i != high; i = (i + 1) % n {
		a, b := v[i], v[(i+1)%n]
		c.edges = append(c.edges, edge{a.x, a.y, b.x, b.y, id})
	}
	s.r1, s.l0 = int32(len(c.edges)), int32(len(c.edges))
	for ; i != low; i = (i + 1) % n {
		a, b := v[i], v[(i+1)%n]
		if a.y > b.y {
			c.edges = append(c.edges, edge{b.x, b.y, a.x, a.y, id})
		}
	}
	s.l1 = int32(len(c.edges))
	slices.Reverse(c.edges[s.l0:s.l1])
	c.span = append(c.span, s)
}

// edgeAt is the edge of e[from:to], ascending, at height y: the one going on
// upwards, or else the one coming from below.
func (c *cutter) edgeAt(from, to int32, y int64, up bool) int32 {
	for i := from; i < to-1; i++ {
		if top := c.edges[i].yb; y < top || y == top && !up {
			return i
		}
	}
	return to - 1
}

func (c *cutter) newSection() *section {
	if n := len(c.free); n > 0 {
		s := c.free[n-1]
		c.free = c.free[:n-1]
		s.gaps, s.rank, s.left = s.gaps[:0], s.rank[:0], s.left[:0]
		s.chain, s.lo, s.hi = append(s.chain[:0], none), s.lo[:0], s.hi[:0]
		return s
	}
	return &section{chain: []int32{none}}
}

// sweep finds the gaps between the active obstacles at height y, just above it or
// just below it.
func (c *cutter) sweep(y int64, active []int32, up bool) *section {
	s := c.newSection()
	c.ivs = c.ivs[:0]
	for i, p := range active {
		k := &c.span[p]
		el, er := c.edgeAt(k.l0, k.l1, y, up), c.edgeAt(k.r0, k.r1, y, up)
		v := interval{c.edges[el].floorAt(y), c.edges[er].ceilAt(y), el, er, int32(i)}
		c.ivs = append(c.ivs, v)
		s.rank = append(s.rank, 0)
		s.lo, s.hi = append(s.lo, v.lo), append(s.hi, v.hi)
	}
	sortIntervals(c.ivs)
	cur, el := int64(0), int32(none)
	beyond := len(c.ivs)
	for i, v := range c.ivs {
		if v.lo >= c.w {
			beyond = i
			break
		}
		if v.hi <= 0 {
			continue
		}
		if v.lo >= cur {
			s.gaps = append(s.gaps, gap{lo: cur, hi: v.lo, el: el, er: v.el})
			s.chain = append(s.chain, gapHere)
		}
		s.rank[v.at] = int32(len(s.gaps))
		if v.hi > cur {
			cur, el = v.hi, v.er
			s.chain = append(s.chain, v.at)
		}
	}
	if cur <= c.w {
		s.chain = append(s.chain, gapHere)
		s.gaps = append(s.gaps, gap{lo: cur, hi: c.w, el: el, er: none, twoSided: beyond < len(c.ivs) && c.ivs[beyond].lo == c.w})
	}
	s.chain = append(s.chain, none)
	for _, v := range c.ivs[beyond:] {
		s.rank[v.at] = int32(len(s.gaps))
	}
	for range s.gaps {
		s.left = append(s.left, 0)
	}
	for _, r := range s.rank {
		if int(r) < len(s.left) {
			s.left[r]++
		}
	}
	for i := 1; i < len(s.left); i++ {
		s.left[i] += s.left[i-1]
	}
	return s
}

// sortIntervals sorts by lower end, ties by index. Successive heights have much the same order, so
// it sorts by insertion as long as that is quick.
func sortIntervals(v []interval) {
	moves := 0
	for i := 1; i < len(v); i++ {
		x := v[i]
		k := i
		for ; k > 0 && (x.lo < v[k-1].lo || x.lo == v[k-1].lo && x.at < v[k-1].at); k-- {
			v[k] = v[k-1]
		}
		v[k] = x
		if moves += i - k; moves > 16*len(v) {
			slices.SortFunc(v, func(a, b interval) int { return cmp.Or(cmp.Compare(a.lo, b.lo), cmp.Compare(a.at, b.at)) })
			return
		}
	}
}

// sameSide says whether the same obstacles are left of gap i of a and of gap j of b.
func sameSide(a, b *section, i, j int) bool {
	if a.left[i] != b.left[j] {
		return false
	}
	for k, r := range a.rank {
		if (int(r) <= i) != (int(b.rank[k]) <= j) {
			return false
		}
	}
	return true
}
