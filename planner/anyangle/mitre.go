package anyangle

import "slices"

// Round a grown corner a dozen chords stand for the arc. Cut along rows, each would cut the
// aisle before the corner, and a way along it would pass a dozen cells. So where a corner
// stands alone it is cut as if its two sides, along the axes, went on until they meet (mitred),
// and what that took too much is a fan of triangles about the place where they do: a way that
// does not turn there passes one portal to it and looks no further.

// mitre is a quarter arc of a piece between two sides along the axes.
type mitre struct {
	at    pt   // where the sides would meet
	chain []pt // the chords' corners, counter-clockwise; the first and the last lie on the sides
}

// fan is what a mitre takes too much of a block, in it: of is where the whole one's sides meet.
type fan struct {
	mitre
	of pt
}

// aloneUm is how far other obstacles must be from a fan: sides may be off by snapUm.
const aloneUm = 4 * snapUm

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

// addMitre keeps the quarter arc of corners chain if the piece has them all in a row.
func (p *piece) addMitre(at pt, chain []pt) {
	if len(chain) < 2 {
		return
	}
	n := len(p.v)
	i := slices.Index(p.v, chain[0])
	if i < 0 || n < len(chain)+2 {
		return
	}
	for k, q := range chain {
		if p.v[(i+k)%n] != q {
			return
		}
	}
	p.mitres = append(p.mitres, mitre{at, slices.Clone(chain)})
}

// mirrored is m with x and y exchanged.
func (m *mitre) mirrored() mitre {
	n := mitre{pt{m.at.y, m.at.x}, make([]pt, len(m.chain))}
	for i, q := range m.chain {
		n.chain[len(n.chain)-1-i] = pt{q.y, q.x}
	}
	return n
}

// moved is m seen from o.
func (m *mitre) moved(o pt) mitre {
	n := mitre{pt{m.at.x - o.x, m.at.y - o.y}, make([]pt, len(m.chain))}
	for i, q := range m.chain {
		n.chain[i] = pt{q.x - o.x, q.y - o.y}
	}
	return n
}

// clipped is the part of m's fan that lies in the block of w x h, as a fan of its own, with a
// corner or a side on the block's border; m itself where it lies well within. It is false where
// what would be left is too small, and where the block's corner is in it.
func (m *mitre) clipped(w, h int64) (mitre, bool) {
	lo, hi := m.bounds()
	x, y := lo.x <= 0 || hi.x >= w, lo.y <= 0 || hi.y >= h
	switch {
	case x && y || hi.x-lo.x >= w || hi.y-lo.y >= h:
		return mitre{}, false
	case y:
		n := m.mirrored()
		n, ok := n.clipped(h, w)
		return n.mirrored(), ok
	case !x:
		return *m, true
	}
	line := w
	if lo.x <= 0 {
		line = 0
	}
	off := func(v int64) bool { return v-line < aloneUm && line-v < aloneUm }
	cut := 0 // the first corner beyond the line
	for i, c := range m.chain {
		if off(c.x) {
			return mitre{}, false
		}
		if i > 0 && (c.x < line) != (m.chain[i-1].x < line) {
			cut = i
		}
	}
	if cut == 0 || off(m.at.x) {
		return mitre{}, false
	}
	a, b := m.chain[cut-1], m.chain[cut]
	if a.x > b.x {
		a, b = b, a
	}
	// Where the chord meets the line, rounded away from the obstacle.
	e := edge{xa: a.y, ya: a.x, xb: b.y, yb: b.x}
	first, last := m.chain[0], m.chain[len(m.chain)-1]
	meets, ends := pt{line, e.ceilAt(line)}, pt{line, m.at.y}
	if m.at.y < max(first.y, last.y) {
		meets.y = e.floorAt(line)
	}
	if d := meets.y - ends.y; d < aloneUm && d > -aloneUm {
		return mitre{}, false
	}
	within := (m.at.x < line) == (line == w)
	var before, beyond []pt
	before = append(append(before, m.chain[:cut]...), meets)
	beyond = append(append(beyond, meets), m.chain[cut:]...)
	switch level := last.y == m.at.y; { // the chain's end on the side that the line meets
	case within && level:
		return mitre{m.at, append(before, ends)}, true
	case within:
		return mitre{m.at, append([]pt{ends}, beyond...)}, true
	case level:
		return mitre{ends, beyond}, true
	}
	return mitre{ends, before}, true
}

// bounds is what the fan takes up, and aloneUm all round.
func (m *mitre) bounds() (lo, hi pt) {
	a, b := m.chain[0], m.chain[len(m.chain)-1]
	lo = pt{min(m.at.x, a.x, b.x) - aloneUm, min(m.at.y, a.y, b.y) - aloneUm}
	return lo, pt{max(m.at.x, a.x, b.x) + aloneUm, max(m.at.y, a.y, b.y) + aloneUm}
}

// mitredBy is p's corners with those mitres' sides going on until they meet.
func (p *piece) mitredBy(ms []mitre) []pt {
	out := make([]pt, 0, len(p.v))
next:
	for _, q := range p.v {
		for i := range ms {
			if q == ms[i].chain[0] {
				out = append(out, ms[i].at)
			}
			if slices.Contains(ms[i].chain, q) {
				continue next
			}
		}
		out = append(out, q)
	}
	return out
}

// clearOf says whether a convex polygon, counter-clockwise, is sure to be clear of a box: that all
// of the box is beyond one of its sides.
func clearOf(v []pt, lo, hi pt) bool {
	for i, a := range v {
		b := v[(i+1)%len(v)]
		// The corner of the box farthest to the left of the side.
		c := hi
		if b.y > a.y {
			c.x = lo.x
		}
		if b.x < a.x {
			c.y = lo.y
		}
		if turnSign(a, b, c) < 0 {
			return true
		}
	}
	return false
}

// mitred puts the pieces into c.coarse, mitred where that may be, and the fans it takes within
// the block of w x h into c.fans. A corner is mitred where its fan, as far as it lies in the
// block, has nothing near.
func (c *cutter) mitred(pieces []piece, w, h int64) {
	c.coarse, c.fans = append(c.coarse[:0], pieces...), c.fans[:0]
	c.whole = c.whole[:0]
	for i := range pieces {
		p := &pieces[i]
		v := p.v
		if len(p.mitres) > 0 {
			v = p.mitredBy(p.mitres)
		}
		c.whole = append(c.whole, v)
	}
	var keep []mitre
	for i := range pieces {
		p := &pieces[i]
		keep = keep[:0]
		for k := range p.mitres {
			m := &p.mitres[k]
			lo, hi := m.bounds()
			if hi.x < 0 || hi.y < 0 || lo.x > w || lo.y > h {
				keep = append(keep, *m)
				continue
			}
			part, alone := m.clipped(w, h)
			if alone = alone && !slices.Contains(c.refused, m.at); alone {
				lo, hi = part.bounds()
			}
			for j := 0; alone && j < len(pieces); j++ {
				alone = j == i || !pieces[j].touches(lo.x, lo.y, hi.x, hi.y) || clearOf(c.whole[j], lo, hi)
			}
			if alone {
				keep = append(keep, *m)
				c.fans = append(c.fans, fan{part, m.at})
			}
		}
		switch {
		case len(keep) == 0:
		case len(keep) == len(p.mitres):
			c.coarse[i].v = c.whole[i]
		default:
			c.coarse[i].v = p.mitredBy(keep)
		}
	}
}

// side is a stretch of cells' upright sides at one x.
type side struct{ lo, hi, cell int32 }

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

// addFans adds the fans to a cut of what was mitred. It gives the fans that did not fit between
// its cells, which does not happen unless sides were snapped where none should be.
func (out *cut) addFans(fans []fan, turned bool) (misfits []pt) {
	if len(fans) == 0 {
		return nil
	}
	type level struct {
		y   int32
		top bool // the cell ends there
	}
	type upright struct {
		x     int32
		right bool // the cell is on the left of it
	}
	levels, uprights := map[level][]int32{}, map[upright][]side{}
	for i := range fans {
		at := fans[i].at
		if turned {
			at = pt{at.y, at.x}
		}
		x, y := int32(at.x), int32(at.y)
		for _, b := range [2]bool{false, true} {
			levels[level{y, b}], uprights[upright{x, b}] = nil, nil
		}
	}
	for i := range out.cells {
		id := int32(i)
		rows := out.rowsOf(id)
		for _, l := range [2]level{{rows[0].y, false}, {rows[len(rows)-1].y, true}} {
			if ids, ok := levels[l]; ok {
				levels[l] = append(ids, id)
			}
		}
		put := func(k upright, on func(row) bool) {
			if ss, ok := uprights[k]; ok {
				if lo, hi, ok := stretchOf(rows, on); ok && lo < hi && !slices.Contains(ss, side{lo, hi, id}) {
					uprights[k] = append(ss, side{lo, hi, id})
				}
			}
		}
		for _, r := range rows {
			put(upright{r.l, false}, func(q row) bool { return q.l == r.l })
			put(upright{r.r, true}, func(q row) bool { return q.r == r.r })
		}
	}
	for i := range fans {
		f := &fans[i].mitre
		in := *f // as the cut has it
		w, h := out.w, out.h
		if turned {
			in = f.mirrored()
			w, h = h, w
		}
		x, y := int32(in.at.x), int32(in.at.y)
		first, last := in.chain[0], in.chain[len(in.chain)-1]
		v, l := first, last // the ends on the upright side and on the level one
		if int32(v.x) != x {
			v, l = last, first
		}
		var over []side // the stretches of the upright side
		lo, hi := min(int32(v.y), y), max(int32(v.y), y)
		covered := int32(0)
		for _, s := range uprights[upright{x, int32(l.x) > x}] {
			if a, b := max(lo, s.lo), min(hi, s.hi); a < b {
				over = append(over, side{a, b, s.cell})
				covered += b - a
			}
		}
		beyond := int32(none) // the cell beyond the level side
		for _, id := range levels[level{y, int32(v.y) > y}] {
			rows := out.rowsOf(id)
			r := rows[0]
			if r.y != y || int32(v.y) > y {
				r = rows[len(rows)-1]
			}
			if r.l <= min(int32(l.x), x) && r.r >= max(int32(l.x), x) {
				beyond = id
			}
		}
		if x != 0 && x != w && covered != hi-lo || y != 0 && y != h && beyond == none {
			misfits = append(misfits, fans[i].of)
			continue
		}
		out.addFan(f, turned, v, l, over, beyond)
	}
	return misfits
}

// addFan adds the triangles of a fan and joins them. v and l are the chain's ends on the upright
// and on the level side, over the stretches of the upright side and their cells, beyond the
// level side's cell; all these as the cut has them.
func (out *cut) addFan(f *mitre, turned bool, v, l pt, over []side, beyond int32) {
	n := len(f.chain)
	base := int32(len(out.cells))
	at := f.at
	for i := 1; i < n; i++ {
		a, b := f.chain[i-1], f.chain[i]
		t := triangle{{int32(at.x), int32(at.y)}, {int32(b.x), int32(b.y)}, {int32(a.x), int32(a.y)}}
		lo, hi := t.bounds(turned)
		out.cells = append(out.cells, cell{row0: int32(len(out.fan)), comp: int32(len(out.cells)), lo: int32(lo.y), hi: int32(hi.y)})
		out.fan = append(out.fan, t)
	}
	put := func(a, b int32, p, q pt, turns uint8) {
		out.joints = append(out.joints, joint{a, b, int32(p.x), int32(p.y), int32(q.x), int32(q.y), turns})
		unite(out.cells, a, b)
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
		if turned {
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
		case end.x == 0 || end.y == 0 || end.x == int64(out.w) || end.y == int64(out.h):
			// The side goes on beyond the border.
		case p == end:
			turns = turnA
		case q == end:
			turns = turnB
		}
		put(tri, cell, p, q, turns)
	}
	atx := at.x
	if turned {
		atx = at.y
	}
	for _, s := range over {
		outer(v, pt{atx, int64(s.lo)}, pt{atx, int64(s.hi)}, s.cell)
	}
	outer(l, l, pt{atx, l.y}, beyond)
	out.corners = append(out.corners, f.at, f.chain[0], f.chain[n-1])
}

// bendsAt says whether a way may bend at a point of a fan's outer sides; known is false for other
// points.
func (c *cut) bendsAt(p pt) (bends, known bool) {
	if i := slices.Index(c.corners, p); i >= 0 {
		return i%3 != 0, true
	}
	return false, false
}
