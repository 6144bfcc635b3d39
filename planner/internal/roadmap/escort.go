package roadmap

import (
	"context"

	"example.com/wideberth/planner/internal/rules"
)

// A search that cannot succeed sees everything that its start can reach, which may be
// a whole hall when the goal is in a shut cupboard. From escortAfter nodes on the
// search is escorted by a flood from the goal, escortSteps cells for each node
// opened: whichever side is shut in is seen to be so at a cost in proportion to
// the smaller one. The flood ends as soon as it meets what the search has closed.
const (
	escortAfter = 4096
	escortSteps = 2
)

// flood goes through the free cells that can be reached from some, or, backward, from
// which some can be reached, nearest first, a bit of memory for each.
type flood struct {
	q         *Query
	backward  bool
	nx        int
	seen      []*[side]uint64
	now, next []Cell
	visited   func(Cell) // may be nil
}

func newFlood(q *Query, from []Link, backward bool, visited func(Cell)) *flood {
	nx, ny := q.Free.Size()
	f := &flood{q: q, backward: backward, nx: nx, seen: make([]*[side]uint64, nx*ny), visited: visited}
	for _, l := range from {
		f.visit(l.Cell)
	}
	return f
}

func (f *flood) visit(c Cell) {
	p := &f.seen[c.Row/side*f.nx+c.Col/side]
	if *p == nil {
		*p = new([side]uint64)
	}
	w := &(*p)[c.Row%side]
	bit := uint64(1) << (c.Col % side)
	if *w&bit != 0 {
		return
	}
	*w |= bit
	f.next = append(f.next, c)
	if f.visited != nil {
		f.visited(c)
	}
}

// step goes on for at most n cells and says whether there are none left.
func (f *flood) step(n int) bool {
	q := f.q
	oneWay := q.Rules.HasOneWay()
	for ; n > 0; n-- {
		if len(f.now) == 0 {
			f.now, f.next = f.next, f.now[:0]
		}
		last := len(f.now) - 1
		if last < 0 {
			return true
		}
		c := f.now[last]
		f.now = f.now[:last]
		var can uint8
		for d := range 8 {
			if d >= 4 && (can&sides[d] != sides[d] || !oneWay) {
				continue // without one-way zones, diagonal moves reach nothing more
			}
			to := Cell{c.Col + moveX[d], c.Row + moveY[d]}
			if !q.Free.Free(to.Col, to.Row) {
				continue
			}
			if d < 4 {
				can |= 1 << d
			}
			if oneWay {
				a, b := q.Frame.Centre(c), q.Frame.Centre(to)
				if f.backward {
					a, b = b, a
				}
				if q.Rules.Against(a, b, rules.StepSlackUm) != nil {
					continue
				}
			}
			f.visit(to)
		}
	}
	return false
}

// Smaller floods from both ends in turn and says which is shut in first: FromShut or
// ToShut. It is for queries that have no path.
func Smaller(ctx context.Context, q *Query) (Outcome, error) {
	from, to := newFlood(q, q.From, false, nil), newFlood(q, q.To, true, nil)
	for {
		switch {
		case ctx.Err() != nil:
			return FromShut, context.Cause(ctx)
		case from.step(PollEvery):
			return FromShut, nil
		case to.step(PollEvery):
			return ToShut, nil
		}
	}
}
