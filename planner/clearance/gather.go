package clearance

import (
	"math/bits"

	"example.com/wideberth/mapstore/geom"
)

func (v *Vicinity) gatherPieces() bool {
	x0, y0, x1, y1 := v.f.bucketRange(v.area)
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			for _, e := range v.f.buckets.at(x, y) {
				if !v.area.Intersects(e.s.bounds) {
					continue
				}
				if e.area {
					v.areas = append(v.areas, e.s)
				}
				for _, i := range e.pieces {
					p := &e.s.pieces[i]
					core := geom.BoundsOf(p.a, p.b)
					if !v.area.Intersects(core.Grow(e.s.grow)) || (x > x0 || y > y0) && v.has(p) {
						continue
					}
					if len(v.pieces) == mostGathered {
						return false
					}
					v.pieces = append(v.pieces, nearPiece{p, e.s, core})
				}
			}
		}
	}
	return true
}

// has says whether the piece came up in another bucket.
func (v *Vicinity) has(p *piece) bool {
	for i := range v.pieces {
		if v.pieces[i].piece == p {
			return true
		}
	}
	return false
}

func (v *Vicinity) gatherCells() bool {
	f, r := v.f, &v.area
	if f.rows == 0 || f.cols == 0 || r.Max.X < f.ox || r.Max.Y < f.oy || r.Min.X > f.bounds.Max.X || r.Min.Y > f.bounds.Max.Y {
		return true
	}
	c0, c1 := f.cellAt(r.Min.X-roundSlack-f.ox, 0, f.cols), f.cellAt(r.Max.X+roundSlack-f.ox, 0, f.cols)
	r0, r1 := f.cellAt(r.Min.Y-roundSlack-f.oy, 0, f.rows), f.cellAt(r.Max.Y+roundSlack-f.oy, 0, f.rows)
	// A cell to the left touches the area where its side is on a lattice line.
	c0, r0 = max(0, c0-1), max(0, r0-1)
	left := 0 // the first box of the block column before
	for bx := c0 >> blockShift; bx <= c1>>blockShift; bx++ {
		mask := uint64(allBytes)
		if bx == c0>>blockShift {
			mask &= allBytes << (c0 & blockMask)
		}
		if bx == c1>>blockShift {
			mask &= allBytes >> (blockMask - c1&blockMask)
		}
		first := len(v.boxes)
		if !v.column(bx, r0, r1, mask) {
			return false
		}
		v.join(left, first)
		left = first
	}
	kept := v.boxes[:0]
	for _, b := range v.boxes {
		if b.c0 <= b.c1 {
			b.Rect = geom.Rect{Min: f.point(b.c0, b.r0), Max: f.point(b.c1+1, b.r1+1)}
			kept = append(kept, b)
		}
	}
	v.boxes = kept
	return true
}

// rimRun is a run of cells of a block's row, and the box that it is the last row of.
type rimRun struct {
	bits uint64
	box  int
}

// column gathers the masked cells of rows r0 to r1 of a column of blocks. It says no when
// they are too many.
func (v *Vicinity) column(bx, r0, r1 int, mask uint64) bool {
	v.rim = v.rim[:0]
	was := uint64(0)
	for row := r0; row <= r1; {
		end := min(r1+1, row|blockMask+1)
		blk := v.f.bits.rows[row>>blockShift][bx]
		if blk == nil {
			v.turn(0, bx, row)
			was, row = 0, end
			continue
		}
		for ; row < end; row++ {
			word := blk[row&blockMask] & mask
			if word == was {
				continue
			}
			if !v.turn(word, bx, row) {
				return false
			}
			was = word
		}
	}
	return v.turn(0, bx, r1+1)
}

// turn begins a row other than the one before: runs that go on as they are stay, others end,
// and new ones begin.
func (v *Vicinity) turn(word uint64, bx, row int) bool {
	fresh, rim := word, v.rim[:0]
	for _, o := range v.rim {
		if word&(o.bits|o.bits<<1|o.bits>>1) == o.bits {
			fresh &^= o.bits
			rim = append(rim, o)
		} else {
			v.boxes[o.box].r1 = row - 1
		}
	}
	v.rim = rim
	for fresh != 0 {
		lo := bits.TrailingZeros64(fresh)
		n := bits.TrailingZeros64(^(fresh >> lo))
		run := uint64(allBytes) >> (blockSize - n) << lo
		fresh &^= run
		if len(v.boxes) == mostGathered {
			return false
		}
		v.rim = append(v.rim, rimRun{run, len(v.boxes)})
		v.boxes = append(v.boxes, cellBox{c0: bx<<blockShift + lo, c1: bx<<blockShift + lo + n - 1, r0: row})
	}
	return true
}

// join makes one of a box up to first and one from there on where they meet in full.
func (v *Vicinity) join(left, first int) {
	for i := left; i < first; i++ {
		for k := first; k < len(v.boxes); k++ {
			b, o := &v.boxes[i], &v.boxes[k]
			if b.c1+1 == o.c0 && b.r0 == o.r0 && b.r1 == o.r1 && b.c0 <= b.c1 {
				o.c0 = b.c0
				b.c0 = b.c1 + 1 // nothing is left of it
				break
			}
		}
	}
}
