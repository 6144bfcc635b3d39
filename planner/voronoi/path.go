package voronoi

import (
	"context"
	"fmt"

	"example.com/wideberth/mapstore/geom"
)

// Path is a way that joins any-angle ways in Open with tight edges.
type Path struct {
	Legs     []Leg
	CostUm   float64 // what was minimised
	LengthUm float64
	TightUm  float64
	Expanded int64 // nodes settled
	Queued   int64
	Opened   int64 // open distances searched for
}

// Leg is a part of a path that is tight, or open, throughout.
type Leg struct {
	Tight    bool
	Points   []geom.Point // the first is the last of the leg before
	LengthUm float64      // along the edges; the chords drawn are shorter, by 3e-4 of it where edges bend with a radius of 0.5 m
}

// RangeError says which argument is out of range.
type RangeError struct {
	Field  string
	Value  float64
	Wanted string
}

// Error names the argument, its value and the wanted range.
func (e *RangeError) Error() string {
	return fmt.Sprintf("%s: %v, wanted %s", e.Field, e.Value, e.Wanted)
}

// MaxTightWeight bounds the extra cost of a tight metre; above it a detour through
// the whole of a floor is preferred to a door.
const MaxTightWeight = 1e6

// Balanced finds the cheapest way from s to t that keeps clearance r: it joins
// shortest ways in Open with tight edges, and costs its open length plus (1 + weight)
// times its tight length. An end outside Open goes straight away from what is nearest to
// a tight edge or to Open first, counted as tight. ok is false when there is none.
// The cost is the least over all portals, to 1e-9 relative. The error is ctx's,
// anyangle.ErrTooLarge or a *RangeError.
//
// It is A* over portals and tight edges. The open distance between two portals is
// searched for only when the straight line between them is not too long to matter
// (as lazy weighted A* does, Cohen, Phillips & Likhachev 2014; from memory), and no
// further than it may matter.
func (w *Roads) Balanced(ctx context.Context, s, t geom.Point, r int64, weight float64) (p Path, ok bool, err error) {
	if r < 0 || float64(r) > w.p {
		return p, false, &RangeError{"required clearance", float64(r), fmt.Sprintf("0 to %.0f µm", w.p)}
	}
	if !(weight >= 0 && weight <= MaxTightWeight) {
		return p, false, &RangeError{"tight weight", weight, fmt.Sprintf("0 to %.0f", float64(MaxTightWeight))}
	}
	return w.search(ctx, s, t, float64(r), float64(r), float64(r), weight)
}

// Clearest finds a way from s to t whose smallest clearance is the largest there is
// (what Widest says, at most p), and among these the shortest along the tight edges
// and in Open. ok is false when there is none with clearance r.
func (w *Roads) Clearest(ctx context.Context, s, t geom.Point, r int64) (p Path, b Bottleneck, ok bool, err error) {
	if r < 0 || float64(r) > w.p {
		return p, b, false, &RangeError{"required clearance", float64(r), fmt.Sprintf("0 to %.0f µm", w.p)}
	}
	b, ok, err = w.Widest(ctx, s, t)
	if err != nil || !ok || b.ClearanceUm < float64(r)-tieUm {
		return p, b, false, err
	}
	p, ok, err = w.search(ctx, s, t, b.ClearanceUm, b.ClearanceUm, w.netLevel(b.ClearanceUm), 0)
	return p, b, ok, err
}

// Roomiest is Clearest, what the ends themselves leave not counted: b is the bottleneck
// between where edges are come to, or the open floor, and where they are left, and all of
// the way beyond an end's rise to an edge and on along it has that clearance. The whole has
// clearance r.
func (w *Roads) Roomiest(ctx context.Context, s, t geom.Point, r int64) (p Path, b Bottleneck, ok bool, err error) {
	if r < 0 || float64(r) > w.p {
		return p, b, false, &RangeError{"required clearance", float64(r), fmt.Sprintf("0 to %.0f µm", w.p)}
	}
	b, ok = w.Between(s, t)
	if !ok || b.ClearanceUm < float64(r)-tieUm {
		return p, b, false, ctx.Err()
	}
	p, ok, err = w.search(ctx, s, t, b.ClearanceUm, float64(r), w.netLevel(b.ClearanceUm), 0)
	return p, b, ok, err
}

// assemble draws the cheapest way to the goal.
func (k *seeker) assemble(last item) Path {
	steps := []item{last}
	for n := last.from; n >= 0; {
		it := k.best[n]
		steps = append(steps, it)
		n = it.from
	}
	p := &k.path
	add := func(tight bool, length float64, pts ...geom.Point) {
		if n := len(p.Legs); n > 0 && p.Legs[n-1].Tight == tight {
			l := &p.Legs[n-1]
			l.LengthUm += length
			l.Points = appendNew(l.Points, pts)
		} else if len(pts) > 1 {
			p.Legs = append(p.Legs, Leg{Tight: tight, LengthUm: length, Points: appendNew(nil, pts)})
		}
	}
	if k.from.from != k.from.to {
		add(true, k.from.length, k.from.from, k.from.to)
	}
	for i := len(steps) - 2; i >= 0; i-- {
		it := &steps[i]
		from := it.from / 2
		if it.kind == byOpen {
			add(false, it.g-k.best[it.from].g, k.ways[it.by]...)
			continue
		}
		v := &k.roads[it.by]
		s0, s1 := v.s0, v.s1
		if from == v.b {
			s0, s1 = v.s1, v.s0
		}
		if from == k.start {
			s0 = k.from.s
			s1 = v.s1
			if it.node == v.a {
				s1 = v.s0
			}
		}
		if it.node == k.goal {
			s1 = k.to.s
		}
		um, a := k.r, k.g.arc(v.step)
		if min(a.clearance(s0), a.clearance(s1)) < um {
			um = k.endUm
		}
		pts := k.g.draw(v.step, s0, s1, um)
		// Nodes are where one of their arcs has them: the others' ends differ by rounding.
		pts[0], pts[len(pts)-1] = k.spot(from), k.spot(it.node)
		add(true, a.length(s0, s1), pts...)
	}
	if k.to.from != k.to.to {
		add(true, k.to.length, k.to.to, k.to.from)
	}
	for _, l := range p.Legs {
		p.LengthUm += l.LengthUm
		if l.Tight {
			p.TightUm += l.LengthUm
		}
	}
	if len(p.Legs) == 0 {
		p.Legs = []Leg{{Points: []geom.Point{k.from.from, k.to.from}}}
	}
	p.CostUm = last.g + float64((1+k.weight)*k.to.length)
	return *p
}

func appendNew(out, pts []geom.Point) []geom.Point {
	for _, q := range pts {
		if n := len(out); n == 0 || out[n-1] != q {
			out = append(out, q)
		}
	}
	return out
}
