package voronoi

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/spare"
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
	endUm     float64 // required of the ends and their ways in; else it is r
	weight    float64
	from, to  entry
	start     int32 // numbers of the ends, after all nodes
	goal      int32
	goalPiece int32   // of the net that the goal's way in comes to, -1 for none
	least     float64 // cheapest way known to the goal
	path      Path

	// Scratch.
	best  []item   // cheapest way known to a state
	known []uint32 // where this is the search's number
	count uint32
	ways  [][]geom.Point // in Open
	q     queue
}

var seekers spare.Shelf[seeker]

// mostKept is of how many states a search's memory is kept for the next one: some 20 MB of it.
const mostKept = 1 << 19

// search finds the cheapest way at clearance r. Its estimates are those of the roads
// that have clearance netAt, at most r.
func (w *Roads) search(ctx context.Context, s, t geom.Point, r, ends, netAt, weight float64) (Path, bool, error) {
	from, ok1 := w.enter(s)
	to, ok2 := w.enter(t)
	if !ok1 || !ok2 || from.um < ends-tieUm || to.um < ends-tieUm {
		return Path{}, false, ctx.Err()
	}
	k := seekers.Get()
	defer k.drop()
	k.Roads, k.net, k.ctx, k.r, k.endUm, k.weight = w, w.netOf(netAt), ctx, r, ends, weight
	k.from, k.to, k.goalPiece, k.least = from, to, -1, inf
	k.start, k.goal = int32(len(w.nodes)), int32(len(w.nodes))+1
	if to.road >= 0 {
		k.goalPiece = k.net.piece[w.roads[to.road].b]
	}
	k.clear(2*len(w.nodes) + 4)
	return k.run()
}

// clear forgets the states of the search before.
func (k *seeker) clear(states int) {
	k.count++
	if len(k.best) < states || k.count == 0 {
		k.best, k.known, k.count = make([]item, states), make([]uint32, states), 1
	}
	k.q = k.q[:0]
}

// drop gives the scratch back. It keeps no version alive.
func (k *seeker) drop() {
	clear(k.ways)
	*k = seeker{best: k.best, known: k.known, count: k.count, ways: k.ways[:0], q: k.q}
	if len(k.best) <= mostKept {
		seekers.Put(k)
	}
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
	k.offer(item{g: float64(tight * k.from.length), node: k.start, from: -1, by: -1, kind: byRoad})
	for len(k.q) > 0 {
		it := k.q.pop()
		if it.kind == byGuess {
			if err := k.resolve(it); err != nil {
				return k.none(), false, err
			}
			continue
		}
		if k.best[state(it.node, it.kind)].g < it.g {
			continue // a cheaper way came up meanwhile
		}
		k.path.Expanded++
		if k.path.Expanded%1024 == 0 && k.ctx.Err() != nil {
			return k.none(), false, k.ctx.Err()
		}
		if it.node == k.goal {
			return k.assemble(it), true, nil
		}
		k.expand(it)
	}
	return k.none(), false, k.ctx.Err()
}

// none is the counters without a way.
func (k *seeker) none() Path { return Path{Expanded: k.path.Expanded, Queued: k.path.Queued} }

// costOf is the cost of the cheapest way known to a state.
func (k *seeker) costOf(state int32) float64 {
	if k.known[state] != k.count {
		return inf
	}
	return k.best[state].g
}

// costTo is that of a state as good as an item's.
func (k *seeker) costTo(it *item) float64 {
	g := k.costOf(state(it.node, byRoad))
	if it.kind != byRoad {
		g = min(g, k.costOf(state(it.node, byOpen)))
	}
	return g
}

// offer takes a way to a node when it is cheaper than those known and may lead to a
// cheaper one to the goal.
func (k *seeker) offer(it item) {
	if k.costTo(&it) <= it.g {
		return
	}
	it.f = it.g + k.left(&it)
	if math.IsInf(it.f, 1) || it.f > k.least {
		return
	}
	if it.kind != byGuess {
		n := state(it.node, it.kind)
		k.best[n], k.known[n] = it, k.count
		if it.node == k.goal {
			k.least = min(k.least, it.g)
		}
	}
	k.path.Queued++
	k.q.push(it)
}

// left is a lower bound of the cost from an item's node on to the goal.
func (k *seeker) left(it *item) float64 {
	switch {
	case it.node == k.goal:
		return 0
	case it.kind == byRoad:
		return k.estimate(it.node)
	}
	return k.leaving(it.node)
}

// resolve searches for the way in Open that an item guesses the length of, as far as it
// is of use, and offers it.
func (k *seeker) resolve(it item) error {
	from := it.from / 2
	gone := k.best[it.from].g
	most := min(k.costTo(&it), k.least-k.left(&it)) - gone
	if most < geom.Dist(k.spot(from), k.spot(it.node))-tieUm {
		return nil // it has been overtaken
	}
	k.path.Opened++
	way, ok, err := k.open.ShortestWithin(k.ctx, k.spot(from), k.spot(it.node), most)
	if err != nil || !ok {
		return err
	}
	it.g, it.kind, it.by = gone+way.LengthUm, byOpen, int32(len(k.ways))
	k.ways = append(k.ways, way.Points)
	k.offer(it)
	return nil
}

func (k *seeker) expand(it item) {
	tight := 1 + k.weight
	n := it.node
	along := func(road, to int32, length float64) {
		k.offer(item{g: it.g + float64(tight*length), node: to, from: state(n, it.kind), by: road, kind: byRoad})
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
			if list := k.siblings(k.goalPiece); len(list) == 1 && k.nodes[list[0]].part == part && list[0] != n {
				k.guess(it, list[0])
			}
		}
	}
}

// guess offers a way in Open at its length as the crow flies.
func (k *seeker) guess(it item, to int32) {
	k.offer(item{g: it.g + geom.Dist(k.spot(it.node), k.spot(to)), node: to, from: state(it.node, it.kind), by: -1, kind: byGuess})
}
