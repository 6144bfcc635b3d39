package judge

import (
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
)

// grader adds up how much of the segment ab has clearance below the preferred one, in
// micrometres. Where it cannot tell within TightResolution it counts all.
type grader struct {
	j    *Judge
	a, b geom.Point
	long float64
	sum  float64
	most float64 // beyond which the sum need not be known
}

// probe is a place on the segment and bounds of the clearance there, exact once that was
// needed.
type probe struct {
	clearance.Nearest
	lo, hi float64
	exact  bool
}

func (g *grader) at(p geom.Point) probe {
	q := probe{}
	q.On = p
	q.lo, q.hi = g.j.Field.Bracket(p)
	return q
}

func (g *grader) measure(q *probe, known func(geom.Point) clearance.Nearest) {
	if !q.exact {
		q.Nearest, q.exact = known(q.On), true
		q.lo, q.hi = q.Um, q.Um
	}
}

// tight says what is known, of everywhere between two places that are part apart, about
// clearance being below the preferred one: it changes no faster than one goes.
func (g *grader) tight(a, b *probe, part float64) (all, none bool) {
	wide := 2 * g.j.Open()
	return a.hi+b.hi+part < wide, a.lo+b.lo-part >= wide
}

func (g *grader) halve(from, to float64, a, b *probe) {
	if g.sum > g.most {
		return
	}
	j := g.j
	part := float64((to - from) * g.long)
	all, none := g.tight(a, b, part)
	if !all && !none && !(a.exact && b.exact) {
		end := j.At
		if from == 0 || to == 1 {
			end = j.end
		}
		g.measure(a, end)
		g.measure(b, end)
		all, none = g.tight(a, b, part)
	}
	switch {
	case none:
		return
	case all || part <= TightResolution:
	case a.Um >= j.Open() && b.Um >= j.Open() && j.Field.SegmentClear(a.On, b.On, j.WideUm):
		return
	case max(a.Um, b.Um) < j.Open() && (j.ceiling(a.On, b.On, a.Nearest) < j.Open() || j.ceiling(a.On, b.On, b.Nearest) < j.Open()):
		// See Tight.
	default:
		mid := from + (to-from)/2
		m := g.at(Along(g.a, g.b, mid))
		g.halve(from, mid, a, &m)
		g.halve(mid, to, &m, b)
		return
	}
	g.sum += part
}
