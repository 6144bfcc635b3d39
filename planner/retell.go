package planner

import (
	"context"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
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
	return &past{record: k, boxes: d.boxes, known: make([]state, len(k.strips))}
}

// same says whether nothing changed near a strip.
func (p *past) same(s int) bool {
	if p.known[s] == unasked {
		p.known[s] = same
		if p.strips[s].reach.meets(p.boxes) {
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
	return was == now && k.q.Goal == q.Request.Goal && k.q.Options == q.Request.Options && slices.Equal(k.pts, q.Previous)
}

// holds says whether piece i of the old route is known to be clear on this version.
func (p *past) holds(i int) bool {
	if p == nil {
		return false
	}
	s := p.bits[i].strip
	return p.strips[s].clear && p.same(s)
}

// strip is the strip from a to b that holds on this version, -1 when there is none. They are
// asked for mostly in order.
func (p *past) strip(a, b geom.Point) int {
	if p == nil {
		return -1
	}
	for range 2 {
		for s := p.ask; s < len(p.strips); s++ {
			if w := &p.strips[s]; w.a == a && w.b == b {
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
	if s := t.past.strip(a, b); s >= 0 && t.past.strips[s].clear {
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
// checked what is new of it: the rest was on a version that is the same near it. Nil when
// nothing is known of it.
func (t *task) retell(ctx context.Context, c *course) (*Route, error) {
	if t.past == nil || len(c.pts) > mostRecorded {
		return nil, nil
	}
	t.past.ask = 0
	from := make([]int, len(c.pts)-1)
	any := false
	for i := range from {
		if from[i] = t.past.strip(c.pts[i], c.pts[i+1]); c.pts[i] == c.pts[i+1] {
			return nil, nil
		}
		any = any || from[i] >= 0
	}
	if !any {
		return nil, nil
	}
	n := t.reoutline(c, from)
	if n == nil {
		return nil, nil
	}
	if ctx.Err() != nil {
		return nil, context.Cause(ctx)
	}
	n.r = t.assemble(n.record)
	n.r.Bound = t.bound(c, n.r)
	t.retold = n
	return n.r, t.recheck(n)
}

// reoutline makes the record of a course whose piece i is strip from[i] of the past, or a new
// one where that is -1; nil when it has too many points.
func (t *task) reoutline(c *course, from []int) *retold {
	p, below := t.past, float64(t.q.Options.TightBelowUm)
	k := &record{
		m: t.w.m, q: t.q, pts: make([]geom.Point, 0, len(p.pts)+2),
		strips: make([]strip, 0, len(from)), parts: make([]part, 0, len(from)+2), bits: make([]bit, 0, len(p.bits)+2),
	}
	src := make([]int, 0, len(from)+2) // the part of the past that a part is, or -1
	for i, s := range from {
		if s < 0 {
			k.strips = append(k.strips, strip{a: c.pts[i], b: c.pts[i+1], parts: len(k.parts)})
			for _, w := range t.outline(c.pts[i : i+2]).pieces {
				k.parts, src = append(k.parts, part{piece: w, strip: i}), append(src, -1)
			}
			continue
		}
		w := p.strips[s]
		w.parts = len(k.parts)
		k.strips = append(k.strips, w)
		p0, p1 := p.partsOf(s)
		k.parts = append(k.parts, p.parts[p0:p1]...)
		for q := p0; q < p1; q++ {
			k.parts[len(src)].strip = i
			src = append(src, q)
		}
	}
	n := &retold{record: k}
	long := 0.0
	for i := 0; i < len(k.parts); { // leg by leg, as outline.markSmallest
		tight, least := k.parts[i].tight(below), math.Inf(1)
		for ; i < len(k.parts) && k.parts[i].tight(below) == tight; i++ {
			least = min(least, k.parts[i].near.Um)
			k.parts[i].marked = false
			long += geom.Dist(k.parts[i].a, k.parts[i].b)
		}
		best := i - 1
		for k.parts[best].near.Um > least+roundingReach {
			best--
		}
		k.parts[best].marked = true
	}
	most := float64(t.q.Options.MaxSpacingUm)
	if most > 0 && long/most+float64(len(k.parts)) > MaxRoutePoints {
		return nil
	}
	for i := range k.parts {
		w := &k.parts[i]
		w.bits = len(k.bits)
		if q := src[i]; q >= 0 && p.parts[q].marked == w.marked {
			b0, b1 := p.bitsOf(q)
			n := len(k.bits)
			k.bits = append(k.bits, p.bits[b0:b1]...)
			for ; n < len(k.bits); n++ {
				b := &k.bits[n]
				b.roomed = b.roomed && !t.beside(b).meets(p.boxes)
				b.strip, b.fresh = w.strip, false
			}
			continue
		}
		o := outline{t: t, below: below, pieces: []piece{w.piece}}
		if w.marked {
			o.cut(0, w.near.On)
		}
		if most > 0 {
			o.space(most)
		}
		strip := w.strip
		for _, w := range o.pieces {
			k.bits = append(k.bits, t.bit(&w))
			b := &k.bits[len(k.bits)-1]
			b.strip, b.fresh = strip, true
		}
	}
	if len(k.bits) > mostRecorded {
		return nil
	}
	for i := range k.bits {
		k.pts = append(k.pts, k.bits[i].a)
	}
	k.pts = append(k.pts, c.pts[len(c.pts)-1])
	k.goal, k.ahead = p.goal, p.ahead
	if k.ahead.meets(p.boxes) {
		at := t.q.Goal.At
		k.goal.ClearanceUm = t.roundedDown(t.j.Place(at).Um + roundingUm)
		k.goal.SpeedCeiling, k.goal.SpeedCause = t.ceiling(at, at, k.goal.Heading)
		k.ahead = t.aheadOf(k.goal)
	}
	for i, s := range from {
		if s < 0 {
			t.aim(k, i)
		}
	}
	return n
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
	pts := make([]RoutePoint, len(k.bits)+1)
	for i := range k.bits {
		b := &k.bits[i]
		s := pts[i].S
		pts[i] = b.at
		pts[i].S = s
		pts[i+1].S = s + b.long
		r.CostUm += b.cost
	}
	end := &pts[len(k.bits)]
	r.LengthUm = end.S
	*end = k.goal
	end.S = r.LengthUm
	for i := 0; i < len(k.bits); {
		first := i
		for i++; i < len(k.bits) && k.bits[i].tight(below) == k.bits[first].tight(below); i++ {
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
	l := Leg{Tight: k.bits[i].tight(float64(t.q.Options.TightBelowUm)), Points: pts[i : j+1 : j+1], LengthUm: pts[j].S - pts[i].S}
	l.SpeedCeiling, l.SpeedCause = t.q.Body.MaxSpeed, CauseBody
	lower := func(v float64, c SpeedCause) {
		if v < l.SpeedCeiling {
			l.SpeedCeiling, l.SpeedCause = v, c
		}
	}
	least := math.Inf(1)
	for n := i; n < j; n++ {
		b := &k.bits[n]
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
	narrowest := j - 1
	for k.bits[narrowest].near.Um > least+roundingReach {
		narrowest--
	}
	b := &k.bits[narrowest]
	l.SmallestUm = t.roundedDown(least + roundingUm)
	l.SmallestAt, l.SmallestS = b.near.On, pts[narrowest].S+geom.Dist(b.a, b.near.On)
	if b.near.Feature != nil {
		l.Nearest = b.near.Feature.Name
	}
	if !b.roomed {
		b.roomed = true
		b.left = max(l.SmallestUm, t.room(l.SmallestAt, b.at.Heading+math.Pi/2))
		b.right = max(l.SmallestUm, t.room(l.SmallestAt, b.at.Heading-math.Pi/2))
	}
	l.LeftUm, l.RightUm = b.left, b.right
	return l
}

// beside is what the room to either side of a bit's narrowest place depends on: what is as
// near to the free way to either side as its nearest solid, and, since a place is looked for
// by halving the whole of the cap, what touches any of that.
func (t *task) beside(b *bit) *reach {
	wide := float64(t.w.field.Cap())
	x, y := float64(wide*math.Cos(b.at.Heading)), float64(wide*math.Sin(b.at.Heading))
	on := b.near.On
	um := (b.near.Um+float64(max(b.left, b.right)))/2 + reachSlack
	r := reachOf(geom.Point{X: on.X - y, Y: on.Y + x}, geom.Point{X: on.X + y, Y: on.Y - x}, um)
	return &r
}

// recheck has what is new of a route checked, as task.check, run by run.
func (t *task) recheck(n *retold) error {
	for i := 0; i < len(n.bits); i++ {
		if !n.bits[i].fresh {
			continue
		}
		first, least := i, int64(math.MaxInt64)
		for ; i < len(n.bits) && n.bits[i].fresh; i++ {
			least = min(least, t.roundedDown(n.bits[i].near.Um+roundingUm))
		}
		if err := t.check(n.pts[first:i+1], least); err != nil {
			return err
		}
	}
	return nil
}
