package check

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/spare"
)

// Pieces of a route that lie close together are checked against one list of what is about
// them all, made by one look at the floor's rows.
const (
	// togetherUm is how wide and how tall, in micrometres, what is checked together may be, and
	// closeUm is that among clutter.
	togetherUm = 8_000_000
	closeUm    = 2_000_000
	// mostListed is how many boxes of cells a list may have.
	mostListed = 64
	// farUm is how far, in micrometres, a list reaches at most, unless more is needed.
	farUm = 2_000_000
)

// about lists the solids near some pieces of a route.
type about struct {
	lo, hi geom.Point // the pieces' extent
	reach  float64    // all that is nearer than that to it is listed; 0: nothing is
	boxes  []cellsBox
	solids []*outline
}

var lists spare.Shelf[about]

// release gives the list's memory back, without what belongs to a version.
func (l *about) release() {
	l.reach = 0
	clear(l.solids)
	lists.Put(l)
}

// cellsBox is a box of solid cells.
type cellsBox struct{ x0, y0, x1, y1 float64 }

// tells says whether all is listed that is nearer than reach to a piece of that extent.
func (l *about) tells(lo, hi geom.Point, reach float64) bool {
	return l.reach > 0 && reach <= l.reach && lo.X >= l.lo.X && lo.Y >= l.lo.Y && hi.X <= l.hi.X && hi.Y <= l.hi.Y
}

// look makes the list for the first of the pieces, and as many on from there as lie
// together. Where the first alone is too long, or near too much, there is none.
func (w *walker) look(pts []geom.Point, need, most float64) {
	l := w.near
	l.reach = 0
	reach := max(need+w.h, min(most, farUm))
	for _, side := range [2]float64{togetherUm, closeUm} {
		lo, hi := extent(pts[:2]...)
		if max(hi.X-lo.X, hi.Y-lo.Y) > side {
			return
		}
		l.lo, l.hi = lo, hi
		for _, p := range pts[2:] {
			lo = geom.Point{X: min(lo.X, p.X), Y: min(lo.Y, p.Y)}
			hi = geom.Point{X: max(hi.X, p.X), Y: max(hi.Y, p.Y)}
			if max(hi.X-lo.X, hi.Y-lo.Y) > side {
				break
			}
			l.lo, l.hi = lo, hi
		}
		if w.list(l, reach) {
			l.reach = reach
			break
		}
	}
	clear(l.solids) // release does not see what lies past the end of fewer
	l.solids = l.solids[:0]
	for i := range w.solids {
		if w.solids[i].apart(l.lo, l.hi) < reach {
			l.solids = append(l.solids, &w.solids[i])
		}
	}
}

// list fills in the boxes, block column by block column: rows alike in one of them make boxes
// together. It says no when they are too many.
func (w *walker) list(l *about, reach float64) bool {
	const size = floor.BlockSize
	l.boxes = l.boxes[:0]
	cell := func(v, from float64, n int) int {
		return int(max(0, min(float64(n-1), math.Floor((v-from)/w.h))))
	}
	c0, c1 := cell(l.lo.X-reach, w.lo.X, w.s.Columns), cell(l.hi.X+reach, w.lo.X, w.s.Columns)
	r0, r1 := cell(l.lo.Y-reach, w.lo.Y, w.s.Rows), cell(l.hi.Y+reach, w.lo.Y, w.s.Rows)
	for bx := c0 / size; bx <= c1/size; bx++ {
		left := w.lo.X + float64(bx*size)*w.h
		mask := columns(bx, c0, c1)
		open, was := len(l.boxes), uint64(0)
		for row := r0; row <= r1; {
			blk := w.block(bx, row/size)
			for next := min(r1+1, row-row%size+size); row < next; row++ {
				word := blk[row%size] & mask
				if word == was {
					continue
				}
				y := w.lo.Y + float64(row)*w.h
				l.end(open, y)
				open, was = len(l.boxes), word
				for word != 0 {
					var from, n int
					from, n, word = firstRun(word)
					if len(l.boxes) == mostListed {
						return false
					}
					l.boxes = append(l.boxes, cellsBox{x0: left + float64(from)*w.h, y0: y, x1: left + float64(from+n)*w.h})
				}
			}
		}
		l.end(open, w.lo.Y+float64(r1+1)*w.h)
	}
	return true
}

// end gives the boxes from one on their upper side.
func (l *about) end(from int, y float64) {
	for i := from; i < len(l.boxes); i++ {
		l.boxes[i].y1 = y
	}
}

// listed is the smallest distance from ab to a box of the list below reach, else reach.
func (w *walker) listed(a, b, lo, hi geom.Point, reach float64) float64 {
	for i := range w.near.boxes {
		c := &w.near.boxes[i]
		dx, dy := max(c.x0-hi.X, lo.X-c.x1, 0), max(c.y0-hi.Y, lo.Y-c.y1, 0)
		if dx < reach && dy < reach && dx*dx+dy*dy < reach*reach {
			reach = min(reach, boxDistance(c.x0, c.y0, c.x1, c.y1, a, b))
		}
	}
	return reach
}
