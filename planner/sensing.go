package planner

import (
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/judge"
)

// beyondSensing says whether somewhere along ab no solid is within the body's sensing
// range. Up to the clearance cap it is exact to judge.TightResolution. Beyond the cap, a solid
// counts as up to two cells farther than it is, so that the answer is yes sooner.
func (t *task) beyondSensing(a, b geom.Point) bool {
	if t.q.Body.SensingUm == 0 {
		return false
	}
	reach := float64(t.q.Body.SensingUm)
	limit := min(reach, float64(t.w.field.Cap()))
	long := geom.Dist(a, b)
	was := t.j.Place(a).Um
	if was+long < limit || t.allNear(a, b, was, t.j.Place(b).Um, reach) {
		return false
	}
	from := 0.0
	for _, s := range append(t.j.Tight(a, b, limit), geom.Span{From: 1, To: 1}) {
		if float64((s.From-from)*long) > judge.TightResolution || long == 0 && s.From > from {
			if limit == reach || t.nothingNear(judge.Along(a, b, from), judge.Along(a, b, s.From), reach) {
				return true
			}
		}
		from = s.To
	}
	return false
}

// leastHalved is, in micrometres, how long a piece must be for allNear to look at its middle.
const leastHalved = 2 * geom.UmPerMetre

// allNear says whether a solid is sure to be within reach of every place along ab, of clearance
// ua and ub at its ends: clearance changes no faster than one goes, and is exact below the cap.
func (t *task) allNear(a, b geom.Point, ua, ub, reach float64) bool {
	long := geom.Dist(a, b)
	if most := float64(t.w.field.Cap()); max(ua, ub) >= most {
		return false
	}
	if (ua+ub+long)/2 < reach {
		return true
	}
	if long < leastHalved {
		return false
	}
	m := judge.Along(a, b, 0.5)
	um := t.j.At(m).Um
	return t.allNear(a, m, ua, um, reach) && t.allNear(m, b, um, ub, reach)
}

// nothingNear says whether somewhere along ab no solid is within reach.
func (t *task) nothingNear(a, b geom.Point, reach float64) bool {
	long := geom.Dist(a, b)
	for s := 0.0; ; {
		p := a
		if long > 0 {
			p = judge.Along(a, b, min(1, s/long))
		}
		d := t.farDistance(p, reach)
		if d > reach {
			return true
		}
		if s >= long {
			return false
		}
		s += max(reach-d, t.w.frame.Res)
	}
}

// farDistance bounds the distance from p to the nearest solid from above, by at most two
// cells; any number above reach when none is within reach. It goes down the
// clearance tree: where the smallest value is m, a solid is within m of a vertex.
func (t *task) farDistance(p geom.Point, reach float64) float64 {
	best := math.Inf(1)
	var visit func(n clearance.Node)
	visit = func(n clearance.Node) {
		c := n.Cells()
		f := &t.w.frame
		r := geom.Rect{
			Min: geom.Point{X: f.OX + float64(float64(c.X0)*f.Res), Y: f.OY + float64(float64(c.Y0)*f.Res)},
			Max: geom.Point{X: f.OX + float64(float64(c.X1)*f.Res), Y: f.OY + float64(float64(c.Y1)*f.Res)},
		}
		// A solid in the node comes within a cell's side of one of its vertices.
		if float64(n.Min) > f.Res || r.Dist(p) > min(reach, best) {
			return
		}
		far := 0.0
		for _, q := range r.Corners() {
			far = max(far, geom.Dist(p, q))
		}
		best = min(best, far+float64(n.Min)+1)
		var kids [4]clearance.Node
		k := n.Children(&kids)
		for i := range k {
			visit(kids[i])
		}
	}
	visit(t.w.field.Root())
	return best
}
