package clearance

import (
	"context"

	"example.com/wideberth/mapstore/floor"
)

// manyChanges is the number of changed places above which what they reach is gathered
// by block instead of being looked at place by place.
const manyChanges = 64

// Advance makes the field of m, another version of the same floor, from f; ch is
// floor.Diff of f's version and m. The result equals Build's bit for bit and shares
// with f what did not change. Only where the value may differ, and never farther than
// the cap from a change, are values computed anew: O(that area, grown by the
// clearances in it), plus the top of the tables. The error is ctx's.
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
	d := &dirty{f: &g, blocks: map[[2]int]mark{}}
	d.features(ch.Features)
	d.cells(ch.Cells)
	s := &scratch{raster: transformer{lad: g.lad}}
	for _, a := range g.areas(d.places) {
		for _, t := range a.tiles() {
			if err := g.compute(ctx, s, t, a.reach, d.vertices); err != nil {
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

// area is a window of vertices to compute, and a guess in cells of how large their
// values get.
type area struct {
	window
	reach int
}

// areas are where values may differ after changes within places, which are windows of
// vertices. The values are still those from before.
func (f *Field) areas(places []window) []area {
	if len(places) > manyChanges {
		return f.byBlock(places)
	}
	var as []area
	for _, p := range places {
		as = append(as, f.touched(p))
	}
	return merge(as)
}

// touched is where the value may differ after changes within the place. A value differs
// only if what was nearest is gone or what has come is nearer; either way the
// value from before is at least the distance to the place. Such vertices are
// star-shaped about the place, for clearance is 1-Lipschitz: when there is none at k
// cells from it in x or y (the larger), there is none farther out.
func (f *Field) touched(place window) area {
	all := window{0, 0, f.cols + 1, f.rows + 1}
	// The way straight to the place may pass half a cell beside a vertex, which
	// changes either distance by as much; values are rounded down.
	slack := int64(f.h) + 2
	steps := f.lad.steps
	box := place
	most := int32(0)
	row := make([]int32, place.width()+2*f.lad.reach)
	for j := place.j0; j < place.j1; j++ {
		row := row[:place.width()]
		f.vertexRow(place.i0, j, row)
		for _, v := range row {
			most = max(most, v)
		}
	}
	for k := 1; k <= f.lad.reach; k++ {
		ring := window{place.i0 - k, place.j0 - k, place.i1 + k, place.j1 + k}
		on := ring.intersect(all)
		hit := window{all.i1, all.j1, -1, -1}
		is := func(i, j int, v int32) {
			dx := max(place.i0-i, i-place.i1+1, 0)
			dy := max(place.j0-j, j-place.j1+1, 0)
			if d := dx*dx + dy*dy; d < len(steps) && int64(v)+slack >= int64(steps[d]) {
				hit = window{min(hit.i0, i), min(hit.j0, j), max(hit.i1, i+1), max(hit.j1, j+1)}
				most = max(most, v)
			}
		}
		for _, j := range [2]int{ring.j0, ring.j1 - 1} {
			if j < 0 || j > f.rows {
				continue
			}
			row := row[:on.width()]
			f.vertexRow(on.i0, j, row)
			for i, v := range row {
				is(on.i0+i, j, v)
			}
		}
		for _, i := range [2]int{ring.i0, ring.i1 - 1} {
			if i < 0 || i > f.cols {
				continue
			}
			for j := max(ring.j0+1, 0); j < min(ring.j1-1, f.rows+1); j++ {
				is(i, j, f.Vertex(i, j))
			}
		}
		if hit.empty() {
			break
		}
		box = box.union(hit)
	}
	// Taking away lets values grow somewhat beyond those about it.
	return area{box, min(f.lad.reach, int(float64(most)*1.25/f.h)+2)}
}

// merge joins areas wherever that saves work.
func merge(as []area) []area {
	for again := true; again; {
		again = false
		for a := 0; a < len(as); a++ {
			for b := a + 1; b < len(as); b++ {
				if u := as[a].union(as[b].window); u.vertices() <= as[a].vertices()+as[b].vertices() {
					as[a] = area{u, max(as[a].reach, as[b].reach)}
					as = append(as[:b], as[b+1:]...)
					again = true
					b--
				}
			}
		}
	}
	return as
}

// byBlock gives areas of whole vertex blocks that cover all within the cap of places, in
// runs along each row of blocks.
func (f *Field) byBlock(places []window) []area {
	nx, ny := f.values.nx, f.values.ny
	all := window{0, 0, f.cols + 1, f.rows + 1}
	marks := make([]bool, nx*ny)
	r := f.lad.reach
	for _, p := range places {
		w := window{p.i0 - r, p.j0 - r, p.i1 + r, p.j1 + r}.intersect(all)
		for y := w.j0 >> blockShift; y<<blockShift < w.j1; y++ {
			for x := w.i0 >> blockShift; x<<blockShift < w.i1; x++ {
				marks[y*nx+x] = true
			}
		}
	}
	var runs []area
	for y := range ny {
		for x := 0; x < nx; x++ {
			if !marks[y*nx+x] {
				continue
			}
			x0 := x
			for x+1 < nx && marks[y*nx+x+1] {
				x++
			}
			w := window{x0 << blockShift, y << blockShift, (x + 1) << blockShift, (y + 1) << blockShift}
			runs = append(runs, area{w.intersect(all), r})
		}
	}
	if len(runs) > manyChanges {
		return runs
	}
	return merge(runs)
}
