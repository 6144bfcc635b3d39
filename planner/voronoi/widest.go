package voronoi

import (
	"context"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// forest is a maximum spanning forest over the roads' nodes (Kruskal 1956), the parts of
// Open joined first. Trees are joined by rank and never flattened, so a node's way
// up to its root has a logarithmic number of steps, each taken later than the one
// below it.
type forest struct {
	up   []int32   // -1 at a root
	when []int32   // at which join a node got its up
	road []int32   // the road that did it; -1 for a part of Open
	um   []float64 // and how wide it is
	rank []int8
}

func (f *forest) root(n int32) int32 {
	for f.up[n] >= 0 {
		n = f.up[n]
	}
	return n
}

func (f *forest) join(a, b, when, road int32, um float64) bool {
	a, b = f.root(a), f.root(b)
	if a == b {
		return false
	}
	if f.rank[a] < f.rank[b] || f.rank[a] == f.rank[b] && b < a {
		a, b = b, a
	}
	if f.rank[a] == f.rank[b] {
		f.rank[a]++
	}
	f.up[b], f.when[b], f.road[b], f.um[b] = a, when, road, um
	return true
}

// narrowest is the last join on the way between two nodes, as the node that it hung up;
// -1 when they are one, ok is false when no way joins them.
func (f *forest) narrowest(a, b int32) (n int32, ok bool) {
	n = -1
	for a != b {
		// The one that was hung up earlier goes on.
		if f.up[a] < 0 || f.up[b] >= 0 && f.when[b] < f.when[a] {
			a, b = b, a
		}
		if f.up[a] < 0 {
			return -1, false
		}
		if n < 0 || f.when[a] > f.when[n] {
			n = a
		}
		a = f.up[a]
	}
	return n, true
}

func (w *Roads) grow() *forest {
	n := len(w.nodes)
	f := &forest{up: make([]int32, n), when: make([]int32, n), road: make([]int32, n), um: make([]float64, n), rank: make([]int8, n)}
	for i := range f.up {
		f.up[i] = -1
	}
	when := int32(0)
	for _, part := range w.portals {
		for _, v := range part[1:] {
			f.join(part[0], v, when, -1, w.p)
			when++
		}
	}
	type wide struct {
		um   float64
		road int32
	}
	order := make([]wide, len(w.roads))
	for i := range order {
		order[i] = wide{w.roads[i].um0, int32(i)}
	}
	slices.SortFunc(order, func(a, b wide) int {
		switch {
		case a.um > b.um:
			return -1
		case a.um < b.um:
			return 1
		}
		return int(a.road - b.road)
	})
	for _, v := range order {
		r := &w.roads[v.road]
		f.join(r.a, r.b, when, v.road, min(v.um, w.p))
		when++
	}
	return f
}

// Bottleneck is what is narrowest on the widest way between two places.
type Bottleneck struct {
	ClearanceUm float64 // beta: the largest radius at which a disc moves from one to the other, at most the roads' p
	At          geom.Point
	Gate        Gate // the solids on both sides; X = Y where an end itself, or one solid beside an open border, is narrowest
	Open        bool // nothing on the way is narrower than p
}

// Widest is the bottleneck between s and t: the largest clearance that all of some way
// between them has, found on a maximum spanning tree of the edges, and where it is
// reached. ok is false when no way whatever joins them, or an end is not on the
// floor, touches a solid or lies in one. ClearanceUm is exact but for rounding below
// p, and told apart up to p less anyangle.DeltaUm.
func (w *Roads) Widest(ctx context.Context, s, t geom.Point) (b Bottleneck, ok bool, err error) {
	from, ok1 := w.enter(s)
	to, ok2 := w.enter(t)
	if !ok1 || !ok2 {
		return Bottleneck{}, false, ctx.Err()
	}
	b, ok = w.linked(&from, &to)
	for _, e := range [2]*entry{&from, &to} {
		if ok && e.um < b.ClearanceUm {
			b = Bottleneck{ClearanceUm: e.um, At: e.from, Gate: Gate{X: e.foot, Y: e.foot, At: e.from, WidthUm: 2 * e.um, Features: [2]string{e.name, ""}}}
		}
	}
	return b, ok, ctx.Err()
}

// Between is Widest, what the ends themselves leave not counted: the bottleneck between where
// edges are come to, or the open floor, and where they are left.
func (w *Roads) Between(s, t geom.Point) (b Bottleneck, ok bool) {
	from, ok1 := w.enter(s)
	to, ok2 := w.enter(t)
	if !ok1 || !ok2 {
		return Bottleneck{}, false
	}
	return w.linked(&from, &to)
}

// linked is the bottleneck between where two entries come to.
func (w *Roads) linked(from, to *entry) (b Bottleneck, ok bool) {
	b = Bottleneck{ClearanceUm: w.p, Open: true}
	if from.road >= 0 && from.road == to.road {
		return b, true
	}
	if from.part == -1 && from.road < 0 || to.part == -1 && to.road < 0 {
		// A part of Open that no edge leads to.
		if from.road >= 0 || to.road >= 0 || !w.open.Connected(from.to, to.to) {
			return Bottleneck{}, false
		}
		return b, true
	}
	f := w.forest()
	n, ok := f.narrowest(w.topOf(from), w.topOf(to))
	if !ok {
		return Bottleneck{}, false
	}
	if n >= 0 && f.road[n] >= 0 && f.um[n] < b.ClearanceUm {
		r := &w.roads[f.road[n]]
		gate := w.g.gateAt(r.step.block, w.g.arc(r.step), r.s0)
		b = Bottleneck{ClearanceUm: f.um[n], At: gate.At, Gate: gate}
	}
	return b, true
}

// topOf is the node that an entry reaches without coming closer to solids.
func (w *Roads) topOf(e *entry) int32 {
	if e.road >= 0 {
		return w.roads[e.road].b
	}
	return w.portals[e.part][0]
}

var inf = math.Inf(1)
