package dstar

import (
	"cmp"
	"context"
	"math"
	"math/bits"
	"slices"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/roadmap"
)

// zone is where the robot's links lie: the rectangle of their cells and the least of their
// costs bound what the way from the robot to a cell costs.
type zone struct {
	links  []link
	lo, hi roadmap.Cell
	least  int64
	best   int64 // of link and cost to go; out of date when stale
	stale  bool
}

// reach is the heuristic: the least that the way from the robot to c can cost.
func (z *zone) reach(s *Session, c roadmap.Cell) int64 {
	dx := max(z.lo.Col-c.Col, 0, c.Col-z.hi.Col)
	dy := max(z.lo.Row-c.Row, 0, c.Row-z.hi.Row)
	return s.steps.Least(int64(dx), int64(dy)) + z.least
}

// best is what the cheapest path costs by the costs counted on.
func (s *Session) best() int64 {
	z := &s.from
	if z.stale {
		z.best, z.stale = never, false
		for _, l := range z.links {
			t, k := s.node(l.id)
			if v := t.cost[k]; v < never {
				z.best = min(z.best, l.cost+v)
			}
		}
	}
	return z.best
}

// aim takes over where the robot and the goal are linked to the grid.
func (s *Session) aim() {
	for _, l := range s.from.links {
		t, _ := s.node(l.id)
		t.start = false
	}
	z := zone{least: math.MaxInt64, stale: true, lo: s.q.From[0].Cell, hi: s.q.From[0].Cell}
	for i, l := range s.q.From {
		c := link{s.number(l.Cell), s.steps.FromUm(l.CostUm), i}
		z.links = append(z.links, c)
		z.least = min(z.least, c.cost)
		z.lo = roadmap.Cell{Col: min(z.lo.Col, l.Cell.Col), Row: min(z.lo.Row, l.Cell.Row)}
		z.hi = roadmap.Cell{Col: max(z.hi.Col, l.Cell.Col), Row: max(z.hi.Row, l.Cell.Row)}
		t, _ := s.node(c.id)
		t.start = true
	}
	if s.from.links != nil {
		s.moved += s.from.drift(s, &z)
	}
	s.from = z

	for _, l := range s.to {
		t, _ := s.node(l.id)
		t.goal = false
	}
	s.to = nil
	for i, l := range s.q.To {
		s.to = append(s.to, link{s.number(l.Cell), s.steps.FromUm(l.CostUm), i})
	}
	slices.SortFunc(s.to, func(a, b link) int { return cmp.Compare(a.id, b.id) })
	for _, l := range s.to {
		t, _ := s.node(l.id)
		t.goal = true
	}
}

// drift is how much less the heuristic can be at any cell with the robot at z than with it
// where it was: distances to a rectangle obey the triangle inequality, and are largest at
// another's corners.
func (z *zone) drift(s *Session, now *zone) int64 {
	far := int64(0)
	for _, c := range [4]roadmap.Cell{now.lo, now.hi, {Col: now.lo.Col, Row: now.hi.Row}, {Col: now.hi.Col, Row: now.lo.Row}} {
		far = max(far, z.reach(s, c))
	}
	return max(0, far-now.least)
}

func (s *Session) linkAt(id uint32) *link {
	i, ok := slices.BinarySearchFunc(s.to, id, func(l link, id uint32) int { return cmp.Compare(l.id, id) })
	if !ok {
		return nil
	}
	return &s.to[i]
}

// follow takes over what differs between the last question and this one: nodes whose cost
// to go no longer follows from their neighbours' are made to, and queued.
func (s *Session) follow(ctx context.Context) error {
	turned := s.q.Rules.OneWayChanges(s.rules)
	s.rules = s.q.Rules
	for n, i := range s.made[:len(s.made):len(s.made)] {
		if n%blocksPerPoll == 0 && ctx.Err() != nil {
			return context.Cause(ctx)
		}
		t := s.all[i]
		if now := s.blocks(t.col/side, t.row/side); now != t.blocks {
			s.replace(t, &now)
		}
		if len(turned) > 0 {
			t.oneWay = s.oneWayNear(t)
			for _, r := range turned {
				s.touchBox(t, r.Grow(2*s.frame.Res))
			}
		}
	}
	goal := s.to
	s.aim()
	for _, l := range append(goal, s.to...) {
		t, k := s.node(l.id)
		c := t.cell(k)
		s.touch(t.col/side, c.Row, 1<<(k%side))
	}
	for _, t := range s.dirty {
		for y, w := range t.dirty {
			for ; w != 0; w &= w - 1 {
				if err := s.poll(ctx); err != nil {
					return err
				}
				k := y*side + bits.TrailingZeros64(w)
				s.setNext(t, k, s.derive(t, k))
			}
		}
		t.dirty = nil
	}
	s.dirty = s.dirty[:0]
	return nil
}

// blocksPerPoll is how many blocks are compared between two looks at the context.
const blocksPerPoll = 64

// replace gives a tile another version's masks and touches the nodes about the cells that
// differ: all from which a step leads to such a cell, or past it.
func (s *Session) replace(t *tile, now *blocks) {
	was := t.blocks
	t.blocks = *now
	if t.class != noClass {
		classPool.Put(t.class)
	}
	t.class = s.classify(now)
	for y := range side {
		w := was.free[y] ^ now.free[y]
		for i := range s.levels {
			w |= (was.levels[i][y] ^ now.levels[i][y]) & was.free[y] & now.free[y]
		}
		if w == 0 {
			continue
		}
		bx := t.col / side
		for r := t.row + y - 1; r <= t.row+y+1; r++ {
			s.touch(bx, r, w|w<<1|w>>1)
			s.touch(bx-1, r, w<<(side-1))
			s.touch(bx+1, r, w>>(side-1))
		}
	}
}

// touch marks the nodes that the bits of word stand for, in a row of the floor's cells and
// a column of its blocks, to be looked at. Blocks that the search has not come near have
// nothing to look at.
func (s *Session) touch(bx, row int, word uint64) {
	if word == 0 || bx < 0 || bx >= s.nx || row < 0 || row >= s.frame.Rows {
		return
	}
	t := s.all[row/side*s.nx+bx]
	if t == nil {
		return
	}
	if t.dirty == nil {
		t.dirty = new([side]uint64)
		s.dirty = append(s.dirty, t)
	}
	t.dirty[row%side] |= word
}

// touchBox touches a tile's nodes in the cells that meet r.
func (s *Session) touchBox(t *tile, r geom.Rect) {
	f := &s.frame
	index := func(v, origin float64, first int) int {
		return int(max(-1, min(side, math.Floor((v-origin)/f.Res)-float64(first))))
	}
	x0, x1 := max(0, index(r.Min.X, f.OX, t.col)), min(side-1, index(r.Max.X, f.OX, t.col))
	y0, y1 := max(0, index(r.Min.Y, f.OY, t.row)), min(side-1, index(r.Max.Y, f.OY, t.row))
	if x0 > x1 {
		return
	}
	for y := y0; y <= y1; y++ {
		s.touch(t.col/side, t.row+y, math.MaxUint64>>(side-1-x1+x0)<<x0)
	}
}
