package solids

import (
	"math/bits"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// corner is a place where the raster's outline turns, with the two sides it runs to.
type corner struct {
	x, y      int32
	right, up bool // its horizontal side runs to the right, its vertical one up
	above     bool // the solid is above its horizontal side
}

// Trace follows the outline of the solid cells: closed chains of lattice
// vertices, the solid on their left, a point at each turn. Two cells that touch in
// a corner are one solid. Unless the border is open, all beyond the floor is solid
// too. Chains begin at their lowest, then leftmost vertex and are in the order of
// those. Time is linear in the bits and the outline's turns.
//
// Each turn has one side along x and one along y: in a row of vertices the first turn
// is joined to the second, the third to the fourth and so on, and in columns alike
// (O'Rourke, "Uniqueness of orthogonal connect-the-dots", 1988).
func (r *Raster) Trace() [][]geom.Point {
	cs := r.corners()
	next := make([]int32, len(cs))
	// Rows: corners come row by row, in each by x, a side to the left before one to the right.
	for i := 0; i+1 < len(cs); i += 2 {
		if cs[i].above { // solid above: to the right
			next[i] = int32(i + 1)
		} else {
			next[i+1] = int32(i)
		}
	}
	byCol := make([]int32, len(cs))
	counts := make([]int32, r.cols+2)
	for _, c := range cs {
		counts[c.x+1]++
	}
	for x := 1; x < len(counts); x++ {
		counts[x] += counts[x-1]
	}
	for i, c := range cs {
		byCol[counts[c.x]] = int32(i)
		counts[c.x]++
	}
	for k := 1; k < len(byCol); k++ {
		if a, b := cs[byCol[k-1]], cs[byCol[k]]; a.x == b.x && a.y == b.y && a.up {
			byCol[k-1], byCol[k] = byCol[k], byCol[k-1] // a pinch: the side down comes first
		}
	}
	for k := 0; k+1 < len(byCol); k += 2 {
		lo, hi := byCol[k], byCol[k+1]
		// Where the horizontal side of the lower end goes in, the vertical one goes out.
		if leaves := cs[lo].above == cs[lo].right; leaves {
			next[hi] = lo
		} else {
			next[lo] = hi
		}
	}
	var loops [][]geom.Point
	done := make([]bool, len(cs))
	for i := range cs {
		if done[i] {
			continue
		}
		var loop []geom.Point
		for k := int32(i); !done[k]; k = next[k] {
			done[k] = true
			loop = append(loop, r.settings.Vertex(int(cs[k].x), int(cs[k].y)))
		}
		loops = append(loops, loop)
	}
	return loops
}

// corners lists the turns of the outline row by row.
func (r *Raster) corners() []corner {
	out := make([]corner, 0, r.turns())
	r.eachTurn(func(y, w int, turn, lb, b, la, a uint64) {
		for ; turn != 0; turn &= turn - 1 {
			i := bits.TrailingZeros64(turn)
			x := w*floor.BlockSize + i
			if x > r.cols {
				break
			}
			out = appendCorner(out, int32(x), int32(y), lb>>i&1 != 0, b>>i&1 != 0, la>>i&1 != 0, a>>i&1 != 0)
		}
	})
	return out
}

// turns is how many corners there are, a pinch counted once.
func (r *Raster) turns() (n int) {
	r.eachTurn(func(_, _ int, turn, _, _, _, _ uint64) { n += bits.OnesCount64(turn) })
	return n
}

// eachTurn goes through the rows of vertices, 64 vertices at a time: those where the outline
// turns, and the cells around them: below and above, to the left and to the right.
func (r *Raster) eachTurn(do func(y, w int, turn, lb, b, la, a uint64)) {
	outside := r.beyond()
	below := r.outside()
	row := func(y int, above []uint64) {
		carryB, carryA := outside&1, outside&1
		for w := range r.words {
			b, a := below[w], above[w]
			lb, la := b<<1|carryB, a<<1|carryA // the cells to the left of each vertex
			carryB, carryA = b>>63, a>>63
			do(y, w, (b^lb^a^la)|(b^lb)&(b^a)&(lb^la), lb, b, la, a) // an odd number, or two opposite ones
		}
		below = above
	}
	for y, above := range r.bits {
		row(y, above)
	}
	row(r.rows, r.outside())
}

// appendCorner adds the turn at (x, y) among its four cells, two for a pinch: one about
// each free cell.
func appendCorner(out []corner, x, y int32, sw, se, nw, ne bool) []corner {
	n := 0
	for _, v := range [4]bool{sw, se, nw, ne} {
		if v {
			n++
		}
	}
	c := func(right, up bool) corner {
		above := nw
		if right {
			above = ne
		}
		return corner{x: x, y: y, right: right, up: up, above: above}
	}
	if n != 2 {
		odd := n == 1 // what the cell unlike the others is
		return append(out, c(se == odd || ne == odd, nw == odd || ne == odd))
	}
	if sw { // and ne: the free cells are nw and se
		return append(out, c(false, true), c(true, false))
	}
	return append(out, c(false, false), c(true, true))
}
