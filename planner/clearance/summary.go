package clearance

import (
	"math"
	"math/bits"
)

// lowestKept is the lowest level kept in a summary: squares of 8x8 cells. Below it,
// smallest and largest are read from the vertices.
const (
	lowestKept = 3
	keptNodes  = 64 + 16 + 4 + 1
)

// summary holds the smallest and largest value over the closed squares of 8, 16, 32
// and 64 cells of one block, level by level, row by row. Squares beyond the floor
// hold an empty range.
type summary struct{ lo, hi [keptNodes]int32 }

// levelStart is where the squares of 2^level cells start in a summary.
func levelStart(level int) int { return [...]int{0, 64, 80, 84}[level-lowestKept] }

func uniformSummary(v int32) *summary {
	s := new(summary)
	fill(s.lo[:], v)
	fill(s.hi[:], v)
	return s
}

// everySquare marks all squares of 8x8 cells of a block, a bit each, row by row.
const everySquare = allBytes

// summarize works out the summary of cell block (bx, by) from the vertices.
func (f *Field) summarize(bx, by int) *summary {
	if s := f.sharedSummary(bx, by); s != nil {
		return s
	}
	s := new(summary)
	fill(s.lo[:], math.MaxInt32)
	fill(s.hi[:], -1)
	f.sumSquares(s, bx, by, everySquare)
	return s
}

// resummarize is summarize when the vertices differ from before in the marked squares only.
func (f *Field) resummarize(bx, by int, squares uint64) *summary {
	if s := f.sharedSummary(bx, by); s != nil {
		return s
	}
	s := *f.sums.at(bx, by)
	f.sumSquares(&s, bx, by, squares)
	return &s
}

// sumSquares works out the marked squares of 8x8 cells, and those above them.
func (f *Field) sumSquares(s *summary, bx, by int, squares uint64) {
	i1, j1 := min(f.cols-bx<<blockShift, blockSize), min(f.rows-by<<blockShift, blockSize)
	var row [blockSize + 1]int32
	for gy := 0; gy<<lowestKept < j1; gy++ {
		marked := uint8(squares >> (8 * gy))
		if marked == 0 {
			continue
		}
		g0, g1 := bits.TrailingZeros8(marked), min(bits.Len8(marked), (i1+7)>>lowestKept)
		if g0 >= g1 {
			continue
		}
		at := gy << lowestKept
		fill(s.lo[at+g0:at+g1], math.MaxInt32)
		fill(s.hi[at+g0:at+g1], -1)
		from, to := g0<<lowestKept, min(g1<<lowestKept, i1)
		for j := gy << lowestKept; j <= min(gy<<lowestKept+8, j1); j++ {
			f.vertexRow(bx<<blockShift+from, by<<blockShift+j, row[from:to+1])
			for g := g0; g < g1; g++ {
				lo, hi := s.lo[at+g], s.hi[at+g]
				for _, v := range row[g<<lowestKept : min(g<<lowestKept+9, i1+1)] {
					lo, hi = min(lo, v), max(hi, v)
				}
				s.lo[at+g], s.hi[at+g] = lo, hi
			}
		}
	}
	for level := lowestKept + 1; level <= blockShift; level++ {
		n := blockSize >> level
		from, to := levelStart(level-1), levelStart(level)
		for y := range n {
			for x := range n {
				a := from + (2*y)*(2*n) + 2*x
				b := a + 2*n
				s.lo[to+y*n+x] = min(s.lo[a], s.lo[a+1], s.lo[b], s.lo[b+1])
				s.hi[to+y*n+x] = max(s.hi[a], s.hi[a+1], s.hi[b], s.hi[b+1])
			}
		}
	}
}

// sharedSummary is the summary of a whole block that is uniform, else nil.
func (f *Field) sharedSummary(bx, by int) *summary {
	if (bx+1)<<blockShift > f.cols || (by+1)<<blockShift > f.rows {
		return nil
	}
	a := f.values.at(bx, by)
	if a != zeroBlock && a != f.capBlock {
		return nil
	}
	if f.values.at(bx+1, by) != a || f.values.at(bx, by+1) != a || f.values.at(bx+1, by+1) != a {
		return nil
	}
	if a == zeroBlock {
		return f.allClose
	}
	return f.allCap
}

// vertexRow copies the values from vertex (i, j) to the right into dst.
func (f *Field) vertexRow(i, j int, dst []int32) {
	blocks := f.values.rows[j>>blockShift]
	base := (j & blockMask) << blockShift
	for len(dst) > 0 {
		n := copy(dst, blocks[i>>blockShift][base+i&blockMask:base+blockSize])
		dst = dst[n:]
		i += n
	}
}
