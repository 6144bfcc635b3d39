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
	was, is := t.j.Place(a).Um, t.j.Place(b).Um
	most := was + long
	if was < limit && is < limit { // exact, and no more than half way between is farther
		most = (was + is + long) / 2
	}
	if most < limit || most < reach && max(was, is) < limit {
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
