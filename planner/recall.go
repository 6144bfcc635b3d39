package planner

import (
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
	if k == nil || k.digest != q.Old.Digest() {
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
