package planner

import (
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/judge"
)

// spot is a place on a polyline.
type spot struct {
	piece int // from point piece to the one after it
	at    geom.Point
	s     float64 // micrometres along the polyline
	off   float64 // how far the place asked about is from at
}

// project is the place of a polyline nearest to p, the first of several.
func project(pts []geom.Point, p geom.Point) spot {
	best := spot{off: math.Inf(1)}
	s := 0.0
	for i := 1; i < len(pts); i++ {
		a, b := pts[i-1], pts[i]
		apart := max(min(a.X, b.X)-p.X, p.X-max(a.X, b.X), min(a.Y, b.Y)-p.Y, p.Y-max(a.Y, b.Y))
		if apart <= float64(best.off*(1+keepSlack)) {
			if d, on := geom.SegmentDist(p, a, b); d < best.off {
				best = spot{i - 1, on, s + geom.Dist(a, on), d}
			}
		}
		s += geom.Dist(a, b)
	}
	return best
}

// ahead is the place s micrometres along a polyline, its end when s is beyond.
func ahead(pts []geom.Point, s float64) (geom.Point, int) {
	for i := 1; i < len(pts); i++ {
		long := geom.Dist(pts[i-1], pts[i])
		if s < long {
			return judge.Along(pts[i-1], pts[i], s/long), i - 1
		}
		s -= long
	}
	return pts[len(pts)-1], len(pts) - 2
}

func lengthOf(pts []geom.Point) float64 {
	s := 0.0
	for i := 1; i < len(pts); i++ {
		s += geom.Dist(pts[i-1], pts[i])
	}
	return s
}

// clearFor is how far along pts, from its start, the body may drive: the whole length,
// or, to a micrometre, where the first piece that it may not drive becomes so.
func clearFor(j *judge.Judge, pts []geom.Point) (s float64, all bool) {
	for i := 1; i < len(pts); i++ {
		a, b := pts[i-1], pts[i]
		long := geom.Dist(a, b)
		if _, ok := j.Drive(a, b); ok {
			s += long
			continue
		}
		return s + drivable(j, a, b, long), false
	}
	return s, true
}

// drivable is how far from a, to a micrometre, the body may drive towards b, which it may not
// reach: a piece that may not be driven stays so when it gets longer. What was found to be
// clear is not looked at again, nor a place for which the lattice tells that it is too near.
func drivable(j *judge.Judge, a, b geom.Point, long float64) float64 {
	point := j.NeedUm == 0 || j.RadiusUm == 0
	lo, hi, at := 0.0, 1.0, a
	for float64((hi-lo)*long) > 1 {
		mid := (lo + hi) / 2
		p := judge.Along(a, b, mid)
		clear := false
		if point || !j.Field.Bounds().Contains(p) {
			clear = j.Sight(a, p)
		} else if _, most := j.Field.Bracket(p); most >= float64(j.NeedUm) {
			clear = j.Sight(at, p) && j.Allowed(a, p)
		}
		if clear {
			lo, at = mid, p
		} else {
			hi = mid
		}
	}
	return float64(lo * long)
}
