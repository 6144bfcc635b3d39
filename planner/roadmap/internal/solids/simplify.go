package solids

import (
	"example.com/wideberth/mapstore/geom"
)

// lookAhead is how many turns a chord may pass over.
const lookAhead = 256

// Simplify fills notches of a closed chain, whose solid is on its left, with chords
// between its own points: what is added lies within errUm of the chain, nothing is taken
// away. A wall that slants across the raster loses its teeth, a straight one is as it
// was. The chain keeps its first point, which must be a convex corner of the solid for
// that; the first such is looked for. Time is at most lookAhead for each point.
func Simplify(chain []geom.Point, errUm float64) []geom.Point {
	n := len(chain)
	first := -1
	for i := range n {
		if geom.Orient(chain[(i+n-1)%n], chain[i], chain[(i+1)%n]) > 0 {
			first = i
			break
		}
	}
	if first < 0 || n <= 4 {
		return chain
	}
	at := func(i int) geom.Point { return chain[(first+i)%n] }
	var out []geom.Point
	for i := 0; i < n; {
		out = append(out, at(i))
		i = farthest(at, i, n, errUm)
	}
	if len(out) < 3 {
		return chain
	}
	return out
}

// farthest is the last index up to n that a chord from i reaches with all between on
// its left, within errUm, and between its ends; i + 1 when there is none.
func farthest(at func(int) geom.Point, i, n int, errUm float64) int {
	p, best := at(i), i+1
	right := at(i + 1) // the rightmost direction so far: only what is on it or right of it sees all
	for j := i + 2; j <= min(n, i+lookAhead); j++ {
		q := at(j)
		if geom.Orient(p, right, q) > 0 {
			// The notch's bottom; too deep already when far from any chord to come.
			if d, _ := geom.SegmentDist(q, p, right); d > 8*errUm && j > i+8 {
				break
			}
			continue
		}
		right = q
		if fills(at, i, j, errUm) {
			best = j
		}
	}
	return best
}

// fills says whether the chord from i to j stays within errUm of the chain between,
// none of which lies before or beyond it.
func fills(at func(int) geom.Point, i, j int, errUm float64) bool {
	p, q := at(i), at(j)
	dx, dy := q.X-p.X, q.Y-p.Y
	long := geom.Dist(p, q)
	if long == 0 {
		return false
	}
	for k := i + 1; k < j; k++ {
		v := at(k)
		x, y := v.X-p.X, v.Y-p.Y
		along := float64(x*dx) + float64(y*dy)
		off := (float64(dx*y) - float64(dy*x)) / long
		if along < 0 || along > long*long || off < 0 || off > errUm {
			return false
		}
	}
	return true
}
