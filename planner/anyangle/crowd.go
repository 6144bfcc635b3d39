package anyangle

import (
	"math"

	"example.com/wideberth/mapstore/floor"
)

// In clutter, where solid cells are nearer to one another than the clearance, nearly all of
// their grown corners lie within the growth of others. Cutting a block takes time in
// proportion to the obstacles at each height times the heights where they bend: seconds,
// for a free space that is empty. So where there are many pieces, those are left out
// that tiles stand in for, each wholly within the growth of one solid cell.
// What they cover together stays the same.

// crowd is with how many pieces about a block that is worth its while.
const crowd = 600

// tiling says which tiles of a block are covered: n x m of them, side micrometres wide.
type tiling struct {
	side    int64
	n, m    int
	covered []bool
}

// overlapUm is by how much, in micrometres, a covered tile may be larger, so that tiles
// overlap rather than touch.
const overlapUm = 1

// tiles finds the covered tiles of the block of w x h that pieces looked at last.
func (z *rasterizer) tiles(w, h int64) tiling {
	// The block's first column and row in the window.
	c0 := (z.win.words - blockSpan) / 2 * floor.BlockSize
	r0 := c0
	side := min(max(z.r/z.h/4, 1), 16) * z.h
	t := tiling{side: side, n: int((w + side - 1) / side), m: int((h + side - 1) / side)}
	t.covered = make([]bool, t.n*t.m)
	reach := int(z.r / z.h)
	for j := range t.m {
		y0, y1 := int64(j)*side-overlapUm, min(int64(j+1)*side, h)+overlapUm
		mid := int((y0+y1)/2/z.h) + r0
		for i := range t.n {
			x0, x1 := int64(i)*side-overlapUm, min(int64(i+1)*side, w)+overlapUm
			for k := 0; k <= 2*reach+1 && !t.covered[j*t.n+i]; k++ {
				row := mid + (k+1)/2
				if k%2 == 1 {
					row = mid - (k+1)/2
				}
				if row < 0 || row >= z.win.rows {
					continue
				}
				// The farthest that the tile reaches up or down from the row of cells.
				cy := int64(row-r0) * z.h
				dy := max(cy-y0, y1-cy-z.h, 0)
				if dy >= z.r {
					continue
				}
				// The cells that reach farthest left and right of it nearer than this, strictly.
				dx := int64(math.Sqrt(float64(z.r*z.r-dy*dy))) - 1
				left := int64(c0) * z.h
				from, to := (left+x1-dx+z.h-1)/z.h-1, (left+x0+dx)/z.h
				t.covered[j*t.n+i] = z.win.any(row, max(from, 0), min(to, int64(z.win.cols)-1))
			}
		}
	}
	return t
}

// any says whether a cell of a row is solid, from one column up to and with another.
func (w *window) any(row int, from, to int64) bool {
	if from > to {
		return false
	}
	line := w.line(row)
	a, b := from/64, to/64
	first, last := ^uint64(0)<<(from%64), ^uint64(0)>>(63-to%64)
	if a == b {
		return line[a]&first&last != 0
	}
	if line[a]&first != 0 || line[b]&last != 0 {
		return true
	}
	for _, v := range line[a+1 : b] {
		if v != 0 {
			return true
		}
	}
	return false
}

// all says whether all tiles that meet the rectangle, cut to the block, are covered.
func (t *tiling) all(lo, hi pt) bool {
	i0, i1 := max(0, int(lo.x/t.side)), min(t.n-1, int(hi.x/t.side))
	for j := max(0, int(lo.y/t.side)); j <= min(t.m-1, int(hi.y/t.side)); j++ {
		for i := i0; i <= i1; i++ {
			if !t.covered[j*t.n+i] {
				return false
			}
		}
	}
	return true
}

// thinOut puts covered tiles in the place of the pieces, of cells and of shapes alike, that lie
// within them, as far as they lie in the block of w x h. Corners keep their piece's index.
func (z *rasterizer) thinOut(pieces []piece, w, h int64) []piece {
	t := z.tiles(w, h)
	index := make([]int32, len(pieces))
	kept := pieces[:0]
	for i := range pieces {
		p := &pieces[i]
		// What only touches the block from outside says where passages of no width are.
		if p.lo.x < w && p.hi.x > 0 && p.lo.y < h && p.hi.y > 0 && t.all(p.lo, p.hi) {
			index[i] = none
			continue
		}
		index[i] = int32(len(kept))
		kept = append(kept, *p)
	}
	for k, i := range z.steps.corners {
		if z.steps.corners[k] = index[i]; index[i] == none {
			delete(z.steps.corners, k)
		}
	}
	// Runs of tiles that are the same in successive rows go together.
	for j := 0; j < t.m; j++ {
		for i := 0; i < t.n; i++ {
			if !t.covered[j*t.n+i] {
				continue
			}
			i1, j1 := i+1, j+1
			for i1 < t.n && t.covered[j*t.n+i1] {
				i1++
			}
			for j1 < t.m && t.sameRun(j1, i, i1) {
				j1++
			}
			for y := j; y < j1; y++ {
				for x := i; x < i1; x++ {
					t.covered[y*t.n+x] = false
				}
			}
			kept = append(kept, rectPiece(int64(i)*t.side-overlapUm, int64(j)*t.side-overlapUm,
				min(int64(i1)*t.side, w)+overlapUm, min(int64(j1)*t.side, h)+overlapUm))
		}
	}
	return kept
}

// sameRun says whether row j has covered tiles from i up to k, and none at either end.
func (t *tiling) sameRun(j, i, k int) bool {
	line := t.covered[j*t.n : (j+1)*t.n]
	for _, c := range line[i:k] {
		if !c {
			return false
		}
	}
	return (i == 0 || !line[i-1]) && (k == t.n || !line[k])
}
