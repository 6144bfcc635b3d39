package voronoi

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// frame is what stays the same for all versions of a floor: the blocks.
type frame struct {
	set    floor.Settings
	need   Need
	nx, ny int
	side   float64 // of a whole block
	h      float64 // of a cell
	w, ht  float64 // of the floor
	o      geom.Point
	most   float64 // clearance up to which edges are traced
}

// shiftUm keeps the borders of blocks, and the lines that boxes are cut at, off all lines
// along an axis that edges run on: these lie at whole quarters of a micrometre.
const shiftUm = 1.0 / 3

func newFrame(s floor.Settings, need Need) frame {
	f := frame{set: s, need: need, h: float64(s.ResolutionUm), o: s.Vertex(0, 0)}
	f.nx = (s.Columns + floor.BlockSize - 1) / floor.BlockSize
	f.ny = (s.Rows + floor.BlockSize - 1) / floor.BlockSize
	f.side = floor.BlockSize * f.h
	f.w, f.ht = float64(s.Columns)*f.h, float64(s.Rows)*f.h
	f.most = float64(need.MostUm + slackUm)
	return f
}

// corner is a block's lower left corner from the floor's, before the shift.
func (f *frame) corner(i int) vec {
	return vec{float64(i%f.nx) * f.side, float64(i/f.nx) * f.side}
}

// box is the block's rectangle from its corner. Blocks at the floor's edge reach
// beyond a closed border, where nothing is free, and end at an open one.
func (f *frame) box(i int) box {
	x, y, o := i%f.nx, i/f.nx, f.corner(i)
	b := box{shiftUm, shiftUm, f.side + shiftUm, f.side + shiftUm}
	over := 1 - shiftUm
	if f.set.OpenBorder {
		over = 0
	}
	if x == 0 {
		b.x0 = -over
	}
	if y == 0 {
		b.y0 = -over
	}
	if x == f.nx-1 {
		b.x1 = f.w - o.x + over
	}
	if y == f.ny-1 {
		b.y1 = f.ht - o.y + over
	}
	return b
}

// rims are the sides of the block that are an open border.
func (f *frame) rims(i int) (r [4]bool) {
	if f.set.OpenBorder {
		x, y := i%f.nx, i/f.nx
		r = [4]bool{x == 0, x == f.nx-1, y == 0, y == f.ny-1}
	}
	return r
}

// blocksNear is the blocks that come within d of r, which is seen from the floor's corner.
func (f *frame) blocksNear(r box, d float64) (x0, y0, x1, y1 int) {
	at := func(v float64, n int) int { return int(max(0, min(math.Floor(v/f.side), float64(n-1)))) }
	d++
	return at(r.x0-d, f.nx), at(r.y0-d, f.ny), at(r.x1+d, f.nx), at(r.y1+d, f.ny)
}

// reduced is a rectangle seen from the floor's corner.
func (f *frame) reduced(r geom.Rect) box {
	return box{r.Min.X - f.o.X, r.Min.Y - f.o.Y, r.Max.X - f.o.X, r.Max.Y - f.o.Y}
}

// cellSites are the sides and convex corners of the solid cells along the lattice
// lines that start block (bx, by), from the floor's corner; the last block's end lines too.
func (f *frame) cellSites(m *floor.Map, bx, by int) []site {
	const n = floor.BlockSize
	var pad padded
	if !pad.read(m, f, bx, by) {
		return nil
	}
	x0, y0 := bx*n, by*n
	cols, rows := min(n, f.set.Columns-x0), min(n, f.set.Rows-y0)
	lastX, lastY := cols, rows
	if bx == f.nx-1 {
		lastX++
	}
	if by == f.ny-1 {
		lastY++
	}
	at := func(i, j int) vec { return vec{float64(x0+i) * f.h, float64(y0+j) * f.h} }
	var out []site
	side := func(a, b vec) {
		s := sideSite(a, b, 0)
		s.from = ofCell
		out = append(out, s)
	}
	// Sides along x on line j: solid above and free below faces down, and the other way.
	for j := range lastY {
		for i := 0; i < cols; {
			up, down := pad.solid(i, j), pad.solid(i, j-1)
			k := i + 1
			for k < cols && pad.solid(k, j) == up && pad.solid(k, j-1) == down {
				k++
			}
			switch {
			case up && !down:
				side(at(i, j), at(k, j))
			case down && !up:
				side(at(k, j), at(i, j))
			}
			i = k
		}
	}
	for i := range lastX {
		for j := 0; j < rows; {
			right, left := pad.solid(i, j), pad.solid(i-1, j)
			k := j + 1
			for k < rows && pad.solid(i, k) == right && pad.solid(i-1, k) == left {
				k++
			}
			switch {
			case right && !left:
				side(at(i, k), at(i, j))
			case left && !right:
				side(at(i, j), at(i, k))
			}
			j = k
		}
	}
	for j := range lastY {
		for i := range lastX {
			k := 0
			for _, s := range [4]bool{pad.solid(i, j), pad.solid(i-1, j), pad.solid(i, j-1), pad.solid(i-1, j-1)} {
				if s {
					k++
				}
			}
			if k == 1 {
				s := cornerSite(at(i, j), 0)
				s.from = ofCell
				out = append(out, s)
			}
		}
	}
	return out
}

// padded is a block's cells and one around them.
type padded [floor.BlockSize + 2][floor.BlockSize + 2]bool

func (p *padded) solid(i, j int) bool { return p[j+1][i+1] }

// read says whether there is any outline to be found.
func (p *padded) read(m *floor.Map, f *frame, bx, by int) bool {
	const n = floor.BlockSize
	closed := !f.set.OpenBorder
	anySolid, anyFree := false, false
	var words [n]uint64
	for dy := -1; dy <= 1; dy++ {
		for dx := -1; dx <= 1; dx++ {
			x, y := bx+dx, by+dy
			on := x >= 0 && y >= 0 && x < f.nx && y < f.ny
			if on {
				m.SolidBits(x, y, &words)
			}
			for j := max(-1, dy*n); j < min(n+1, dy*n+n); j++ {
				for i := max(-1, dx*n); i < min(n+1, dx*n+n); i++ {
					c, r := bx*n+i, by*n+j
					v := closed
					if on && c < f.set.Columns && r < f.set.Rows {
						v = words[j-dy*n]>>(i-dx*n)&1 != 0
						anySolid, anyFree = anySolid || v, anyFree || !v
					}
					p[j+1][i+1] = v
				}
			}
		}
	}
	return anySolid && (anyFree || !closed)
}

// borderSites are the sides of a closed border, from the floor's corner.
func (f *frame) borderSites() []site {
	if f.set.OpenBorder {
		return nil
	}
	c := [4]vec{{0, 0}, {f.w, 0}, {f.w, f.ht}, {0, f.ht}}
	var out []site
	for i := range c {
		s := sideSite(c[(i+1)%4], c[i], 0) // free on the right
		s.from = ofBorder
		out = append(out, s)
	}
	return out
}

// bounds are those of the grown site.
func (s *site) bounds() box {
	b := box{s.a.x, s.a.y, s.a.x, s.a.y}
	if s.straight {
		e := s.end()
		b = box{min(b.x0, e.x), min(b.y0, e.y), max(b.x1, e.x), max(b.y1, e.y)}
	}
	g := max(0, s.grow)
	return box{b.x0 - g, b.y0 - g, b.x1 + g, b.y1 + g}
}
