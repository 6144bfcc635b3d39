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
	s.notes, s.cells = s.notes[:0], s.cells[:0]
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
		*first = int32(len(s.notes))
		for range count {
			s.notes = append(s.notes, portalNote{within: math.Inf(1), last: none})
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
	return n.flags&point == 0 && n.least > s.notes[n.portal].within+undercutUm
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
	if most := max(dr, dl); most < s.notes[n.portal].within {
		s.notes[n.portal].within = most
	}
}

// portalNote is what a search knows of a portal: all points of it are reached by ways as short as
// within; the node put into the queue last with a stretch of it, if it is still there, and
// its place in the queue.
type portalNote struct {
	within, f float64
	last      int32
}

// join puts n's stretch and that of the portal's last node in the queue together where one root
// sees the ends at which they meet, and says whether that node has taken n in; else n
// may have taken in that node.
func (s *search) join(n *node, f float64) bool {
	e := &s.notes[n.portal]
	if e.last == none {
		return false
	}
	m := &s.nodes[e.last]
	u := *m
	switch eps := s.g.eps; {
	case m.rootL == n.rootR && math.Abs(m.lx-n.rx) <= eps && math.Abs(m.ly-n.ry) <= eps:
		u.lx, u.ly, u.rootL = n.lx, n.ly, n.rootL
		u.flags = m.flags&turnR | n.flags&turnL
		if m.apex == m.rootL {
			u.apex = n.apex
		} else if n.apex != n.rootR {
			return false
		}
	case m.rootR == n.rootL && math.Abs(m.rx-n.lx) <= eps && math.Abs(m.ry-n.ly) <= eps:
		u.rx, u.ry, u.rootR = n.rx, n.ry, n.rootR
		u.flags = m.flags&turnL | n.flags&turnR
		if m.apex == m.rootR {
			u.apex = n.apex
		} else if n.apex != n.rootL {
			return false
		}
	default:
		return false
	}
	u.least = min(m.least, n.least)
	if f >= e.f {
		*m = u
		return true
	}
	m.flags |= gone
	*n = u
	return false
}
