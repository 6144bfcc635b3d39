package anyangle

import (
	"math/bits"
	"slices"

	"example.com/wideberth/mapstore/floor"
)

// window is the solid cells of a block and of what surrounds it, as bits.
type window struct {
	col, row   int // of its lower left cell, on the floor
	cols, rows int
	words      int // a row
	solid      []uint64
}

func (w *window) line(row int) []uint64 { return w.solid[row*w.words : (row+1)*w.words] }

// fill reads block (tx, ty) of the mesh and k blocks of the floor all round it. What lies beyond the
// floor is solid unless the border is open.
func (w *window) fill(m *floor.Map, tx, ty, k int) {
	s := m.Settings()
	bx, by := tx*blockSpan, ty*blockSpan
	w.col, w.row = (bx-k)*floor.BlockSize, (by-k)*floor.BlockSize
	w.words = 2*k + blockSpan
	w.cols, w.rows = w.words*floor.BlockSize, w.words*floor.BlockSize
	n := w.rows * w.words
	if cap(w.solid) < n {
		w.solid = make([]uint64, n)
	}
	w.solid = w.solid[:n]
	var bits [floor.BlockSize]uint64
	for dy := range w.words {
		for dx := range w.words {
			x, y := bx-k+dx, by-k+dy
			m.SolidBits(x, y, &bits)
			if !s.OpenBorder {
				beyond(&bits, s.Columns-x*floor.BlockSize, s.Rows-y*floor.BlockSize, x >= 0 && y >= 0)
			}
			for i, b := range bits {
				w.solid[(dy*floor.BlockSize+i)*w.words+dx] = b
			}
		}
	}
}

// beyond sets the bits that are not among the first cols and rows.
func beyond(bits *[floor.BlockSize]uint64, cols, rows int, on bool) {
	if !on {
		cols, rows = 0, 0
	}
	for y := range bits {
		switch {
		case y >= rows || cols <= 0:
			bits[y] = ^uint64(0)
		case cols < floor.BlockSize:
			bits[y] |= ^uint64(0) << cols
		}
	}
}

// clip clears the columns before from and from to on.
func (w *window) clip(from, to int) {
	for i := range w.words {
		keep := ^uint64(0) << min(max(from-i*64, 0), 64)
		keep &^= ^uint64(0) << min(max(to-i*64, 0), 64)
		for k := i; k < len(w.solid); k += w.words {
			w.solid[k] &= keep
		}
	}
}

// run is a stretch of cells in one row.
type run struct{ from, to int }

// appendRuns adds the stretches of set bits.
func appendRuns(out []run, line []uint64) []run {
	from := -1
	for i, w := range line {
		base := i * 64
		for at := 0; at < 64; {
			rest := w >> at
			if from < 0 {
				if rest == 0 {
					break
				}
				at += bits.TrailingZeros64(rest)
				from = base + at
				continue
			}
			ones := bits.TrailingZeros64(^rest)
			if at+ones >= 64 {
				break
			}
			at += ones
			out = append(out, run{from, base + at})
			from = -1
		}
	}
	if from >= 0 {
		out = append(out, run{from, len(line) * 64})
	}
	return out
}

// rasterizer turns solid cells into convex pieces. The pieces of solid cells
// grown by r > 0 are: stretches of equal runs of rows, a little taller than they are
// so that they overlap; a strip along each exposed side; and a rounded square at
// each exposed corner, with chords outside its arc. Each is open and a part of the
// grown solid but for the chords, and together they leave out nothing of it but
// single points.
type rasterizer struct {
	r, h int64
	arc  []pt // a quarter arc's corners, from +x to +y
	win  window

	lo, hi pt // pieces that do not touch this rectangle are dropped
	out    []piece
	steps  steps
	runs   []run
	groups []group
	spare  []group
	exp    [2][]uint64
	since  [2][]int
}

// group is equal runs of successive rows.
type group struct {
	run
	row int
}

func newRasterizer(r, h int64) *rasterizer {
	z := &rasterizer{r: r, h: h}
	if r > 0 {
		z.arc = appendSubArc(nil, fpt{}, float64(r), axisTangent(0), axisTangent(1))
	}
	return z
}

// pieces are the obstacles of the solid cells that touch the rectangle lo, hi (in
// micrometres from the lower left corner of block (bx, by)), from that corner.
func (z *rasterizer) pieces(m *floor.Map, bx, by int, lo, hi pt) []piece {
	// One cell more than r reaches, so that what touches the block from outside is seen.
	reach := int(z.r/z.h) + 2
	k := (reach + floor.BlockSize - 1) / floor.BlockSize
	z.win.fill(m, bx, by, k)
	z.lo, z.hi, z.out = lo, hi, nil
	z.steps.reset()
	c0, r0 := k*floor.BlockSize, k*floor.BlockSize
	cols, rows := int(hi.x/z.h), int(hi.y/z.h)
	// Only what is within reach matters: how runs are joined must not depend on more.
	z.win.clip(c0-reach, c0+cols+reach)
	from, to := max(0, r0-reach), min(z.win.rows, r0+rows+reach)
	z.bodies(from, to, c0, r0)
	if z.r > 0 {
		z.sides(from, to, c0, r0)
		z.tops(from, to, c0, r0)
		z.corners(from, to, max(0, c0-reach), min(z.win.cols, c0+cols+reach), c0, r0)
	}
	return z.out
}

func (z *rasterizer) add(x0, y0, x1, y1 int64) {
	if p := rectPiece(x0, y0, x1, y1); p.touches(z.lo.x, z.lo.y, z.hi.x, z.hi.y) {
		z.out = append(z.out, p)
	}
}

// bodies adds the solid cells themselves.
func (z *rasterizer) bodies(from, to, c0, r0 int) {
	z.groups = z.groups[:0]
	e := min(z.r, z.h)
	put := func(g group, end int) {
		z.add(int64(g.from-c0)*z.h, int64(g.row-r0)*z.h-e, int64(g.to-c0)*z.h, int64(end-r0)*z.h+e)
	}
	for row := from; row < to; row++ {
		z.runs = appendRuns(z.runs[:0], z.win.line(row))
		z.spare = z.spare[:0]
		i := 0
		for _, r := range z.runs {
			for i < len(z.groups) && z.groups[i].from < r.from {
				put(z.groups[i], row)
				i++
			}
			g := group{r, row}
			if i < len(z.groups) && z.groups[i].run == r {
				g.row = z.groups[i].row
				i++
			}
			z.spare = append(z.spare, g)
		}
		for ; i < len(z.groups); i++ {
			put(z.groups[i], row)
		}
		z.groups, z.spare = z.spare, z.groups
	}
	for _, g := range z.groups {
		put(g, to)
	}
}

// sides adds the strips left and right of exposed vertical sides.
func (z *rasterizer) sides(from, to, c0, r0 int) {
	n := z.win.words
	for s := range z.exp {
		if len(z.exp[s]) < n {
			z.exp[s], z.since[s] = make([]uint64, n), make([]int, n*64)
		}
		clear(z.exp[s])
	}
	put := func(s, col, row, end int) {
		x, y0, y1 := int64(col-c0)*z.h, int64(row-r0)*z.h, int64(end-r0)*z.h
		z.steps.riser(x+int64(s)*z.h, y0, y1, s == 0)
		if s == 0 {
			z.add(x-z.r, y0, x+z.h, y1) // cell col is solid, the one on its left free
		} else {
			z.add(x, y0, x+z.h+z.r, y1) // the one on its right free
		}
	}
	for row := from; row <= to; row++ {
		for w := range n {
			var now [2]uint64
			if row < to {
				line := z.win.line(row)
				l, r := line[w]<<1, line[w]>>1
				if w > 0 {
					l |= line[w-1] >> 63
				} else {
					l |= 1 // the window's own edge exposes nothing
				}
				if w+1 < n {
					r |= line[w+1] << 63
				} else {
					r |= 1 << 63
				}
				now = [2]uint64{line[w] &^ l, line[w] &^ r}
			}
			for s := range now {
				for d := now[s] ^ z.exp[s][w]; d != 0; d &= d - 1 {
					b := bits.TrailingZeros64(d)
					if now[s]>>b&1 != 0 {
						z.since[s][w*64+b] = row
					} else {
						put(s, w*64+b, z.since[s][w*64+b], row)
					}
				}
				z.exp[s][w] = now[s]
			}
		}
	}
}

// tops adds the strips below and above exposed horizontal sides.
func (z *rasterizer) tops(from, to, c0, r0 int) {
	buf := make([]uint64, z.win.words)
	for row := from + 1; row < to; row++ {
		a, b := z.win.line(row-1), z.win.line(row)
		y := int64(row-r0) * z.h
		for s := range 2 {
			for i := range buf {
				if s == 0 {
					buf[i] = a[i] &^ b[i]
				} else {
					buf[i] = b[i] &^ a[i]
				}
			}
			z.runs = appendRuns(z.runs[:0], buf)
			for _, r := range z.runs {
				x0, x1 := int64(r.from-c0)*z.h, int64(r.to-c0)*z.h
				z.steps.treads = append(z.steps.treads, tread{x0, x1, y, s == 0})
				if s == 0 {
					z.add(x0, y-z.h, x1, y+z.r)
				} else {
					z.add(x0, y-z.r, x1, y+z.h)
				}
			}
		}
	}
}

// corners adds a rounded square at each lattice vertex with one solid cell of four.
func (z *rasterizer) corners(from, to, left, right, c0, r0 int) {
	for row := from + 1; row < to; row++ {
		a, b := z.win.line(row-1), z.win.line(row)
		for w := range a {
			// Bit i is the cell on the right of vertex i; shifted, the one on its left.
			al, bl := a[w]<<1, b[w]<<1
			if w > 0 {
				al |= a[w-1] >> 63
				bl |= b[w-1] >> 63
			}
			quads := [4]uint64{al, a[w], bl, b[w]}
			odd := al ^ a[w] ^ bl ^ b[w]
			many := al&a[w] | bl&b[w] | (al|a[w])&(bl|b[w])
			for one := odd &^ many; one != 0; one &= one - 1 {
				i := bits.TrailingZeros64(one)
				col := w*64 + i
				if col <= left || col >= right {
					continue
				}
				for q := range quads {
					if quads[q]>>i&1 != 0 {
						z.corner(int64(col-c0)*z.h, int64(row-r0)*z.h, q)
					}
				}
			}
		}
	}
}

// corner adds the rounded square at (x, y) away from solid quadrant q (0 lower
// left, 1 lower right, 2 upper left, 3 upper right).
func (z *rasterizer) corner(x, y int64, q int) {
	sx, sy := int64(1), int64(1)
	if q&1 != 0 {
		sx = -1
	}
	if q&2 != 0 {
		sy = -1
	}
	box := piece{lo: pt{min(x-sx*z.h, x+sx*z.r), min(y-sy*z.h, y+sy*z.r)}, hi: pt{max(x-sx*z.h, x+sx*z.r), max(y-sy*z.h, y+sy*z.r)}}
	if !box.touches(z.lo.x, z.lo.y, z.hi.x, z.hi.y) {
		return
	}
	v := make([]pt, 0, len(z.arc)+3)
	v = append(v, pt{x - sx*z.h, y - sy*z.h}, pt{x + sx*z.r, y - sy*z.h})
	for _, a := range z.arc {
		v = append(v, pt{x + sx*a.x, y + sy*a.y})
	}
	v = append(v, pt{x - sx*z.h, y + sy*z.r})
	z.steps.corners[cornerKey{x, y, sx, sy}] = int32(len(z.out))
	p := newPiece(hull(v))
	chain := make([]pt, 0, len(z.arc))
	for _, a := range z.arc {
		chain = append(chain, pt{x + sx*a.x, y + sy*a.y})
	}
	if sx != sy {
		slices.Reverse(chain)
	}
	p.addMitre(pt{x + sx*z.r, y + sy*z.r}, chain)
	z.out = append(z.out, p)
}
