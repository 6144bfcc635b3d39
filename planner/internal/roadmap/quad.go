package roadmap

import (
	"container/heap"
	"context"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/mask"
	"example.com/wideberth/planner/internal/rules"
)

// Class is what all cells of a quadtree leaf are.
type Class uint8

// The classes. A free leaf's is ClassOpen plus the number of levels that it is not in.
const (
	ClassBlocked Class = iota // not free
	ClassOpen                 // free, a metre costs one
	classMixed   = ClassOpen + MaxLevels + 1
)

// Leaf is a square of 1, 2, 4 .. 64 cells a side, aligned to its side, all of one class.
// Leaves stop at a block of 64x64 cells: a larger one would have so many
// neighbours along its border that joining them all costs more than it saves.
type Leaf struct {
	Col, Row, Size int
	Class          Class
}

// LeafAt is the leaf that holds a cell of the floor, or of the block beyond its edge
// that a cell of the floor is in. levels are as in Query.
func LeafAt(free *mask.Mask, levels []*mask.Mask, c Cell) Leaf {
	var blocks [1 + MaxLevels]*mask.Block
	bx, by := c.Col/side, c.Row/side
	blocks[0] = free.Block(bx, by)
	for i, m := range levels {
		blocks[1+i] = m.Block(bx, by)
	}
	b := blocks[:1+len(levels)]
	x, y := c.Col%side, c.Row%side
	leaf := Leaf{c.Col, c.Row, 1, classOf(b, x, y, 1)}
	for size := 2; size <= side; size *= 2 {
		lx, ly := x&^(size-1), y&^(size-1)
		if classOf(b, lx, ly, size) == classMixed {
			break
		}
		leaf.Col, leaf.Row, leaf.Size = c.Col-x+lx, c.Row-y+ly, size
	}
	return leaf
}

// classOf is a square's class, by the free cells and then the levels.
func classOf(blocks []*mask.Block, x, y, size int) Class {
	row := (uint64(math.MaxUint64) >> (64 - size)) << x
	class := ClassOpen
	for i, b := range blocks {
		or, and := uint64(0), row
		for k := y; k < y+size; k++ {
			or |= b[k] & row
			and &= b[k]
		}
		switch {
		case or != 0 && and != row:
			return classMixed
		case or == 0 && i == 0:
			return ClassBlocked
		case or == 0:
			class++
		}
	}
	return class
}

// portal is the shared stretch of two leaves' borders, and the way it is crossed. The
// roadmap's nodes are the middles of portals; its edges are straight lines within
// one leaf.
type portal struct {
	x2, y2 int32 // its middle in half cells
	dir    uint8 // which of the four straight moves enters
}

// into is a cell of the leaf entered.
func (p portal) into() Cell {
	c := Cell{int(p.x2 >> 1), int(p.y2 >> 1)}
	switch p.dir {
	case 2:
		c.Col--
	case 3:
		c.Row--
	}
	return c
}

type quadNode struct {
	at     geom.Point
	g      float64
	parent int32
	closed bool
	p      portal // dir sourceDir: a link of From
}

const sourceDir = 4

type quadEntry struct {
	f, g float64
	node int32 // -1-i: the far end of To[i]
	from int32
}

type quadQueue []quadEntry

func (q quadQueue) Len() int { return len(q) }
func (q quadQueue) Less(i, j int) bool {
	a, b := &q[i], &q[j]
	if a.f != b.f {
		return a.f < b.f
	}
	if a.g != b.g {
		return a.g > b.g
	}
	return a.node < b.node
}
func (q quadQueue) Swap(i, j int) { q[i], q[j] = q[j], q[i] }
func (q *quadQueue) Push(x any)   { *q = append(*q, x.(quadEntry)) }
func (q *quadQueue) Pop() any {
	h := *q
	x := h[len(h)-1]
	*q = h[:len(h)-1]
	return x
}

type quad struct {
	*Query
	nodes   []quadNode
	index   map[portal]int32
	portals map[Cell][]portal // by a leaf's lower left cell
	goals   map[Cell][]int    // by the same: links of To in the leaf
	open    quadQueue
}

// Quadtree searches the leaves of a region quadtree over the free cells (Samet,
// "The Quadtree and Related Hierarchical Data Structures", ACM Computing Surveys 16(2), 1984;
// for paths Kambhampati & Davis, "Multiresolution path planning for mobile
// robots", IEEE J. Robotics and Automation 2(3), 1986). The way crosses from leaf to leaf at the middle
// of the border they share. Memory is about 100 bytes a portal come by, which is at
// most a few for each leaf.
func Quadtree(ctx context.Context, q *Query) (Path, Outcome, error) {
	s := &quad{Query: q, index: map[portal]int32{}, portals: map[Cell][]portal{}, goals: map[Cell][]int{}}
	for i, l := range q.To {
		leaf := s.leaf(l.Cell)
		at := Cell{leaf.Col, leaf.Row}
		s.goals[at] = append(s.goals[at], i)
	}
	for i, l := range q.From {
		s.nodes = append(s.nodes, quadNode{at: l.At, g: l.CostUm, parent: -1, p: portal{x2: int32(i), dir: sourceDir}})
		s.push(int32(i))
	}
	return s.run(ctx)
}

func (s *quad) leaf(c Cell) Leaf { return LeafAt(s.Free, s.Levels, c) }

// push queues a node. The heuristic is the straight distance to the nearest link.
func (s *quad) push(i int32) {
	n := &s.nodes[i]
	h := math.Inf(1)
	for _, l := range s.To {
		h = min(h, geom.Dist(n.at, l.At)+l.CostUm)
	}
	heap.Push(&s.open, quadEntry{f: n.g + h, g: n.g, node: i, from: n.parent})
	s.Count.Queued++
}

func (s *quad) run(ctx context.Context) (Path, Outcome, error) {
	p := poll{ctx: ctx}
	for len(s.open) > 0 {
		e := heap.Pop(&s.open).(quadEntry)
		if e.node < 0 {
			return s.path(e), Found, nil
		}
		n := &s.nodes[e.node]
		if n.closed || e.g > n.g {
			continue
		}
		n.closed = true
		if err := p.err(); err != nil {
			return Path{}, Found, err
		}
		s.Count.Expanded++
		s.expand(e.node)
	}
	return Path{}, FromShut, nil
}

func (s *quad) expand(i int32) {
	at, g, p := s.nodes[i].at, s.nodes[i].g, s.nodes[i].p
	var leaf Leaf
	if p.dir == sourceDir {
		leaf = s.leaf(s.From[p.x2].Cell)
	} else {
		leaf = s.leaf(p.into())
	}
	factor := s.factor(int(leaf.Class - ClassOpen))
	key := Cell{leaf.Col, leaf.Row}
	for _, k := range s.goals[key] {
		l := &s.To[k]
		if s.Rules.Against(at, l.At, rules.StepSlackUm) == nil {
			cost := g + float64(factor*geom.Dist(at, l.At)) + l.CostUm
			heap.Push(&s.open, quadEntry{f: cost, g: cost, node: int32(-1 - k), from: i})
		}
	}
	ps, ok := s.portals[key]
	if !ok {
		ps = s.border(leaf)
		s.portals[key] = ps
	}
	for _, t := range ps {
		k, known := s.index[t]
		if known && s.nodes[k].closed {
			continue
		}
		to := s.point(t)
		cost := g + float64(factor*geom.Dist(at, to))
		if known && s.nodes[k].g <= cost || s.Rules.Against(at, to, rules.StepSlackUm) != nil {
			continue
		}
		if !known {
			k = int32(len(s.nodes))
			s.index[t] = k
			s.nodes = append(s.nodes, quadNode{at: to, p: t})
		}
		s.nodes[k].g, s.nodes[k].parent = cost, i
		s.push(k)
	}
}

// point is a portal's middle, rounded down to whole micrometres along the border.
func (s *quad) point(p portal) geom.Point {
	half := s.Frame.Res / 2
	return geom.Point{
		X: s.Frame.OX + math.Floor(float64(float64(p.x2)*half)),
		Y: s.Frame.OY + math.Floor(float64(float64(p.y2)*half)),
	}
}

// border are the portals out of a leaf: right side upward, top to the right, left
// side upward, bottom to the right.
func (s *quad) border(l Leaf) []portal {
	var ps []portal
	for d := range 4 {
		flat := d%2 == 1 // crossing a horizontal border
		lo, end := l.Row, min(l.Row+l.Size, s.Frame.Rows)
		if flat {
			lo, end = l.Col, min(l.Col+l.Size, s.Frame.Cols)
		}
		for lo < end {
			c := Cell{lo, lo}
			switch d {
			case 0:
				c.Col = l.Col + l.Size
			case 1:
				c.Row = l.Row + l.Size
			case 2:
				c.Col = l.Col - 1
			case 3:
				c.Row = l.Row - 1
			}
			if uint(c.Col) >= uint(s.Frame.Cols) || uint(c.Row) >= uint(s.Frame.Rows) {
				break
			}
			n := s.leaf(c)
			hi := n.Row + n.Size
			if flat {
				hi = n.Col + n.Size
			}
			hi = min(hi, end)
			if n.Class != ClassBlocked {
				p := portal{dir: uint8(d)}
				across, along := int32(2*(c.Col)), int32(lo+hi)
				switch d {
				case 0:
					p.x2, p.y2 = across, along
				case 1:
					p.x2, p.y2 = along, int32(2*c.Row)
				case 2:
					p.x2, p.y2 = across+2, along
				case 3:
					p.x2, p.y2 = along, int32(2*c.Row+2)
				}
				ps = append(ps, p)
			}
			lo = hi
		}
	}
	return ps
}

func (s *quad) path(e quadEntry) Path {
	to := int(-1 - e.node)
	p := Path{To: to, CostUm: e.g, Points: []geom.Point{s.To[to].At}}
	for i := e.from; i >= 0; i = s.nodes[i].parent {
		p.Points = append(p.Points, s.nodes[i].at)
		p.From = int(s.nodes[i].p.x2)
	}
	slices.Reverse(p.Points)
	p.Points = slices.Compact(p.Points)
	return p
}

// Borders are the middles of the borders that a free leaf shares with other free leaves.
func Borders(f Frame, free *mask.Mask, l Leaf) []geom.Point {
	s := &quad{Query: &Query{Frame: f, Free: free}}
	var pts []geom.Point
	for _, p := range s.border(l) {
		pts = append(pts, s.point(p))
	}
	return pts
}
