package pull

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/geom"
)

// Relaxer is a Judge that knows where there is most room.
type Relaxer interface {
	Judge
	// Narrowest is the place of smallest clearance on a piece.
	Narrowest(a, b geom.Point) geom.Point
	// Middle is the place reached from p straight away from what is nearest, where
	// something else becomes as near or clearance is Open; in whole micrometres.
	Middle(p geom.Point) geom.Point
	// Clearance is the clearance at p.
	Clearance(p geom.Point) float64
}

// maxRelax is how often all tight pieces are gone through.
const maxRelax = 4

// Relax moves a straightened path towards the middle where clearance is below Open, by
// bend after bend (path relaxation; Thorpe, "Path Relaxation: Path Planning for a Mobile
// Robot", Proc. AAAI 1984): bends, and the narrowest places between them, go to where
// there is as much room on the other side. No stretch loses clearance. A move gains
// gain micrometres of clearance or more, and costs no more than it gains; all of them
// together cost at most budget.
func Relax(ctx context.Context, j Relaxer, pts []geom.Point, gain, budget float64) ([]geom.Point, error) {
	l := &relaxed{line: line{ctx: ctx, j: j, pts: append([]geom.Point(nil), pts...)}, room: j, least: gain, budget: budget}
	l.pieces = unknown(len(pts) - 1)
	for range maxRelax {
		moved := false
		for i := 0; i < len(l.pieces); i++ {
			if l.stretch(i, i+1).least < j.Open() && l.bendIn(i) {
				moved = true
				i++
			}
		}
		for i := 1; i < len(l.pieces); i++ {
			if l.stretch(i-1, i+1).least < j.Open() && l.shift(i) {
				moved = true
			}
		}
		if !moved {
			break
		}
	}
	if ctx.Err() != nil {
		return nil, context.Cause(ctx)
	}
	return l.pts, nil
}

type relaxed struct {
	line
	room   Relaxer
	least  float64 // gain of clearance that a move is worth
	budget float64
}

// bendIn puts a bend into piece i where it is narrowest.
func (l *relaxed) bendIn(i int) bool {
	a, b := l.pts[i], l.pts[i+1]
	on := l.room.Narrowest(a, b)
	p := l.room.Middle(on)
	if near := math.Sqrt(l.least * geom.Dist(on, p)); geom.Dist(on, a) <= near || geom.Dist(on, b) <= near {
		return false // a bend is there
	}
	return l.move(i, i+1, p, func(least float64) float64 { return least - l.pieces[i].least })
}

// shift moves bend i to the middle.
func (l *relaxed) shift(i int) bool {
	p := l.room.Middle(l.pts[i])
	more := l.room.Clearance(p) - l.room.Clearance(l.pts[i])
	return l.move(i-1, i+1, p, func(float64) float64 { return more })
}

// move goes from point i to point k through p, if that is allowed and worth it. more is
// the clearance gained, given the smallest on the new way.
func (l *relaxed) move(i, k int, p geom.Point, more func(least float64) float64) bool {
	was := l.stretch(i, k)
	w := way{pts: []geom.Point{l.pts[i], p, l.pts[k]}, pieces: unknown(2)}
	if p == l.pts[i] || p == l.pts[k] {
		return false
	}
	sum, least := 0.0, math.Inf(1)
	for n := range w.pieces {
		if l.spent() || !l.j.Keeps(w.pts[n], w.pts[n+1], was.least) {
			return false
		}
		v := &w.pieces[n]
		v.cost, v.least = l.j.Cost(w.pts[n], w.pts[n+1], math.Inf(1)), l.j.Least(w.pts[n], w.pts[n+1])
		sum += v.cost
		least = min(least, v.least)
	}
	gained, dearer := more(least), sum-was.cost
	if least < was.least || gained < l.least || dearer > gained || dearer > l.budget {
		return false
	}
	l.budget -= dearer
	l.replace(i, k, w)
	return true
}
