// Package mask keeps, for one version and one body size, which cells are free as a
// whole, a bit a cell, filled in block by block as searches come by.
package mask

import (
	"math"
	"sync/atomic"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/rules"
	"example.com/wideberth/planner/internal/touch"
)

// Key says what free means: every point of the closed cell has at least Um of
// clearance and, when Zones is set, at least RadiusUm to every closed zone.
// With Um 0 a cell is free when it holds nothing solid.
type Key struct {
	Um, RadiusUm int64
	Zones        bool
}

// Block is 64x64 cells: bit x of word y.
type Block = [floor.BlockSize]uint64

// The two blocks that most blocks are. They are shared and never written to.
var (
	allFree = func() *Block {
		b := new(Block)
		for i := range b {
			b[i] = math.MaxUint64
		}
		return b
	}()
	noneFree = new(Block)
)

// Mask is the free cells of one version for one Key. It is safe for any number of
// readers: a block is computed by whoever needs it first, without a lock; when
// two do at once, both compute the same and one result is kept.
type Mask struct {
	key    Key
	field  *clearance.Field
	rules  *rules.Rules
	set    floor.Settings
	nx, ny int
	blocks []atomic.Pointer[Block]
	parts  []atomic.Pointer[parts]
	used   atomic.Int64 // by Set, for eviction

	regions regions
}

func newMask(k Key, f *clearance.Field, r *rules.Rules) *Mask {
	s := f.Map().Settings()
	m := &Mask{key: k, field: f, rules: r, set: s,
		nx: (s.Columns + floor.BlockSize - 1) / floor.BlockSize,
		ny: (s.Rows + floor.BlockSize - 1) / floor.BlockSize}
	m.blocks = make([]atomic.Pointer[Block], m.nx*m.ny)
	m.parts = make([]atomic.Pointer[parts], m.nx*m.ny)
	return m
}

// Size is how many blocks there are from left to right and from bottom to top.
func (m *Mask) Size() (nx, ny int) { return m.nx, m.ny }

// Block is the free cells of one block of the floor; cells beyond the floor's edge
// are not free. The caller must not write to it.
func (m *Mask) Block(bx, by int) *Block {
	p := &m.blocks[by*m.nx+bx]
	if b := p.Load(); b != nil {
		return b
	}
	p.CompareAndSwap(nil, m.compute(bx, by))
	return p.Load()
}

// Free says whether a cell is free; cells beyond the floor are not.
func (m *Mask) Free(col, row int) bool {
	if uint(col) >= uint(m.set.Columns) || uint(row) >= uint(m.set.Rows) {
		return false
	}
	b := m.Block(col/floor.BlockSize, row/floor.BlockSize)
	return b[row%floor.BlockSize]>>(col%floor.BlockSize)&1 == 1
}

func (m *Mask) compute(bx, by int) *Block {
	var b Block
	m.field.ClearBits(bx, by, m.key.Um, &b)
	m.clip(bx, by, &b)
	if m.key.Zones {
		m.close(bx, by, &b)
	}
	return share(&b)
}

// clip takes away what lies beyond the floor's edge.
func (m *Mask) clip(bx, by int, b *Block) {
	if w := m.set.Columns - bx*floor.BlockSize; w < floor.BlockSize {
		for y := range b {
			b[y] &= 1<<w - 1
		}
	}
	for y := max(0, m.set.Rows-by*floor.BlockSize); y < floor.BlockSize; y++ {
		b[y] = 0
	}
}

func share(b *Block) *Block {
	and, or := uint64(math.MaxUint64), uint64(0)
	for _, w := range b {
		and &= w
		or |= w
	}
	switch {
	case or == 0:
		return noneFree
	case and == math.MaxUint64:
		return allFree
	}
	c := *b
	return &c
}

// close takes away the cells that closed zones keep the body's outline off.
func (m *Mask) close(bx, by int, b *Block) {
	radius := float64(m.key.RadiusUm)
	res := float64(m.set.ResolutionUm)
	side := res * floor.BlockSize
	lo := geom.Point{
		X: float64(m.set.OriginX) + float64(float64(bx)*side),
		Y: float64(m.set.OriginY) + float64(float64(by)*side),
	}
	box := geom.Rect{Min: lo, Max: geom.Point{X: lo.X + side, Y: lo.Y + side}}.Grow(radius)
	for bounds, shape := range m.rules.Closed {
		if bounds.Intersects(box) {
			z := shutter{b: b, shape: shape, lo: lo, res: res, radius: radius}
			z.square(0, 0, floor.BlockSize)
		}
	}
}

// shutter shuts the cells of one block that one closed zone is too near to.
// Distance to a zone changes no faster than one goes, so that a square's middle
// often settles the whole square.
type shutter struct {
	b           *Block
	shape       floor.Shape
	lo          geom.Point
	res, radius float64
}

func (z *shutter) square(x, y, size int) {
	row := (uint64(math.MaxUint64) >> (64 - size)) << x
	left := false
	for k := y; k < y+size && !left; k++ {
		left = z.b[k]&row != 0
	}
	if !left {
		return
	}
	half := float64(z.res*float64(size)) / 2
	mid := geom.Point{X: z.lo.X + float64(float64(x)*z.res) + half, Y: z.lo.Y + float64(float64(y)*z.res) + half}
	d, _ := z.shape.Dist(mid)
	diag := float64(half * math.Sqrt2)
	switch {
	case d-diag >= z.radius+settle:
		return
	case d+diag < z.radius-settle, size == 1 && z.near(x, y):
		for k := y; k < y+size; k++ {
			z.b[k] &^= row
		}
	case size > 1:
		h := size / 2
		z.square(x, y, h)
		z.square(x+h, y, h)
		z.square(x, y+h, h)
		z.square(x+h, y+h, h)
	}
}

// settle, in micrometres, keeps rounding out of decisions about whole squares.
const settle = 1e-3

// near says whether the cell's closed square is nearer to the zone than radius. For a
// point body it is the open square that must not meet the zone's inside.
func (z *shutter) near(x, y int) bool {
	c := geom.Rect{Min: geom.Point{X: z.lo.X + float64(float64(x)*z.res), Y: z.lo.Y + float64(float64(y)*z.res)}}
	c.Max = geom.Point{X: c.Min.X + z.res, Y: c.Min.Y + z.res}
	if z.radius > 0 {
		return z.shape.RectDist(c) < z.radius
	}
	for a, b := range z.shape.Edges {
		if touch.EntersRect(c, a, b) {
			return true
		}
	}
	return geom.InPolygon(z.shape.Chains, geom.Point{X: c.Min.X + z.res/2, Y: c.Min.Y + z.res/2})
}
