package clearance

import (
	"math"

	"example.com/wideberth/mapstore/floor"
)

// span is a node above the blocks: smallest and largest value, and whether some and
// whether all of its cells are barred at clearance 0.
type span struct {
	lo, hi   int32
	any, all bool
	near     bool // a vector solid may be within the cap
}

var emptySpan = span{lo: math.MaxInt32, hi: -1, all: true}

func (s span) with(o span) span {
	return span{min(s.lo, o.lo), max(s.hi, o.hi), s.any || o.any, s.all && o.all, s.near || o.near}
}

// blockSpan is the pyramid's entry for cell block (bx, by).
func (f *Field) blockSpan(bx, by int) span {
	s := f.sums.at(bx, by)
	sp := span{lo: s.lo[keptNodes-1], hi: s.hi[keptNodes-1], all: true, near: f.nearVector(bx, by)}
	b := f.barred.at(bx, by)
	if b == nil {
		sp.all = false
		return sp
	}
	w := f.width(bx)
	for y := range min(blockSize, f.rows-by<<blockShift) {
		sp.any = sp.any || b[y] != 0
		sp.all = sp.all && b[y]&w == w
	}
	return sp
}

// width is the columns of block column bx that are on the floor, as bits.
func (f *Field) width(bx int) uint64 {
	if n := f.cols - bx<<blockShift; n < blockSize {
		return 1<<n - 1
	}
	return allBytes
}

// Node is a square of the quadtree over the floor's cells: 2^Level cells wide, cut
// off at the floor's edge. One tree serves every body: Min and Max are the
// smallest and the largest clearance, rounded down, over all lattice vertices of
// the closed node.
type Node struct {
	Min, Max int32
	Level    int
	X, Y     int // column and row of its lower left cell
	f        *Field
}

// Root is the whole floor.
func (f *Field) Root() Node {
	return f.node(len(f.pyramid)-1+blockShift, 0, 0)
}

// Cells is the part of the node that is on the floor.
func (n Node) Cells() floor.CellRect {
	return floor.CellRect{X0: n.X, Y0: n.Y, X1: min(n.X+1<<n.Level, n.f.cols), Y1: min(n.Y+1<<n.Level, n.f.rows)}
}

// Children writes the node's children that are on the floor, in the order lower left,
// lower right, upper left, upper right, and says how many. A cell has none.
func (n Node) Children(dst *[4]Node) int {
	if n.Level == 0 {
		return 0
	}
	k := 0
	half := 1 << (n.Level - 1)
	for q := range 4 {
		x, y := n.X+half*(q&1), n.Y+half*(q>>1)
		if x < n.f.cols && y < n.f.rows {
			dst[k] = n.f.node(n.Level-1, x, y)
			k++
		}
	}
	return k
}

// node is the node of that level at cell (x, y).
func (f *Field) node(level, x, y int) Node {
	n := Node{Level: level, X: x, Y: y, f: f}
	switch {
	case level >= blockShift:
		s := f.pyramid[level-blockShift].at(x>>level, y>>level)
		n.Min, n.Max = s.lo, s.hi
	case level >= lowestKept:
		s := f.sums.at(x>>blockShift, y>>blockShift)
		at := levelStart(level) + ((y&blockMask)>>level)<<(blockShift-level) + (x&blockMask)>>level
		n.Min, n.Max = s.lo[at], s.hi[at]
	default:
		n.Min, n.Max = math.MaxInt32, -1
		for j := y; j <= min(y+1<<level, f.rows); j++ {
			for i := x; i <= min(x+1<<level, f.cols); i++ {
				v := f.Vertex(i, j)
				n.Min, n.Max = min(n.Min, v), max(n.Max, v)
			}
		}
	}
	return n
}

// Kind says what whole cells of a node are.
type Kind uint8

// The kinds of node.
const (
	Mixed   Kind = iota // some may be clear, some may not
	Free                // every cell is clear
	Blocked             // no cell is clear
)

// Kind sorts the node for a clearance of um micrometres, in terms of whole cells, as
// CellClear does: Free and Blocked are exact; Mixed means that the node must be
// cut further. At um = 0, and at a cell, Mixed is exact too: a cell is never Mixed.
func (n Node) Kind(um int64) Kind {
	if um <= 0 {
		return n.kindAtZero()
	}
	switch {
	case int64(n.Max) < um:
		return Blocked
	case n.f.lower(int64(n.Min), n.near()) >= um:
		return Free
	case n.Level > 0:
		return Mixed
	case n.f.CellClear(n.X, n.Y, um):
		return Free
	}
	return Blocked
}

func (n Node) kindAtZero() Kind {
	any, all := false, true
	if n.Level >= blockShift {
		s := n.f.pyramid[n.Level-blockShift].at(n.X>>n.Level, n.Y>>n.Level)
		any, all = s.any, s.all
	} else if b := n.f.barred.at(n.X>>blockShift, n.Y>>blockShift); b == nil {
		all = false
	} else {
		w := (uint64(1)<<(1<<n.Level) - 1) << (n.X & blockMask) & n.f.width(n.X>>blockShift)
		for y := n.Y & blockMask; y < min(n.Y&blockMask+1<<n.Level, n.f.rows-n.Y&^blockMask); y++ {
			any = any || b[y]&w != 0
			all = all && b[y]&w == w
		}
	}
	switch {
	case !any:
		return Free
	case all:
		return Blocked
	}
	return Mixed
}

// near says whether a vector solid may be within the cap of the node.
func (n Node) near() bool {
	k := max(0, n.Level-blockShift)
	return n.f.pyramid[k].at(n.X>>(blockShift+k), n.Y>>(blockShift+k)).near
}

// nearVector says whether a bucket within the cap of cell block (bx, by) holds
// anything.
func (f *Field) nearVector(bx, by int) bool {
	r := f.bucketReach()
	for y := max(0, by-r); y <= min(f.buckets.ny-1, by+r); y++ {
		for x := max(0, bx-r); x <= min(f.buckets.nx-1, bx+r); x++ {
			if len(f.buckets.at(x, y)) > 0 {
				return true
			}
		}
	}
	return false
}

// bucketReach is how many buckets away a piece within the cap of a block may be.
func (f *Field) bucketReach() int { return f.lad.reach>>blockShift + 1 }
