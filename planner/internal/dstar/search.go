package dstar

import (
	"context"
	"errors"
	"math"
	"math/bits"
	"slices"

	"example.com/wideberth/planner/internal/roadmap"
)

const (
	// connectAfter is how many nodes are taken from the queue before it is asked whether
	// the goal is connected at all.
	connectAfter = 4096
	// sweepEvery is how many expansions come between two looks for memory to let go of.
	sweepEvery = 1 << 16
	// queueSlack is how many nodes may be queued beyond twice the inconsistent ones.
	queueSlack = 1 << 16
)

// search expands nodes until none can matter to the cheapest path.
func (s *Session) search(ctx context.Context) (roadmap.Outcome, error) {
	out, again, err := s.run(ctx)
	if again {
		s.begin(s.q, s.steps.Can&0xf0 != 0)
		out, _, err = s.run(ctx)
	}
	if s.first != nil {
		s.first.Release()
		s.first = nil
		s.requeue()
	}
	return out, err
}

// run is search; again says that a search from scratch is likely to be less work.
func (s *Session) run(ctx context.Context) (out roadmap.Outcome, again bool, err error) {
	limit, ask := int64(math.MaxInt64), connectAfter
	if s.mended && s.fresh > 0 { // soon over in any case
		limit, ask = max(s.fresh/giveUp, leastRepair), -1
	}
	for n := 0; ; n++ {
		if n == ask {
			if out := roadmap.Connected(s.q); out != roadmap.Found {
				return out, false, nil
			}
		}
		e, ok := s.next()
		switch {
		case !ok && s.best() == never:
			if out := roadmap.Connected(s.q); out != roadmap.Found {
				return out, false, nil
			}
			return roadmap.ToShut, false, nil
		case !ok:
			return roadmap.Found, false, nil
		}
		if err := s.poll(ctx); err != nil {
			return roadmap.Found, false, err
		}
		if !s.expand(e) {
			continue
		}
		s.q.Count.Expanded++
		if s.opened++; s.opened%sweepEvery == 0 {
			s.sweep()
		}
		if s.opened >= limit {
			return roadmap.Found, true, nil
		}
	}
}

// next is the node of least key in the queue, when it can matter to the cheapest path.
func (s *Session) next() (entry, bool) {
	if s.first != nil {
		if s.first.Empty() {
			return entry{}, false
		}
		f, id := s.first.Pop()
		return entry{f: uint64(f), id: id}, f-s.moved <= s.best()
	}
	if len(s.open.all) == 0 || int64(s.open.all[0].f)-s.moved > s.best() {
		return entry{}, false
	}
	return s.open.all[0], true
}

// expand takes a node out of the queue and makes it consistent, or at least no longer counts
// on its cost; false when there was nothing to do, or the node is not next by now.
func (s *Session) expand(e entry) bool {
	t, k := s.node(e.id)
	old, next := t.cost[k], t.next[k]
	if s.first == nil {
		if now := s.key(t, k); old != next && e.before(&now) == 1 {
			s.open.sink(now)
			return false
		}
		s.open.pop()
	}
	if old == next {
		return false
	}
	if old > next {
		s.setCost(t, k, next)
		if m, rim := s.moves(t, k); !rim && !t.oneWay {
			s.lower(t, k, m, next)
			return true
		}
		s.around(t, k, func(u *tile, i int, step int64) {
			if v := next + step; v < u.next[i] {
				s.setNext(u, i, v)
			}
		})
		return true
	}
	s.setCost(t, k, never)
	s.around(t, k, func(u *tile, i int, step int64) {
		if u.next[i] == old+step {
			s.setNext(u, i, s.derive(u, i))
		}
	})
	return true
}

// lower lets a node's neighbours, all in its block, know of its cost: what is most of a search
// from scratch.
func (s *Session) lower(t *tile, k int, m uint8, cost int64) {
	flat, across := cost+s.flat[t.class[k]], cost+s.across[t.class[k]]
	for ; m != 0; m &= m - 1 {
		d := bits.TrailingZeros8(m)
		n := k + within[d]
		v := flat + s.flat[t.class[n]]
		if d >= 4 {
			v = across + s.across[t.class[n]]
		}
		if v < t.next[n] {
			s.setNext(t, n, v)
		}
	}
}

// within is where each move leads in a block.
var within = func() (w [8]int) {
	for d := range w {
		dx, dy := roadmap.MoveOf(d)
		w[d] = dy*side + dx
	}
	return w
}()

// derive is the cost to go of a node that follows from its neighbours' by one step.
func (s *Session) derive(t *tile, k int) int64 {
	if t.free[k/side]>>(k%side)&1 == 0 {
		return never
	}
	v := never
	if t.goal {
		if l := s.linkAt(s.id(t, k)); l != nil {
			v = l.cost
		}
	}
	s.ahead(t, k, func(_ int, u *tile, i int, step int64) bool {
		v = min(v, u.cost[i]+step)
		return true
	})
	return v
}

// key is a node's key by now.
func (s *Session) key(t *tile, k int) entry {
	v := min(t.cost[k], t.next[k])
	return entry{f: uint64(v + s.from.reach(s, t.cell(k)) + s.moved), g: uint64(v), id: s.id(t, k)}
}

func (s *Session) push(t *tile, k int) {
	if s.first != nil {
		e := s.key(t, k)
		s.first.Push(int64(e.f), e.id)
		s.q.Count.Queued++
		return
	}
	if len(s.open.all) > 2*s.odd+queueSlack {
		s.requeue()
		return
	}
	s.open.push(s.key(t, k))
	s.q.Count.Queued++
}

// requeue builds the queue anew, without what is out of date.
func (s *Session) requeue() {
	s.open.all = s.open.all[:0]
	for _, i := range s.made {
		t := s.all[i]
		if t.odd == 0 {
			continue
		}
		for k := range t.cost {
			if t.cost[k] != t.next[k] {
				s.open.push(s.key(t, k))
			}
		}
	}
}

// moves are the moves that lead to and from a cell, one-way zones aside, a bit each; rim
// says that some leave the block.
func (s *Session) moves(t *tile, k int) (m uint8, rim bool) {
	x, y := k%side, k/side
	if t.free[y]>>x&1 == 0 {
		return 0, false
	}
	var around uint64
	if rim = x == 0 || x == side-1 || y == 0 || y == side-1; rim {
		for i := range 9 {
			if u, n := s.beside(t, x+i%3-1, y+i/3-1); u != nil {
				around |= u.free[n/side] >> (n % side) & 1 << i
			}
		}
	} else {
		around = t.free[y-1]>>(x-1)&7 | t.free[y]>>(x-1)&7<<3 | t.free[y+1]>>(x-1)&7<<6
	}
	return roadmap.MovesAmong(uint(around)) & s.steps.Can, rim
}

// beside is the node at (x, y) from a tile's lower left cell, at most a cell off it.
func (s *Session) beside(t *tile, x, y int) (*tile, int) {
	if uint(x) < side && uint(y) < side {
		return t, y*side + x
	}
	c := roadmap.Cell{Col: t.col + x, Row: t.row + y}
	if c.Col < 0 || c.Row < 0 || c.Col >= s.frame.Cols || c.Row >= s.frame.Rows {
		return nil, 0
	}
	return s.at(c.Col/side, c.Row/side), c.Row%side*side + c.Col%side
}

// step is where move d from a node leads and what it costs.
func (s *Session) step(t *tile, k, d int, rim bool) (u *tile, i int, cost int64) {
	dx, dy := roadmap.MoveOf(d)
	u, i = t, k+dy*side+dx
	if rim {
		u, i = s.beside(t, k%side+dx, k/side+dy)
	}
	if d < 4 {
		return u, i, s.flat[t.class[k]] + s.flat[u.class[i]]
	}
	return u, i, s.across[t.class[k]] + s.across[u.class[i]]
}

// around yields the nodes from which one step leads to a node.
func (s *Session) around(t *tile, k int, yield func(u *tile, i int, step int64)) {
	m, rim := s.moves(t, k)
	for ; m != 0; m &= m - 1 {
		u, i, cost := s.step(t, k, bits.TrailingZeros8(m), rim)
		if (t.oneWay || u.oneWay) && s.q.Against(u.cell(i), t.cell(k)) {
			continue
		}
		yield(u, i, cost)
	}
}

// ahead yields the nodes to which one step leads from a node, by move, until told to stop.
func (s *Session) ahead(t *tile, k int, yield func(d int, u *tile, i int, step int64) bool) {
	m, rim := s.moves(t, k)
	for ; m != 0; m &= m - 1 {
		d := bits.TrailingZeros8(m)
		u, i, cost := s.step(t, k, d, rim)
		if (t.oneWay || u.oneWay) && s.q.Against(t.cell(k), u.cell(i)) {
			continue
		}
		if !yield(d, u, i, cost) {
			return
		}
	}
}

// errLost says that costs to go do not lead to the goal: a fault of this program.
var errLost = errors.New("dstar: costs to go lead nowhere")

// path reads the path off the costs to go.
func (s *Session) path() (roadmap.Path, error) {
	p := roadmap.Path{CostUm: s.steps.UmFrom(s.best())}
	p.From = slices.IndexFunc(s.from.links, func(l link) bool {
		t, k := s.node(l.id)
		return l.cost+t.cost[k] == s.best()
	})
	t, k := s.node(s.from.links[p.From].id)
	for {
		p.Points = append(p.Points, s.frame.Centre(t.cell(k)))
		if l := s.linkAt(s.id(t, k)); l != nil && l.cost == t.cost[k] {
			p.To = l.i
			p.Points = roadmap.StraightRuns(p.Points)
			return p, nil
		}
		here := t.cost[k]
		s.ahead(t, k, func(_ int, u *tile, i int, step int64) bool {
			if u.cost[i]+step == here {
				t, k = u, i
			}
			return t.cost[k] == here
		})
		if t.cost[k] == here {
			return roadmap.Path{}, errLost
		}
	}
}
