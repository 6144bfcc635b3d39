package anyangle

import (
	"math"
	"slices"
)

// A search finds many ways to the same places: through an aisle from each of the gaps that
// lead into it. A stretch all of whose points are reached by shorter ways is on no
// shortest way, whatever comes of those. (Polyanya tells that of corners only.)

// reached is where the cells of a block that a search has come to begin in its list of cells;
// stamp says which search.
type reached struct {
	first int32
	stamp uint32
}

// resetPortals begins a search.
func (s *search) resetPortals() {
	s.within, s.cells = s.within[:0], s.cells[:0]
	s.base = slices.Grow(s.base[:0], len(s.g.blocks))[:len(s.g.blocks)]
	if s.stamp++; s.stamp == 0 {
		clear(s.base[:cap(s.base)])
		s.stamp = 1
	}
}

// portals is the number of the first of a cell's portals in the search's list, to which those
// of a cell are added when it is first asked about: most cells of a large block never are.
func (s *search) portals(block, cell, count int32) int32 {
	e := &s.base[block]
	if e.stamp != s.stamp {
		*e = reached{int32(len(s.cells)), s.stamp}
		for range s.g.blocks[block].of {
			s.cells = append(s.cells, none)
		}
	}
	first := &s.cells[e.first+cell]
	if *first == none {
		*first = int32(len(s.within))
		for range count {
			s.within = append(s.within, math.Inf(1))
		}
	}
	return *first
}

// undercutUm is by how much a way must be the longer one, in micrometres, to be of no
// use: above what taking ends on rays, within rounding, for seen may add.
const undercutUm = 1e-3

// undercut says whether every point of n's stretch is known to be reached by a shorter way than
// over its fan: then it is on no shortest way.
func (s *search) undercut(n *node) bool {
	return n.flags&point == 0 && n.least > s.within[n.portal]+undercutUm
}

// measure bounds the ways over n's fan to its stretch, the part t0 to t1 of c's portal. Along a
// stretch their length is convex (Pollack, Sharir & Rote, Discrete & Computational Geometry 4,
// 1989), so no more than at its ends; the rest of the portal is reached along it.
func (c *look) measure(n *node, t0, t1 float64) {
	s := c.s
	r, l, o := &s.roots[n.rootR], &s.roots[n.rootL], &s.roots[n.apex]
	dr, dl := r.g+dist(r.x, r.y, n.rx, n.ry), l.g+dist(l.x, l.y, n.lx, n.ly)
	dx, dy := n.lx-n.rx, n.ly-n.ry
	long := math.Sqrt(float64(dx*dx) + float64(dy*dy))
	// No shorter than straight from the apex, nor than the ends' ways less what is between.
	n.least = (dr + dl - long) / 2
	wx, wy := o.x-n.rx, o.y-n.ry
	switch along := float64(wx*dx) + float64(wy*dy); {
	case along <= 0:
		n.least = max(n.least, o.g+math.Sqrt(float64(wx*wx)+float64(wy*wy)))
	case along >= float64(long*long):
		n.least = max(n.least, o.g+dist(o.x, o.y, n.lx, n.ly))
	default:
		n.least = max(n.least, o.g+math.Abs(float64(wx*dy)-float64(wy*dx))/long)
	}
	if t0 > 0 {
		dr += dist(c.ax, c.ay, n.rx, n.ry)
	}
	if t1 < 1 {
		dl += dist(c.bx, c.by, n.lx, n.ly)
	}
	if most := max(dr, dl); most < s.within[n.portal] {
		s.within[n.portal] = most
	}
}
