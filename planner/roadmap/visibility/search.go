package visibility

import (
	"container/heap"
	"context"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/roadmap"
)

// label is an arrival: at a node, or (node < 0) at the goal, by a tangent from where from
// arrived.
type label struct {
	node   int32
	from   *label
	t      tangent
	arrive float64
	cost   float64 // up to here
	total  float64 // with what is left at least
	seen   bool    // t is known to be clear
	order  int64
}

// queue orders labels by total, then the higher cost, then the earlier.
type queue []*label

func (q queue) Len() int { return len(q) }
func (q queue) Less(i, j int) bool {
	a, b := q[i], q[j]
	if a.total != b.total {
		return a.total < b.total
	}
	if a.cost != b.cost {
		return a.cost > b.cost
	}
	return a.order < b.order
}
func (q queue) Swap(i, j int) { q[i], q[j] = q[j], q[i] }
func (q *queue) Push(x any)   { *q = append(*q, x.(*label)) }
func (q *queue) Pop() any {
	old := *q
	l := old[len(old)-1]
	*q = old[:len(old)-1]
	return l
}

// search is A* (Hart, Nilsson & Raphael 1968) over tangents and arcs, by straight distance.
type search struct {
	g      *Graph
	judge  *judge.Judge
	goal   geom.Point
	goals  []geom.Point // places from which the goal is seen, itself first
	queue  queue
	best   map[int32][]*label // settled or queued arrivals at a node that none there undercuts
	queued int64
}

// Search finds the shortest way along tangents and arcs. Ends whose clearance is below the
// required one have none. Time is that of the search plus that of tangents not found before.
// The error is ctx's.
func (g *Graph) Search(ctx context.Context, s, t geom.Point) (roadmap.Way, bool, error) {
	j := g.judge()
	defer j.Release()
	j.Ends = [2]geom.Point{s, t}
	if ctx.Err() != nil {
		return roadmap.Way{}, false, ctx.Err()
	}
	if ok, _ := j.Stands(s); !ok {
		return roadmap.Way{}, false, nil
	}
	if ok, _ := j.Stands(t); !ok {
		return roadmap.Way{}, false, nil
	}
	if j.Sight(s, t) {
		return roadmap.Way{Points: []geom.Point{s, t}, LengthUm: geom.Dist(s, t), ExactUm: geom.Dist(s, t)}, true, nil
	}
	q := &search{g: g, judge: j, goal: t, goals: g.outOf(t, j), best: map[int32][]*label{}}
	for _, p := range g.outOf(s, j) {
		q.begin(&label{node: -2, t: tangent{p: s, q: p}, cost: geom.Dist(s, p), seen: true})
	}
	var w roadmap.Way
	for len(q.queue) > 0 {
		if ctx.Err() != nil {
			return roadmap.Way{}, false, ctx.Err()
		}
		l := heap.Pop(&q.queue).(*label)
		if l.node >= 0 && q.undercut(l) || !l.seen && !j.Sight(l.t.p, l.t.q) {
			continue
		}
		if l.node == -1 {
			pts, ok := g.points(l, s, t, j)
			if !ok {
				continue // another way may do
			}
			w.Points, w.Queued, w.ExactUm = pts, q.queued, l.cost
			for i := 1; i < len(pts); i++ {
				w.LengthUm += geom.Dist(pts[i-1], pts[i])
			}
			return w, true, nil
		}
		if !l.seen {
			l.seen = true
			q.keep(l)
		}
		w.Expanded++
		q.expand(l)
	}
	return roadmap.Way{Expanded: w.Expanded, Queued: q.queued}, false, nil
}

// begin queues the tangents from a beginning of the way, not yet known to be clear.
func (q *search) begin(l *label) {
	for node := range int32(len(q.g.links)) {
		if t, ok := q.g.fromEnd(l.t.q, node); ok {
			q.push(&label{node: node, from: l, t: t, arrive: q.g.along(node, t.w), cost: l.cost + t.length})
		}
	}
	for _, p := range q.goals {
		q.push(&label{node: -1, from: l, t: tangent{p: l.t.q, q: p, length: geom.Dist(l.t.q, p)}, cost: l.cost + geom.Dist(l.t.q, p)})
	}
}

// expand goes along the arc and leaves it by every tangent further on.
func (q *search) expand(l *label) {
	g := q.g
	radius := g.arcs[l.node>>1].wide()
	on := func(leave float64) (float64, bool) {
		turn := leave - l.arrive
		if turn < 0 && g.arcs[l.node>>1].whole() {
			turn += 2 * math.Pi
		}
		return l.cost + float64(radius*max(0, turn)), turn >= -2*angleTol
	}
	for _, k := range g.linksOf(l.node, q.judge) {
		if cost, ok := on(k.leave); ok {
			n := label{node: k.to, from: l, arrive: k.arrive, cost: cost + k.length, seen: true}
			if !q.undercut(&n) {
				n.t, _ = g.between(l.node, k.to)
				q.push(&n)
			}
		}
	}
	for _, p := range q.goals {
		if t, ok := g.toEnd(l.node, p); ok {
			if cost, ok := on(g.along(l.node, t.v)); ok {
				q.push(&label{node: -1, from: l, t: t, cost: cost + t.length})
			}
		}
	}
}

func (q *search) push(l *label) {
	if l.node == -1 {
		l.cost += geom.Dist(l.t.q, q.goal)
		l.total = l.cost
	} else {
		l.total = l.cost + geom.Dist(l.t.q, q.goal)
	}
	if l.seen && l.node >= 0 {
		q.keep(l)
	}
	l.order = q.queued
	q.queued++
	heap.Push(&q.queue, l)
}

// reach is what it costs to come along the arc from a to where b arrives; +Inf when b
// is behind.
func (q *search) reach(a, b *label) float64 {
	arc := &q.g.arcs[b.node>>1]
	turn := b.arrive - a.arrive
	if turn < 0 {
		if !arc.whole() {
			return math.Inf(1)
		}
		turn += 2 * math.Pi
	}
	return a.cost + float64(arc.wide()*turn)
}

// undercut says whether another arrival known to be clear leads to all that l does, for no
// more.
func (q *search) undercut(l *label) bool {
	for _, o := range q.best[l.node] {
		if o != l && q.reach(o, l) <= l.cost {
			return true
		}
	}
	return false
}

// keep notes an arrival that is clear, and forgets those it undercuts.
func (q *search) keep(l *label) {
	list := q.best[l.node][:0]
	for _, o := range q.best[l.node] {
		if q.reach(l, o) > o.cost {
			list = append(list, o)
		}
	}
	q.best[l.node] = append(list, l)
}

// outOf are places from which a way to or from p may go on: p, and where it lies in a notch of
// the raster that the outline has filled, places up to three cells straight out.
func (g *Graph) outOf(p geom.Point, j *judge.Judge) []geom.Point {
	out := []geom.Point{p}
	n := j.At(p)
	if g.errUm == 0 || n.Um >= float64(g.need.ClearanceUm)+g.errUm {
		return out
	}
	away := math.Atan2(p.Y-n.At.Y, p.X-n.At.X)
	for k := range 8 {
		s, c := math.Sincos(away + float64(k)*(math.Pi/4))
		for _, d := range [2]float64{g.errUm, 2 * g.errUm} {
			if q := (geom.Point{X: p.X + float64(d*c), Y: p.Y + float64(d*s)}); j.Sight(p, q) {
				out = append(out, q)
			}
		}
	}
	return out
}
