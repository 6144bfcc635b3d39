package anyangle

import (
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// shapePieces covers a shape grown by r with convex pieces, seen from the floor's origin o.
func shapePieces(s floor.Shape, r float64, o geom.Point) []piece {
	r += s.Grow
	var out []piece
	switch s.Kind {
	case floor.Disc:
		c := s.Chains[0][0]
		out = append(out, growConvex([]fpt{{c.X - o.X, c.Y - o.Y}}, r))
	case floor.Polyline:
		chain := s.Chains[0]
		for i := 1; i < len(chain); i++ {
			a, b := fpt{chain[i-1].X - o.X, chain[i-1].Y - o.Y}, fpt{chain[i].X - o.X, chain[i].Y - o.Y}
			core := []fpt{a, b}
			if a == b {
				core = core[:1]
			}
			out = append(out, growConvex(core, r))
		}
	case floor.Polygon:
		if core := convexCore(s.Chains, o); core != nil {
			return append(out, growConvex(core, r))
		}
		// Neighbouring trapezoids only touch; growing them, by 1 µm at least, makes them overlap.
		for _, core := range trapezoids(s.Chains, o) {
			out = append(out, growConvex(core, max(r, 1)))
		}
	}
	return out
}

// convexCore is the polygon counter-clockwise without points in line when it is
// convex, else nil.
func convexCore(chains [][]geom.Point, o geom.Point) []fpt {
	if len(chains) != 1 {
		return nil
	}
	ring := slices.Clone(chains[0])
	if geom.Ring(ring).SignedArea() < 0 {
		slices.Reverse(ring)
	}
	n := len(ring)
	var core []fpt
	for i, p := range ring {
		switch geom.Orient(ring[(i+n-1)%n], p, ring[(i+1)%n]) {
		case -1:
			return nil
		case 1:
			core = append(core, fpt{p.X - o.X, p.Y - o.Y})
		}
	}
	// A simple ring that only turns left goes round once.
	return core
}

// ringEdge is a side of a polygon from its lower to its upper end.
type ringEdge struct{ a, b geom.Point }

func (e *ringEdge) at(y float64) float64 {
	switch y {
	case e.a.Y:
		return e.a.X
	case e.b.Y:
		return e.b.X
	}
	return e.a.X + (e.b.X-e.a.X)*((y-e.a.Y)/(e.b.Y-e.a.Y))
}

// trapezoids cuts a simple polygon with holes at the heights of its vertices, and
// joins what has the same two sides again.
func trapezoids(chains [][]geom.Point, o geom.Point) [][]fpt {
	var edges []ringEdge
	var ys []float64
	for _, c := range chains {
		for i, b := range c {
			a := c[(i+len(c)-1)%len(c)]
			ys = append(ys, b.Y)
			switch {
			case a.Y < b.Y:
				edges = append(edges, ringEdge{a, b})
			case b.Y < a.Y:
				edges = append(edges, ringEdge{b, a})
			}
		}
	}
	slices.Sort(ys)
	ys = slices.Compact(ys)
	slices.SortFunc(edges, func(p, q ringEdge) int { return cmpFloat(p.a.Y, q.a.Y) })

	type open struct {
		left, right int
		from        float64
	}
	var out [][]fpt
	var active, nextActive []int
	var opened, stay []open
	closeAt := func(t open, y float64) {
		l, r := &edges[t.left], &edges[t.right]
		core := []fpt{{l.at(t.from) - o.X, t.from - o.Y}}
		for _, p := range []fpt{{r.at(t.from) - o.X, t.from - o.Y}, {r.at(y) - o.X, y - o.Y}, {l.at(y) - o.X, y - o.Y}} {
			if p != core[len(core)-1] && p != core[0] {
				core = append(core, p)
			}
		}
		out = append(out, core)
	}
	next := 0
	for i := 0; i+1 < len(ys); i++ {
		y0, y1 := ys[i], ys[i+1]
		nextActive = nextActive[:0]
		for _, e := range active {
			if edges[e].b.Y > y0 {
				nextActive = append(nextActive, e)
			}
		}
		for ; next < len(edges) && edges[next].a.Y <= y0; next++ {
			nextActive = append(nextActive, next)
		}
		active, nextActive = nextActive, active
		mid := y0 + (y1-y0)/2
		slices.SortStableFunc(active, func(p, q int) int { return cmpFloat(edges[p].at(mid), edges[q].at(mid)) })
		stay = stay[:0]
		for k := 0; k+1 < len(active); k += 2 {
			t := open{active[k], active[k+1], y0}
			for _, p := range opened {
				if p.left == t.left && p.right == t.right {
					t.from = p.from
				}
			}
			stay = append(stay, t)
		}
		for _, p := range opened {
			if !slices.ContainsFunc(stay, func(t open) bool { return t == p }) {
				closeAt(p, y0)
			}
		}
		opened, stay = stay, opened
	}
	for _, p := range opened {
		closeAt(p, ys[len(ys)-1])
	}
	return out
}

func cmpFloat(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}
