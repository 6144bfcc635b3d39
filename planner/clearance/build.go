package clearance

import (
	"context"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/internal/parallel"
)

// Windows are computed in tiles, so that scratch space stays small and tiles can be
// shared out; no value depends on how a window is cut.
const (
	tileWidth  = 4096 // vertices; keeps squared columns within 32 bits
	tileHeight = 256
	// buildWorkers is the most goroutines Build uses. Every tile writes blocks of its
	// own, so their order does not matter.
	buildWorkers = 2
)

// Build makes the field of one version from scratch, in time linear in the number
// of cells. The error is ctx's.
func Build(ctx context.Context, m *floor.Map) (*Field, error) {
	f := frame(m)
	nbx, nby := (f.cols+blockMask)>>blockShift, (f.rows+blockMask)>>blockShift
	f.bits = newTable[*cellBits](nbx, nby)
	f.barred = newTable[*cellBits](nbx, nby)
	f.sums = newTable[*summary](nbx, nby)
	f.buckets = newTable[bucket](nbx, nby)
	f.values = newTable[*vertexBlock](f.cols>>blockShift+1, f.rows>>blockShift+1)
	for n := max(nbx, nby); ; n = (n + 1) / 2 {
		k := len(f.pyramid)
		f.pyramid = append(f.pyramid, newTable[span]((nbx+1<<k-1)>>k, (nby+1<<k-1)>>k))
		if n == 1 {
			break
		}
	}
	for by := range nby {
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		for bx := range nbx {
			f.bits.set(bx, by, f.readBits(bx, by))
		}
	}
	for ft := range m.Features() {
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		if ft.Kind == floor.Solid {
			f.enter(newSolid(ft), true)
		}
	}
	tiles := window{0, 0, f.cols + 1, f.rows + 1}.tiles()
	if err := f.shareOut(ctx, len(tiles), func(s *scratch, k int) error {
		return f.compute(ctx, s, tiles[k], f.lad.reach, nil)
	}); err != nil {
		return nil, err
	}
	if err := f.shareOut(ctx, nby, func(s *scratch, by int) error {
		for bx := range nbx {
			f.barred.set(bx, by, f.bar(s, bx, by))
			f.sums.set(bx, by, f.summarize(bx, by))
		}
		return nil
	}); err != nil {
		return nil, err
	}
	for by := range nby {
		for bx := range nbx {
			f.pyramid[0].set(bx, by, f.blockSpan(bx, by))
		}
	}
	for k := 1; k < len(f.pyramid); k++ {
		for y := range f.pyramid[k].ny {
			for x := range f.pyramid[k].nx {
				f.pyramid[k].set(x, y, f.joinSpan(k, x, y))
			}
		}
	}
	f.freeze()
	return f, nil
}

func (f *Field) freeze() {
	f.bits.freeze()
	f.barred.freeze()
	f.sums.freeze()
	f.buckets.freeze()
	f.values.freeze()
	for k := range f.pyramid {
		f.pyramid[k].freeze()
	}
}

// joinSpan is the pyramid's entry (x, y) at level k, from the level below.
func (f *Field) joinSpan(k, x, y int) span {
	low := &f.pyramid[k-1]
	sp := emptySpan
	for q := range 4 {
		if cx, cy := 2*x+q&1, 2*y+q>>1; cx < low.nx && cy < low.ny {
			sp = sp.with(low.at(cx, cy))
		}
	}
	return sp
}

// readBits is the solid cells of block (bx, by), nil when there are none.
func (f *Field) readBits(bx, by int) *cellBits {
	var words cellBits
	any, all := f.m.SolidBits(bx, by, (*[blockSize]uint64)(&words))
	switch {
	case !any:
		return nil
	case all && words == *fullBits:
		return fullBits
	}
	return &words
}

// scratch is what one worker works with.
type scratch struct {
	raster transformer
	vector vectorizer
	out    []int32
	spans  []float64
}

// shareOut does n jobs on a few goroutines and gives ctx's error, or that of the first
// job that failed.
func (f *Field) shareOut(ctx context.Context, n int, job func(*scratch, int) error) error {
	errs := make([]error, n)
	going, stop := context.WithCancel(ctx)
	defer stop()
	err := parallel.Each(going, buildWorkers, n, func() func(int) {
		s := &scratch{raster: transformer{lad: f.lad}}
		return func(k int) {
			if errs[k] = job(s, k); errs[k] != nil {
				stop()
			}
		}
	})
	for _, e := range errs {
		if e != nil {
			return e
		}
	}
	return err
}

// tiles cuts w at multiples of the tile size.
func (w window) tiles() []window {
	var ts []window
	for j := w.j0; j < w.j1; j = (j/tileHeight + 1) * tileHeight {
		for i := w.i0; i < w.i1; i = (i/tileWidth + 1) * tileWidth {
			ts = append(ts, w.intersect(window{i, j, (i/tileWidth + 1) * tileWidth, (j/tileHeight + 1) * tileHeight}))
		}
	}
	return ts
}

// compute works out the values of w and keeps those that are new. changed, when not
// nil, is told where other values than before may be.
func (f *Field) compute(ctx context.Context, s *scratch, w window, reach int, changed func(sub window)) error {
	if err := f.evaluate(ctx, s, w, reach); err != nil {
		return err
	}
	for by := w.j0 >> blockShift; by<<blockShift < w.j1; by++ {
		for bx := w.i0 >> blockShift; bx<<blockShift < w.i1; bx++ {
			if f.keep(w, s.out, bx, by) && changed != nil {
				changed(w.intersect(blockWindow(bx, by)))
			}
		}
	}
	return nil
}

// evaluate writes the values of w, which lies within one tile, to s.out. reach is a
// guess, in cells, of how large they get: it saves work and changes no value.
func (f *Field) evaluate(ctx context.Context, s *scratch, w window, reach int) error {
	s.out = grow(s.out, w.vertices())
	for {
		s.raster.lad.reach, s.vector.limit = reach, float64(f.cap)
		if reach < f.lad.reach {
			s.vector.limit = float64(reach) * f.h
		}
		if err := s.raster.raster(ctx, f, w, s.out); err != nil {
			return err
		}
		if err := s.vector.apply(ctx, f, w, s.out); err != nil {
			return err
		}
		// What is no farther than was looked is exact.
		if reach >= f.lad.reach || float64(slices.Max(s.out)) <= s.vector.limit {
			return nil
		}
		reach = min(2*reach+1, f.lad.reach)
	}
}

// blockWindow is the vertices of vertex block (bx, by).
func blockWindow(bx, by int) window {
	return window{bx << blockShift, by << blockShift, (bx + 1) << blockShift, (by + 1) << blockShift}
}

// keep stores the part of w's values that belongs to vertex block (bx, by) and says
// whether anything differs from before. Blocks that are 0 or the cap throughout
// are shared ones.
func (f *Field) keep(w window, out []int32, bx, by int) bool {
	block := blockWindow(bx, by)
	whole := block.intersect(window{0, 0, f.cols + 1, f.rows + 1})
	sub := block.intersect(w)
	old := f.values.at(bx, by)
	if old != nil && !f.differs(w, sub, out, old) {
		return false
	}
	if sub == whole {
		if v := out[(sub.j0-w.j0)*w.width()+sub.i0-w.i0]; v == 0 || int64(v) == f.cap {
			shared := zeroBlock
			if v != 0 {
				shared = f.capBlock
			}
			if !f.differs(w, sub, out, shared) {
				f.values.set(bx, by, shared)
				return true
			}
		}
	}
	b := new(vertexBlock)
	if old != nil {
		f.copyBlock(b, old, whole)
	}
	for j := sub.j0; j < sub.j1; j++ {
		at := (j-w.j0)*w.width() - w.i0
		copy(b[(j&blockMask)<<blockShift+sub.i0&blockMask:], out[at+sub.i0:at+sub.i1])
	}
	if old != nil && sub != whole {
		b = f.shareIfUniform(b, whole)
	}
	f.values.set(bx, by, b)
	return true
}

// copyBlock copies the part of a block that is on the lattice; the rest stays 0.
func (f *Field) copyBlock(dst, src *vertexBlock, whole window) {
	for j := range whole.height() {
		copy(dst[j<<blockShift:j<<blockShift+whole.width()], src[j<<blockShift:])
	}
}

func (f *Field) shareIfUniform(b *vertexBlock, whole window) *vertexBlock {
	v := b[0]
	if v != 0 && int64(v) != f.cap {
		return b
	}
	for j := range whole.height() {
		for _, c := range b[j<<blockShift : j<<blockShift+whole.width()] {
			if c != v {
				return b
			}
		}
	}
	if v == 0 {
		return zeroBlock
	}
	return f.capBlock
}

func (f *Field) differs(w, sub window, out []int32, b *vertexBlock) bool {
	for j := sub.j0; j < sub.j1; j++ {
		at := (j-w.j0)*w.width() - w.i0
		row := out[at+sub.i0 : at+sub.i1]
		is := b[(j&blockMask)<<blockShift+sub.i0&blockMask:][:len(row)]
		for k, v := range row {
			if is[k] != v {
				return true
			}
		}
	}
	return false
}
