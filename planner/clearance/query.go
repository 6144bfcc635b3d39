package clearance

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Nearest is what is nearest to a point or a segment.
type Nearest struct {
	Um      float64        // the clearance in micrometres, at most the cap
	On      geom.Point     // the place asked about where it is reached
	At      geom.Point     // the nearest place of the solid; On itself at clearance 0
	Feature *floor.Feature // the solid: a feature,
	Border  bool           // the closed border (or a place off the floor),
	Cell    bool           // or a solid cell. None when nothing is nearer than the cap.
}

// roundSlack, in micrometres, widens bounds that only choose what is looked at exactly:
// far above rounding, far below what matters.
const roundSlack = 1e-3

func finite(p geom.Point) bool {
	return !math.IsNaN(p.X-p.X) && !math.IsNaN(p.Y-p.Y)
}

// At is the distance from p to the nearest solid, exact but for geom.RelativeError, at most
// the cap; 0 in and on a solid and off a floor with a closed border. Of things
// equally near, features come before cells and cells before the border. A point
// that is not finite has clearance 0.
func (f *Field) At(p geom.Point) Nearest {
	if !finite(p) || !f.open && !f.bounds.Contains(p) {
		return Nearest{On: p, At: p, Border: true}
	}
	n := Nearest{Um: float64(f.cap)}
	f.nearestFeature(p, &n)
	f.nearestCell(p, &n)
	f.nearestBorder(p, &n)
	return n
}

// bracket bounds the clearance at p, which is on the floor, by that of the nearest
// vertex.
func (f *Field) bracket(p geom.Point) (least, most float64) {
	i := int(min(float64(f.cols), math.Floor((p.X-f.ox)/f.h+0.5)))
	j := int(min(float64(f.rows), math.Floor((p.Y-f.oy)/f.h+0.5)))
	v, d := float64(f.Vertex(i, j)), geom.Dist(p, f.point(i, j))
	return v - d - roundSlack, v + 1 + d + roundSlack
}

// Bracket bounds the clearance at p, which must be on the floor, from below and above: by
// that of the nearest lattice vertex, within half a cell's diagonal either way, at
// the cost of a look-up.
func (f *Field) Bracket(p geom.Point) (least, most float64) {
	least, most = f.bracket(p)
	return max(0, least), min(most, float64(f.cap))
}

// nearestFeature searches rings of buckets about p outwards.
func (f *Field) nearestFeature(p geom.Point, n *Nearest) {
	bx, by, _, _ := f.bucketRange(geom.Rect{Min: p, Max: p})
	if f.bounds.Contains(p) && bx < f.pyramid[0].nx && by < f.pyramid[0].ny && !f.pyramid[0].at(bx, by).near {
		return
	}
	for k := 0; ; k++ {
		x0, y0, x1, y1 := max(0, bx-k), max(0, by-k), min(f.buckets.nx-1, bx+k), min(f.buckets.ny-1, by+k)
		for y := y0; y <= y1; y++ {
			step := 1
			if k > 0 && y != by-k && y != by+k {
				step = 2 * k // inner rows: their two ends only
			}
			for x := bx - k; x <= bx+k; x += step {
				if x < x0 || x > x1 {
					continue
				}
				for _, e := range f.buckets.at(x, y) {
					if k == 0 && e.area && e.s.holds(p) {
						*n = Nearest{On: p, At: p, Feature: e.s.feature}
						return
					}
					if e.s.core.Dist(p)-e.s.grow >= n.Um {
						continue
					}
					for _, i := range e.pieces {
						d, q := geom.SegmentDist(p, e.s.pieces[i].a, e.s.pieces[i].b)
						if d -= e.s.grow; d < n.Um {
							*n = nearFeature(e.s, max(0, d), p, q)
						}
					}
				}
			}
		}
		r := f.bucketRect(x0, y0).Union(f.bucketRect(x1, y1))
		seen := min(p.X-r.Min.X, r.Max.X-p.X, p.Y-r.Min.Y, r.Max.Y-p.Y)
		if seen >= n.Um || x0 == 0 && y0 == 0 && x1 == f.buckets.nx-1 && y1 == f.buckets.ny-1 {
			return
		}
	}
}

// nearFeature is the answer for the place on and the core's nearest place q, whose
// grown outline is d away.
func nearFeature(s *solid, d float64, on, q geom.Point) Nearest {
	n := Nearest{Um: d, On: on, At: on, Feature: s.feature}
	if d > 0 {
		n.At = q
		if s.grow > 0 {
			t := s.grow / (d + s.grow)
			n.At = geom.Point{X: q.X + float64(t*(on.X-q.X)), Y: q.Y + float64(t*(on.Y-q.Y))}
		}
	}
	return n
}

// nearestCell looks for solid cells row by row, outwards from p, next to p's column.
func (f *Field) nearestCell(p geom.Point, n *Nearest) {
	if f.rows == 0 {
		return
	}
	limit := n.Um
	if f.bounds.Contains(p) {
		least, most := f.bracket(p)
		if least >= limit {
			return
		}
		limit = min(limit, most)
	}
	f.cellsAbout(p, limit, n)
}

// cellsAbout lowers n to the solid cells nearer than limit to p.
func (f *Field) cellsAbout(p geom.Point, limit float64, n *Nearest) {
	mid, col := f.cellAt(p.Y-f.oy, 0, f.rows), f.cellAt(p.X-f.ox, -1, f.cols+1)
	first, last := f.cellAt(p.X-limit-roundSlack-f.ox, 0, f.cols), f.cellAt(p.X+limit+roundSlack-f.ox, 0, f.cols)
	row := func(r int) bool {
		low := f.oy + float64(r)*f.h
		if max(0, p.Y-(low+f.h), low-p.Y) >= limit {
			return false
		}
		try := func(c int) {
			at := f.cellRect(c, r).Nearest(p)
			if d := geom.Dist(p, at); d < limit {
				limit = d
				*n = Nearest{Um: d, On: p, At: at, Cell: true}
			}
		}
		right := f.nextSolid(max(0, col), last, r)
		if right != col {
			if left := f.prevSolid(min(col, f.cols)-1, first, r); left >= 0 {
				try(left)
			}
		}
		if right >= 0 {
			try(right)
		}
		return limit > 0
	}
	for r := mid; r >= 0 && row(r); {
		for r--; r >= 0 && r&blockMask == blockMask && f.noCells(first, last, r); {
			r -= blockSize
		}
	}
	for r := mid + 1; r < f.rows && row(r); {
		for r++; r < f.rows && r&blockMask == 0 && f.noCells(first, last, r); {
			r += blockSize
		}
	}
}

// noCells says whether the blocks that hold row r have no solid cell from column first to
// column last.
func (f *Field) noCells(first, last, r int) bool {
	for _, b := range f.bits.rows[r>>blockShift][first>>blockShift : last>>blockShift+1] {
		if b != nil {
			return false
		}
	}
	return true
}

// cellsNear lowers n to the solid cells nearer than limit to the stretch from p to q of
// segment ab, measured from the whole of it. The distance of the cells of one row from a
// convex thing is a convex function of the column: of the solid cells on either side of
// where it is least, only the next one counts.
func (f *Field) cellsNear(a, b, p, q geom.Point, limit float64, n *Nearest) {
	limit = min(limit, n.Um)
	if p.Y > q.Y {
		p, q = q, p
	}
	y0, y1 := p.Y-limit-roundSlack, q.Y+limit+roundSlack
	if f.rows == 0 || y1 < f.oy || y0 > f.bounds.Max.Y {
		return
	}
	x0, x1 := min(p.X, q.X)-limit-roundSlack, max(p.X, q.X)+limit+roundSlack
	r := rower{
		f: f, a: a, b: b, p: p, q: q, limit: limit, n: n,
		c0: f.cellAt(x0-f.ox, 0, f.cols), c1: f.cellAt(x1-f.ox, 0, f.cols),
	}
	mid := f.cellAt((p.Y+q.Y)/2-f.oy, 0, f.rows)
	first, last := f.cellAt(y0-f.oy, 0, f.rows), f.cellAt(y1-f.oy, 0, f.rows)
	mid = max(first, min(mid, last))
	for k := mid; k >= first && r.limit > 0; k-- {
		r.row(k)
	}
	for k := mid + 1; k <= last && r.limit > 0; k++ {
		r.row(k)
	}
}

// rower looks for the solid cells near the stretch from p to q, p.Y <= q.Y, of segment ab.
type rower struct {
	f          *Field
	a, b, p, q geom.Point
	c0, c1     int // columns that cells within limit may be in
	limit      float64
	n          *Nearest
}

func (w *rower) try(c, r int) float64 {
	d, on, at := rectSegment(w.f.cellRect(c, r), w.a, w.b)
	if d < w.limit {
		w.limit = d
		*w.n = Nearest{Um: d, On: on, At: at, Cell: true}
	}
	return d
}

// row looks at the solid cells of one row nearer than limit.
func (w *rower) row(r int) {
	f := w.f
	lowest := f.nextSolid(w.c0, w.c1, r)
	if lowest < 0 {
		return
	}
	lowY := f.oy + float64(r)*f.h
	highY := lowY + f.h
	away := max(0, w.p.Y-highY, lowY-w.q.Y)
	if away >= w.limit {
		return
	}
	// Where in x the part of the stretch is that is nearest to the row's band, and the
	// part that is within limit of it.
	x0, x1 := xWithin(w.p, w.q, lowY, highY)
	c0, c1 := f.cellAt(x0-f.ox, -1, f.cols+1), f.cellAt(x1-f.ox, -1, f.cols+1)
	x0, x1 = xWithin(w.p, w.q, lowY-w.limit, highY+w.limit)
	first := max(lowest, f.cellAt(x0-w.limit-roundSlack-f.ox, 0, f.cols))
	last := f.cellAt(x1+w.limit+roundSlack-f.ox, 0, f.cols)
	// How far along x a cell may be from that part and still count; most that come up here
	// are known by that to be too far.
	reach := math.Sqrt(float64(w.limit*w.limit)-float64(away*away)) + roundSlack
	from, to := x0-reach, x1+reach
	// Rounding of x0 and x1 may shift a cell from one group to the next, no more.
	if c := f.nextSolid(max(lowest, c0), min(c1, f.cols-1), r); c >= 0 {
		if w.try(c, r) > away {
			if c = f.nextSolid(c+1, min(c1, f.cols-1), r); c >= 0 {
				w.try(c, r)
			}
		}
	}
	if c := f.prevSolid(min(c0-1, f.cols-1), first, r); c >= 0 && f.ox+float64(float64(c+1)*f.h) >= from {
		w.try(c, r)
	}
	if c := f.nextSolid(max(lowest, c1+1), last, r); c >= 0 && f.ox+float64(float64(c)*f.h) <= to {
		w.try(c, r)
	}
}

// xWithin is the x extent, rounded, of the part of segment ab, a.Y <= b.Y, that lies in
// the band y0 <= y <= y1; of the end next to the band when none does.
func xWithin(a, b geom.Point, y0, y1 float64) (x0, x1 float64) {
	x0, x1 = a.X, b.X
	switch {
	case a.Y == b.Y:
	case a.Y >= y1:
		x1 = a.X
	case b.Y <= y0:
		x0 = b.X
	default:
		slope := (b.X - a.X) / (b.Y - a.Y)
		if a.Y < y0 {
			x0 = a.X + float64((y0-a.Y)*slope)
		}
		if b.Y > y1 {
			x1 = a.X + float64((y1-a.Y)*slope)
		}
	}
	return min(x0, x1), max(x0, x1)
}

// rectSegment is the distance between a closed rectangle and a closed segment, with a
// nearest place on the segment and on the rectangle.
func rectSegment(r geom.Rect, a, b geom.Point) (d float64, on, at geom.Point) {
	if a == b {
		at = r.Nearest(a)
		return geom.Dist(a, at), a, at
	}
	if geom.RectTouchesSegment(r, a, b) {
		on = a
		if !r.Contains(a) {
			on = b
			if !r.Contains(b) {
				on = entersAt(r, a, b)
			}
		}
		return 0, on, on
	}
	d = math.Inf(1)
	for _, p := range [2]geom.Point{a, b} {
		q := r.Nearest(p)
		if v := geom.Dist(p, q); v < d {
			d, on, at = v, p, q
		}
	}
	for _, c := range r.Corners() {
		if v, q := geom.SegmentDist(c, a, b); v < d {
			d, on, at = v, q, c
		}
	}
	return d, on, at
}

// entersAt is where ab, whose ends are outside r, enters it (Liang & Barsky 1984), rounded.
func entersAt(r geom.Rect, a, b geom.Point) geom.Point {
	t := 0.0
	if dx := b.X - a.X; dx > 0 {
		t = max(t, (r.Min.X-a.X)/dx)
	} else if dx < 0 {
		t = max(t, (r.Max.X-a.X)/dx)
	}
	if dy := b.Y - a.Y; dy > 0 {
		t = max(t, (r.Min.Y-a.Y)/dy)
	} else if dy < 0 {
		t = max(t, (r.Max.Y-a.Y)/dy)
	}
	return r.Nearest(geom.Point{X: a.X + float64(t*(b.X-a.X)), Y: a.Y + float64(t*(b.Y-a.Y))})
}

func (f *Field) nearestBorder(p geom.Point, n *Nearest) {
	if f.open {
		return
	}
	for _, q := range [4]geom.Point{
		{X: f.bounds.Min.X, Y: p.Y}, {X: f.bounds.Max.X, Y: p.Y},
		{X: p.X, Y: f.bounds.Min.Y}, {X: p.X, Y: f.bounds.Max.Y},
	} {
		if d := geom.Dist(p, q); d < n.Um {
			*n = Nearest{Um: d, On: p, At: q, Border: true}
		}
	}
}
