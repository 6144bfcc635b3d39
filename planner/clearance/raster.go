package clearance

import (
	"context"
	"encoding/binary"
	"math"
	"math/bits"
)

// window is a rectangle of lattice vertices: i0 <= i < i1, j0 <= j < j1.
type window struct{ i0, j0, i1, j1 int }

func (w window) empty() bool   { return w.i0 >= w.i1 || w.j0 >= w.j1 }
func (w window) width() int    { return w.i1 - w.i0 }
func (w window) height() int   { return w.j1 - w.j0 }
func (w window) vertices() int { return w.width() * w.height() }

func (w window) intersect(o window) window {
	return window{max(w.i0, o.i0), max(w.j0, o.j0), min(w.i1, o.i1), min(w.j1, o.j1)}
}

func (w window) union(o window) window {
	return window{min(w.i0, o.i0), min(w.j0, o.j0), max(w.i1, o.i1), max(w.j1, o.j1)}
}

// ladder turns squared distances in cells into micrometres: steps[d] is
// floor(sqrt(d)*res), exactly, for every squared distance below the cap; the last
// entry, which stands for every larger one, is the cap.
type ladder struct {
	steps []int32
	reach int // whole cells within the cap
}

func newLadder(res, cap int64) ladder {
	// sqrt(d)*res < cap. Both squares fit 63 bits: res is at most 10^7, cap below 2^31.
	last := (cap*cap - 1) / (res * res)
	l := ladder{steps: make([]int32, last+2), reach: int(cap / res)}
	for d := int64(0); d <= last; d++ {
		l.steps[d] = int32(isqrt(uint64(d) * uint64(res*res)))
	}
	l.steps[last+1] = int32(cap)
	return l
}

// isqrt is floor(sqrt(n)), exactly.
func isqrt(n uint64) uint64 {
	r := uint64(math.Sqrt(float64(n)))
	for r*r > n {
		r--
	}
	for (r+1)*(r+1) <= n {
		r++
	}
	return r
}

// envelope entry: from column start on, the site at column x gives the least
// squared distance (i-x)² + gg. A flat entry stands for a run of columns that
// are sites themselves.
type parabola struct {
	x, gg, start int
	flat         bool
}

// transformer computes the raster part of a window. It holds scratch space only, and
// may be used for one window after another.
type transformer struct {
	lad   ladder
	up    []byte // per window row: cells down to the nearest site of the column
	cur   []byte
	sites []uint64
	stack []parabola
}

// raster writes, for every vertex of w, row by row, the distance in micrometres to the
// nearest solid cell or closed border, rounded down, at most the cap. Sites are
// the corners of solid cells; the transform is exact (Felzenszwalb &
// Huttenlocher, "Distance Transforms of Sampled Functions", Theory of Computing 8, 2012; integer
// envelope of Meijster, Roerdink & Hesselink, "A General Algorithm for Computing Distance
// Transforms in Linear Time", 2000). It reads sites up to the cap beyond w.
func (t *transformer) raster(ctx context.Context, f *Field, w window, out []int32) error {
	reach := t.lad.reach
	// What is read; its left edge on a word.
	ri0 := max(0, w.i0-reach) &^ blockMask
	ri1 := min(f.cols+1, w.i1+reach)
	rj0, rj1 := max(0, w.j0-reach), min(f.rows+1, w.j1+reach)
	words := (ri1 - ri0 + blockMask) >> blockShift
	width := words << blockShift
	t.up = grow(t.up, width*w.height())
	t.cur = grow(t.cur, width)
	t.sites = grow(t.sites, words)

	cur := t.cur
	fill(cur, 255)
	for j := rj0; j < w.j1; j++ {
		f.siteRow(j, ri0>>blockShift, t.sites)
		sweep(cur, t.sites)
		if j >= w.j0 {
			copy(t.up[(j-w.j0)*width:], cur)
		}
	}
	fill(cur, 255)
	for j := rj1 - 1; j >= w.j0; j-- {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		f.siteRow(j, ri0>>blockShift, t.sites)
		sweep(cur, t.sites)
		if j >= w.j1 {
			continue
		}
		row := t.up[(j-w.j0)*width:][:width]
		least := uint64(allBytes)
		for k := 0; k < width; k += 8 {
			v := minBytes(binary.LittleEndian.Uint64(row[k:]), binary.LittleEndian.Uint64(cur[k:]))
			binary.LittleEndian.PutUint64(row[k:], v)
			least &= v
		}
		dst := out[(j-w.j0)*w.width():][:w.width()]
		if least == allBytes {
			fill(dst, t.lad.steps[len(t.lad.steps)-1])
			continue
		}
		t.row(row[:ri1-ri0], dst, w.i0-ri0)
	}
	return nil
}

// sweep moves column distances on by one row.
func sweep(cur []byte, sites []uint64) {
	for k, s := range sites {
		c := cur[k<<blockShift:][:blockSize]
		for b := 0; b < blockSize; b += 8 {
			v := incBytes(binary.LittleEndian.Uint64(c[b:])) &^ spread[s>>b&255]
			binary.LittleEndian.PutUint64(c[b:], v)
		}
	}
}

// row turns one row of column distances g into clearances of the columns off and on.
func (t *transformer) row(g []byte, dst []int32, off int) {
	n := len(g)
	reach := t.lad.reach
	stack := t.stack[:0]
	for x := 0; x < n; x++ {
		gx := int(g[x])
		if gx > reach {
			for x+8 < n && binary.LittleEndian.Uint64(g[x+1:]) == allBytes {
				x += 8
			}
			continue
		}
		gg := gx * gx
		start := 0
		for len(stack) > 0 {
			top := &stack[len(stack)-1]
			a, b := top.start-top.x, top.start-x
			if a*a+top.gg <= b*b+gg {
				// The new site takes over after the crossing of the two parabolas.
				num := x*x - top.x*top.x + gg - top.gg
				if d := x - top.x; d == 1 {
					start = num>>1 + 1
				} else {
					start = int(uint32(num)/uint32(2*d)) + 1
				}
				break
			}
			stack = stack[:len(stack)-1]
		}
		if start >= n {
			continue
		}
		stack = append(stack, parabola{x: x, gg: gg, start: start})
		if gx == 0 {
			end := x
			for end+8 < n && binary.LittleEndian.Uint64(g[end+1:]) == 0 {
				end += 8
			}
			for end+1 < n && g[end+1] == 0 {
				end++
			}
			if end > x {
				stack = append(stack, parabola{x: x, start: x + 1, flat: true}, parabola{x: end, start: end})
				x = end
			}
		}
	}
	t.stack = stack
	t.paint(stack, dst, off)
}

// paint writes the lower envelope's values.
func (t *transformer) paint(stack []parabola, dst []int32, off int) {
	steps := t.lad.steps
	far := steps[len(steps)-1]
	if len(stack) == 0 {
		fill(dst, far)
		return
	}
	limit := off + len(dst)
	for k := range stack {
		p := &stack[k]
		lo, hi := max(p.start, off), limit
		if k+1 < len(stack) {
			hi = min(limit, stack[k+1].start)
		}
		if lo >= hi {
			continue
		}
		if p.flat {
			fill(dst[lo-off:hi-off], 0)
			continue
		}
		// Beyond the cap there is nothing to compute.
		in := t.lad.reach + 1
		a, b := min(hi, max(lo, p.x-in)), max(lo, min(hi, p.x+in+1))
		if a > lo {
			fill(dst[lo-off:a-off], far)
		}
		d := (a-p.x)*(a-p.x) + p.gg
		inc := 2*(a-p.x) + 1
		seg := dst[a-off : max(a, b)-off]
		for i := range seg {
			if d < len(steps) {
				seg[i] = steps[d]
			} else {
				seg[i] = far
			}
			d += inc
			inc += 2
		}
		if b < hi {
			fill(dst[max(a, b)-off:hi-off], far)
		}
	}
}

// siteRow writes which vertices of row j are sites: bit k of dst[w] is vertex
// (64*(bx+w)+k, j). A vertex is a site when one of the four cells about it is
// solid, or when it lies on a closed border.
func (f *Field) siteRow(j, bx int, dst []uint64) {
	var carry uint64
	if bx > 0 {
		carry = f.cellWord(bx-1, j) >> blockMask
	}
	for w := range dst {
		c := f.cellWord(bx+w, j)
		dst[w] = c | c<<1 | carry
		carry = c >> blockMask
	}
	if f.open {
		return
	}
	if j == 0 || j == f.rows {
		fill(dst, allBytes)
		return
	}
	if bx == 0 {
		dst[0] |= 1
	}
	if w := f.cols>>blockShift - bx; w >= 0 && w < len(dst) {
		dst[w] |= 1 << (f.cols & blockMask)
	}
}

// cellWord is the solid cells of block column bx in the two cell rows that meet at
// vertex row j.
func (f *Field) cellWord(bx, j int) uint64 {
	return f.solidWord(bx, j-1) | f.solidWord(bx, j)
}

// solidWord is the solid cells of block column bx in cell row r, zero beyond the floor.
func (f *Field) solidWord(bx, r int) uint64 {
	if r < 0 || r >= f.rows || bx >= f.bits.nx {
		return 0
	}
	b := f.bits.at(bx, r>>blockShift)
	if b == nil {
		return 0
	}
	return b[r&blockMask]
}

// nextSolid is the first solid column >= c of cell row r, at most last; -1 when
// there is none.
func (f *Field) nextSolid(c, last, r int) int {
	if c > last {
		return -1
	}
	bx := c >> blockShift
	word := f.solidWord(bx, r) &^ (1<<(c&blockMask) - 1)
	for {
		if word != 0 {
			if c = bx<<blockShift + bits.TrailingZeros64(word); c <= last {
				return c
			}
			return -1
		}
		if bx++; bx<<blockShift > last {
			return -1
		}
		word = f.solidWord(bx, r)
	}
}

// prevSolid is the last solid column <= c of cell row r, at least first; -1 when
// there is none.
func (f *Field) prevSolid(c, first, r int) int {
	if c < first {
		return -1
	}
	bx := c >> blockShift
	word := f.solidWord(bx, r) & (allBytes >> (blockMask - c&blockMask))
	for {
		if word != 0 {
			if c = bx<<blockShift + blockMask - bits.LeadingZeros64(word); c >= first {
				return c
			}
			return -1
		}
		if bx--; bx<<blockShift+blockMask < first || bx < 0 {
			return -1
		}
		word = f.solidWord(bx, r)
	}
}

func grow[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}

func fill[T any](s []T, v T) {
	for i := range s {
		s[i] = v
	}
}
