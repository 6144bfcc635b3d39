package voronoi

import (
	"context"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/clearance"
)

// Advance makes the graph of another version of the same floor: f is that version's
// field, change what differs between this graph's version and it. Only blocks within
// reach of the change (Need.MostUm, and what the solids there leave of it) are looked
// at, and those whose sites are the old ones are kept. The result equals Build's in
// every edge and node. Beside that, time is about a millisecond per million nodes, for
// numbering them. The error is ctx's or wraps ErrTooLarge, as Build's would.
func (g *Graph) Advance(ctx context.Context, f *clearance.Field, change floor.Change) (*Graph, error) {
	m := f.Map()
	if m.Settings() != g.set {
		return Build(ctx, f, g.need)
	}
	n := newGraph(f, g.need)
	copy(n.cells, g.cells)
	copy(n.shapes, g.shapes)
	copy(n.blocks, g.blocks)
	copy(n.links, g.links)
	// Blocks to look at, and those among them where the inside of solids may differ.
	stale, inside := make([]bool, len(n.blocks)), make([]bool, len(n.blocks))
	mark := func(r box, d float64, in []bool) {
		x0, y0, x1, y1 := n.blocksNear(r, d)
		for y := y0; y <= y1; y++ {
			for x := x0; x <= x1; x++ {
				in[y*n.nx+x] = true
			}
		}
	}
	recut := make([]bool, len(n.blocks))
	for _, c := range change.Cells {
		r := n.reduced(n.set.CellBounds(c))
		mark(r, n.h, inside)
		mark(r, n.h, recut)
	}
	for i, is := range recut {
		if !is {
			continue
		}
		n.cells[i] = n.cellSites(m, i%n.nx, i/n.nx)
		// A side may change its length far from the cell that changed.
		for _, s := range differing(g.cells[i], n.cells[i]) {
			mark(s.bounds(), n.most+2, stale)
		}
	}
	for _, c := range change.Features {
		if c.Before != nil {
			if sites := n.featureSites(c.Before); sites != nil {
				mark(n.reduced(c.Before.Bounds()), n.h, inside)
				mark(n.reduced(c.Before.Bounds()), n.most+2, stale)
				n.leave(c.Before.Name, sites)
			}
		}
		if c.After != nil {
			if sites := n.featureSites(c.After); sites != nil {
				mark(n.reduced(c.After.Bounds()), n.h, inside)
				mark(n.reduced(c.After.Bounds()), n.most+2, stale)
				for i, v := range n.shapes {
					n.shapes[i] = slices.Clip(v) // the old graph's lists are not written to
				}
				n.enter(c.After)
			}
		}
	}
	if n.sites() > maxSites {
		return nil, tooManySites()
	}
	var list []int
	for i := range stale {
		if stale[i] || inside[i] {
			list = append(list, i)
		}
	}
	err := n.trace(ctx, list, func(i int) *block {
		if inside[i] {
			return nil
		}
		return g.blocks[i]
	})
	if err != nil {
		return nil, err
	}
	rejoin := make([]bool, len(n.blocks))
	fresh := false
	for i := range n.blocks {
		if n.blocks[i] == g.blocks[i] {
			continue
		}
		fresh = true
		x, y := i%n.nx, i/n.nx
		for ny := max(0, y-1); ny <= y; ny++ {
			for nx := max(0, x-1); nx <= min(n.nx-1, x+1); nx++ {
				rejoin[ny*n.nx+nx] = true
			}
		}
	}
	if !fresh {
		n.base, n.lead = g.base, g.lead
		return n, nil
	}
	list = list[:0]
	for i, s := range rejoin {
		if s {
			list = append(list, i)
		}
	}
	n.join(list)
	return n, nil
}

// differing are the sites that only one of two lists has.
func differing(a, b []site) (out []site) {
	in := make(map[site]bool, len(a))
	for _, s := range a {
		in[s] = true
	}
	for _, s := range b {
		if in[s] {
			delete(in, s)
		} else {
			out = append(out, s)
		}
	}
	for _, s := range a {
		if in[s] {
			out = append(out, s)
		}
	}
	return out
}

// leave takes a feature's sites out of the blocks they reach into.
func (g *Graph) leave(name string, sites []site) {
	for k := range sites {
		x0, y0, x1, y1 := g.blocksNear(sites[k].bounds(), 0)
		for y := y0; y <= y1; y++ {
			for x := x0; x <= x1; x++ {
				old := g.shapes[y*g.nx+x]
				named := func(s *site) bool { return s.name == name }
				if slices.ContainsFunc(old, named) {
					g.shapes[y*g.nx+x] = slices.DeleteFunc(slices.Clone(old), named)
				}
			}
		}
	}
}
