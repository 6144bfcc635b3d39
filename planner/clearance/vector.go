package clearance

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/geom"
)

// candidate is a piece that may be the nearest one somewhere in the square of
// vertices at hand.
type candidate struct {
	piece
	grow float64
	dist float64 // from the square's middle to the grown piece, maybe negative
}

// vectorizer lowers a window's values to the distances of vector solids. It holds scratch
// space only.
type vectorizer struct {
	limit float64 // in micrometres; larger distances need not be right, but stay larger
	seen  map[*solid][]uint64
	order []*solid
	stack []candidate
	cross []float64
}

// pruneSlack, in micrometres, keeps rounding of the pruning bounds from dropping the
// nearest piece.
const pruneSlack = 1

// leafSide is the side in vertices of the squares in which distances are evaluated
// one by one.
const leafSide = 8

// apply lowers out, the values of w, to the distance of the nearest vector solid.
func (v *vectorizer) apply(ctx context.Context, f *Field, w window, out []int32) error {
	for by := w.j0 >> blockShift; by<<blockShift < w.j1; by++ {
		for bx := w.i0 >> blockShift; bx<<blockShift < w.i1; bx++ {
			block := window{bx << blockShift, by << blockShift, (bx + 1) << blockShift, (by + 1) << blockShift}
			sub := block.intersect(w)
			if ctx.Err() != nil {
				return ctx.Err()
			}
			v.gather(f, sub)
			if len(v.order) == 0 {
				continue
			}
			for _, s := range v.order {
				v.fillInside(f, s, w, sub, out)
			}
			if len(v.stack) > 0 {
				v.square(f, w, sub, out, 0, len(v.stack))
			}
		}
	}
	return nil
}

// gather collects the solids and pieces within the limit of w, each once.
func (v *vectorizer) gather(f *Field, w window) {
	v.order, v.stack = v.order[:0], v.stack[:0]
	if v.seen == nil {
		v.seen = make(map[*solid][]uint64)
	}
	clear(v.seen)
	x0, y0, x1, y1 := f.bucketRange(f.vertexRect(w).Grow(v.limit + bucketSlack))
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			for _, e := range f.buckets.at(x, y) {
				mask, ok := v.seen[e.s]
				if !ok {
					mask = make([]uint64, (len(e.s.pieces)+63)/64)
					v.seen[e.s] = mask
					v.order = append(v.order, e.s)
				}
				for _, k := range e.pieces {
					if mask[k>>6]>>(k&63)&1 == 0 {
						mask[k>>6] |= 1 << (k & 63)
						v.stack = append(v.stack, candidate{piece: e.s.pieces[k], grow: e.s.grow})
					}
				}
			}
		}
	}
}

// fillInside sets the vertices inside a polygon to 0. Those on its border are left
// to the distances.
func (v *vectorizer) fillInside(f *Field, s *solid, w, sub window, out []int32) {
	if len(s.slabs) == 0 {
		return
	}
	lo := max(sub.j0, int(math.Floor(max(-1, (s.bounds.Min.Y-f.oy)/f.h))))
	hi := min(sub.j1, int(math.Ceil(min(float64(sub.j1), (s.bounds.Max.Y-f.oy)/f.h)))+1)
	for j := lo; j < hi; j++ {
		v.cross = s.crossings(f.oy+float64(j)*f.h, v.cross[:0])
		for k := 0; k+1 < len(v.cross); k += 2 {
			a := math.Ceil((v.cross[k] - f.ox) / f.h)
			b := math.Floor((v.cross[k+1] - f.ox) / f.h)
			i0 := int(max(float64(sub.i0), a))
			i1 := int(min(float64(sub.i1-1), b)) + 1
			if i0 < i1 {
				at := (j-w.j0)*w.width() - w.i0
				fill(out[at+i0:at+i1], 0)
			}
		}
	}
}

// square lowers the values of the vertices of sub to the distances of the candidates
// stack[from:to], dropping those that cannot be nearest, then cutting sub in four.
// Distances are 1-Lipschitz: within a square of half diagonal rad they differ
// from the middle's by at most rad.
func (v *vectorizer) square(f *Field, w, sub window, out []int32, from, to int) {
	var most int32
	for j := sub.j0; j < sub.j1; j++ {
		at := (j-w.j0)*w.width() - w.i0
		for _, c := range out[at+sub.i0 : at+sub.i1] {
			most = max(most, c)
		}
	}
	if most == 0 {
		return
	}
	mid := geom.Point{
		X: f.ox + float64(sub.i0+sub.i1-1)*f.h/2,
		Y: f.oy + float64(sub.j0+sub.j1-1)*f.h/2,
	}
	rad := math.Hypot(float64(sub.width()-1), float64(sub.height()-1))*f.h/2 + pruneSlack
	limit := min(float64(most), v.limit)
	base := len(v.stack)
	for k := from; k < to; k++ {
		c := v.stack[k]
		d, _ := geom.SegmentDist(mid, c.a, c.b)
		if c.dist = d - c.grow; c.dist-rad < limit {
			limit = min(limit, max(0, c.dist)+rad)
			v.stack = append(v.stack, c)
		}
	}
	end := base
	for k := base; k < len(v.stack); k++ {
		if c := v.stack[k]; c.dist-rad <= limit {
			v.stack[end] = c
			end++
		}
	}
	v.stack = v.stack[:end]
	switch {
	case end == base:
	case sub.width() <= leafSide && sub.height() <= leafSide:
		v.leaf(f, w, sub, out, v.stack[base:end])
	default:
		mi, mj := half(sub.i0, sub.i1), half(sub.j0, sub.j1)
		for _, q := range [4]window{{sub.i0, sub.j0, mi, mj}, {mi, sub.j0, sub.i1, mj}, {sub.i0, mj, mi, sub.j1}, {mi, mj, sub.i1, sub.j1}} {
			if !q.empty() {
				v.square(f, w, q, out, base, end)
			}
		}
	}
	v.stack = v.stack[:base]
}

// half cuts [lo, hi) in two when it is longer than a leaf.
func half(lo, hi int) int {
	if hi-lo <= leafSide {
		return hi
	}
	return lo + (hi-lo+1)/2
}

func (v *vectorizer) leaf(f *Field, w, sub window, out []int32, cands []candidate) {
	for j := sub.j0; j < sub.j1; j++ {
		at := (j-w.j0)*w.width() - w.i0
		row := out[at+sub.i0 : at+sub.i1]
		p := geom.Point{Y: f.oy + float64(j)*f.h}
		for k := range row {
			if row[k] == 0 {
				continue
			}
			p.X = f.ox + float64(sub.i0+k)*f.h
			for n := range cands {
				d, _ := geom.SegmentDist(p, cands[n].a, cands[n].b)
				if d -= cands[n].grow; d < float64(row[k]) {
					row[k] = int32(max(0, d))
				}
			}
		}
	}
}

// vertexRect is the rectangle that the vertices of w span.
func (f *Field) vertexRect(w window) geom.Rect {
	return geom.Rect{
		Min: geom.Point{X: f.ox + float64(w.i0)*f.h, Y: f.oy + float64(w.j0)*f.h},
		Max: geom.Point{X: f.ox + float64(w.i1-1)*f.h, Y: f.oy + float64(w.j1-1)*f.h},
	}
}
