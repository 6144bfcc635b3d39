package voronoi

import (
	"context"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// seeker is one search. A node is in one of two states: come to along a road, or in
// Open. Two ways in Open in a row are never shorter than one, so from the second kind a
// path goes on along roads only, which makes for a better estimate of what is
// left. That estimate is never too high, but may fall by more than a step costs, so states
// are taken up again when a cheaper way to them is found.
type seeker struct {
	*Roads
	*net
	ctx       context.Context
	r         float64
	weight    float64
	from, to  entry
	start     int32 // numbers of the ends, after all nodes
	goal      int32
	goalPiece int32          // of the net that the goal's way in comes to, -1 for none
	best      map[int32]item // cheapest way known to a state
	ways      map[[2]int32][]geom.Point
	q         queue
	path      Path
}

func (w *Roads) search(ctx context.Context, s, t geom.Point, r, weight float64) (Path, bool, error) {
	k := &seeker{Roads: w, ctx: ctx, r: r, weight: weight, best: map[int32]item{}, ways: map[[2]int32][]geom.Point{}, goalPiece: -1}
	k.start, k.goal = int32(len(w.nodes)), int32(len(w.nodes))+1
	var ok1, ok2 bool
	k.from, ok1 = w.enter(s)
	k.to, ok2 = w.enter(t)
	if !ok1 || !ok2 || k.from.um < r-tieUm || k.to.um < r-tieUm {
		return Path{}, false, ctx.Err()
	}
	k.net = w.netOf(r)
	if k.to.road >= 0 {
		k.goalPiece = k.net.piece[w.roads[k.to.road].b]
	}
	return k.run()
}

// state is the number of a node's state.
func state(node int32, k kind) int32 {
	if k == byRoad {
		return 2 * node
	}
	return 2*node + 1
}

// spot is the place of a node, or where an end's way in arrives.
func (k *seeker) spot(n int32) geom.Point {
	switch n {
	case k.start:
		return k.from.to
	case k.goal:
		return k.to.to
	}
	return k.nodes[n].at
}

func (k *seeker) estimate(n int32) float64 {
	return geom.Dist(k.spot(n), k.to.to)
}

func (k *seeker) run() (Path, bool, error) {
	tight := 1 + k.weight
	k.offer(item{g: float64(tight * k.from.length), node: k.start, from: -1, road: -1, kind: byRoad})
	for len(k.q) > 0 {
		it := k.q.pop()
		if it.kind == byGuess {
			if k.beaten(&it) {
				continue
			}
			from := it.from / 2
			d, err := k.between(from, it.node)
			if err != nil {
				return Path{}, false, err
			}
			if !math.IsInf(d, 1) {
				it.g, it.kind = it.g-geom.Dist(k.spot(from), k.spot(it.node))+d, byOpen
				k.offer(it)
			}
			continue
		}
		if k.best[state(it.node, it.kind)].g < it.g {
			continue // a cheaper way came up meanwhile
		}
		k.path.Expanded++
		if k.path.Expanded%1024 == 0 && k.ctx.Err() != nil {
			return Path{}, false, k.ctx.Err()
		}
		if it.node == k.goal {
			return k.assemble(it)
		}
		k.expand(it)
	}
	return Path{}, false, k.ctx.Err()
}

// beaten says whether a state as good as an item's is known to be reached as cheaply.
func (k *seeker) beaten(it *item) bool {
	if b, ok := k.best[state(it.node, byRoad)]; ok && b.g <= it.g {
		return true
	}
	if it.kind != byRoad {
		b, ok := k.best[state(it.node, byOpen)]
		return ok && b.g <= it.g
	}
	return false
}

// offer takes a way to a node when it is cheaper than those known.
func (k *seeker) offer(it item) {
	if k.beaten(&it) {
		return
	}
	left := 0.0
	switch {
	case it.node == k.goal:
	case it.kind == byRoad:
		left = k.estimate(it.node)
	default:
		left = k.leaving(it.node)
	}
	if math.IsInf(left, 1) {
		return
	}
	it.f = it.g + left
	if it.kind != byGuess {
		k.best[state(it.node, it.kind)] = it
	}
	k.path.Queued++
	k.q.push(it)
}

func (k *seeker) expand(it item) {
	tight := 1 + k.weight
	n := it.node
	along := func(road, to int32, length float64) {
		k.offer(item{g: it.g + float64(tight*length), node: to, from: state(n, it.kind), road: road, kind: byRoad})
	}
	part := int32(-1)
	if n == k.start {
		if r := k.from.road; r >= 0 {
			v := &k.roads[r]
			a := k.g.arc(v.step)
			along(r, v.b, a.length(k.from.s, v.s1))
			if v.um0 >= k.r-tieUm {
				along(r, v.a, a.length(v.s0, k.from.s))
			}
			if k.to.road == r {
				along(r, k.goal, a.length(k.from.s, k.to.s))
			}
			return
		}
		part = k.from.part
		if k.to.road < 0 && (part >= 0 && part == k.to.part || part < 0 && k.to.part < 0) {
			k.guess(it, k.goal)
		}
	} else {
		for _, r := range k.ends[k.at[n]:k.at[n+1]] {
			v := &k.roads[r]
			if k.to.road == r {
				// Up from a needs a's clearance, down from b what is met until there.
				if n == v.b {
					along(r, k.goal, k.g.arc(v.step).length(k.to.s, v.s1))
				}
				if n == v.a && v.um0 >= k.r-tieUm {
					along(r, k.goal, k.g.arc(v.step).length(v.s0, k.to.s))
				}
			}
			if v.um0 >= k.r-tieUm {
				if n == v.a {
					along(r, v.b, v.length)
				}
				if n == v.b {
					along(r, v.a, v.length)
				}
			}
		}
		if it.kind != byOpen { // two ways in Open in a row are never shorter than one
			part = k.nodes[n].part
		}
		if part >= 0 && k.to.road < 0 && k.to.part == part {
			k.guess(it, k.goal)
		}
	}
	if part >= 0 {
		for _, v := range k.net.portals[part] {
			if v != n {
				k.guess(it, v)
			}
		}
		if k.goalPiece >= 0 {
			// A portal that leads to the goal alone.
			if list := k.siblings[k.goalPiece]; len(list) == 1 && k.nodes[list[0]].part == part && list[0] != n {
				k.guess(it, list[0])
			}
		}
	}
}

// guess offers a way in Open at its length as the crow flies.
func (k *seeker) guess(it item, to int32) {
	k.offer(item{g: it.g + geom.Dist(k.spot(it.node), k.spot(to)), node: to, from: state(it.node, it.kind), road: -1, kind: byGuess})
}

// between is the length of the shortest way in Open.
func (k *seeker) between(a, b int32) (float64, error) {
	if a < k.start && b < k.start {
		if d, ok := k.known.get(a, b); ok {
			return d, nil
		}
	}
	d, err := k.walk(a, b)
	if err == nil && a < k.start && b < k.start {
		k.known.put(a, b, d)
	}
	return d, err
}

// walk searches for the shortest way in Open between two nodes and keeps it. Portals
// are asked for from the lower to the higher, so that the answer does not depend on
// who asked first.
func (k *seeker) walk(a, b int32) (float64, error) {
	swap := a < k.start && b < k.start && a > b
	if swap {
		a, b = b, a
	}
	k.path.Opened++
	way, ok, err := k.open.Shortest(k.ctx, k.spot(a), k.spot(b))
	if err != nil || !ok {
		return inf, err
	}
	k.ways[[2]int32{a, b}] = way.Points
	back := slices.Clone(way.Points)
	slices.Reverse(back)
	k.ways[[2]int32{b, a}] = back
	return way.LengthUm, nil
}
