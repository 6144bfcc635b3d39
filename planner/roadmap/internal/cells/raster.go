package cells

import (
	"math/bits"

	"example.com/wideberth/mapstore/floor"
)

// rasterizer traces the solid cells about a strip. Cells beyond the floor are none of
// its: the border is an obstacle of its own.
type rasterizer struct {
	h, r  int64
	words int // a row
	base  int // column of bit 0
	rows  int
	solid []uint64
	arc   []pt // a quarter arc's corners, from +x to +y
	o     *outline
	from  []int32 // where the upright side left and right of a column began
}

// fill reads the columns of floor block bx and k blocks beside it.
func (z *rasterizer) fill(m *floor.Map, bx, k int) {
	s := m.Settings()
	z.words, z.base, z.rows = 2*k+1, (bx-k)*floor.BlockSize, s.Rows
	blocks := (s.Rows + floor.BlockSize - 1) / floor.BlockSize
	n := (blocks*floor.BlockSize + 2) * z.words
	if cap(z.solid) < n {
		z.solid = make([]uint64, n)
	}
	z.solid = z.solid[:n]
	clear(z.solid)
	var words [floor.BlockSize]uint64
	for by := range blocks {
		for w := range z.words {
			if any, _ := m.SolidBits(bx-k+w, by, &words); !any {
				continue
			}
			for y, b := range words {
				z.solid[(by*floor.BlockSize+y+1)*z.words+w] = b
			}
		}
	}
}

// line is the row of cells above lattice line j, its lower neighbour that of j-1.
func (z *rasterizer) line(j int) []uint64 { return z.solid[(j+1)*z.words : (j+2)*z.words] }

func (z *rasterizer) isSolid(col, row int) bool {
	if col < 0 || col >= z.words*64 {
		return false
	}
	return z.line(row)[col/64]>>(col%64)&1 != 0
}

// trace adds the outlines of the solid cells grown by r to o, with chords outside
// arcs. What is not near o's strip may be wrong or missing.
func (z *rasterizer) trace(o *outline, h, r int64, chord float64) {
	z.o, z.h, z.r = o, h, r
	z.arc = z.arc[:0]
	if r > 0 {
		z.arc = appendArc(z.arc, pt{}, float64(r), chord, axisTangent(0), axisTangent(1))
	} else {
		z.arc = append(z.arc, pt{})
	}
	n := z.words * 64
	if len(z.from) < 2*n {
		z.from = make([]int32, 2*n)
	}
	for j := 0; j <= z.rows; j++ {
		below, above := z.line(j-1), z.line(j)
		z.level(j, below, above)
		z.upright(j, below, above)
	}
}

// level adds the level sides on lattice line j and the corners at their ends.
func (z *rasterizer) level(j int, below, above []uint64) {
	for _, up := range [2]bool{true, false} {
		in, out := below, above // solid and free
		if !up {
			in, out = above, below
		}
		start := -1
		for w := range in {
			side := in[w] &^ out[w]
			if side == 0 && start < 0 {
				continue
			}
			for i := 0; i < 64; {
				rest := side >> i
				if start < 0 {
					if rest == 0 {
						break
					}
					i += bits.TrailingZeros64(rest)
					start = w*64 + i
					continue
				}
				if i += bits.TrailingZeros64(^rest); i < 64 {
					z.levelSide(j, start, w*64+i, up)
					start = -1
				}
			}
		}
		if start >= 0 {
			z.levelSide(j, start, len(in)*64, up)
		}
	}
}

// levelSide adds the side from bit a to bit b of lattice line j, free above or below.
func (z *rasterizer) levelSide(j, a, b int, up bool) {
	sy, row := int64(1), j-1
	if !up {
		sy, row = -1, j
	}
	y := int64(j) * z.h
	x0, x1 := z.x(a), z.x(b)
	l, r := z.levelEnd(x0, y, -1, sy, z.isSolid(a-1, row)), z.levelEnd(x1, y, 1, sy, z.isSolid(b, row))
	p, q := pt{l, y + sy*z.r}, pt{r, y + sy*z.r}
	if up {
		p, q = q, p
	}
	z.o.put(p, q, Source{Kind: Raster})
}

func (z *rasterizer) x(bit int) int64 { return int64(z.base+bit) * z.h }

// levelEnd adds the corner (x, y) at the sx end of a level side that is free towards sy, and
// says where the side ends. An inner corner has a solid cell beyond.
func (z *rasterizer) levelEnd(x, y, sx, sy int64, inner bool) int64 {
	src := Source{Kind: Raster}
	if inner {
		if z.r > 0 {
			// Free is what is towards -sx and sy. See outline.growRing.
			p, q, v := pt{x, y + sy*z.r}, pt{x - sx*z.r, y}, pt{x, y}
			if sx*sy > 0 {
				z.o.put(q, v, src)
				z.o.put(v, p, src)
			} else {
				z.o.put(p, v, src)
				z.o.put(v, q, src)
			}
		}
		return x
	}
	for i := 1; i < len(z.arc); i++ {
		p := pt{x + sx*z.arc[i-1].x, y + sy*z.arc[i-1].y}
		q := pt{x + sx*z.arc[i].x, y + sy*z.arc[i].y}
		if sx*sy < 0 {
			p, q = q, p
		}
		z.o.put(p, q, src)
	}
	return x + sx*z.arc[len(z.arc)-1].x
}

// upright adds the upright sides that end on lattice line j and remembers those that begin.
func (z *rasterizer) upright(j int, below, above []uint64) {
	n := len(below)
	sides := func(line []uint64, w int) (left, right uint64) {
		l, r := line[w]<<1, line[w]>>1
		if w > 0 {
			l |= line[w-1] >> 63
		}
		if w+1 < n {
			r |= line[w+1] << 63
		}
		return line[w] &^ l, line[w] &^ r
	}
	for w := range n {
		if below[w]|above[w] == 0 {
			continue
		}
		bl, br := sides(below, w)
		al, ar := sides(above, w)
		for s, change := range [2]uint64{bl ^ al, br ^ ar} {
			was := bl
			if s == 1 {
				was = br
			}
			for ; change != 0; change &= change - 1 {
				i := bits.TrailingZeros64(change)
				col := w*64 + i
				if was>>i&1 == 0 {
					z.from[2*col+s] = int32(j)
				} else {
					z.uprightSide(col, int(z.from[2*col+s]), j, s)
				}
			}
		}
	}
}

// uprightSide adds the left (s = 0) or right side of the cells of bit col from line j0 to j1.
func (z *rasterizer) uprightSide(col, j0, j1, s int) {
	sx, x := int64(-1), z.x(col)
	if s == 1 {
		sx, x = 1, z.x(col+1)
	}
	e := z.arc[0].y
	y0, y1 := int64(j0)*z.h, int64(j1)*z.h
	// Where the solid goes on, the side ends at an inner corner.
	if !z.isSolid(col, j0-1) {
		y0 -= e
	}
	if !z.isSolid(col, j1) {
		y1 += e
	}
	p, q := pt{x + sx*z.r, y0}, pt{x + sx*z.r, y1}
	if s == 0 {
		p, q = q, p
	}
	z.o.put(p, q, Source{Kind: Raster})
}
