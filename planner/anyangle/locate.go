package anyangle

import (
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// at is a cell in a block.
type at struct{ block, cell int32 }

// locate adds the cells that hold p, borders included, from the lowest block and cell
// on. tolerance is how far outside a cell p, once settled, may be.
func (g *Mesh) locate(out []at, p geom.Point, tolerance float64) []at {
	p = g.settled(p)
	x, y := p.X-g.o.X, p.Y-g.o.Y
	bx0, by0, bx1, by1, ok := g.blocksOf(geom.Rect{Min: p, Max: p}, tolerance)
	if !ok {
		return out
	}
	for by := by0; by <= by1; by++ {
		for bx := bx0; bx <= bx1; bx++ {
			i := bx + by*g.bx
			b := g.blocks[i]
			lx, ly := x-float64(bx)*g.side, y-float64(by)*g.side
			for c := range b.cells {
				if b.holds(int32(c), lx, ly, tolerance) {
					out = append(out, at{int32(i), int32(c)})
				}
			}
		}
	}
	return out
}

// holds says whether a cell holds (x, y), give or take tolerance along x and y.
func (c *cut) holds(id int32, x, y, tolerance float64) bool {
	u, v := x, y // as the cut has them
	if c.turned {
		u, v = y, x
	}
	if k := &c.cells[id]; v < float64(k.lo)-tolerance || v > float64(k.hi)+tolerance {
		return false
	}
	if t := c.triangleOf(id); t != nil {
		if lo, hi := t.bounds(c.turned); u < float64(lo.x)-tolerance || u > float64(hi.x)+tolerance {
			return false
		}
		for i, a := range t {
			b := t[(i+1)%3]
			dx, dy := float64(b.x-a.x), float64(b.y-a.y)
			if off := float64(dx*(y-float64(a.y))) - float64(dy*(x-float64(a.x))); off < -tolerance*math.Sqrt(float64(dx*dx)+float64(dy*dy)) {
				return false
			}
		}
		return true
	}
	rows := c.rowsOf(id)
	k := 1
	for k < len(rows)-1 && v > float64(rows[k].y) {
		k++
	}
	if k >= len(rows) {
		return u >= float64(rows[0].l)-tolerance && u <= float64(rows[0].r)+tolerance
	}
	a, b := rows[k-1], rows[k]
	t := (v - float64(a.y)) / float64(b.y-a.y)
	t = min(max(t, 0), 1)
	l := float64(a.l) + float64(float64(b.l-a.l)*t)
	r := float64(a.r) + float64(float64(b.r-a.r)*t)
	return u >= l-tolerance && u <= r+tolerance
}

// covers says, exactly, whether a cell holds (x, y).
func (c *cut) covers(id int32, x, y float64) bool {
	if t := c.triangleOf(id); t != nil {
		for i, a := range t {
			b := t[(i+1)%3]
			if geom.Orient(geom.Point{X: float64(a.x), Y: float64(a.y)}, geom.Point{X: float64(b.x), Y: float64(b.y)}, geom.Point{X: x, Y: y}) < 0 {
				return false
			}
		}
		return true
	}
	if c.turned {
		x, y = y, x
	}
	rows := c.rowsOf(id)
	first, last := rows[0], rows[len(rows)-1]
	if y < float64(first.y) || y > float64(last.y) {
		return false
	}
	if len(rows) == 1 {
		return x >= float64(first.l) && x <= float64(first.r)
	}
	p := geom.Point{X: x, Y: y}
	at := func(x, y int32) geom.Point { return geom.Point{X: float64(x), Y: float64(y)} }
	for i := 1; i < len(rows); i++ {
		a, b := rows[i-1], rows[i]
		if geom.Orient(at(a.l, a.y), at(b.l, b.y), p) > 0 || geom.Orient(at(a.r, a.y), at(b.r, b.y), p) < 0 {
			return false
		}
	}
	return true
}

// Nearest is the place of the mesh nearest to p, at most within away; p itself when
// the mesh holds it. Of places as near the one in the lowest block and cell is
// given. It serves ends whose clearance is above the required one by less than
// DeltaUm, which the mesh may leave out.
func (g *Mesh) Nearest(p geom.Point, within float64) (geom.Point, bool) {
	if g.Contains(p) {
		return p, true
	}
	x0, y0, x1, y1, ok := g.blocksOf(geom.BoundsOf(p), within)
	if !ok {
		return geom.Point{}, false
	}
	best, at := math.Inf(1), geom.Point{}
	var ring []geom.Point
	for by := y0; by <= y1; by++ {
		for bx := x0; bx <= x1; bx++ {
			i := bx + by*g.bx
			o := g.corner(i)
			for c := range g.blocks[i].cells {
				ring = g.blocks[i].outline(ring[:0], int32(c), geom.Point{X: g.o.X + float64(o.x), Y: g.o.Y + float64(o.y)})
				a := ring[len(ring)-1]
				for _, b := range ring {
					if d, q := geom.SegmentDist(p, a, b); d < best {
						best, at = d, q
					}
					a = b
				}
			}
		}
	}
	return at, best <= within
}

// outline adds a cell's corners, counter-clockwise or, in a turned cut, clockwise,
// seen from o.
func (c *cut) outline(out []geom.Point, id int32, o geom.Point) []geom.Point {
	put := func(x, y int32) {
		if c.turned {
			x, y = y, x
		}
		out = append(out, geom.Point{X: o.X + float64(x), Y: o.Y + float64(y)})
	}
	if t := c.triangleOf(id); t != nil {
		from := len(out)
		for _, v := range t {
			out = append(out, geom.Point{X: o.X + float64(v.x), Y: o.Y + float64(v.y)})
		}
		if c.turned {
			slices.Reverse(out[from:])
		}
		return out
	}
	rows := c.rowsOf(id)
	for _, r := range rows {
		put(r.r, r.y)
	}
	for i := len(rows) - 1; i >= 0; i-- {
		put(rows[i].l, rows[i].y)
	}
	return out
}

// Contains says whether p lies in the mesh, borders included.
func (g *Mesh) Contains(p geom.Point) bool { return len(g.locate(nil, p, g.eps)) > 0 }

// Connected says whether a way leads from p to q. Both must lie in the mesh.
func (g *Mesh) Connected(p, q geom.Point) bool {
	for _, a := range g.locate(nil, p, g.eps) {
		for _, b := range g.locate(nil, q, g.eps) {
			if g.compOf(a) == g.compOf(b) {
				return true
			}
		}
	}
	return false
}

func (g *Mesh) compOf(a at) int32 {
	return g.comp[g.base[a.block]+g.blocks[a.block].cells[a.cell].comp]
}
