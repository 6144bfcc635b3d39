package voronoi

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

const (
	// drawUm is how far chords of a drawn edge may be off it.
	drawUm = 500.0
	// closeUm is how far they may be off where clearance is needed to the last bit: half a
	// nanometre.
	closeUm = 5e-4
	// drawDepth bounds the halving: 2^40 pieces of a curve are far below closeUm.
	drawDepth = 40
)

// draw is a polyline along an arc from s0 to s1. It is off the arc by drawUm at most, and
// by less than clearance there exceeds um, or than closeUm.
func (g *Graph) draw(at step, s0, s1, um float64) []geom.Point {
	a := g.arc(at)
	pts := []geom.Point{g.place(at.block, a.curve.at(s0))}
	var halve func(s0, s1 float64, depth int)
	halve = func(s0, s1 float64, depth int) {
		off := a.sag(s0, s1)
		room := min(a.clearance(s0), a.clearance(s1)) - um
		if off <= closeUm || off <= min(drawUm, room) || depth == 0 {
			pts = append(pts, g.place(at.block, a.curve.at(s1)))
			return
		}
		m := (s0 + s1) / 2
		halve(s0, m, depth-1)
		halve(m, s1, depth-1)
	}
	halve(s0, s1, drawDepth)
	return pts
}

// sag bounds how far the chord from s0 to s1 is off the curve: by the second
// derivative, an eighth of it times the square of the span.
func (c *curve) sag(s0, s1 float64) float64 {
	d := s1 - s0
	switch c.shape {
	case parabola:
		return float64(d*d) / (8 * c.h)
	case hyperbola:
		s := 0.0
		if s0 > 0 == (s1 > 0) {
			s = min(math.Abs(s0), math.Abs(s1))
		}
		b := float64(c.b * c.b)
		q := 1 + float64(s*s)/b
		return math.Abs(c.a) / b / float64(q*math.Sqrt(q)) * float64(d*d) / 8
	}
	return 0
}
