package roadmap

import (
	"math/bits"
	"sync"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/mask"
)

// Memory. A grid search keeps 4 KiB (a byte a cell) for every 64x64 block it comes
// into, 4 KiB more where cells differ in cost, and 32 KiB of costs besides for as long
// as the block has a free cell that is not closed: with a consistent heuristic a closed
// node's cost is never asked for again. A search that floods a 4096x4096 floor holds 32 MiB
// plus the blocks along its front; the worst case, a walled-in free cell in every block,
// 160 MiB. Queued nodes take 16 bytes each. All of it comes from pools and goes back.

const (
	side    = floor.BlockSize
	cellsIn = side * side
)

// What a node's byte says.
const (
	unseen   = 0
	dirMask  = 0x0f // 1 to 8: which move led here, plus one
	isSource = 9
	isClosed = 0x80
)

type classes = [cellsIn]uint8

type tile struct {
	state    [cellsIn]uint8
	cost     *[cellsIn]int64
	class    *classes // by cell: how many levels it is below
	free     *mask.Block
	col, row int  // the block's lower left cell
	left     int  // free cells not closed yet
	oneWay   bool // a one-way zone is near
	goal     bool // a link of To is in it
}

var (
	tilePool  = sync.Pool{New: func() any { return new(tile) }}
	costPool  = sync.Pool{New: func() any { return new([cellsIn]int64) }}
	classPool = sync.Pool{New: func() any { return new(classes) }}
	noClass   = new(classes) // shared where a metre costs one everywhere; never written to
)

// classify counts for every free cell of a block the levels that it is not in.
func classify(q *Query, free *mask.Block, bx, by int) *classes {
	out := noClass
	for _, m := range q.Levels {
		b := m.Block(bx, by)
		differ := uint64(0)
		for y := range free {
			differ |= free[y] &^ b[y]
		}
		if differ == 0 {
			continue
		}
		if out == noClass {
			out = classPool.Get().(*classes)
			*out = classes{}
		}
		for y := range free {
			for w := free[y] &^ b[y]; w != 0; w &= w - 1 {
				out[y*side+bits.TrailingZeros64(w)]++
			}
		}
	}
	return out
}

// tiles is the lazily made node state of one search.
type tiles struct {
	q      *Query
	nx, ny int
	all    []*tile
	made   []int32
}

func newTiles(q *Query) *tiles {
	nx, ny := q.Free.Size()
	return &tiles{q: q, nx: nx, ny: ny, all: make([]*tile, nx*ny)}
}

// at is the tile of block (bx, by), which must be on the floor.
func (t *tiles) at(bx, by int) *tile {
	i := by*t.nx + bx
	if p := t.all[i]; p != nil {
		return p
	}
	p := tilePool.Get().(*tile)
	p.state = [cellsIn]uint8{}
	p.cost = costPool.Get().(*[cellsIn]int64)
	p.free = t.q.Free.Block(bx, by)
	p.col, p.row = bx*side, by*side
	p.class = classify(t.q, p.free, bx, by)
	p.left, p.goal = 0, false
	for _, w := range p.free {
		p.left += bits.OnesCount64(w)
	}
	f := &t.q.Frame
	lo := f.Rect(Cell{bx * side, by * side}).Min
	span := f.Res * side
	box := geom.Rect{Min: lo, Max: geom.Point{X: lo.X + span, Y: lo.Y + span}}
	p.oneWay = t.q.Rules.OneWayNear(box.Grow(f.Res))
	t.all[i] = p
	t.made = append(t.made, int32(i))
	return p
}

// close marks a cell of the tile as closed.
func (p *tile) close(k int) {
	p.state[k] |= isClosed
	if p.left--; p.left == 0 {
		costPool.Put(p.cost)
		p.cost = nil
	}
}

// release gives everything back to the pools.
func (t *tiles) release() {
	for _, i := range t.made {
		p := t.all[i]
		if p.cost != nil {
			costPool.Put(p.cost)
		}
		if p.class != noClass {
			classPool.Put(p.class)
		}
		p.cost, p.class, p.free = nil, nil, nil
		tilePool.Put(p)
	}
	t.all, t.made = nil, nil
}
