package planner

import (
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// record is a route as it was answered on a version, with what describing it found out
// about each of its pieces. It never changes.
type record struct {
	m      *floor.Map
	q      Request
	pts    []geom.Point // where its pieces meet
	strips []strip
	parts  []part
	bits   []bit
	goal   RoutePoint
	ahead  reach // what goal depends on
}

// strip is a straight piece of the course, between two bends.
type strip struct {
	a, b  geom.Point
	parts int  // the first of its parts
	clear bool // the body may drive it, as a whole and bit by bit
	reach reach
}

// part is a strip, or where it is cut for a speed limit or for being tight.
type part struct {
	piece
	strip  int  // that it is of
	bits   int  // the first of its bits
	marked bool // cut where clearance is smallest in a leg
}

// bit is a piece of the route, between two of its points.
type bit struct {
	piece
	at          RoutePoint // of the end it begins at; S is not kept
	strip       int        // that it is of
	long, limit float64
	roomed      bool // whether it is the narrowest of its leg: then these are known
	left, right int64
	sensed      bool // known not to be beyond the sensing range
	fresh       bool // judged on the record's version
}

// mostRecorded is of how many pieces a route may be to be recorded, which takes about half
// a kilobyte each.
const mostRecorded = 1000

// bytes is about how much memory the record takes.
func (r *record) bytes() int64 {
	if r == nil {
		return 0
	}
	return int64(64*len(r.pts) + 128*len(r.strips) + 144*len(r.parts) + 288*len(r.bits))
}

// reach is a segment and the distance from it within which something must have changed for
// what was found out about it to be another.
type reach struct {
	a, b geom.Point
	um   float64
	box  geom.Rect // holds all that is within um
}

func reachOf(a, b geom.Point, um float64) reach {
	return reach{a, b, um, geom.BoundsOf(a, b).Grow(um)}
}

func (r *reach) meets(boxes []geom.Rect) bool {
	for i := range boxes {
		if b := &boxes[i]; r.box.Intersects(*b) && geom.RectSegmentDist(*b, r.a, r.b) <= r.um {
			return true
		}
	}
	return false
}

// reachSlack is what is added to reaches for all roundings, in micrometres, beside two
// cells for bounds that are taken from the lattice's vertices.
const reachSlack = 100

// about is the reach of all that is found out about places up to far along a segment of that
// length, of clearance ca and cb, rounded down, at its ends, and beyond them straight on.
//
// A distance, a line of sight or free travel at or from a place depends on what is no
// farther from it than its nearest solid is, before and after: a farther solid that comes or
// goes is never the nearest. Clearance is at most the cap, and changes no faster than one
// goes. A zone counts where it is touched, or within the body's radius, which is
// less. Where stretches of less than some clearance are told (judge.Judge.Tight, and what
// metres cost), a row of cells along the whole segment may be looked at besides.
func (t *task) about(a, b geom.Point, ca, cb int64, far float64, stretches bool) reach {
	long := geom.Dist(a, b)
	um := max((float64(ca+cb)+long)/2, float64(cb)+max(0, far-long)) + 1
	um = min(um, float64(t.w.field.Cap()))
	if stretches {
		um += long
	}
	if far > long && long > 0 {
		share := far / long
		b = geom.Point{X: a.X + float64(share*(b.X-a.X)), Y: a.Y + float64(share*(b.Y-a.Y))}
	}
	return reachOf(a, b, um+2*t.w.frame.Res+reachSlack)
}

// notes are what is taken down while a course is described.
type notes struct {
	t    *task
	c    *course
	o    *outline
	base []piece // before points were added to legs
	r    *Route
}

// noting is for a course about to be described; nil when there is no session to record it in,
// or it cannot be recorded: what a point may do hangs on the ends of its route.
func (t *task) noting(c *course, o *outline) *notes {
	if t.session == nil || t.j.NeedUm == 0 || t.j.RadiusUm == 0 || len(c.pts) > mostRecorded {
		return nil
	}
	return &notes{t: t, c: c, o: o, base: slices.Clone(o.pieces)}
}

// done takes down the route that the course became.
func (n *notes) done(r *Route) {
	if n != nil {
		n.r, n.t.notes = r, n
	}
}

// remember records a route that is about to be answered in the session.
func (t *task) remember(r *Route) {
	switch {
	case t.session == nil || r == nil:
	case t.retold != nil && t.retold.r == r:
		t.session.last = t.retold.record
	case t.notes != nil && t.notes.r == r:
		t.session.last = t.notes.record()
	default:
		t.session.last = nil
	}
}

// record is the route that was described; nil when it cannot be recorded.
func (n *notes) record() *record {
	t, o := n.t, n.o
	if len(o.pieces) > mostRecorded {
		return nil
	}
	k := &record{
		m: t.w.m, q: t.q,
		pts:    make([]geom.Point, 0, len(o.pieces)+1),
		strips: make([]strip, 0, len(n.c.pts)), parts: make([]part, len(n.base)), bits: make([]bit, 0, len(o.pieces)),
	}
	i := 0 // the base piece at hand
	for j := 1; j < len(n.c.pts); j++ {
		k.strips = append(k.strips, strip{a: n.c.pts[j-1], b: n.c.pts[j], parts: i})
		for ; i < len(n.base) && n.base[i].b != n.c.pts[j]; i++ {
			k.parts[i].strip = j - 1
		}
		if i < len(n.base) {
			k.parts[i].strip = j - 1
		}
		i++
	}
	i = 0
	var all []RoutePoint
	for l := range n.r.Legs {
		all = append(all[:max(0, len(all)-1)], n.r.Legs[l].Points...)
	}
	for f := range o.pieces {
		w := &o.pieces[f]
		if w.a == w.b || i == len(n.base) {
			return nil
		}
		if w.a == n.base[i].a {
			k.parts[i].piece, k.parts[i].bits = n.base[i], f
		}
		strip := k.parts[i].strip
		if w.b == n.base[i].b {
			i++
		}
		k.pts = append(k.pts, w.a)
		k.bits = append(k.bits, bit{
			piece: *w, strip: strip, fresh: true, at: all[f], long: geom.Dist(w.a, w.b), limit: t.w.rules.SpeedLimit(w.a, w.b), sensed: t.q.Body.SensingUm == 0,
		})
	}
	k.pts = append(k.pts, o.pieces[len(o.pieces)-1].b)
	k.goal = all[len(all)-1]
	was := outline{t: t, below: o.below, pieces: n.base}
	starts := was.legs()
	for l := 1; l < len(starts); l++ {
		i, _ := was.narrowest(starts[l-1], starts[l])
		k.parts[i].marked = true
	}
	starts = o.legs()
	for l := 1; l < len(starts); l++ {
		leg := &n.r.Legs[l-1]
		i, _ := o.narrowest(starts[l-1], starts[l])
		b := &k.bits[i]
		b.roomed, b.left, b.right = true, leg.LeftUm, leg.RightUm
		if !leg.BeyondSensing && t.q.Body.SensingUm <= t.w.field.Cap() {
			for f := starts[l-1]; f < starts[l]; f++ {
				k.bits[f].sensed = true
			}
		}
	}
	for s := range k.strips {
		t.aim(k, s)
	}
	k.ahead = t.aheadOf(k.goal)
	return k
}

// aheadOf is what is found out about the goal depends on: nothing but how far it is free to
// travel from there.
func (t *task) aheadOf(goal RoutePoint) reach {
	most := float64(t.w.stopping(t.q.Body, math.Inf(1)))
	to := geom.Point{X: goal.At.X + most*math.Cos(goal.Heading), Y: goal.At.Y + most*math.Sin(goal.Heading)}
	return t.about(goal.At, to, goal.ClearanceUm, min(goal.ClearanceUm+int64(most), t.w.field.Cap()), most, false)
}

// partsOf and bitsOf are the range of a strip's parts, and of a part's bits.
func (k *record) partsOf(s int) (from, to int) {
	if s+1 < len(k.strips) {
		return k.strips[s].parts, k.strips[s+1].parts
	}
	return k.strips[s].parts, len(k.parts)
}

func (k *record) bitsOf(p int) (from, to int) {
	if p+1 < len(k.parts) {
		return k.parts[p].bits, k.parts[p+1].bits
	}
	return k.parts[p].bits, len(k.bits)
}

// aim finds out whether a strip may be driven and what its description depends on.
func (t *task) aim(k *record, s int) {
	w := &k.strips[s]
	p0, p1 := k.partsOf(s)
	b0, _ := k.bitsOf(p0)
	_, b1 := k.bitsOf(p1 - 1)
	zones := t.w.rules.HasClosed() || t.w.rules.HasOneWay()
	w.clear = true
	stretches := t.j.Weight > 0 || t.q.Body.SensingUm > 0
	for p := p0; p < p1; p++ {
		stretches = stretches || k.parts[p].tight(float64(t.q.Options.TightBelowUm))
	}
	for b := b0; b < b1; b++ {
		v := &k.bits[b]
		w.clear = w.clear && v.near.Um >= float64(t.j.NeedUm) && (!zones || t.j.Allowed(v.a, v.b))
	}
	if w.clear && b1-b0 > 1 {
		_, w.clear = t.j.Drive(w.a, w.b)
	}
	next := k.goal.ClearanceUm
	if b1 < len(k.bits) {
		next = k.bits[b1].at.ClearanceUm
	}
	last := &k.bits[b1-1]
	far := geom.Dist(w.a, w.b)
	if most := float64(t.w.stopping(t.q.Body, math.Inf(1))); last.long < most {
		far += most - last.long
	}
	w.reach = t.about(w.a, w.b, k.bits[b0].at.ClearanceUm, next, far, stretches)
}
