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

// addMitre keeps the quarter arc of corners chain if the piece has them all in a row, between two
// sides along the axes: beside a side that is almost one the corner on it is put a little off it.
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
	along := func(a, b pt) bool {
		return a.x == at.x && b.x == at.x && a.y != at.y || a.y == at.y && b.y == at.y && a.x != at.x
	}
	if !along(p.v[(i+n-1)%n], chain[0]) || !along(p.v[(i+len(chain))%n], chain[len(chain)-1]) {
		return
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
