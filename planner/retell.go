package planner

import (
	"context"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
)

// past is a session's record of the very route that a replan asks about, and what of it
// holds on this version: what was found out about strips that nothing changed near.
type past struct {
	*record
	boxes []geom.Rect // what changed
	known []state     // of strips, once asked
	ask   int         // the strip likely to be asked for next
}

// state says whether something changed near a strip.
type state uint8

const (
	unasked state = iota
	same
	changed
)

// mostBoxes is how many things that changed are compared with a record strip by strip.
const mostBoxes = 64

// recall is what the session knows of the old route; nil when that is nothing.
func (w *World) recall(s *Session, q *ReplanRequest) *past {
	if s == nil || q.Old == nil || !s.last.answers(q) || q.Old.Settings() != w.m.Settings() {
		return nil
	}
	d := w.since(q.Old)
	if len(d.boxes) > mostBoxes {
		return nil
	}
	k := s.last
	return &past{record: k, boxes: d.boxes, known: make([]state, k.strips())}
}

// same says whether nothing changed near a strip.
func (p *past) same(s int) bool {
	if p.known[s] == unasked {
		p.known[s] = same
		if p.strip(s).reach.meets(p.boxes) {
			p.known[s] = changed
		}
	}
	return p.known[s] == same
}

// answers says whether the record is of the route that q is about and of the version that it
// was checked on. The body's name is no part of the question.
func (k *record) answers(q *ReplanRequest) bool {
	if k == nil || k.m != q.Old && k.m.Digest() != q.Old.Digest() {
		return false
	}
	was, now := k.q.Body, q.Request.Body
	was.Name, now.Name = "", ""
	return was == now && k.q.Goal == q.Request.Goal && k.q.Options == q.Request.Options && k.goes(q.Previous)
}

// goes says whether the route is by way of these points.
func (k *record) goes(pts []geom.Point) bool {
	n := k.bits()
	if len(pts) != n+1 || pts[n] != k.goal.At {
		return false
	}
	for i := range n {
		if pts[i] != k.bit(i).a {
			return false
		}
	}
	return true
}

// holds says whether piece i of the old route is known to be clear on this version.
func (p *past) holds(i int) bool {
	if p == nil {
		return false
	}
	s := p.stripOf(i)
	return p.strip(s).clear && p.same(s)
}

// place is what is nearest to point i of the route; nil where that is not known to hold on
// this version.
func (p *past) place(i int) *clearance.Nearest {
	switch {
	case p == nil:
		return nil
	case i == p.bits():
		if p.ahead.meets(p.boxes) {
			return nil
		}
		return &p.near
	}
	s := p.stripOf(i)
	if w := p.strip(s); w.a == p.bit(i).a && p.same(s) {
		return &w.near
	}
	return nil
}

// find is the strip from a to b that holds on this version, -1 when there is none. They are
// asked for mostly in order.
func (p *past) find(a, b geom.Point) int {
	if p == nil {
		return -1
	}
	for range 2 {
		for s := p.ask; s < p.strips(); s++ {
			if w := p.strip(s); w.a == a && w.b == b {
				if p.ask = s + 1; !p.same(s) {
					return -1
				}
				return s
			}
		}
		if p.ask == 0 {
			break
		}
		p.ask = 0
	}
	return -1
}

// drives says whether the body may drive straight from a to b.
func (t *task) drives(a, b geom.Point) bool {
	if s := t.past.find(a, b); s >= 0 && t.past.strip(s).clear {
		return true
	}
	_, ok := t.j.Drive(a, b)
	return ok
}

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
	p, below := t.past, float64(t.q.Options.TightBelowUm)
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
	k := &record{m: t.w.m, q: t.q, tail: p.tail, from: from}
	for _, w := range t.outline(c.pts[:2]).pieces {
		k.head.parts = append(k.head.parts, part{piece: w})
	}
	// The marks of legs, as outline.markSmallest.
	n := len(k.head.parts)
	rest := p.tail.parts[k.from.parts:]
	at := func(i int) *part {
		if i < n {
			return &k.head.parts[i]
		}
		return &rest[i-n]
	}
	long := 0.0
	for i := 0; i < n+len(rest); {
		first := i
		tight, least := at(i).tight(below), math.Inf(1)
		for ; i < n+len(rest) && at(i).tight(below) == tight; i++ {
			least = min(least, at(i).near.Um)
			long += geom.Dist(at(i).a, at(i).b)
		}
		mark := i - 1
		for at(mark).near.Um > least+roundingReach {
			mark--
		}
		for f := first; f < i; f++ {
			if f < n {
				at(f).marked = f == mark
			} else if at(f).marked != (f == mark) {
				return nil
			}
		}
	}
	if t.tooMany(long, n+len(rest)) {
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
	t.toGoal(k)
	next := k.goal.ClearanceUm
	if from.bits < len(p.tail.bits) {
		next = p.tail.bits[from.bits].at.ClearanceUm
	}
	t.aim(&k.head, 0, next)
	return k
}

// tooMany says whether a route of that length would have too many points.
func (t *task) tooMany(long float64, parts int) bool {
	most := float64(t.q.Options.MaxSpacingUm)
	return most > 0 && long/most+float64(parts) > MaxRoutePoints
}

// split appends the bits of a part, described on this version.
func (t *task) split(bits []bit, strip int, w *part) []bit {
	o := outline{t: t, below: float64(t.q.Options.TightBelowUm), pieces: []piece{w.piece}}
	if w.marked {
		o.cut(0, w.near.On)
	}
	if most := t.q.Options.MaxSpacingUm; most > 0 {
		o.space(float64(most))
	}
	for i := range o.pieces {
		bits = append(bits, t.bit(&o.pieces[i]))
		bits[len(bits)-1].strip, bits[len(bits)-1].fresh = strip, true
	}
	return bits
}

// toGoal sets what is said of the goal.
func (t *task) toGoal(k *record) {
	k.goal, k.near, k.ahead = t.past.goal, t.past.near, t.past.ahead
	if k.ahead.meets(t.past.boxes) {
		at := t.q.Goal.At
		k.near = t.j.Place(at)
		k.goal.ClearanceUm = t.roundedDown(k.near.Um + roundingUm)
		k.goal.SpeedCeiling, k.goal.SpeedCause = t.ceiling(at, at, k.goal.Heading)
		k.ahead = t.aheadOf(k.goal)
	}
}

// splice makes the record of a course many pieces of which are known strips, nil when there are
// not enough or it has too many points.
func (t *task) splice(c *course) *record {
	p, below := t.past, float64(t.q.Options.TightBelowUm)
	p.ask = 0
	k := &record{m: t.w.m, q: t.q}
	d := &k.tail
	from := make([]int, len(c.pts)-1) // the strip that a piece is, or -1
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
	long := 0.0
	for i := 0; i < len(d.parts); { // leg by leg, as outline.markSmallest
		tight, least := d.parts[i].tight(below), math.Inf(1)
		for ; i < len(d.parts) && d.parts[i].tight(below) == tight; i++ {
			least = min(least, d.parts[i].near.Um)
			d.parts[i].marked = false
			long += geom.Dist(d.parts[i].a, d.parts[i].b)
		}
		mark := i - 1
		for d.parts[mark].near.Um > least+roundingReach {
			mark--
		}
		d.parts[mark].marked = true
	}
	if t.tooMany(long, len(d.parts)) {
		return nil
	}
	d.bits = make([]bit, 0, p.bits()+2)
	for i := range from {
		d.strips[i].first.bits = len(d.bits)
		for q := d.strips[i].first.parts; q < d.end(i).parts; q++ {
			w, was := &d.parts[q], src[q]
			w.bits = len(d.bits)
			if was.s == nil || was.s.parts[was.part].marked != w.marked {
				d.bits = t.split(d.bits, i, w)
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
	t.toGoal(k)
	for i, s := range from {
		if s >= 0 {
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

// bit describes a piece of a route, as task.points and task.describe.
func (t *task) bit(w *piece) bit {
	w.cost = t.cost(w)
	b := bit{
		piece: *w, at: RoutePoint{At: w.a, Heading: bearing(w.a, w.b)},
		long: geom.Dist(w.a, w.b), limit: t.w.rules.SpeedLimit(w.a, w.b), sensed: t.q.Body.SensingUm == 0,
	}
	b.at.SpeedCeiling, b.at.SpeedCause = t.ceiling(w.a, w.b, b.at.Heading)
	b.at.ClearanceUm = t.roundedDown(t.j.Place(w.a).Um + roundingUm)
	return b
}

// assemble makes a route of its bits, as task.describe makes it of an outline.
func (t *task) assemble(k *record) *Route {
	below := float64(t.q.Options.TightBelowUm)
	r := &Route{Start: t.q.Start, Goal: t.q.Goal, SmallestUm: math.MaxInt64}
	n := k.bits()
	pts := make([]RoutePoint, n+1)
	along := 0.0
	for i := range n {
		b := k.bit(i)
		pts[i] = b.at
		pts[i].S = along
		along += b.long
		r.CostUm += b.cost
	}
	pts[n] = k.goal
	pts[n].S = along
	r.LengthUm = along
	for i := 0; i < n; {
		first := i
		for i++; i < n && k.bit(i).tight(below) == k.bit(first).tight(below); i++ {
		}
		l := t.legOf(k, pts, first, i)
		r.Legs = append(r.Legs, l)
		r.DurationS += l.DurationS
		if l.SmallestUm < r.SmallestUm {
			r.SmallestUm, r.SmallestAt = l.SmallestUm, l.SmallestAt
		}
	}
	return r
}

// legOf is task.leg of the bits from i up to j.
func (t *task) legOf(k *record, pts []RoutePoint, i, j int) Leg {
	l := Leg{Tight: k.bit(i).tight(float64(t.q.Options.TightBelowUm)), Points: pts[i : j+1 : j+1], LengthUm: pts[j].S - pts[i].S}
	l.SpeedCeiling, l.SpeedCause = t.q.Body.MaxSpeed, CauseBody
	lower := func(v float64, c SpeedCause) {
		if v < l.SpeedCeiling {
			l.SpeedCeiling, l.SpeedCause = v, c
		}
	}
	least := math.Inf(1)
	for n := i; n < j; n++ {
		b := k.bit(n)
		if b.long > 0 {
			l.DurationS += geom.Metres(b.long) / pts[n].SpeedCeiling
		}
		lower(b.limit, CauseZone)
		l.BeyondSensing = l.BeyondSensing || !b.sensed && t.beyondSensing(b.a, b.b)
		least = min(least, b.near.Um)
	}
	for n := max(i, 1); n <= min(j, len(pts)-2); n++ {
		lower(pts[n].SpeedCeiling, pts[n].SpeedCause)
	}
	at := j - 1
	for k.bit(at).near.Um > least+roundingReach {
		at--
	}
	b := k.bit(at)
	l.SmallestUm = t.roundedDown(least + roundingUm)
	l.SmallestAt, l.SmallestS = b.near.On, pts[at].S+geom.Dist(b.a, b.near.On)
	if b.near.Feature != nil {
		l.Nearest = b.near.Feature.Name
	}
	left, right := b.left, b.right
	if !b.roomed {
		left = t.room(l.SmallestAt, b.at.Heading+math.Pi/2)
		right = t.room(l.SmallestAt, b.at.Heading-math.Pi/2)
		if at < len(k.head.bits) || len(k.head.bits) == 0 { // else others share it
			b.roomed, b.left, b.right = true, left, right
		}
	}
	l.LeftUm, l.RightUm = max(l.SmallestUm, left), max(l.SmallestUm, right)
	return l
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
