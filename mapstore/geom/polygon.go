package geom

import "math"

// A polygon is given as chains: the outer ring first, then holes. Each chain is
// closed, its last point joining its first. Inside is decided by even-odd
// counting over all chains, so winding does not matter.

// Bounds is the smallest rectangle that holds the ring.
func (r Ring) Bounds() Rect { return BoundsOf(r...) }

// SignedArea is the area enclosed, positive when the ring runs
// counter-clockwise, in square micrometres, rounded.
func (r Ring) SignedArea() float64 {
	if len(r) < 3 {
		return 0
	}
	var twice float64
	o := r[0]
	for i := 2; i < len(r); i++ {
		p, q := r[i-1], r[i]
		twice += diffOfProducts(p.X-o.X, q.Y-o.Y, p.Y-o.Y, q.X-o.X)
	}
	return twice / 2
}

// Edge is the i-th edge, from point i to the one after it.
func (r Ring) Edge(i int) (a, b Point) {
	if i == len(r)-1 {
		return r[i], r[0]
	}
	return r[i], r[i+1]
}

// InPolygon says, exactly, whether p lies inside the polygon or on its border,
// borders of holes included. Time is linear in the number of points.
func InPolygon(chains [][]Point, p Point) bool {
	inside := false
	for _, chain := range chains {
		n := len(chain)
		if n == 0 {
			continue
		}
		a := chain[n-1]
		for _, b := range chain {
			if (a.Y > p.Y) != (b.Y > p.Y) {
				// The edge meets the horizontal line through p; half-open in y, so a
				// vertex on the line is counted once.
				s := 0
				switch {
				case a.X < p.X && b.X < p.X:
				case a.X > p.X && b.X > p.X:
					s = 1
				default:
					o := Orient(a, b, p)
					if o == 0 {
						return true
					}
					if (o > 0) == (b.Y > a.Y) {
						s = 1
					}
				}
				if s == 1 {
					inside = !inside
				}
			} else if (a.Y == p.Y || b.Y == p.Y) && OnSegment(p, a, b) {
				return true
			}
			a = b
		}
	}
	return inside
}

// BorderDist is the distance from p to the nearest edge of the chains, and the
// point there; +Inf when there is no edge.
func BorderDist(chains [][]Point, p Point) (float64, Point) {
	best, at := math.Inf(1), p
	for _, chain := range chains {
		if len(chain) == 0 {
			continue
		}
		a := chain[len(chain)-1]
		for _, b := range chain {
			if d, n := SegmentDist(p, a, b); d < best {
				best, at = d, n
			}
			a = b
		}
	}
	return best, at
}
