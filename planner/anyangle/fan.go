package anyangle

import "slices"

// triangle is a cell of a fan, counter-clockwise, from the block's lower left corner; not
// turned in a turned cut.
type triangle [3]struct{ x, y int32 }

// bounds are the triangle's, turned or not.
func (t *triangle) bounds(turned bool) (lo, hi pt) {
	lo = pt{int64(min(t[0].x, t[1].x, t[2].x)), int64(min(t[0].y, t[1].y, t[2].y))}
	hi = pt{int64(max(t[0].x, t[1].x, t[2].x)), int64(max(t[0].y, t[1].y, t[2].y))}
	if turned {
		lo, hi = pt{lo.y, lo.x}, pt{hi.y, hi.x}
	}
	return lo, hi
}

// joint says that the cells a and b share the points from p to q, which run counter-clockwise
// round a, and whether a way may bend at either. It is not turned in a turned cut.
type joint struct {
	a, b           int32
	px, py, qx, qy int32
	turns          uint8 // turnA at p, turnB at q
}

// ends says whether the joint ends at (x, y).
func (t *joint) ends(x, y int32) bool { return t.px == x && t.py == y || t.qx == x && t.qy == y }

// touch adds a triangle's sides, and single corners, on the block's border to the contacts.
func (c *cut) touch(t *triangle, id int32) {
	for _, s := range [4]struct {
		side   int
		x      bool // it is upright, at that x; else level, at that y
		v, end int32
	}{{leftward, true, 0, c.h}, {rightward, true, c.w, c.h}, {downward, false, 0, c.w}, {upward, false, c.h, c.w}} {
		lo, hi := s.end+1, int32(-1)
		for _, p := range t {
			along, v := p.x, p.y
			if s.x {
				along, v = v, along
			}
			if v == s.v {
				lo, hi = min(lo, along), max(hi, along)
			}
		}
		if lo <= hi {
			c.contact[s.side] = append(c.contact[s.side], contact{lo, hi, id})
		}
	}
}

// side is a stretch of a cell's upright sides, from lo up to hi.
type side struct{ lo, hi, cell int32 }

// level is a height at which cells begin, or end (top); upright is a place along it with sides of
// cells, those on the left of it (right: it is their right one) or on its right. As the cut has them.
type level struct {
	y   int32
	top bool
}

type upright struct {
	x     int32
	right bool
}

// rims are the sides of a cut's cells along the two lines through each fan's apex.
type rims struct {
	cut      *cut
	levels   map[level][]int32
	uprights map[upright][]side
}

// addFans adds the fans to a cut of what was mitred. It gives the fans that did not fit between
// its cells, which does not happen unless sides were snapped where none should be.
func (c *cut) addFans(fans []fan) (misfits []pt) {
	if len(fans) == 0 {
		return nil
	}
	r := c.rimsAt(fans)
	for i := range fans {
		if f := &fans[i]; !r.add(f) {
			misfits = append(misfits, f.of)
		}
	}
	return misfits
}

// own is a fan as the cut has it.
func (c *cut) own(m *mitre) mitre {
	if c.turned {
		return m.mirrored()
	}
	return *m
}

func (c *cut) rimsAt(fans []fan) *rims {
	r := &rims{c, map[level][]int32{}, map[upright][]side{}}
	for i := range fans {
		at := fans[i].at
		if c.turned {
			at = pt{at.y, at.x}
		}
		for _, far := range [2]bool{false, true} {
			r.levels[level{int32(at.y), far}], r.uprights[upright{int32(at.x), far}] = nil, nil
		}
	}
	for i := range c.cells {
		id := int32(i)
		rows := c.rowsOf(id)
		for _, l := range [2]level{{rows[0].y, false}, {rows[len(rows)-1].y, true}} {
			if ids, ok := r.levels[l]; ok {
				r.levels[l] = append(ids, id)
			}
		}
		put := func(k upright, on func(row) bool) {
			if ss, ok := r.uprights[k]; ok {
				if lo, hi, ok := stretchOf(rows, on); ok && lo < hi && !slices.Contains(ss, side{lo, hi, id}) {
					r.uprights[k] = append(ss, side{lo, hi, id})
				}
			}
		}
		for _, w := range rows {
			put(upright{w.l, false}, func(q row) bool { return q.l == w.l })
			put(upright{w.r, true}, func(q row) bool { return q.r == w.r })
		}
	}
	return r
}

// add adds a fan, if the cells beyond its two sides are there, as far as those are not on the
// block's border.
func (r *rims) add(f *fan) bool {
	in := r.cut.own(&f.mitre)
	w, h := r.cut.w, r.cut.h
	if r.cut.turned {
		w, h = h, w
	}
	x, y := int32(in.at.x), int32(in.at.y)
	v, l := in.chain[0], in.chain[len(in.chain)-1] // the ends on the upright side and on the level one
	if int32(v.x) != x {
		v, l = l, v
	}
	var over []side // the stretches of the upright side
	if x != 0 && x != w {
		lo, hi := min(int32(v.y), y), max(int32(v.y), y)
		left := hi - lo
		for _, s := range r.uprights[upright{x, int32(l.x) > x}] {
			if a, b := max(lo, s.lo), min(hi, s.hi); a < b {
				over = append(over, side{a, b, s.cell})
				left -= b - a
			}
		}
		if left != 0 {
			return false
		}
	}
	beyond := int32(none) // the cell beyond the level side
	if y != 0 && y != h {
		below := int32(v.y) > y
		for _, id := range r.levels[level{y, below}] {
			rows := r.cut.rowsOf(id)
			w := rows[0]
			if below {
				w = rows[len(rows)-1]
			}
			if w.l <= min(int32(l.x), x) && w.r >= max(int32(l.x), x) {
				beyond = id
			}
		}
		if beyond == none {
			return false
		}
	}
	r.cut.addFan(&f.mitre, v, l, over, beyond)
	return true
}

// addFan adds the triangles of a fan and joins them. v and l are the chain's ends on the upright
// and on the level side, over the stretches of the upright side and their cells, beyond the
// level side's cell; all these as the cut has them.
func (c *cut) addFan(f *mitre, v, l pt, over []side, beyond int32) {
	n := len(f.chain)
	base := int32(len(c.cells))
	at := f.at
	for i := 1; i < n; i++ {
		a, b := f.chain[i-1], f.chain[i]
		t := triangle{{int32(at.x), int32(at.y)}, {int32(b.x), int32(b.y)}, {int32(a.x), int32(a.y)}}
		lo, hi := t.bounds(c.turned)
		c.cells = append(c.cells, cell{row0: int32(len(c.fan)), comp: int32(len(c.cells)), lo: int32(lo.y), hi: int32(hi.y)})
		c.fan = append(c.fan, t)
	}
	put := func(a, b int32, p, q pt, turns uint8) {
		c.joints = append(c.joints, joint{a, b, int32(p.x), int32(p.y), int32(q.x), int32(q.y), turns})
		unite(c.cells, a, b)
	}
	for i := 1; i+1 < n; i++ {
		put(base+int32(i)-1, base+int32(i), at, f.chain[i], turnB)
	}
	// From the first triangle its side runs from the chain to where the sides meet, from the last
	// one the other way.
	outer := func(end, p, q pt, cell int32) {
		if cell == none {
			return // on the block's border
		}
		if c.turned {
			end, p, q = pt{end.y, end.x}, pt{p.y, p.x}, pt{q.y, q.x}
		}
		tri := base
		towards := end == f.chain[0]
		if !towards {
			tri = base + int32(n) - 2
		}
		// Nearer to the chain first, or last.
		if near := abs(p.x-end.x)+abs(p.y-end.y) < abs(q.x-end.x)+abs(q.y-end.y); near != towards {
			p, q = q, p
		}
		turns := uint8(0)
		switch {
		case end.x == 0 || end.y == 0 || end.x == int64(c.w) || end.y == int64(c.h):
			// The side goes on beyond the border.
		case p == end:
			turns = turnA
		case q == end:
			turns = turnB
		}
		put(tri, cell, p, q, turns)
	}
	atx := at.x
	if c.turned {
		atx = at.y
	}
	for _, s := range over {
		outer(v, pt{atx, int64(s.lo)}, pt{atx, int64(s.hi)}, s.cell)
	}
	outer(l, l, pt{atx, l.y}, beyond)
	c.corners = append(c.corners, f.at, f.chain[0], f.chain[n-1])
}

// bendsAt says whether a way may bend at a point of a fan's outer sides; known is false for other
// points.
func (c *cut) bendsAt(p pt) (bends, known bool) {
	if i := slices.Index(c.corners, p); i >= 0 {
		return i%3 != 0, true
	}
	return false, false
}
