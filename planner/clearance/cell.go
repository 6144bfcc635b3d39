package clearance

import (
	"math"
	"math/bits"

	"example.com/wideberth/mapstore/geom"
)

// lower is a lower bound of the clearance over a closed square of cells whose
// vertices all have at least m. Raster cells and the border alone: m itself, for
// the nearest point of a lattice square to a lattice cell is reached at a vertex.
// With vector solids near: 0 when m <= h/sqrt 2, for one may hide inside a cell, else
// sqrt(m² - h²/4), reached in front of the middle of a side.
func (f *Field) lower(m int64, near bool) int64 {
	if !near {
		return m
	}
	mm, hh := m*m, int64(f.h)*int64(f.h)
	if mm <= hh/2 {
		return 0
	}
	return int64(isqrt(uint64(mm - (hh+3)/4)))
}

// surely is the smallest vertex minimum that makes lower, with vector solids near, at
// least um.
func (f *Field) surely(um int64) int64 {
	m := max(int64(math.Sqrt(float64(um)*float64(um)+f.h*f.h/4))-1, um)
	for f.lower(m, true) < um {
		m++
	}
	return m
}

// CellLower is a lower bound, in micrometres, of the clearance over the closed cell;
// 0 for a solid cell and off the floor. Where no vector solid is within the cap
// it is the smallest clearance itself, rounded down.
func (f *Field) CellLower(c, r int) int32 {
	if !f.onFloor(c, r) {
		return 0
	}
	m := int64(min(f.Vertex(c, r), f.Vertex(c+1, r), f.Vertex(c, r+1), f.Vertex(c+1, r+1)))
	return int32(f.lower(m, f.pyramid[0].at(c>>blockShift, r>>blockShift).near))
}

func (f *Field) onFloor(c, r int) bool { return c >= 0 && r >= 0 && c < f.cols && r < f.rows }

// CellClear says, exactly, whether every point of the closed cell has at least um
// micrometres of clearance. At um = 0 it says whether the cell is free: it is not
// solid, and no vector solid comes into its open square. Off the floor, and
// for um above the cap, the answer is no.
func (f *Field) CellClear(c, r int, um int64) bool {
	if !f.onFloor(c, r) || um > f.cap {
		return false
	}
	bx, by := c>>blockShift, r>>blockShift
	if um <= 0 {
		b := f.barred.at(bx, by)
		return b == nil || b[r&blockMask]>>(c&blockMask)&1 == 0
	}
	m := int64(min(f.Vertex(c, r), f.Vertex(c+1, r), f.Vertex(c, r+1), f.Vertex(c+1, r+1)))
	if m < um {
		return false
	}
	return f.lower(m, f.pyramid[0].at(bx, by).near) >= um || f.vectorClear(c, r, um)
}

// vectorClear says whether the vector solids leave the closed cell um of clearance. Its
// vertices must have it: then no polygon holds the cell, unless one of its edges is
// nearer than um.
func (f *Field) vectorClear(c, r int, um int64) bool {
	cell := f.cellRect(c, r)
	x0, y0, x1, y1 := f.bucketRange(cell.Grow(float64(um)))
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			for _, e := range f.buckets.at(x, y) {
				need := float64(um) + e.s.grow
				if rectsApart(cell, e.s.core, need) {
					continue
				}
				for _, k := range e.pieces {
					p := &e.s.pieces[k]
					if !rectsApart(cell, geom.BoundsOf(p.a, p.b), need) && geom.RectSegmentDist(cell, p.a, p.b) < need {
						return false
					}
				}
			}
		}
	}
	return true
}

// rectsApart says whether a and b are at least d apart in x or in y.
func rectsApart(a, b geom.Rect, d float64) bool {
	return b.Min.X-a.Max.X >= d || a.Min.X-b.Max.X >= d || b.Min.Y-a.Max.Y >= d || a.Min.Y-b.Max.Y >= d
}

// ClearBits writes CellClear for the cells of block (bx, by): bit x of word y, zero
// beyond the floor. It costs a few operations for a block that is clear or
// blocked throughout, and about a nanosecond a cell along the boundary.
func (f *Field) ClearBits(bx, by int, um int64, words *[blockSize]uint64) {
	if bx < 0 || by < 0 || bx >= f.sums.nx || by >= f.sums.ny || um > f.cap {
		*words = [blockSize]uint64{}
		return
	}
	w := f.width(bx)
	rows := min(blockSize, f.rows-by<<blockShift)
	if um <= 0 {
		b := f.barred.at(bx, by)
		if b == nil {
			b = new(cellBits)
		}
		for y := range words {
			words[y] = w &^ b[y]
		}
		clear(words[rows:])
		return
	}
	sum := f.sums.at(bx, by)
	near := f.pyramid[0].at(bx, by).near
	sure := um
	if near {
		sure = f.surely(um)
	}
	switch {
	case int64(sum.hi[keptNodes-1]) < um:
		clear(words[:])
		return
	case int64(sum.lo[keptNodes-1]) >= sure:
		fill(words[:rows], w)
		clear(words[rows:])
		return
	}
	var maybe [blockSize]uint64 // cells that only exact geometry decides
	for g, lo := range sum.lo[:64] {
		gx, gy := g&7<<lowestKept, g>>3<<lowestKept
		switch {
		case int64(sum.hi[g]) < um:
			for y := range 1 << lowestKept {
				words[gy+y] &^= 0xff << gx
			}
		case int64(lo) >= sure:
			for y := range 1 << lowestKept {
				words[gy+y] |= 0xff << gx
			}
		default:
			f.squareBits(bx<<blockShift+gx, by<<blockShift+gy, um, sure, gx, words[gy:gy+8], maybe[gy:gy+8])
		}
	}
	for y := range words {
		words[y] &= w
		for m := maybe[y] & w; m != 0; m &= m - 1 {
			x := bits.TrailingZeros64(m)
			if f.vectorClear(bx<<blockShift+x, by<<blockShift+y, um) {
				words[y] |= 1 << x
			}
		}
	}
	clear(words[rows:])
}

// squareBits decides the 8x8 cells from (x, y) on by their vertices: into words those
// whose vertices all reach sure, into maybe those whose vertices all reach um only.
// Bits of cells beyond the floor's right edge are left undefined.
func (f *Field) squareBits(x, y int, um, sure int64, shift int, words, maybe []uint64) {
	const side = 1 << lowestKept
	var surePrev, okPrev uint32
	bx, i := x>>blockShift, x&blockMask
	for j := y; j <= y+side; j++ {
		var s, ok uint32
		if j <= f.rows {
			blocks := f.values.rows[j>>blockShift]
			base := (j&blockMask)<<blockShift + i
			row := (*[side]int32)(blocks[bx][base:])
			// The ninth vertex may be the next block's first.
			var ninth int32
			if i+side < blockSize {
				ninth = blocks[bx][base+side]
			} else if bx+1 < len(blocks) {
				ninth = blocks[bx+1][base-i]
			}
			ok = reach(row, ninth, um)
			if s = ok; sure != um && ok != 0 {
				s = reach(row, ninth, sure)
			}
		}
		s, ok = s&(s>>1), ok&(ok>>1)
		if j > y {
			both := s & surePrev
			words[j-y-1] = words[j-y-1]&^(0xff<<shift) | uint64(both)<<shift
			maybe[j-y-1] |= uint64(ok&okPrev&^both) << shift
		}
		surePrev, okPrev = s, ok
	}
}

// reach has bit k set where the k-th of nine values is at least v.
func reach(row *[1 << lowestKept]int32, ninth int32, v int64) uint32 {
	below := uint32(uint64(int64(ninth)-v)>>63) << 8
	for k, c := range row {
		below |= uint32(uint64(int64(c)-v)>>63) << k
	}
	return ^below & 0x1ff
}

// bar works out which cells of block (bx, by) are not free at clearance 0; nil when
// all are free.
func (f *Field) bar(s *scratch, bx, by int) *cellBits {
	base := f.bits.at(bx, by)
	list := f.buckets.at(bx, by)
	if len(list) == 0 || base == fullBits {
		return base
	}
	var b cellBits
	if base != nil {
		b = *base
	}
	c0, r0 := bx<<blockShift, by<<blockShift
	c1, r1 := min(c0+blockSize, f.cols), min(r0+blockSize, f.rows)
	for _, e := range list {
		for _, k := range e.pieces {
			p := &e.s.pieces[k]
			lo, hi := p.a, p.b
			if lo.Y > hi.Y {
				lo, hi = hi, lo
			}
			reach := e.s.grow + bucketSlack
			for r := f.cellAt(lo.Y-reach-f.oy, r0, r1); r <= f.cellAt(hi.Y+reach-f.oy, r0, r1); r++ {
				y := f.oy + float64(r)*f.h
				x0, x1 := xWithin(lo, hi, y-reach, y+f.h+reach)
				for c := f.cellAt(x0-reach-f.ox, c0, c1); c <= f.cellAt(x1+reach-f.ox, c0, c1); c++ {
					if b[r-r0]>>(c-c0)&1 == 0 && reachesInto(f.cellRect(c, r), p, e.s.grow) {
						b[r-r0] |= 1 << (c - c0)
					}
				}
			}
		}
		if !e.area {
			continue
		}
		for r := r0; r < r1; r++ {
			y := f.oy + (float64(r)+0.5)*f.h
			s.spans = e.s.crossings(y, s.spans[:0])
			for k := 0; k+1 < len(s.spans); k += 2 {
				// Cells whose middle is between the crossings.
				a := math.Ceil((s.spans[k]-f.ox)/f.h - 0.5)
				z := math.Floor((s.spans[k+1]-f.ox)/f.h - 0.5)
				for c := int(max(float64(c0), a)); c <= int(min(float64(c1-1), z)); c++ {
					b[r-r0] |= 1 << (c - c0)
				}
			}
		}
	}
	switch {
	case b == cellBits{}:
		return nil
	case base != nil && b == *base:
		return base
	case b == *fullBits:
		return fullBits
	}
	return &b
}

// cellAt is the cell that holds the offset d from the floor's corner, kept within
// [lo, hi-1].
func (f *Field) cellAt(d float64, lo, hi int) int {
	v := d / f.h
	switch {
	case v >= float64(hi-1):
		return max(lo, hi-1)
	case !(v > float64(lo)):
		return lo
	}
	c := int(v)
	if float64(c) > v { // below 0
		c--
	}
	return c
}

// reachesInto says, exactly but for rounding of oblique distances, whether the piece
// grown by grow comes into the open square.
func reachesInto(sq geom.Rect, p *piece, grow float64) bool {
	if grow > 0 {
		// The distance to a convex core has no minimum above 0 inside an open
		// square, so one that only equals grow is reached on the border.
		return !rectsApart(sq, geom.BoundsOf(p.a, p.b), grow) && geom.RectSegmentDist(sq, p.a, p.b) < grow
	}
	if min(p.a.X, p.b.X) >= sq.Max.X || max(p.a.X, p.b.X) <= sq.Min.X || min(p.a.Y, p.b.Y) >= sq.Max.Y || max(p.a.Y, p.b.Y) <= sq.Min.Y {
		return false
	}
	if p.a == p.b {
		return true
	}
	lo, hi := 1, -1
	for _, c := range sq.Corners() {
		o := geom.Orient(p.a, p.b, c)
		lo, hi = min(lo, o), max(hi, o)
	}
	return lo < 0 && hi > 0
}

// SameBlock says whether everything that CellClear depends on in cell block (bx, by)
// is the same in f and o, so that what was worked out from it may be kept. Both
// must be fields of versions of one floor. A false answer may be needlessly
// cautious when neither field was advanced from the other.
func (f *Field) SameBlock(o *Field, bx, by int) bool {
	if bx < 0 || by < 0 || bx >= f.sums.nx || by >= f.sums.ny || f.bounds != o.bounds || f.cap != o.cap {
		return false
	}
	if !sameBits(f.barred.at(bx, by), o.barred.at(bx, by)) {
		return false
	}
	for y := by; y <= min(by+1, f.values.ny-1); y++ {
		for x := bx; x <= min(bx+1, f.values.nx-1); x++ {
			a, b := f.values.at(x, y), o.values.at(x, y)
			if a != b && !sameCorner(a, b, x > bx, y > by) {
				return false
			}
		}
	}
	r := f.bucketReach()
	for y := max(0, by-r); y <= min(f.buckets.ny-1, by+r); y++ {
		for x := max(0, bx-r); x <= min(f.buckets.nx-1, bx+r); x++ {
			if !sameBucket(f.buckets.at(x, y), o.buckets.at(x, y)) {
				return false
			}
		}
	}
	return true
}

// sameCorner compares two vertex blocks, only their first column when it is a right
// neighbour's, only their first row when it is an upper neighbour's.
func sameCorner(a, b *vertexBlock, column, row bool) bool {
	switch {
	case column && row:
		return a[0] == b[0]
	case row:
		return [blockSize]int32(a[:blockSize]) == [blockSize]int32(b[:blockSize])
	case column:
		for k := 0; k < len(a); k += blockSize {
			if a[k] != b[k] {
				return false
			}
		}
		return true
	}
	return *a == *b
}
