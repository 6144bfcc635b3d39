// Package pull makes a roadmap's path, which runs from cell to cell, into one that is
// driven: straight where there is sight, turning at corners. Whatever it changes,
// it changes for something that a Judge allows and that costs less, so that the result
// costs at most what it was given.
package pull

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/geom"
)

// Judge says what straight pieces are worth.
type Judge interface {
	// Keeps says whether the piece may be driven and keeps least micrometres of
	// clearance, rounded down to whole ones.
	Keeps(a, b geom.Point, least float64) bool
	// Cost is what the piece costs, or, when that is more than most, something more than
	// most.
	Cost(a, b geom.Point, most float64) float64
	// Least is the smallest clearance along the piece, at most Open.
	Least(a, b geom.Point) float64
	// Open is the clearance from which on a piece costs its length, and Dearest what
	// a micrometre costs at most.
	Open() float64
	Dearest() float64
}

// The bounds of the work.
const (
	// MaxChecks is how many lines of sight one path is worth. A path that would need
	// more is left as it then is.
	MaxChecks = 6000
	// maxRounds is how often all bends are gone through.
	maxRounds = 5
	// halvings is how finely a bend's move is found: to 1/4096 of the piece it moves along, or
	// to the gain.
	halvings = 12
	// roundGain is the share of the cost below which another round is not worth it.
	roundGain = 1e-4
)

// line is the path as it stands, with what each piece costs.
type line struct {
	ctx    context.Context
	j      Judge
	gain   float64
	checks int
	pts    []geom.Point
	pieces []worth // of the piece from pts[i] to pts[i+1]
	stuck  map[[3]geom.Point]bool
}

// worth is what a piece costs and keeps; what is below 0 is not known yet.
type worth struct{ cost, least float64 }

// Straighten gives a path with the same ends. Moves of bends that gain less than gain
// micrometres are not made. The points of the result are points of the path or
// whole micrometres. No stretch comes nearer to solids than what it replaces, to
// the micrometre, rounded down, where that is below the judge's Open. The error is
// ctx's cause.
func Straighten(ctx context.Context, j Judge, pts []geom.Point, gain float64) ([]geom.Point, error) {
	l := &line{ctx: ctx, j: j, gain: gain, pts: append([]geom.Point(nil), pts...), stuck: map[[3]geom.Point]bool{}}
	l.pieces = unknown(len(pts) - 1)
	l.shortcut()
	for range maxRounds {
		before := l.total()
		l.bends()
		l.shortcut()
		if before-l.total() < float64(roundGain*before) {
			break
		}
	}
	if ctx.Err() != nil {
		return nil, context.Cause(ctx)
	}
	return l.pts, nil
}

func unknown(n int) []worth {
	w := make([]worth, n)
	for i := range w {
		w[i] = worth{-1, -1}
	}
	return w
}

// stretch is the cost and the smallest clearance from point i to point k.
func (l *line) stretch(i, k int) worth {
	sum := worth{0, math.Inf(1)}
	for ; i < k; i++ {
		w := &l.pieces[i]
		if w.cost < 0 {
			w.cost = l.j.Cost(l.pts[i], l.pts[i+1], math.Inf(1))
		}
		if w.least < 0 {
			w.least = l.j.Least(l.pts[i], l.pts[i+1])
		}
		sum.cost += w.cost
		sum.least = min(sum.least, w.least)
	}
	return sum
}

func (l *line) total() float64 { return l.stretch(0, len(l.pieces)).cost }

// way is a piece of path that might replace a stretch.
type way struct {
	pts    []geom.Point // ends included
	pieces []worth
}

// verdict is what comes of trying a way.
type verdict uint8

const (
	good verdict = iota
	idle         // allowed for all that is known, but hardly shorter
	barred
)

// try says whether the way through via may replace the stretch from i to k: it is
// allowed, comes no nearer to anything, and costs less by the gain, or, straight
// from i to k, at least no more. When it may, it is given.
func (l *line) try(i, k int, via ...geom.Point) (way, verdict) {
	was := l.stretch(i, k)
	if len(via) > 0 {
		was.cost -= l.gain // fewer points are worth it for nothing
	}
	w := way{pts: []geom.Point{l.pts[i]}}
	long := 0.0
	for _, p := range append(via, l.pts[k]) {
		if last := w.pts[len(w.pts)-1]; p != last {
			long += geom.Dist(last, p)
			w.pts = append(w.pts, p)
		}
	}
	if long > was.cost || len(w.pts) < 2 {
		return w, idle
	}
	for n := 1; n < len(w.pts); n++ {
		if l.spent() || !l.j.Keeps(w.pts[n-1], w.pts[n], was.least) {
			return w, barred
		}
	}
	w.pieces = unknown(len(w.pts) - 1)
	if was.least >= l.j.Open() {
		for n := range w.pieces {
			w.pieces[n] = worth{geom.Dist(w.pts[n], w.pts[n+1]), was.least}
		}
		return w, good
	}
	if float64(long*l.j.Dearest()) <= was.cost {
		return w, good
	}
	sum := 0.0
	for n := range w.pieces {
		v := &w.pieces[n]
		if v.cost = l.j.Cost(w.pts[n], w.pts[n+1], was.cost-sum); sum+v.cost > was.cost {
			return w, barred
		}
		sum += v.cost
	}
	return w, good
}

// better is try for callers to whom idle and barred are the same.
func (l *line) better(i, k int) (way, bool) {
	w, v := l.try(i, k)
	return w, v == good
}

// spent counts a check and says whether there are none left.
func (l *line) spent() bool {
	l.checks++
	return l.checks > MaxChecks || l.checks%64 == 0 && l.ctx.Err() != nil
}

func (l *line) replace(i, k int, w way) {
	l.pts = splice(l.pts, i, k+1, w.pts)
	l.pieces = splice(l.pieces, i, k, w.pieces)
}

func splice[T any](s []T, i, k int, by []T) []T {
	out := make([]T, 0, len(s)-(k-i)+len(by))
	out = append(out, s[:i]...)
	out = append(out, by...)
	return append(out, s[k:]...)
}

// shortcut goes from point to point, from each straight to the farthest one found by
// doubling the stride and then halving it.
func (l *line) shortcut() {
	for i := 0; i+2 < len(l.pts); i++ {
		last := len(l.pts) - 1
		if w, ok := l.better(i, last); ok {
			l.replace(i, last, w)
			return
		}
		good, bad := i+1, last
		var best way
		for stride := 2; i+stride < bad; stride *= 2 {
			w, ok := l.better(i, i+stride)
			if !ok {
				bad = i + stride
				break
			}
			good, best = i+stride, w
		}
		for bad-good > 1 {
			mid := (good + bad) / 2
			if w, ok := l.better(i, mid); ok {
				good, best = mid, w
			} else {
				bad = mid
			}
		}
		if good > i+1 {
			l.replace(i, good, best)
		}
	}
}

// bends goes through the bends and moves each to where the path is shorter.
func (l *line) bends() {
	for i := 1; i+1 < len(l.pts); i++ {
		at := [3]geom.Point(l.pts[i-1 : i+2])
		if l.stuck[at] { // as it was when nothing could be done
			continue
		}
		if w, ok := l.better(i-1, i+1); ok {
			l.replace(i-1, i+1, w)
			i--
			continue
		}
		// Along the piece that leads to the bend, along the one that leads on, then
		// both at once: the corner is cut, and two lesser bends take its place.
		l.slide(i, l.pts[i-1])
		l.slide(i, l.pts[i+1])
		if l.cut(i) {
			i++
		} else if i+1 < len(l.pts) && at == [3]geom.Point(l.pts[i-1:i+2]) {
			l.stuck[at] = true
		}
	}
}

// slide moves bend i towards to, one of its neighbours, as far as that pays.
func (l *line) slide(i int, to geom.Point) {
	from := l.pts[i]
	if a, c := l.pts[i-1], l.pts[i+1]; geom.Dist(a, from)+geom.Dist(from, c)-geom.Dist(a, c) < l.gain {
		return
	}
	w, ok := l.farthest(geom.Dist(from, to), func(t float64) (way, verdict) {
		return l.try(i-1, i+1, between(from, to, t))
	})
	if ok {
		l.replace(i-1, i+1, w)
	}
}

// cut replaces bend i by two, equally far from it, as far from it as there is sight.
func (l *line) cut(i int) bool {
	a, b, c := l.pts[i-1], l.pts[i], l.pts[i+1]
	da, dc := geom.Dist(a, b), geom.Dist(b, c)
	reach := min(da, dc)
	// What is saved at full reach, which is the most.
	if 2*reach-geom.Dist(between(b, a, reach/da), between(b, c, reach/dc)) < l.gain {
		return false
	}
	w, ok := l.farthest(reach, func(t float64) (way, verdict) {
		return l.try(i-1, i+1, between(b, a, float64(t*reach)/da), between(b, c, float64(t*reach)/dc))
	})
	if !ok {
		return false
	}
	l.replace(i-1, i+1, w)
	return len(w.pts) == 4
}

// farthest looks for the largest share t up to 1 of a reach for which a move is good.
func (l *line) farthest(reach float64, move func(t float64) (way, verdict)) (way, bool) {
	if w, v := move(1); v == good {
		return w, true
	}
	lo, hi := 0.0, 1.0
	var best way
	found := false
	for range halvings {
		mid := (lo + hi) / 2
		w, v := move(mid)
		switch v {
		case good:
			lo, best, found = mid, w, true
		case idle:
			lo = mid
		case barred:
			hi = mid
		}
		if l.checks > MaxChecks || float64((hi-lo)*reach) < l.gain/2 {
			break
		}
	}
	return best, found
}

// between is the point at share t of the way from a to b, rounded to whole micrometres.
func between(a, b geom.Point, t float64) geom.Point {
	return geom.Point{X: math.Round(a.X + float64(t*(b.X-a.X))), Y: math.Round(a.Y + float64(t*(b.Y-a.Y)))}
}
