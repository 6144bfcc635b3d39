package solids

import (
	"example.com/wideberth/mapstore/floor"
)

// Raster is which cells of a floor are solid, as bits. What lies beyond the floor is solid
// unless the border is open. Whoever has it may fill gaps before tracing it.
type Raster struct {
	cols, rows int
	open       bool
	words      int        // a row; the last holds only cells beyond the floor
	bits       [][]uint64 // by row; bit i of word w is column 64·w + i
	settings   floor.Settings
}

// ReadRaster takes the cells of m.
func ReadRaster(m *floor.Map) *Raster {
	s := m.Settings()
	r := &Raster{cols: s.Columns, rows: s.Rows, open: s.OpenBorder, settings: s}
	r.words = (s.Columns+floor.BlockSize-1)/floor.BlockSize + 1
	all := make([]uint64, r.words*s.Rows)
	r.bits = make([][]uint64, s.Rows)
	for y := range r.bits {
		r.bits[y] = all[y*r.words : (y+1)*r.words]
	}
	edge := s.Columns & (floor.BlockSize - 1)
	var buf [floor.BlockSize]uint64
	for by := 0; by*floor.BlockSize < s.Rows; by++ {
		for bx := range r.words {
			m.SolidBits(bx, by, &buf)
			for i := 0; i < floor.BlockSize && by*floor.BlockSize+i < s.Rows; i++ {
				v := buf[i]
				if bx == s.Columns/floor.BlockSize {
					v |= r.beyond() << edge
				} else if bx > s.Columns/floor.BlockSize {
					v = r.beyond()
				}
				r.bits[by*floor.BlockSize+i][bx] = v
			}
		}
	}
	return r
}

// beyond is a word of cells beyond the floor.
func (r *Raster) beyond() uint64 {
	if r.open {
		return 0
	}
	return ^uint64(0)
}

func (r *Raster) outside() []uint64 {
	row := make([]uint64, r.words)
	for i := range row {
		row[i] = r.beyond()
	}
	return row
}

// Solid says whether a cell is solid, those beyond the floor included.
func (r *Raster) Solid(col, row int) bool {
	if col < 0 || row < 0 || col >= r.cols || row >= r.rows {
		return !r.open
	}
	return r.bits[row][col/floor.BlockSize]>>(col%floor.BlockSize)&1 != 0
}

// MaxGap is how many cells wide FillGaps fills at most.
const MaxGap = 62

// FillGaps makes up to gap free cells between two solid ones of a row solid, then the same
// in columns. Time is linear in the bits times gap, in columns times gap squared.
func (r *Raster) FillGaps(gap int) {
	gap = min(gap, MaxGap)
	if gap < 1 {
		return
	}
	fill := make([]uint64, r.words)
	for _, row := range r.bits {
		for w := range row {
			before, here, after := r.beyond(), row[w], r.beyond()
			if w > 0 {
				before = row[w-1]
			}
			if w+1 < len(row) {
				after = row[w+1]
			}
			fill[w] = here
			right := uint64(0) // solid within gap + 1 - a to the right
			for a := gap; a >= 1; a-- {
				b := gap + 1 - a
				right |= here>>b | after<<(64-b)
				fill[w] |= (here<<a | before>>(64-a)) & right
			}
		}
		copy(row, fill)
	}
	out := make([][]uint64, len(r.bits))
	edge := r.outside()
	at := func(y int) []uint64 {
		if y < 0 || y >= len(r.bits) {
			return edge
		}
		return r.bits[y]
	}
	above := make([]uint64, r.words)
	for y := range r.bits {
		row := append([]uint64(nil), r.bits[y]...)
		clear(above)
		for a := gap; a >= 1; a-- {
			up, down := at(y+gap+1-a), at(y-a)
			for w := range row {
				above[w] |= up[w]
				row[w] |= above[w] & down[w]
			}
		}
		out[y] = row
	}
	r.bits = out
}
