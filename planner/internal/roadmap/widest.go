package roadmap

import (
	"context"
	"math"
	"slices"
	"sync"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/rules"
)

// WideQuery asks for the widest way between two points.
type WideQuery struct {
	Frame    Frame
	Field    *clearance.Field
	Rules    *rules.Rules // zones to obey; nil: none
	RadiusUm int64        // kept from closed zones
	NeedUm   int64        // clearance from which on a place is as good as any, 1 or more
	From, To geom.Point
	Backward bool // the way asked for leads from To to From
	// Passes, when set, says which pieces may be driven; all those are as good then.
	Passes func(a, b geom.Point) bool
	Count  *Counters
	Exact  *int64 // counts exact distance evaluations
}

// WidestShort is by how much, in cells, the least clearance along the way that Widest
// finds may be below that of the widest way there is: a curve that keeps c passes
// through a chain of cells, and the straight pieces that join their middles
// stay within half a cell's diagonal of it.
const WidestShort = math.Sqrt2 / 2

// wide is a best-first search: the largest bottleneck first (Pollack, "The maximum
// capacity through a network", Operations Research 8(5), 1960), among equals below
// NeedUm the node nearest to the other end.
type wide struct {
	*WideQuery
	from []*[cellsIn]uint8
	nx   int
	// sure holds entered nodes as wide as can be, in order of coming; open the rest.
	sure []entry
	next int
	open queue
}

// fromStart is the move into a cell that is not from a neighbour, and wideGoal the number
// of the far end.
const (
	fromStart = 9
	wideGoal  = 1 << 40
)

// guessed marks a queued node whose value is a bound from above, known cheaply; most such
// nodes are never come to.
const guessed = 0x40

var queuePool = sync.Pool{New: func() any { return new(queue) }}

// Widest gives a way from From to To (from To to From when Backward) over middles of cells, joined where the straight
// piece keeps more than 0 clearance, such that the smallest clearance along it, as
// far as it is below NeedUm, is the largest. found is false when there is none.
func Widest(ctx context.Context, q *WideQuery) (way []geom.Point, found bool, err error) {
	w := &wide{WideQuery: q, nx: (q.Frame.Cols + side - 1) / side}
	w.from = make([]*[cellsIn]uint8, w.nx*((q.Frame.Rows+side-1)/side))
	heap := queuePool.Get().(*queue)
	w.open = (*heap)[:0]
	defer func() {
		*heap = w.open[:0]
		queuePool.Put(heap)
	}()
	if v := w.value(q.From, q.To, false); v >= q.NeedUm {
		if q.Backward {
			return []geom.Point{q.To, q.From}, true, nil
		}
		return []geom.Point{q.From, q.To}, true, nil
	}
	for _, c := range w.around(q.From) {
		w.queue(c, w.value(q.From, q.Frame.Centre(c), false), fromStart)
	}
	last := map[int64]bool{}
	for _, c := range w.around(q.To) {
		last[w.number(c)] = true
	}
	p := poll{ctx: ctx}
	for w.next < len(w.sure) || len(w.open) > 0 {
		e := w.take()
		if e.id() == wideGoal {
			return w.way(e.tie), true, nil
		}
		c := Cell{int(e.id() % int64(q.Frame.Cols)), int(e.id() / int64(q.Frame.Cols))}
		s := w.state(c)
		if *s&isClosed != 0 {
			continue
		}
		if d := e.dir(); d&guessed != 0 { // now it matters
			d &^= guessed
			from := Cell{c.Col - moveX[d-1], c.Row - moveY[d-1]}
			clear := int64(min(q.Field.CellLower(from.Col, from.Row), q.Field.CellLower(c.Col, c.Row))) >= -e.key
			w.queue(c, min(-e.key, w.value(q.Frame.Centre(from), q.Frame.Centre(c), clear)), d)
			continue
		}
		*s = e.dir() | isClosed
		if err := p.err(); err != nil {
			return nil, false, err
		}
		q.Count.Expanded++
		here := q.Frame.Centre(c)
		if last[e.id()] {
			if v := min(-e.key, w.value(here, q.To, false)); v > 0 {
				// tie carries the cell; the goal comes before any other node of its key.
				w.put(newEntry(-v, e.id(), wideGoal, 0))
			}
		}
		clear := int64(q.Field.CellLower(c.Col, c.Row)) >= q.NeedUm
		for d := range 4 {
			n := Cell{c.Col + moveX[d], c.Row + moveY[d]}
			if uint(n.Col) >= uint(q.Frame.Cols) || uint(n.Row) >= uint(q.Frame.Rows) || *w.state(n)&isClosed != 0 {
				continue
			}
			if clear && int64(q.Field.CellLower(n.Col, n.Row)) >= q.NeedUm {
				w.queue(n, min(-e.key, w.value(here, q.Frame.Centre(n), true)), uint8(d+1))
				continue
			}
			w.queue(n, min(-e.key, w.ceiling(c), w.ceiling(n)), uint8(d+1)|guessed)
		}
	}
	return nil, false, nil
}

func (w *wide) number(c Cell) int64 { return int64(c.Row)*int64(w.Frame.Cols) + int64(c.Col) }

// around are the cells at p, those whose squares hold or touch p's own, on the floor.
func (w *wide) around(p geom.Point) []Cell {
	m, ok := w.Frame.CellAt(p)
	if !ok {
		return nil
	}
	var cs []Cell
	for r := max(0, m.Row-1); r <= min(w.Frame.Rows-1, m.Row+1); r++ {
		for c := max(0, m.Col-1); c <= min(w.Frame.Cols-1, m.Col+1); c++ {
			cs = append(cs, Cell{c, r})
		}
	}
	return cs
}

// value is the clearance along a straight piece, rounded down, at most NeedUm; 0 where
// a zone forbids it. clear says that it is known to keep NeedUm.
func (w *wide) value(a, b geom.Point, clear bool) int64 {
	if w.Backward {
		a, b = b, a
	}
	if w.Passes != nil && !w.Passes(a, b) {
		return 0
	}
	if w.Rules != nil && (w.Rules.Entered(a, b, float64(w.RadiusUm)) != nil || w.Rules.Against(a, b, rules.BackwardSlackUm) != nil) {
		return 0
	}
	if clear || w.Passes != nil {
		return w.NeedUm
	}
	*w.Exact++
	return min(w.NeedUm, int64(w.Field.Segment(a, b).Um))
}

// ceiling is at least the clearance at the middle of a cell, and at least 1.
func (w *wide) ceiling(c Cell) int64 {
	if w.Passes != nil {
		return w.NeedUm
	}
	f := w.Field
	v := min(f.Vertex(c.Col, c.Row), f.Vertex(c.Col+1, c.Row), f.Vertex(c.Col, c.Row+1), f.Vertex(c.Col+1, c.Row+1))
	return min(w.NeedUm, int64(v)+2+int64(w.Frame.Res))
}

func (w *wide) state(c Cell) *uint8 {
	i := c.Row/side*w.nx + c.Col/side
	t := w.from[i]
	if t == nil {
		t = new([cellsIn]uint8)
		w.from[i] = t
	}
	return &t[(c.Row%side)*side+c.Col%side]
}

func (w *wide) queue(c Cell, value int64, dir uint8) {
	s := w.state(c)
	if value <= 0 || *s != unseen { // closed, or waiting and as wide as can be
		return
	}
	if value == w.NeedUm && dir&guessed == 0 {
		*s = dir
	}
	far := geom.Dist(w.Frame.Centre(c), w.To)
	w.put(newEntry(-value, -int64(far), w.number(c), dir))
	w.Count.Queued++
}

// put queues a node. Among those as wide as can be the first to come goes first, which
// costs less than a heap and keeps the way short.
func (w *wide) put(e entry) {
	if e.key <= -w.NeedUm && e.dir()&guessed == 0 {
		w.sure = append(w.sure, e)
		return
	}
	w.open.push(e)
}

func (w *wide) take() entry {
	if w.next == len(w.sure) {
		return w.open.pop()
	}
	e := w.sure[w.next]
	if w.next++; w.next > len(w.sure)/2 && w.next > cellsIn {
		w.sure = w.sure[:copy(w.sure, w.sure[w.next:])]
		w.next = 0
	}
	return e
}

func (w *wide) way(cell int64) []geom.Point {
	c := Cell{int(cell % int64(w.Frame.Cols)), int(cell / int64(w.Frame.Cols))}
	way := []geom.Point{w.To}
	for {
		way = append(way, w.Frame.Centre(c))
		d := *w.state(c) & dirMask
		if d == fromStart {
			break
		}
		c = Cell{c.Col - moveX[d-1], c.Row - moveY[d-1]}
	}
	way = append(way, w.From)
	if !w.Backward {
		slices.Reverse(way)
	}
	return way
}
