package planner

import (
	"math"
	"unsafe"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
)

// record is a route as it was answered on a version, with what describing it found out
// about each of its pieces: head, and then the rest of tail, which it may share with the
// record of the route before. It never changes.
type record struct {
	digest [32]byte // of the version
	q      Request
	head   stock
	tail   stock
	from   cut        // where tail's rest begins
	goal   RoutePoint // S is not kept
	near   clearance.Nearest
	ahead  reach // what goal and near, what is nearest to it, depend on
}

// stock are straight pieces in a row: strips, the parts of each, and the bits of those.
type stock struct {
	strips []strip
	parts  []part
	bits   []bit
}

// cut is a place between two strips of a stock.
type cut struct{ strips, parts, bits int }

// strip is a straight piece of the course, between two bends.
type strip struct {
	a, b  geom.Point
	near  clearance.Nearest // what is nearest to a
	first cut               // where it begins in its stock
	clear bool              // the body may drive it, as a whole and bit by bit
	reach reach
}

// part is a strip, or where it is cut for a speed limit or for being tight.
type part struct {
	piece
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
	fresh       bool // judged on the version that its stock was made on
}

// mostRecorded is of how many pieces a route may be to be recorded.
const mostRecorded = 1000

// bytes is about how much memory the record takes.
func (k *record) bytes() int64 {
	if k == nil {
		return 0
	}
	n := int64(unsafe.Sizeof(*k))
	for _, s := range [2]*stock{&k.head, &k.tail} {
		n += int64(cap(s.strips))*int64(unsafe.Sizeof(strip{})) + int64(cap(s.parts))*int64(unsafe.Sizeof(part{})) + int64(cap(s.bits))*int64(unsafe.Sizeof(bit{}))
	}
	return n
}

// strips and bits are how many there are, strip and bit one of them.
func (k *record) strips() int { return len(k.head.strips) + len(k.tail.strips) - k.from.strips }
func (k *record) bits() int   { return len(k.head.bits) + len(k.tail.bits) - k.from.bits }

func (k *record) strip(i int) *strip {
	if i < len(k.head.strips) {
		return &k.head.strips[i]
	}
	return &k.tail.strips[i-len(k.head.strips)+k.from.strips]
}

func (k *record) bit(i int) *bit {
	if i < len(k.head.bits) {
		return &k.head.bits[i]
	}
	return &k.tail.bits[i-len(k.head.bits)+k.from.bits]
}

// owns says whether bit i is this record's alone.
func (k *record) owns(i int) bool { return i < len(k.head.bits) || len(k.head.bits) == 0 }

// stripOf is the strip that a bit is of.
func (k *record) stripOf(i int) int {
	if i < len(k.head.bits) {
		return k.head.bits[i].strip
	}
	return k.bit(i).strip - k.from.strips + len(k.head.strips)
}

// end is where a strip of a stock ends, bitsOf where the bits of a part do.
func (s *stock) end(i int) cut {
	if i+1 < len(s.strips) {
		return s.strips[i+1].first
	}
	return cut{len(s.strips), len(s.parts), len(s.bits)}
}

func (s *stock) bitsOf(p int) (from, to int) {
	if p+1 < len(s.parts) {
		return s.parts[p].bits, s.parts[p+1].bits
	}
	return s.parts[p].bits, len(s.bits)
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

// notes are of a route that was described: its record, but for its strips.
type notes struct {
	c *course
	k *record
	r *Route
}

// noted takes down the route that a course became, unless there is no session to record it in,
// or it cannot be recorded: what a point may do hangs on the ends of its route.
func (t *task) noted(c *course, k *record, r *Route) {
	if t.session != nil && t.j.NeedUm > 0 && t.j.RadiusUm > 0 && len(k.tail.bits) <= mostRecorded {
		t.notes = &notes{c, k, r}
	}
}

// remember records a route that is about to be answered in the session.
func (t *task) remember(r *Route) {
	switch {
	case t.session == nil || r == nil:
	case t.retold != nil && t.retold.r == r:
		t.session.last = t.retold.record
	case t.notes != nil && t.notes.r == r:
		t.session.last = t.record(t.notes)
	default:
		t.session.last = nil
	}
}

// record is the route that was described; nil when it cannot be recorded.
func (t *task) record(n *notes) *record {
	k := n.k
	s := &k.tail
	k.q, k.digest = t.q, t.w.m.Digest()
	s.strips = make([]strip, 0, len(n.c.pts)-1)
	t.j.Rewind()
	p := 0
	for j := 1; j < len(n.c.pts); j++ {
		a, b := n.c.pts[j-1], n.c.pts[j]
		if a == b { // stands still
			return nil
		}
		s.strips = append(s.strips, strip{a: a, b: b, near: t.j.Place(a), first: cut{j - 1, p, s.parts[p].bits}})
		for at := a; at != b; p++ {
			at = s.parts[p].b
			for f, end := s.bitsOf(p); f < end; f++ {
				s.bits[f].strip = j - 1
			}
		}
	}
	for i := range s.strips {
		next := k.goal.ClearanceUm
		if end := s.end(i); end.bits < len(s.bits) {
			next = s.bits[end.bits].at.ClearanceUm
		}
		t.aim(s, i, next)
	}
	return k
}

// aheadOf is what is found out about the goal depends on: nothing but how far it is free to
// travel from there.
func (t *task) aheadOf(goal RoutePoint) reach {
	most := float64(t.w.stopping(t.q.Body, math.Inf(1)))
	to := geom.Point{X: goal.At.X + most*math.Cos(goal.Heading), Y: goal.At.Y + most*math.Sin(goal.Heading)}
	return t.about(goal.At, to, goal.ClearanceUm, min(goal.ClearanceUm+int64(most), t.w.field.Cap()), most, false)
}

// aim finds out whether a strip may be driven and what its description depends on. next is the
// clearance at its end.
func (t *task) aim(s *stock, i int, next int64) {
	w := &s.strips[i]
	end := s.end(i)
	zones := t.w.rules.HasClosed() || t.w.rules.HasOneWay()
	w.clear = true
	stretches := t.j.Weight > 0 || t.q.Body.SensingUm > 0
	for p := w.first.parts; p < end.parts; p++ {
		stretches = stretches || s.parts[p].tight(float64(t.q.Options.TightBelowUm))
	}
	for b := w.first.bits; b < end.bits; b++ {
		v := &s.bits[b]
		w.clear = w.clear && v.near.Um >= float64(t.j.NeedUm) && (!zones || t.j.Allowed(v.a, v.b))
	}
	if w.clear && end.bits-w.first.bits > 1 {
		_, w.clear = t.j.Drive(w.a, w.b)
	}
	last := &s.bits[end.bits-1]
	far := geom.Dist(w.a, w.b)
	if most := float64(t.w.stopping(t.q.Body, math.Inf(1))); last.long < most {
		far += most - last.long
	}
	w.reach = t.about(w.a, w.b, s.bits[w.first.bits].at.ClearanceUm, next, far, stretches)
}
