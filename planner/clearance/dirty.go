package clearance

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// dirty collects what of the field under construction must be derived anew.
type dirty struct {
	f      *Field
	places []window // vertices that enclose what changed
	blocks map[[2]int]mark
}

// mark is what must be derived anew of one cell block; being marked at all, its span.
type mark struct {
	bar     bool
	squares uint64 // of 8x8 cells, whose smallest and largest values
}

// vertices marks the squares whose vertices w, part of one vertex block, belongs to.
func (d *dirty) vertices(w window) {
	n := d.f.sums
	gx0, gy0 := (w.i0-1)>>lowestKept, (w.j0-1)>>lowestKept
	gx1, gy1 := (w.i1-1)>>lowestKept, (w.j1-1)>>lowestKept
	const per = blockShift - lowestKept
	for by := max(0, gy0>>per); by <= min(n.ny-1, gy1>>per); by++ {
		for bx := max(0, gx0>>per); bx <= min(n.nx-1, gx1>>per); bx++ {
			var m mark
			across := uint64(0xff) >> (7 - min(7, gx1-bx<<per)) &^ (1<<max(0, gx0-bx<<per) - 1)
			for y := max(0, gy0-by<<per); y <= min(7, gy1-by<<per); y++ {
				m.squares |= across << (8 * y)
			}
			d.mark(bx, by, m)
		}
	}
}

// mark adds to what must be derived anew of a cell block.
func (d *dirty) mark(bx, by int, more mark) {
	m := d.blocks[[2]int{bx, by}]
	d.blocks[[2]int{bx, by}] = mark{m.bar || more.bar, m.squares | more.squares}
}

// cells reads changed cells.
func (d *dirty) cells(rects []floor.CellRect) {
	f := d.f
	for _, r := range rects {
		for by := max(0, r.Y0) >> blockShift; by<<blockShift < min(r.Y1, f.rows); by++ {
			for bx := max(0, r.X0) >> blockShift; bx<<blockShift < min(r.X1, f.cols); bx++ {
				old, now := f.bits.at(bx, by), f.readBits(bx, by)
				c := changedCells(old, now)
				if c.X0 >= c.X1 {
					continue
				}
				f.bits.set(bx, by, now)
				d.mark(bx, by, mark{bar: true})
				i, j := bx<<blockShift, by<<blockShift
				d.places = append(d.places, window{i + c.X0, j + c.Y0, i + c.X1 + 1, j + c.Y1 + 1})
			}
		}
	}
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

// features takes changed solids out of the index and puts them in.
func (d *dirty) features(changes []floor.FeatureChange) {
	f := d.f
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
			if moved {
				d.solid(s)
			}
			f.leave(before.Name, s.bounds)
		}
		if after != nil {
			s := newSolid(after)
			f.enter(s, false)
			if moved {
				d.solid(s)
			}
		}
	}
}

// fewBuckets is up to how many buckets a solid's bounds are one place.
const fewBuckets = 4

// solid marks what a solid, which must be in the index, touches.
func (d *dirty) solid(s *solid) {
	f := d.f
	bounds := s.bounds.Grow(bucketSlack)
	x0, y0, x1, y1 := f.bucketRange(bounds)
	r := f.bucketReach()
	one := (x1-x0+1)*(y1-y0+1) <= fewBuckets
	if one {
		d.place(bounds)
	}
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			if !f.buckets.at(x, y).holds(s.feature.Name) {
				continue
			}
			d.mark(x, y, mark{bar: true})
			if !one {
				d.place(bounds.Intersect(f.bucketRect(x, y).Grow(bucketSlack)))
			}
			// Whether a solid is near may differ.
			for ny := max(0, y-r); ny <= min(f.sums.ny-1, y+r); ny++ {
				for nx := max(0, x-r); nx <= min(f.sums.nx-1, x+r); nx++ {
					d.mark(nx, ny, mark{})
				}
			}
		}
	}
}

// place adds the vertices about r. A place beyond the floor is as far from any vertex as
// the nearest of the floor's edge, or farther.
func (d *dirty) place(r geom.Rect) {
	f := d.f
	if near := r.Grow(float64(f.cap)); !near.Intersects(f.bounds) {
		return
	}
	cut := func(v float64, most int) int { return int(max(0, min(v, float64(most)))) }
	d.places = append(d.places, window{
		cut(math.Floor((r.Min.X-f.ox)/f.h), f.cols), cut(math.Floor((r.Min.Y-f.oy)/f.h), f.rows),
		cut(math.Ceil((r.Max.X-f.ox)/f.h), f.cols) + 1, cut(math.Ceil((r.Max.Y-f.oy)/f.h), f.rows) + 1,
	})
}

// settle derives marked blocks anew, and the pyramid above them.
func (d *dirty) settle(ctx context.Context, s *scratch) error {
	f := d.f
	up := map[[2]int]bool{}
	for at, m := range d.blocks {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		x, y := at[0], at[1]
		if m.bar {
			if b := f.bar(s, x, y); !sameBits(b, f.barred.at(x, y)) {
				f.barred.set(x, y, b)
			}
		}
		if m.squares != 0 {
			f.sums.set(x, y, f.resummarize(x, y, m.squares))
		}
		if sp := f.blockSpan(x, y); sp != f.pyramid[0].at(x, y) {
			f.pyramid[0].set(x, y, sp)
			up[[2]int{x / 2, y / 2}] = true
		}
	}
	for k := 1; k < len(f.pyramid); k++ {
		next := map[[2]int]bool{}
		for at := range up {
			if sp := f.joinSpan(k, at[0], at[1]); sp != f.pyramid[k].at(at[0], at[1]) {
				f.pyramid[k].set(at[0], at[1], sp)
				next[[2]int{at[0] / 2, at[1] / 2}] = true
			}
		}
		up = next
	}
	return nil
}
