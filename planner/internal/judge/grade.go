package judge

import (
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
)

// grader adds up, over the segment ab, how many levels clearance is below, in
// micrometres times levels. Where it cannot tell within TightResolution it counts the more.
type grader struct {
	j    *Judge
	a, b geom.Point
	long float64
	sum  float64
	most float64 // beyond which the sum need not be known
}

// below is how many levels a clearance is below.
func (j *Judge) below(um float64) int {
	k := 0
	for k < len(j.Levels) && um < float64(j.Levels[k]) {
		k++
	}
	return k
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

// levels bounds how many levels clearance is below, anywhere between two places that are
// part apart: it changes no faster than one goes.
func (g *grader) levels(a, b *probe, part float64) (least, most int) {
	return g.j.below((a.hi + b.hi + part) / 2), g.j.below((a.lo + b.lo - part) / 2)
}

func (g *grader) halve(from, to float64, a, b *probe) {
	if g.sum > g.most {
		return
	}
	j := g.j
	part := float64((to - from) * g.long)
	least, most := g.levels(a, b, part)
	if least != most && !(a.exact && b.exact) {
		end := j.At
		if from == 0 || to == 1 {
			end = j.end
		}
		g.measure(a, end)
		g.measure(b, end)
		least, most = g.levels(a, b, part)
	}
	if least != most && part > TightResolution {
		if k := j.below(a.Um); k == j.below(b.Um) && g.all(k, a.Nearest, b.Nearest) {
			most = k
		} else {
			mid := from + (to-from)/2
			m := g.at(Along(g.a, g.b, mid))
			g.halve(from, mid, a, &m)
			g.halve(mid, to, &m, b)
			return
		}
	}
	g.sum += float64(part * float64(most))
}

// all says whether clearance is below k levels, no more and no fewer, all the way
// between two places, as it is at both. See Tight for the ceiling.
func (g *grader) all(k int, na, nb clearance.Nearest) bool {
	j, a, b := g.j, na.On, nb.On
	if k < len(j.Levels) && !j.Field.SegmentClear(a, b, j.Levels[k]) {
		return false
	}
	if k == 0 {
		return true
	}
	um := float64(j.Levels[k-1])
	return j.ceiling(a, b, na) < um || j.ceiling(a, b, nb) < um
}

// Narrowest is the place of smallest clearance on ab.
func (j *Judge) Narrowest(a, b geom.Point) geom.Point { return j.Segment(a, b).On }

// Clearance is the clearance at p.
func (j *Judge) Clearance(p geom.Point) float64 { return j.At(p).Um }

// Middle is the place reached from p straight away from the nearest solid, where something
// else becomes as near or clearance is Open, to a micrometre or so. It is p where
// there is no way to tell.
func (j *Judge) Middle(p geom.Point) geom.Point {
	n := j.At(p)
	if n.Um == 0 || n.Um >= j.Open() {
		return p
	}
	ux, uy := (p.X-n.At.X)/n.Um, (p.Y-n.At.Y)/n.Um
	step := func(s float64) geom.Point {
		return geom.Point{X: math.Round(p.X + float64(s*ux)), Y: math.Round(p.Y + float64(s*uy))}
	}
	lo, hi := 0.0, j.Open()-n.Um
	if j.At(step(hi)).Um >= j.Open()-1 {
		return step(hi)
	}
	for hi-lo > 1 {
		// Rounding puts a place off by less than 1 µm, and its clearance no more.
		if m := (lo + hi) / 2; j.At(step(m)).Um >= n.Um+m-2 {
			lo = m
		} else {
			hi = m
		}
	}
	return step(lo)
}
