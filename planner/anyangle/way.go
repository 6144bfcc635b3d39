package anyangle

import (
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// estimate is the length of the shortest way over a point of n's stretch to the
// goal, were there nothing in between beyond it; the goal is taken on the far
// side of the stretch (op. cit., section 3.2).
func (s *search) estimate(n *node) float64 {
	tx, ty := s.tx, s.ty
	o := &s.roots[n.apex]
	if n.flags&point == 0 {
		dx, dy := n.lx-n.rx, n.ly-n.ry
		st := float64(dx*(ty-n.ry)) - float64(dy*(tx-n.rx))
		so := float64(dx*(o.y-n.ry)) - float64(dy*(o.x-n.rx))
		if st*so > 0 {
			// Mirror the goal.
			k := 2 * st / (float64(dx*dx) + float64(dy*dy))
			tx, ty = tx+float64(k*dy), ty-float64(k*dx)
		}
	}
	r, over, x, y := s.leave(n, tx, ty)
	q := &s.roots[r]
	if over {
		return q.g + dist(q.x, q.y, x, y) + dist(x, y, tx, ty)
	}
	return q.g + dist(q.x, q.y, tx, ty)
}

// leave is the root from which the shortest way to (tx, ty), beyond n's stretch,
// leaves n's fan, and the end of the stretch that it goes over, if any.
func (s *search) leave(n *node, tx, ty float64) (r int32, over bool, x, y float64) {
	if n.flags&point != 0 {
		return n.apex, false, 0, 0
	}
	if p := &s.roots[n.rootR]; float64((n.rx-p.x)*(ty-p.y))-float64((n.ry-p.y)*(tx-p.x)) < 0 {
		return n.rootR, true, n.rx, n.ry
	}
	if p := &s.roots[n.rootL]; float64((n.lx-p.x)*(ty-p.y))-float64((n.ly-p.y)*(tx-p.x)) > 0 {
		return n.rootL, true, n.lx, n.ly
	}
	r, _ = s.sees(n, tx, ty)
	return r, false, 0, 0
}

// straight is the way between two points of one cell.
func (s *search) straight(from, to geom.Point) Way {
	return Way{Points: []geom.Point{from, to}, LengthUm: geom.Dist(from, to), Expanded: s.expanded, Queued: s.queued}
}

// way lays out the way to the goal over n's stretch.
func (s *search) way(n *node) Way {
	w := Way{Expanded: s.expanded, Queued: s.queued}
	o := s.g.o
	put := func(x, y float64) {
		p := geom.Point{X: x + o.X, Y: y + o.Y}
		if k := len(w.Points); k == 0 || w.Points[k-1] != p {
			w.Points = append(w.Points, p)
		}
	}
	put(s.tx, s.ty)
	r, over, x, y := s.leave(n, s.tx, s.ty)
	if over {
		put(x, y)
	}
	for ; r != none; r = s.roots[r].parent {
		put(s.roots[r].x, s.roots[r].y)
	}
	slices.Reverse(w.Points)
	w.Points[0], w.Points[len(w.Points)-1] = s.start, s.goal
	for i := 1; i < len(w.Points); i++ {
		w.LengthUm += geom.Dist(w.Points[i-1], w.Points[i])
	}
	return w
}
