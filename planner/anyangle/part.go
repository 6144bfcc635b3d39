package anyangle

import (
	"cmp"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// Spot is a connected piece of the free space of one block of a mesh.
type Spot struct{ Block, Piece int32 }

// Spots appends the pieces that hold p, borders included, each once and in rising order.
// There are none when the mesh does not hold p. Meshes that share the blocks about p
// (SharesAround) have the same.
func (g *Mesh) Spots(out []Spot, p geom.Point) []Spot {
	x, y := p.X-g.o.X, p.Y-g.o.Y
	bx0, by0, bx1, by1, ok := g.blocksOf(geom.Rect{Min: p, Max: p}, g.eps)
	if !ok {
		return out
	}
	from := len(out)
	for by := by0; by <= by1; by++ {
		for bx := bx0; bx <= bx1; bx++ {
			i := bx + by*g.bx
			b := g.blocks[i]
			lx, ly := x-float64(bx)*g.side, y-float64(by)*g.side
			for c := range b.cells {
				s := Spot{int32(i), b.cells[c].comp}
				if !slices.Contains(out[from:], s) && b.holds(int32(c), lx, ly, g.eps) {
					out = append(out, s)
				}
			}
		}
	}
	slices.SortFunc(out[from:], func(a, b Spot) int {
		return cmp.Or(cmp.Compare(a.Block, b.Block), cmp.Compare(a.Piece, b.Piece))
	})
	return out
}

// Part is the number, below Parts, of the connected part of the whole mesh that a spot
// belongs to. A way joins two places when they have spots of one part.
func (g *Mesh) Part(s Spot) int32 { return g.comp[g.base[s.Block]+s.Piece] }

// Parts is above every number of a part.
func (g *Mesh) Parts() int { return len(g.comp) }

// SharesAround says whether g and old hold the same places about r, because all blocks
// that touch it are shared. It may be false where they do, and is for other floors.
func (g *Mesh) SharesAround(old *Mesh, r geom.Rect) bool {
	if g.bx != old.bx || g.by != old.by || g.o != old.o || g.side != old.side || g.need != old.need {
		return false
	}
	x0, y0, x1, y1, ok := g.blocksOf(r, g.eps)
	if !ok {
		return true
	}
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			if i := x + y*g.bx; g.blocks[i].cut != old.blocks[i].cut {
				return false
			}
		}
	}
	return true
}

// Probe answers for places within one rectangle whether a mesh holds them. It has looked for the
// cells about it once. The zero Probe serves Aim only; it may be aimed again.
type Probe struct {
	g     *Mesh
	cells []at
}

// Aim readies p for places of r. Time is proportional to the cells of the blocks that
// touch r.
func (p *Probe) Aim(g *Mesh, r geom.Rect) {
	p.g, p.cells = g, p.cells[:0]
	bx0, by0, bx1, by1, ok := g.blocksOf(r, g.eps)
	if !ok {
		return
	}
	for by := by0; by <= by1; by++ {
		for bx := bx0; bx <= bx1; bx++ {
			i := bx + by*g.bx
			b := g.blocks[i]
			ox, oy := g.o.X+float64(bx)*g.side, g.o.Y+float64(by)*g.side
			x0, x1, y0, y1 := r.Min.X-ox-g.eps, r.Max.X-ox+g.eps, r.Min.Y-oy-g.eps, r.Max.Y-oy+g.eps
			if b.turned {
				x0, x1, y0, y1 = y0, y1, x0, x1
			}
			for c := range b.cells {
				if k := &b.cells[c]; float64(k.lo) > y1 || float64(k.hi) < y0 {
					continue
				}
				if t := b.triangleOf(int32(c)); t != nil {
					lo, hi := t.bounds(b.turned)
					if float64(lo.x) <= x1 && float64(hi.x) >= x0 {
						p.cells = append(p.cells, at{int32(i), int32(c)})
					}
					continue
				}
				rows := b.rowsOf(int32(c))
				left, right := true, true // of r, with all of its rows
				for _, w := range rows {
					left, right = left && float64(w.r) < x0, right && float64(w.l) > x1
				}
				if !left && !right {
					p.cells = append(p.cells, at{int32(i), int32(c)})
				}
			}
		}
	}
}

// Holds says whether the mesh holds q, a place of the rectangle aimed at, as Contains does.
func (p *Probe) Holds(q geom.Point) bool {
	g := p.g
	for _, a := range p.cells {
		bx, by := int(a.block)%g.bx, int(a.block)/g.bx
		if g.blocks[a.block].holds(a.cell, q.X-g.o.X-float64(bx)*g.side, q.Y-g.o.Y-float64(by)*g.side, g.eps) {
			return true
		}
	}
	return false
}
