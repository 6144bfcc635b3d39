package voronoi

import (
	"cmp"
	"math"
	"slices"
)

// SameFrom says whether the edges of g and of old, of another version of the same floor, are
// the same wherever clearance is um or more: the same places, to joinUm, with the same
// clearances. It looks only at blocks that the two do not share (see Advance), so time is that of the
// change. Where an edge is the same but a solid beside it was cut otherwise it may say
// false. Graphs for different needs or floors are never the same.
//
// A bottleneck of um that is the same in both then lets clearest ways stay what they are.
func (g *Graph) SameFrom(old *Graph, um float64) bool {
	if g.frame != old.frame {
		return false
	}
	for i, b := range g.blocks {
		if k := old.blocks[i]; b != k && !sameSpans(b.above(um), k.above(um)) {
			return false
		}
	}
	return true
}

// span is a part of an arc.
type span struct {
	curve
	at, to   vec
	um0, um1 float64
	lo, hi   float64 // its parameters
}

// above is what a block's arcs have at clearance um and more, in an order that rests on
// the places alone.
func (b *block) above(um float64) (out []span) {
	for i := range b.arcs {
		a := &b.arcs[i]
		if a.um1 < um {
			continue
		}
		s, low := a.s0, a.um0
		if low < um {
			s, low = a.levelBetween(um), um
		}
		v := span{curve: a.curve, at: a.at(s), to: a.at(a.s1), um0: low, um1: a.um1, lo: min(s, a.s1), hi: max(s, a.s1)}
		if v.hi-v.lo < joinUm {
			continue // a touch
		}
		out = append(out, v)
	}
	slices.SortFunc(out, func(p, q span) int {
		return cmp.Or(cmp.Compare(math.Round(p.at.x), math.Round(q.at.x)), cmp.Compare(math.Round(p.at.y), math.Round(q.at.y)),
			cmp.Compare(math.Round(p.to.x), math.Round(q.to.x)), cmp.Compare(math.Round(p.to.y), math.Round(q.to.y)))
	})
	return out
}

func sameSpans(a, b []span) bool {
	return slices.EqualFunc(a, b, func(p, q span) bool {
		near := func(a, b vec) bool { return math.Abs(a.x-b.x) <= joinUm && math.Abs(a.y-b.y) <= joinUm }
		if !near(p.at, q.at) || !near(p.to, q.to) || math.Abs(p.um0-q.um0) > joinUm || math.Abs(p.um1-q.um1) > joinUm {
			return false
		}
		// Ends say all about a straight arc along which clearance is linear.
		return p.linear && q.linear || p.curve == q.curve
	})
}
