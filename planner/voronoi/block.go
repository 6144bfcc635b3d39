package voronoi

import (
	"cmp"
	"math"
	"slices"
)

// arc is a stretch of the Voronoi edges: of one curve, clearance rising from s0 to s1
// (or the same throughout). Its sites are indices into the block's.
type arc struct {
	curve
	i, j     int32
	s0, s1   float64
	um0, um1 float64 // clearance at the ends
	from, to int32   // nodes of the block
}

// node is an end of arcs.
type node struct {
	at vec
	um float64 // clearance
}

// block is the part of the Voronoi edges in one block of cells. It never changes.
type block struct {
	near   []site // all that may be nearest to a place of the block
	nodes  []node
	arcs   []arc
	border []int32 // nodes on the block's border, by place
}

// length is the length of the arc between two of its parameters.
func (a *arc) length(s, t float64) float64 { return math.Abs(a.curve.length(min(s, t), max(s, t))) }

// finish turns pieces into a block's arcs and nodes.
func finish(near []site, b box, pieces []piece, mid vec, rimAt box) *block {
	k := &block{near: near}
	type end struct {
		at  vec
		arc int32
		to  bool
	}
	var ends []end
	for _, p := range pieces {
		a := arc{i: p.i, j: p.j, s0: p.s0, s1: p.s1}
		if p.j >= 0 {
			a.curve, _ = bisector(&near[p.i], &near[p.j], mid)
		} else {
			a.curve = rimCurve(&near[p.i], rimAt, int(-1-p.j))
		}
		a.um0, a.um1 = a.clearance(a.s0), a.clearance(a.s1)
		if a.um0 > a.um1 {
			a.s0, a.s1, a.um0, a.um1 = a.s1, a.s0, a.um1, a.um0
		}
		n := int32(len(k.arcs))
		ends = append(ends, end{a.at(a.s0), n, false}, end{a.at(a.s1), n, true})
		k.arcs = append(k.arcs, a)
	}
	// Ends within joinUm of one another are one node.
	order := make([]int32, len(ends))
	lead := make([]int32, len(ends))
	for i := range ends {
		order[i], lead[i] = int32(i), int32(i)
	}
	slices.SortFunc(order, func(a, b int32) int {
		return cmp.Or(cmp.Compare(ends[a].at.x, ends[b].at.x), cmp.Compare(a, b))
	})
	find := func(i int32) int32 {
		for lead[i] != i {
			lead[i] = lead[lead[i]]
			i = lead[i]
		}
		return i
	}
	for n, i := range order {
		for _, j := range order[n+1:] {
			if ends[j].at.x-ends[i].at.x > joinUm {
				break
			}
			if math.Abs(ends[j].at.y-ends[i].at.y) <= joinUm {
				a, b := find(i), find(j)
				lead[max(a, b)] = min(a, b)
			}
		}
	}
	ids := make([]int32, len(ends))
	for i := range ends {
		if l := find(int32(i)); int(l) == i {
			ids[i] = int32(len(k.nodes))
			a := &k.arcs[ends[i].arc]
			um := a.um0
			if ends[i].to {
				um = a.um1
			}
			k.nodes = append(k.nodes, node{ends[i].at, um})
		} else {
			ids[i] = ids[l]
		}
		if a := &k.arcs[ends[i].arc]; ends[i].to {
			a.to = ids[i]
		} else {
			a.from = ids[i]
		}
	}
	k.arcs = slices.Clone(slices.DeleteFunc(k.arcs, func(a arc) bool { return a.from == a.to && a.length(a.s0, a.s1) < 8*joinUm }))
	for i, n := range k.nodes {
		if n.at.x-b.x0 < joinUm || b.x1-n.at.x < joinUm || n.at.y-b.y0 < joinUm || b.y1-n.at.y < joinUm {
			k.border = append(k.border, int32(i))
		}
	}
	slices.SortFunc(k.border, func(i, j int32) int {
		return cmp.Or(cmp.Compare(k.nodes[i].at.x, k.nodes[j].at.x), cmp.Compare(i, j))
	})
	return k
}
