package roadmap

import (
	"math/bits"
	"sync"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/mask"
)

// Memory. A grid search keeps 4 KiB (a byte a cell) for every 64x64 block it comes
// into, and 32 KiB of costs besides for as long as the block has a free cell that
// is not closed: with a consistent heuristic a closed node's cost is never asked
// for again. A search that floods a 4096x4096 floor holds 16 MiB plus the blocks
// along its front; the worst case, a walled-in free cell in every block, 144 MiB.
// Queued nodes take 24 bytes each. All of it comes from pools and goes back.

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

type tile struct {
	state  [cellsIn]uint8
	cost   *[cellsIn]int64
	open   *mask.Block // nil: every cell is
	free   *mask.Block
	left   int  // free cells not closed yet
	oneWay bool // a one-way zone is near
}

var (
	tilePool = sync.Pool{New: func() any { return new(tile) }}
	costPool = sync.Pool{New: func() any { return new([cellsIn]int64) }}
)

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
	p.open = nil
	if t.q.Open != nil {
		p.open = t.q.Open.Block(bx, by)
	}
	p.left = 0
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
func (p *tile) close(k int, state uint8) {
	p.state[k] = state | isClosed
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
		p.cost, p.open, p.free = nil, nil, nil
		tilePool.Put(p)
	}
	t.all, t.made = nil, nil
}
