package clearance

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// manyWindows is the number of changed areas above which they are gathered by block
// instead of being merged pair by pair.
const manyWindows = 64

// Advance makes the field of m, another version of the same floor, from f; ch is
// floor.Diff of f's version and m. The result equals Build's bit for bit and shares
// with f what did not change. Only the surroundings of what changed, as far as
// the cap reaches, are computed anew: O(changed area grown by the cap), plus the
// top of the tables. The error is ctx's.
func (f *Field) Advance(ctx context.Context, m *floor.Map, ch floor.Change) (*Field, error) {
	if m.Settings() != f.m.Settings() {
		return Build(ctx, m)
	}
	g := *f
	g.m = m
	g.bits, g.barred, g.sums, g.buckets, g.values = f.bits.fork(), f.barred.fork(), f.sums.fork(), f.buckets.fork(), f.values.fork()
	g.pyramid = make([]table[span], len(f.pyramid))
	for k := range g.pyramid {
		g.pyramid[k] = f.pyramid[k].fork()
	}
	d := newDirty(&g)
	windows := d.features(ch.Features)
	windows = append(windows, d.cells(ch.Cells)...)
	if len(windows) > manyWindows {
		windows = g.byBlock(windows)
	} else {
		windows = merge(windows)
	}
	s := &scratch{raster: transformer{lad: g.lad}}
	for _, w := range windows {
		for _, t := range w.tiles() {
			if err := g.compute(ctx, s, t, d.vertices); err != nil {
				return nil, err
			}
		}
	}
	if err := d.settle(ctx, s); err != nil {
		return nil, err
	}
	g.freeze()
	return &g, nil
}

// dirty collects which blocks of the field under construction must be derived anew.
type dirty struct {
	f            *Field
	bar, sum, up []bool // cell blocks: cells, smallest and largest values, anything
}

func newDirty(f *Field) *dirty {
	n := f.sums.nx * f.sums.ny
	return &dirty{f, make([]bool, n), make([]bool, n), make([]bool, n)}
}

// vertices marks the cell blocks that vertex block (bx, by) belongs to.
func (d *dirty) vertices(bx, by int) {
	for y := max(0, by-1); y <= min(by, d.f.sums.ny-1); y++ {
		for x := max(0, bx-1); x <= min(bx, d.f.sums.nx-1); x++ {
			d.sum[y*d.f.sums.nx+x] = true
		}
	}
}

// cells reads changed cells and gives the windows of vertices they reach.
func (d *dirty) cells(rects []floor.CellRect) []window {
	f := d.f
	var ws []window
	for _, r := range rects {
		for by := max(0, r.Y0) >> blockShift; by<<blockShift < min(r.Y1, f.rows); by++ {
			for bx := max(0, r.X0) >> blockShift; bx<<blockShift < min(r.X1, f.cols); bx++ {
				old, now := f.bits.at(bx, by), f.readBits(bx, by)
				c := changedCells(old, now)
				if c.X0 >= c.X1 {
					continue
				}
				f.bits.set(bx, by, now)
				d.bar[by*f.sums.nx+bx] = true
				i, j := bx<<blockShift, by<<blockShift
				ws = append(ws, f.reached(i+c.X0, j+c.Y0, i+c.X1, j+c.Y1))
			}
		}
	}
	return ws
}

// reached is the vertices within the cap of the closed cells i0 <= i < i1, j0 <= j < j1.
func (f *Field) reached(i0, j0, i1, j1 int) window {
	r := f.lad.reach
	return window{i0 - r, j0 - r, i1 + r + 1, j1 + r + 1}.intersect(window{0, 0, f.cols + 1, f.rows + 1})
}

// changedCells is the smallest rectangle of cells that holds what differs.
func changedCells(a, b *cellBits) floor.CellRect {
	var zero cellBits
	if a == nil {
		a = &zero
	}
	if b == nil {
		b = &zero
	}
	r := floor.CellRect{X0: blockSize, Y0: blockSize}
	var columns uint64
	for y := range a {
		if x := a[y] ^ b[y]; x != 0 {
			columns |= x
			r.Y0, r.Y1 = min(r.Y0, y), y+1
		}
	}
	for x := range blockSize {
		if columns>>x&1 == 1 {
			r.X0, r.X1 = min(r.X0, x), x+1
		}
	}
	return r
}

// features takes changed solids out of the index and puts them in, and gives the
// windows of vertices they reach.
func (d *dirty) features(changes []floor.FeatureChange) []window {
	f := d.f
	var ws []window
	for _, c := range changes {
		before, after := c.Before, c.After
		if before != nil && before.Kind != floor.Solid {
			before = nil
		}
		if after != nil && after.Kind != floor.Solid {
			after = nil
		}
		moved := before == nil || after == nil || !sameShape(&before.Shape, &after.Shape)
		if before != nil {
			s := newSolid(before)
			f.leave(before.Name, s.bounds)
			if moved {
				ws = d.solid(s.bounds, ws)
			}
		}
		if after != nil {
			s := newSolid(after)
			f.enter(s, false)
			if moved {
				ws = d.solid(s.bounds, ws)
			}
		}
	}
	return ws
}

// solid marks what a solid of these bounds touches and appends the window it reaches.
func (d *dirty) solid(bounds geom.Rect, ws []window) []window {
	f := d.f
	x0, y0, x1, y1 := f.bucketRange(bounds.Grow(bucketSlack))
	r := f.bucketReach()
	for y := max(0, y0-r); y <= min(f.sums.ny-1, y1+r); y++ {
		for x := max(0, x0-r); x <= min(f.sums.nx-1, x1+r); x++ {
			at := y*f.sums.nx + x
			d.up[at] = true
			if x0 <= x && x <= x1 && y0 <= y && y <= y1 {
				d.bar[at] = true
			}
		}
	}
	b := bounds.Grow(float64(f.cap) + bucketSlack)
	cut := func(v float64, most int) int { return int(max(0, min(v, float64(most)))) }
	w := window{
		cut(math.Ceil((b.Min.X-f.ox)/f.h), f.cols+1), cut(math.Ceil((b.Min.Y-f.oy)/f.h), f.rows+1),
		cut(math.Floor((b.Max.X-f.ox)/f.h)+1, f.cols+1), cut(math.Floor((b.Max.Y-f.oy)/f.h)+1, f.rows+1),
	}
	if w.empty() {
		return ws
	}
	return append(ws, w)
}

// settle derives marked blocks anew, and the pyramid above them.
func (d *dirty) settle(ctx context.Context, s *scratch) error {
	f := d.f
	nx := f.sums.nx
	for y := range f.sums.ny {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		for x := range nx {
			at := y*nx + x
			if d.bar[at] {
				if b := f.bar(s, x, y); !sameBits(b, f.barred.at(x, y)) {
					f.barred.set(x, y, b)
				}
			}
			if d.sum[at] {
				f.sums.set(x, y, f.summarize(x, y))
			}
			d.up[at] = d.up[at] || d.bar[at] || d.sum[at]
			if d.up[at] {
				sp := f.blockSpan(x, y)
				if d.up[at] = sp != f.pyramid[0].at(x, y); d.up[at] {
					f.pyramid[0].set(x, y, sp)
				}
			}
		}
	}
	marks := d.up
	for k := 1; k < len(f.pyramid); k++ {
		level := &f.pyramid[k]
		low := f.pyramid[k-1]
		next := make([]bool, level.nx*level.ny)
		for at, m := range marks {
			if x, y := at%low.nx/2, at/low.nx/2; m && !next[y*level.nx+x] {
				next[y*level.nx+x] = true
				level.set(x, y, f.joinSpan(k, x, y))
			}
		}
		marks = next
	}
	return nil
}

// merge joins windows wherever that saves work.
func merge(ws []window) []window {
	for again := true; again; {
		again = false
		for a := 0; a < len(ws); a++ {
			for b := a + 1; b < len(ws); b++ {
				if u := ws[a].union(ws[b]); u.vertices() <= ws[a].vertices()+ws[b].vertices() {
					ws[a] = u
					ws = append(ws[:b], ws[b+1:]...)
					again = true
					b--
				}
			}
		}
	}
	return ws
}

// byBlock gives windows of whole vertex blocks that cover ws, in runs along each row
// of blocks.
func (f *Field) byBlock(ws []window) []window {
	nx, ny := f.values.nx, f.values.ny
	marks := make([]bool, nx*ny)
	for _, w := range ws {
		for y := w.j0 >> blockShift; y<<blockShift < w.j1; y++ {
			for x := w.i0 >> blockShift; x<<blockShift < w.i1; x++ {
				marks[y*nx+x] = true
			}
		}
	}
	all := window{0, 0, f.cols + 1, f.rows + 1}
	var runs []window
	for y := range ny {
		for x := 0; x < nx; x++ {
			if !marks[y*nx+x] {
				continue
			}
			x0 := x
			for x+1 < nx && marks[y*nx+x+1] {
				x++
			}
			runs = append(runs, window{x0 << blockShift, y << blockShift, (x + 1) << blockShift, (y + 1) << blockShift}.intersect(all))
		}
	}
	if len(runs) > manyWindows {
		return runs
	}
	return merge(runs)
}
