package planner

import (
	"context"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// retold is a route made of what a record holds of it and of new strips.
type retold struct {
	*record
	r *Route
}

// retell describes a course, as describe does, from what is known of its strips, and has
// checked what is new of it: the rest was on a version that is the same near it. Nil when too
// little is known of it.
func (t *task) retell(ctx context.Context, c *course) (*Route, error) {
	if t.past == nil || len(c.pts) > mostRecorded || slices.ContainsFunc(c.pts[1:], func(p geom.Point) bool { return p == c.pts[0] }) {
		return nil, nil
	}
	k := t.follow(c)
	if k == nil {
		if k = t.splice(c); k == nil {
			return nil, nil
		}
	}
	if ctx.Err() != nil {
		return nil, context.Cause(ctx)
	}
	r := t.assemble(k)
	r.Bound = t.bound(c, r)
	t.retold = &retold{k, r}
	return r, t.recheck(k)
}

// follow makes the record of a course that is all known but for its first piece, if it
// is described as it was: only that piece is new. Else nil.
func (t *task) follow(c *course) *record {
	p := t.past
	p.ask = 0
	s, from := p.strips(), cut{len(p.tail.strips), len(p.tail.parts), len(p.tail.bits)}
	if len(c.pts) > 2 {
		if s = p.find(c.pts[1], c.pts[2]); s < len(p.head.strips) || p.strips()-s != len(c.pts)-2 {
			return nil
		}
		from = p.strip(s).first
	}
	for i := 1; i+1 < len(c.pts); i++ {
		if w := p.strip(s + i - 1); w.a != c.pts[i] || w.b != c.pts[i+1] || !p.same(s+i-1) {
			return nil
		}
	}
	k := &record{digest: t.w.m.Digest(), q: t.q, tail: p.tail, from: from}
	for _, w := range t.outline(c.pts[:2]).pieces {
		k.head.parts = append(k.head.parts, part{piece: w})
	}
	n := len(k.head.parts)
	rest := p.tail.parts[k.from.parts:]
	if !t.mark(n+len(rest), n, func(i int) *part {
		if i < n {
			return &k.head.parts[i]
		}
		return &rest[i-n]
	}) {
		return nil
	}
	k.head.strips = []strip{{a: c.pts[0], b: c.pts[1], near: t.j.Place(c.pts[0])}}
	k.head.bits = make([]bit, 0, n+1)
	for i := range k.head.parts {
		k.head.parts[i].bits = len(k.head.bits)
		k.head.bits = t.split(k.head.bits, 0, &k.head.parts[i])
	}
	if k.bits() > mostRecorded {
		return nil
	}
	for i := k.from.bits; i < len(p.tail.bits); i++ {
		if b := &p.tail.bits[i]; b.roomed && t.beside(b).meets(p.boxes) {
			return nil
		}
	}
	t.recallGoal(k)
	next := k.goal.ClearanceUm
	if from.bits < len(p.tail.bits) {
		next = p.tail.bits[from.bits].at.ClearanceUm
	}
	t.aim(&k.head, 0, next)
	return k
}

// recallGoal sets what is said of the goal, from what is known of it if that holds.
func (t *task) recallGoal(k *record) {
	if p := t.past; p.ahead.meets(p.boxes) {
		t.toGoal(k)
	} else {
		k.goal, k.near, k.ahead = p.goal, p.near, p.ahead
	}
}

// splice makes the record of a course many pieces of which are known strips, nil when there are
// not enough or it has too many points.
func (t *task) splice(c *course) *record {
	p := t.past
	p.ask = 0
	k := &record{digest: t.w.m.Digest(), q: t.q}
	d := &k.tail
	from := make([]int, len(c.pts)-1) // the strip that a piece is, or -1
	anew := make([]bool, len(from))   // whether any of its bits are new
	var src []source                  // of parts
	known := 0
	for i := range from {
		if from[i] = p.find(c.pts[i], c.pts[i+1]); from[i] >= 0 {
			known++
		}
		if c.pts[i] == c.pts[i+1] {
			return nil
		}
	}
	if 2*known < len(from) { // describing all is as fast
		return nil
	}
	for i, s := range from {
		w := strip{a: c.pts[i], b: c.pts[i+1]}
		if s >= 0 {
			w = *p.strip(s)
		}
		w.first = cut{strips: i, parts: len(d.parts)}
		d.strips = append(d.strips, w)
		if s < 0 {
			for _, w := range t.outline(c.pts[i : i+2]).pieces {
				d.parts, src = append(d.parts, part{piece: w}), append(src, source{})
			}
			continue
		}
		was, j := p.stock(s)
		for q := was.strips[j].first.parts; q < was.end(j).parts; q++ {
			d.parts, src = append(d.parts, was.parts[q]), append(src, source{was, q})
		}
	}
	if !t.mark(len(d.parts), len(d.parts), func(i int) *part { return &d.parts[i] }) {
		return nil
	}
	d.bits = make([]bit, 0, p.bits()+2)
	for i := range from {
		d.strips[i].first.bits = len(d.bits)
		for q := d.strips[i].first.parts; q < d.end(i).parts; q++ {
			w, was := &d.parts[q], src[q]
			w.bits = len(d.bits)
			if was.s == nil || was.s.parts[was.part].marked != w.marked {
				d.bits, anew[i] = t.split(d.bits, i, w), true
				continue
			}
			b0, b1 := was.s.bitsOf(was.part)
			d.bits = append(d.bits, was.s.bits[b0:b1]...)
			for n := w.bits; n < len(d.bits); n++ {
				b := &d.bits[n]
				b.strip, b.fresh, b.roomed = i, false, b.roomed && !t.beside(b).meets(p.boxes)
			}
		}
	}
	if len(d.bits) > mostRecorded {
		return nil
	}
	t.recallGoal(k)
	for i := range from {
		if !anew[i] {
			continue
		}
		next := k.goal.ClearanceUm
		if end := d.end(i); end.bits < len(d.bits) {
			next = d.bits[end.bits].at.ClearanceUm
		}
		d.strips[i].near = t.j.Place(d.strips[i].a)
		t.aim(d, i, next)
	}
	return k
}

// source is a part of a stock.
type source struct {
	s    *stock
	part int
}

// stock is where a strip is kept, and which one it is there.
func (k *record) stock(i int) (*stock, int) {
	if i < len(k.head.strips) {
		return &k.head, i
	}
	return &k.tail, i - len(k.head.strips) + k.from.strips
}

// beside is what the room to either side of a bit's narrowest place depends on: what is as
// near to the free way to either side as its nearest solid, and, since a place is looked for
// by halving the whole of the cap, what touches any of that.
func (t *task) beside(b *bit) *reach {
	wide := float64(t.w.field.Cap())
	x, y := float64(wide*math.Cos(b.at.Heading)), float64(wide*math.Sin(b.at.Heading))
	on := b.near.On
	um := (b.near.Um+float64(max(b.left, b.right)))/2 + 2*t.w.frame.Res + reachSlack
	r := reachOf(geom.Point{X: on.X - y, Y: on.Y + x}, geom.Point{X: on.X + y, Y: on.Y - x}, um)
	return &r
}

// recheck has what is new of a route checked, as task.check, run by run.
func (t *task) recheck(k *record) error {
	n := len(k.head.bits)
	if n == 0 {
		n = k.bits()
	}
	var pts []geom.Point
	for i := 0; i < n; i++ {
		if !k.bit(i).fresh {
			continue
		}
		least := int64(math.MaxInt64)
		pts = append(pts[:0], k.bit(i).a)
		for ; i < n && k.bit(i).fresh; i++ {
			least = min(least, t.roundedDown(k.bit(i).near.Um+roundingUm))
			pts = append(pts, k.bit(i).b)
		}
		if err := t.check(pts, least); err != nil {
			return err
		}
	}
	return nil
}
