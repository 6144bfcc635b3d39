package dstar

import (
	"math/bits"
	"sync"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/roadmap"
)

const (
	side      = floor.BlockSize
	cellsIn   = side * side
	costBytes = cellsIn * 8
)

type costs = [cellsIn]int64

type classes = [cellsIn]uint8

// tile is one block's part of the state. A node has two costs to go (Koenig & Likhachev's
// g and rhs): what the search counts on, and what follows from its neighbours' costs by one
// step. It is inconsistent while they differ.
type tile struct {
	blocks
	cost     *costs   // noCosts until one is known
	next     *costs   // the same array as cost unless some node is, or was of late, inconsistent
	class    *classes // by cell: how many levels it is below
	col, row int      // the block's lower left cell
	odd      int      // inconsistent nodes
	oneWay   bool     // a one-way zone is near
	goal     bool     // a link of the goal is in it
	start    bool     // a link of the start is in it
	dirty    *[side]uint64
}

var (
	costPool  = sync.Pool{New: func() any { return new(costs) }}
	classPool = sync.Pool{New: func() any { return new(classes) }}
	// Shared and never written to: no cost known; a metre costs one everywhere.
	noCosts = func() *costs {
		c := new(costs)
		for i := range c {
			c[i] = never
		}
		return c
	}()
	noClass = new(classes)
)

func (s *Session) number(c roadmap.Cell) uint32 {
	return uint32(c.Row/side*s.nx+c.Col/side)*cellsIn + uint32(c.Row%side*side+c.Col%side)
}

func (s *Session) node(id uint32) (*tile, int) {
	block, k := int(id/cellsIn), int(id%cellsIn)
	return s.at(block%s.nx, block/s.nx), k
}

func (t *tile) cell(k int) roadmap.Cell {
	return roadmap.Cell{Col: t.col + k%side, Row: t.row + k/side}
}

func (s *Session) id(t *tile, k int) uint32 {
	return uint32(t.row/side*s.nx+t.col/side)*cellsIn + uint32(k)
}

// at is the tile of block (bx, by), which must be on the floor.
func (s *Session) at(bx, by int) *tile {
	i := by*s.nx + bx
	if t := s.all[i]; t != nil {
		return t
	}
	t := &tile{cost: noCosts, next: noCosts, col: bx * side, row: by * side, blocks: s.blocks(bx, by)}
	t.class = s.classify(&t.blocks)
	t.oneWay = s.oneWayNear(t)
	s.all[i] = t
	s.made = append(s.made, int32(i))
	return t
}

// classify counts for every cell of a block the levels that it is not in.
func (s *Session) classify(b *blocks) *classes {
	out := noClass
	for _, l := range b.levels[:s.levels] {
		for y := range l {
			for w := b.free[y] &^ l[y]; w != 0; w &= w - 1 {
				if out == noClass {
					out = classPool.Get().(*classes)
					*out = classes{}
				}
				out[y*side+bits.TrailingZeros64(w)]++
			}
		}
	}
	return out
}

func (s *Session) box(t *tile) geom.Rect {
	lo := s.frame.Rect(roadmap.Cell{Col: t.col, Row: t.row}).Min
	span := s.frame.Res * side
	return geom.Rect{Min: lo, Max: geom.Point{X: lo.X + span, Y: lo.Y + span}}.Grow(s.frame.Res)
}

func (s *Session) oneWayNear(t *tile) bool {
	return s.rules.HasOneWay() && s.rules.OneWayNear(s.box(t))
}

// setNext gives a node another cost that follows from its neighbours', and queues it when
// it is inconsistent then.
func (s *Session) setNext(t *tile, k int, v int64) {
	if t.next[k] == v {
		return
	}
	if t.next == t.cost {
		t.next = costPool.Get().(*costs)
		*t.next = *t.cost
		s.held++
	}
	was := t.next[k] != t.cost[k]
	t.next[k] = v
	s.weigh(t, k, was)
}

// setCost gives an inconsistent node another cost to count on.
func (s *Session) setCost(t *tile, k int, v int64) {
	if t.cost == noCosts {
		t.cost = costPool.Get().(*costs)
		*t.cost = *noCosts
		s.held++
	}
	t.cost[k] = v
	s.weigh(t, k, true)
	if t.start {
		s.from.stale = true
	}
}

func (s *Session) weigh(t *tile, k int, was bool) {
	is := t.next[k] != t.cost[k]
	if was && !is {
		t.odd--
		s.odd--
	}
	if is && !was {
		t.odd++
		s.odd++
	}
	if is {
		s.push(t, k)
	}
}

// sweep lets go of second costs that are the same as the first.
func (s *Session) sweep() {
	for _, i := range s.made {
		if t := s.all[i]; t.odd == 0 && t.next != t.cost {
			s.put(t.next)
			t.next = t.cost
		}
	}
}

func (s *Session) put(c *costs) {
	if c != noCosts {
		costPool.Put(c)
		s.held--
	}
}

func (s *Session) drop(t *tile) {
	if t.next != t.cost {
		s.put(t.next)
	}
	s.put(t.cost)
	if t.class != noClass {
		classPool.Put(t.class)
	}
	*t = tile{}
}
