package anyangle

import (
	"context"

	"example.com/wideberth/mapstore/floor"
)

// Advance makes the mesh of another version of the same floor, change being what
// differs between this mesh's version and m. Blocks beyond the clearance (and a
// block) of what changed are shared. The result equals Build's for m in every cell
// and portal. The error is ctx's, or ErrTooLarge as Build's would be.
func (g *Mesh) Advance(ctx context.Context, m *floor.Map, change floor.Change) (*Mesh, error) {
	n := newMesh(m, g.need)
	if n.bx != g.bx || n.by != g.by || n.o != g.o || n.side != g.side {
		return Build(ctx, m, g.need)
	}
	stale := make([]bool, len(g.blocks))
	mark := func(x0, y0, x1, y1 int) {
		for y := max(0, y0); y <= min(g.by-1, y1); y++ {
			for x := max(0, x0); x <= min(g.bx-1, x1); x++ {
				stale[x+y*g.bx] = true
			}
		}
	}
	s := m.Settings()
	for _, c := range change.Cells {
		// Two cells further: a window shows one, and corners need one more.
		if x0, y0, x1, y1, ok := g.blocksOf(s.CellBounds(c), float64(g.need.ClearanceUm+3*s.ResolutionUm)); ok {
			mark(x0, y0, x1, y1)
		}
	}
	for _, f := range change.Features {
		for _, v := range [2]*floor.Feature{f.Before, f.After} {
			if v == nil {
				continue
			}
			if x0, y0, x1, y1, ok := g.reachOf(v); ok {
				mark(x0, y0, x1, y1)
			}
		}
	}
	n.lean = newMesh(m, g.need)
	cuts, leanCuts := make([]*cut, len(g.blocks)), make([]*cut, len(g.blocks))
	rejoin := make([]bool, len(g.blocks))
	var fresh, joins []int
	for i, b := range g.blocks {
		cuts[i], n.blocks[i] = b.cut, b
		n.lean.blocks[i] = g.lean.blocks[i]
		leanCuts[i] = n.lean.blocks[i].cut
		if !stale[i] {
			continue
		}
		fresh = append(fresh, i)
		x, y := i%g.bx, i/g.bx
		for ny := max(0, y-1); ny <= min(g.by-1, y+1); ny++ {
			for nx := max(0, x-1); nx <= min(g.bx-1, x+1); nx++ {
				rejoin[nx+ny*g.bx] = true
			}
		}
	}
	for i, r := range rejoin {
		if r {
			joins = append(joins, i)
		}
	}
	if len(fresh) == 0 {
		n.base, n.comp = g.base, g.comp
		n.lean.base, n.lean.comp = g.lean.base, g.lean.comp
		return n, nil
	}
	if err := n.fill(ctx, cuts, leanCuts, fresh, joins); err != nil {
		return nil, err
	}
	return n, nil
}
