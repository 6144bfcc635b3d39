package anyangle

import "math"

// portal is a stretch of a cell's border beyond which another cell lies: from a to
// b counter-clockwise round the cell, so a is on the right of one who looks out.
// a equals b where two cells share one point and a way leads through it.
type portal struct {
	ax, ay, bx, by int32 // from the block's lower left corner
	to             int32 // the cell beyond
	dir            uint8 // the block it is in
	turns          uint8 // turnA, turnB: a way may bend there
}

const (
	turnA = 1 << iota
	turnB
)

// span is a cell's portals in its block.
type span struct{ first, count int32 }

// bridge says that a component of a block is joined to one of the block beyond.
type bridge struct {
	dir       uint8 // rightward or upward
	own, next int32
}

// block is a cut joined to its neighbours.
type block struct {
	*cut
	of      []span
	portals []portal
	bridges []bridge
	dead    []int32 // for a cell that leads nowhere else, the cell to which it does; else none
}

// neighbours are the cuts around one, row by row from the lower left, itself at 4;
// nil beyond the floor.
type neighbours [9]*cut

// beside is the neighbour in a direction.
func (n *neighbours) beside(dir int) *cut { return n[[5]int{4, 5, 7, 3, 1}[dir]] }

// joiner makes blocks. It may be used again but not by two at once.
type joiner struct {
	around neighbours
	thin   bool
	from   []int32
	all    []portal
	poly   []pt
}

// opposite is the side of the neighbour beyond a side.
func opposite(side int) int { return [5]int{inside, leftward, downward, rightward, upward}[side] }

func (j *joiner) join(around neighbours, thin bool) *block {
	j.around, j.thin = around, thin
	j.from, j.all = j.from[:0], j.all[:0]
	c := around[4]
	b := &block{cut: c, of: make([]span, len(c.cells))}
	for _, l := range c.links {
		lo, hi := pt{int64(l.l), int64(l.y)}, pt{int64(l.r), int64(l.y)}
		if c.turned {
			// b is on the right of a, and a's side of the link goes up.
			lo, hi = pt{lo.y, hi.x}, pt{lo.y, lo.x}
		}
		// From a the link runs from hi to lo counter-clockwise, from b the other way.
		p := portal{ax: int32(hi.x), ay: int32(hi.y), bx: int32(lo.x), by: int32(lo.y), to: l.b}
		q := portal{ax: p.bx, ay: p.by, bx: p.ax, by: p.ay, to: l.a}
		if j.innerTurn(c, l, hi) {
			p.turns, q.turns = turnA, turnB
		}
		if j.innerTurn(c, l, lo) {
			p.turns, q.turns = p.turns|turnB, q.turns|turnA
		}
		j.put(l.a, p)
		j.put(l.b, q)
	}
	for i := range c.joints {
		t := &c.joints[i]
		back := t.turns&turnA<<1 | t.turns&turnB>>1
		j.put(t.a, portal{ax: t.px, ay: t.py, bx: t.qx, by: t.qy, to: t.b, turns: t.turns})
		j.put(t.b, portal{ax: t.qx, ay: t.qy, bx: t.px, by: t.py, to: t.a, turns: back})
	}
	for side := rightward; side <= downward; side++ {
		if n := around.beside(side); n != nil {
			j.seam(b, c, n, side)
		}
	}
	// Lay the portals out cell by cell.
	for _, f := range j.from {
		b.of[f].count++
	}
	at := int32(0)
	for i := range b.of {
		b.of[i].first = at
		at += b.of[i].count
		b.of[i].count = 0
	}
	b.portals = make([]portal, len(j.all))
	for i, f := range j.from {
		s := &b.of[f]
		b.portals[s.first+s.count] = j.all[i]
		s.count++
	}
	b.findDead()
	return b
}

func (j *joiner) put(from int32, p portal) {
	j.from = append(j.from, from)
	j.all = append(j.all, p)
}

// innerTurn says whether a way may bend at p, an end of a link.
func (j *joiner) innerTurn(c *cut, l link, p pt) bool {
	if p.x == 0 || p.x == int64(c.w) || p.y == 0 || p.y == int64(c.h) {
		return j.turnsAt(p)
	}
	if bends, known := c.bendsAt(p); known {
		return bends
	}
	return bendable(j.wedge(c, l.a, p) + j.wedge(c, l.b, p))
}

// angleSlack tells a free angle of half a turn from a larger one, in radians: sums of a few atan2
// are right to 1e-14. Three corners on whole micrometres may be out of line by less than any slack,
// but a ray that the middle one of them keeps off the last, of a block at most 1.3e9 µm wide, is
// then so near to it, within minEpsUm, that the search takes it to see the last.
const angleSlack = 5e-14

// bendable says whether a way may bend at a point about which that angle is free.
func bendable(free float64) bool { return free > math.Pi+angleSlack && free < 2*math.Pi-angleSlack }

// turnsAt is for a point of the block's border, in all the blocks that meet there.
func (j *joiner) turnsAt(p pt) bool {
	c := j.around[4]
	free := 0.0
	for dy := -1; dy <= 1; dy++ {
		for dx := -1; dx <= 1; dx++ {
			if dx < 0 && p.x != 0 || dx > 0 && p.x != int64(c.w) || dy < 0 && p.y != 0 || dy > 0 && p.y != int64(c.h) {
				continue
			}
			n := j.around[4+dx+3*dy]
			if n == nil {
				continue
			}
			q := p
			switch dx {
			case -1:
				q.x = int64(n.w)
			case 1:
				q.x = 0
			}
			switch dy {
			case -1:
				q.y = int64(n.h)
			case 1:
				q.y = 0
			}
			free += j.freeAt(n, q)
		}
	}
	return bendable(free)
}

// freeAt is the free angle about a point of n's border, within n.
func (j *joiner) freeAt(n *cut, p pt) float64 {
	var sides [2]int
	k := 0
	switch p.x {
	case 0:
		sides[k] = leftward
		k++
	case int64(n.w):
		sides[k] = rightward
		k++
	}
	switch p.y {
	case 0:
		sides[k] = downward
		k++
	case int64(n.h):
		sides[k] = upward
		k++
	}
	free := 0.0
	var seen []int32
	for _, s := range sides[:k] {
		along := int32(p.x)
		if s == leftward || s == rightward {
			along = int32(p.y)
		}
	next:
		for _, t := range n.contact[s] {
			if t.lo > along {
				break
			}
			if t.hi < along {
				continue
			}
			for _, c := range seen {
				if c == t.cell {
					continue next
				}
			}
			seen = append(seen, t.cell)
			free += j.wedge(n, t.cell, p)
		}
	}
	return free
}

// wedge is a cell's angle at a point of its border, 0 for other points and for
// cells of no width or height.
func (j *joiner) wedge(c *cut, id int32, p pt) float64 {
	t := c.triangleOf(id)
	if c.turned && t == nil {
		p = pt{p.y, p.x}
	}
	rows := c.rowsOf(id)
	v := j.poly[:0]
	put := func(x, y int32) {
		q := pt{int64(x), int64(y)}
		if len(v) == 0 || v[len(v)-1] != q && v[0] != q {
			v = append(v, q)
		}
	}
	for _, r := range rows {
		put(r.r, r.y)
	}
	for i := len(rows) - 1; i >= 0; i-- {
		put(rows[i].l, rows[i].y)
	}
	if t != nil {
		for _, q := range t {
			put(q.x, q.y)
		}
	}
	j.poly = v
	n := len(v)
	if n < 3 {
		return 0
	}
	for i, q := range v {
		next := v[(i+1)%n]
		if q == p {
			return cornerAngle(v[(i+n-1)%n], q, next)
		}
		if p != next && turnSign(q, next, p) == 0 && between(q, p, next) {
			return math.Pi
		}
	}
	return 0
}

func between(a, p, b pt) bool {
	return min(a.x, b.x) <= p.x && p.x <= max(a.x, b.x) && min(a.y, b.y) <= p.y && p.y <= max(a.y, b.y)
}

// cornerAngle is the angle at q of a convex polygon that goes p, q, r.
func cornerAngle(p, q, r pt) float64 {
	ax, ay := float64(r.x-q.x), float64(r.y-q.y)
	bx, by := float64(p.x-q.x), float64(p.y-q.y)
	return math.Abs(math.Atan2(float64(ax*by)-float64(ay*bx), float64(ax*bx)+float64(ay*by)))
}

// seam adds the portals through one side of the block.
func (j *joiner) seam(b *block, c, n *cut, side int) {
	own, theirs := c.contact[side], n.contact[opposite(side)]
	var last bridge
	start := 0
	for _, o := range own {
		for start < len(theirs) && theirs[start].hi < o.lo && theirs[start].lo < o.lo {
			start++
		}
		for k := start; k < len(theirs) && theirs[k].lo <= o.hi; k++ {
			t := theirs[k]
			lo, hi := max(o.lo, t.lo), min(o.hi, t.hi)
			if lo > hi || lo == hi && (!j.thin || c.tip(o) || n.tip(t) || j.goRound(c, n, own, theirs, o, t, lo, side)) {
				continue
			}
			p := sidePortal(c, side, lo, hi)
			p.to, p.dir = t.cell, uint8(side)
			if lo < hi {
				if j.turnsAt(pt{int64(p.ax), int64(p.ay)}) {
					p.turns |= turnA
				}
				if j.turnsAt(pt{int64(p.bx), int64(p.by)}) {
					p.turns |= turnB
				}
			}
			j.put(o.cell, p)
			if side == rightward || side == upward {
				if g := (bridge{uint8(side), c.cells[o.cell].comp, n.cells[t.cell].comp}); g != last {
					b.bridges = append(b.bridges, g)
					last = g
				}
			}
		}
	}
}

// sidePortal is the stretch from lo to hi of a side, counter-clockwise.
func sidePortal(c *cut, side int, lo, hi int32) portal {
	switch side {
	case rightward:
		return portal{ax: c.w, ay: lo, bx: c.w, by: hi}
	case leftward:
		return portal{ax: 0, ay: hi, bx: 0, by: lo}
	case upward:
		return portal{ax: hi, ay: c.h, bx: lo, by: c.h}
	}
	return portal{ax: lo, ay: 0, bx: hi, by: 0}
}

// tip says whether a contact is the single corner of a fan's triangle: those of its fan next to it
// lead round it.
func (c *cut) tip(k contact) bool { return k.lo == k.hi && c.triangleOf(k.cell) != nil }

// goRound says whether cells o and t, which share but one point of a side, are
// joined about that point through others anyway.
func (j *joiner) goRound(c, n *cut, own, theirs []contact, o, t contact, at int32, side int) bool {
	// o reaches a cell of the other side along the border, and so does t one of this
	// side; beyond that, follow links at the point.
	touching := func(list []contact) []contact {
		var out []contact
		for _, k := range list {
			if k.lo <= at && at <= k.hi {
				out = append(out, k)
			}
		}
		return out
	}
	a, b := touching(own), touching(theirs)
	lead := make([]int, len(a)+len(b))
	for i := range lead {
		lead[i] = i
	}
	find := func(i int) int {
		for lead[i] != i {
			i = lead[i]
		}
		return i
	}
	for i, p := range a {
		for k, q := range b {
			if max(p.lo, q.lo) < min(p.hi, q.hi) {
				lead[find(i)] = find(len(a) + k)
			}
		}
	}
	linked := func(c *cut, list []contact, base, side int) {
		// The point along the border, as the cut's links have it.
		x, y := int32(0), at
		switch side {
		case rightward:
			x = c.w
		case upward:
			x, y = at, c.h
		case downward:
			x, y = at, 0
		}
		px, py := x, y
		if c.turned {
			x, y = y, x
		}
		for i := range list {
			for k := i + 1; k < len(list); k++ {
				for _, l := range c.links {
					if (l.a == list[i].cell && l.b == list[k].cell || l.a == list[k].cell && l.b == list[i].cell) &&
						l.y == y && l.l <= x && x <= l.r {
						lead[find(base+i)] = find(base + k)
					}
				}
				for _, t := range c.joints {
					if (t.a == list[i].cell && t.b == list[k].cell || t.a == list[k].cell && t.b == list[i].cell) && t.ends(px, py) {
						lead[find(base+i)] = find(base + k)
					}
				}
			}
		}
	}
	linked(c, a, 0, side)
	linked(n, b, len(a), opposite(side))
	at1, at2 := -1, -1
	for i, p := range a {
		if p.cell == o.cell {
			at1 = i
		}
	}
	for k, q := range b {
		if q.cell == t.cell {
			at2 = len(a) + k
		}
	}
	return find(at1) == find(at2)
}
