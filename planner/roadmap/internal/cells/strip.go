package cells

import (
	"context"
	"sort"

	"example.com/wideberth/mapstore/floor"
)

// strip is what is free between two upright lines. It depends on the solids within
// reach alone.
type strip struct {
	x0, x1 int64
	traps  []trap
	links  []link
	first  []int32 // cells that begin at x0
	last   []int32 // cells that end at x1
	edges  []edge  // those that bound cells
}

// MaxStripEdges is how many sides of grown outlines may come into one strip.
const MaxStripEdges = 1 << 21

// stripper makes strips. It may be used again but not by two at once.
type stripper struct {
	z rasterizer
	o outline
	s sweeper
}

// make sweeps strip i; nil when it is too large or ctx has ended.
func (p *stripper) make(ctx context.Context, sp *Space, i int, features []*floor.Feature) *strip {
	x0, x1 := sp.span(i)
	t := &strip{x0: x0, x1: x1}
	y0, y1 := sp.low.y, sp.high.y
	if x0 >= x1 || y0 > y1 {
		return t
	}
	r := sp.need.ClearanceUm
	p.o.edges, p.o.uprights = p.o.edges[:0], p.o.uprights[:0]
	p.o.x0, p.o.x1 = x0, x1
	// One cell more than is in reach, for the corners there.
	h := sp.m.Settings().ResolutionUm
	reach := int((r+int64(sp.chord)+h-1)/h) + 2
	p.z.fill(sp.m, i, (reach+floor.BlockSize-1)/floor.BlockSize)
	p.z.trace(&p.o, h, r, sp.chord)
	for _, f := range features {
		if r, ok := sp.need.growth(f.Kind); ok {
			p.o.growShape(f, r, sp.chord, sp.origin)
		}
	}
	if len(p.o.edges)+len(p.o.uprights) > MaxStripEdges {
		return nil
	}
	s := &p.s
	*s = sweeper{edges: append(p.o.edges, edge{pt{x0 - 1, y0}, pt{x1 + 1, y0}, -1, Source{}}, edge{pt{x0 - 1, y1}, pt{x1 + 1, y1}, 1, Source{}}),
		uprights: p.o.uprights, x0: x0, x1: x1, y0: y0, y1: y1, left: x0 == sp.low.x, right: x1 == sp.high.x,
		thin: sp.thin(), most: sp.most, stop: func() bool { return ctx.Err() != nil },
		order: s.order, upOrder: s.upOrder, items: s.items[:0], second: s.second[:0], reach: s.reach, spare: s.spare,
		traps: s.traps[:0], links: s.links[:0], first: s.first[:0], pend: s.pend, next: s.next[:0], front: s.front[:0], walls: s.walls, marks: s.marks}
	s.run()
	p.o.edges = s.edges
	if len(s.traps) > sp.most || ctx.Err() != nil {
		return nil
	}
	t.traps, t.links = append(t.traps, s.traps...), append(t.links, s.links...)
	t.first, t.last = append(t.first, s.first...), append(t.last, s.front...)
	t.keep(s.edges)
	return t
}

// keep keeps the edges that bound cells, level ones as far as the strip: where
// they end beyond it is not its business.
func (t *strip) keep(edges []edge) {
	place := make([]int32, len(edges)) // plus one
	put := func(e *int32) {
		if *e == none {
			return
		}
		if place[*e] == 0 {
			place[*e] = int32(len(t.edges)) + 1
			k := edges[*e]
			if k.a.y == k.b.y {
				k.a.x, k.b.x = max(k.a.x, t.x0), min(k.b.x, t.x1)
			}
			t.edges = append(t.edges, k)
		}
		*e = place[*e] - 1
	}
	for i := range t.traps {
		put(&t.traps[i].bottom)
		put(&t.traps[i].top)
	}
}

// beside are the cells at the strip's right side that touch f, which begins there.
func (t *strip) beside(f *trap) []int32 {
	a := sort.Search(len(t.last), func(i int) bool { return t.traps[t.last[i]].hi1 >= f.lo0 })
	b := a
	for b < len(t.last) && t.traps[t.last[b]].lo1 <= f.hi0 {
		b++
	}
	return t.last[a:b]
}

// bytes is about how much memory the strip takes.
func (t *strip) bytes() int64 {
	return 120 + 80*int64(cap(t.traps)) + 32*int64(cap(t.links)) + 64*int64(cap(t.edges)) + 4*int64(cap(t.first)+cap(t.last))
}
