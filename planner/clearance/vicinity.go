package clearance

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// Vicinity is what is solid in a rectangle, gathered once for many questions about places
// close to one another: solid cells as rectangles, equal runs of cells in rows one above the
// other as one, and pieces of vector solids. It answers as the field does, which it asks
// where something beyond the rectangle may count, or two solids are nearest alike. A
// question costs a look at each thing gathered, some nanoseconds for those that are
// too far. It is for one goroutine; its memory is used again by the next Gather.
type Vicinity struct {
	f      *Field
	area   geom.Rect // all that is solid in it is below; empty: the field is asked
	boxes  []cellBox
	pieces []nearPiece
	areas  []*solid // polygons whose inside may come into the area

	rim []rimRun // of the column of blocks at hand
}

// cellBox is a rectangle of solid cells.
type cellBox struct {
	geom.Rect
	c0, c1, r0, r1 int // columns and rows, the last ones included
}

// nearPiece is a piece of a vector solid.
type nearPiece struct {
	*piece
	s    *solid
	core geom.Rect
}

// mostGathered is how many things of a kind a vicinity holds: where there are more, the
// field, which looks at those next to a place only, is as fast.
const mostGathered = 96

// Gather makes v the vicinity of an area, in time proportional to the area's rows and to
// what is solid in it. It says no when that is too much; the field is asked everything then.
func (v *Vicinity) Gather(f *Field, area geom.Rect) bool {
	v.f, v.area = f, area
	clear(v.pieces) // Release does not see what lies past the end of fewer
	clear(v.areas)
	v.boxes, v.pieces, v.areas = v.boxes[:0], v.pieces[:0], v.areas[:0]
	if !v.gatherPieces() || !v.gatherCells() {
		v.area = geom.EmptyRect()
		return false
	}
	return true
}

// Release lets go of the field and all that is its; the memory is kept for the next Gather.
func (v *Vicinity) Release() {
	v.f, v.area = nil, geom.EmptyRect()
	clear(v.pieces)
	clear(v.areas)
}

// Holds says whether the segment ab lies in the area.
func (v *Vicinity) Holds(a, b geom.Point) bool { return v.room(a, b) > 0 }

// room is how far from ab, at least, anything is that was not gathered.
func (v *Vicinity) room(a, b geom.Point) float64 {
	r := &v.area
	return min(min(a.X, b.X)-r.Min.X, r.Max.X-max(a.X, b.X), min(a.Y, b.Y)-r.Min.Y, r.Max.Y-max(a.Y, b.Y))
}

// At is Field.At.
func (v *Vicinity) At(p geom.Point) Nearest {
	if n, ok := v.at(p); ok {
		return n
	}
	return v.f.At(p)
}

func (v *Vicinity) at(p geom.Point) (n Nearest, ok bool) {
	f := v.f
	room := v.room(p, p)
	if !(room > 0) || !f.open && !f.bounds.Contains(p) || v.inside(p) {
		return n, false
	}
	n.Um = float64(f.cap)
	tied := false
	for i := range v.pieces {
		e := &v.pieces[i]
		if max(e.core.Min.X-p.X, p.X-e.core.Max.X, e.core.Min.Y-p.Y, p.Y-e.core.Max.Y)-e.s.grow > n.Um {
			continue
		}
		d, q := geom.SegmentDist(p, e.a, e.b)
		if d -= e.s.grow; d > n.Um || d == n.Um && n.Feature == nil {
			continue
		}
		if d <= 0 {
			return n, false
		}
		near := nearFeature(e.s, d, p, q)
		if tied = d == n.Um && (tied || near != n); !tied {
			n = near
		}
	}
	if tied {
		return n, false
	}
	held := -1 // the box that n is a cell of
	for i := range v.boxes {
		b := &v.boxes[i]
		if max(b.Min.X-p.X, p.X-b.Max.X, b.Min.Y-p.Y, p.Y-b.Max.Y) > n.Um {
			continue
		}
		q := b.Nearest(p)
		if d := geom.Dist(p, q); d < n.Um || d == n.Um && held >= 0 && v.sooner(p, b, &v.boxes[held]) {
			n, held = Nearest{Um: d, On: p, At: q, Cell: true}, i
		}
	}
	f.nearestBorder(p, &n)
	return n, n.Um < room
}

// inside says whether a polygon holds p.
func (v *Vicinity) inside(p geom.Point) bool {
	for _, s := range v.areas {
		if s.holds(p) {
			return true
		}
	}
	return false
}

// sooner says whether a row by row look from p comes to a cell of b before one of o, both as
// far from p: see cellsAbout.
func (v *Vicinity) sooner(p geom.Point, b, o *cellBox) bool {
	mid := v.f.cellAt(p.Y-v.f.oy, 0, v.f.rows)
	turn := func(b *cellBox) int {
		switch {
		case b.r1 < mid:
			return mid - b.r1
		case b.r0 > mid:
			return v.f.rows + b.r0 - mid
		}
		return 0
	}
	if tb, to := turn(b), turn(o); tb != to {
		return tb < to
	}
	return b.c0 < o.c0
}

// sieve is a segment, and what tells quickly how far it is from a box at least.
type sieve struct {
	a, b   geom.Point
	box    geom.Rect
	nx, ny float64 // its unit normal
	off    float64 // of its line from the origin, along the normal
	level  bool    // along a row or column
	skew   bool    // almost: by less than rounding may tell
}

func sieveOf(a, b geom.Point) sieve {
	s := sieve{a: a, b: b, box: geom.BoundsOf(a, b)}
	s.level = a.X == b.X || a.Y == b.Y
	s.skew = !s.level && (s.box.Width() < 1 || s.box.Height() < 1)
	if long := geom.Dist(a, b); long > 0 {
		s.nx, s.ny = (a.Y-b.Y)/long, (b.X-a.X)/long
	}
	s.off = float64(s.nx*a.X) + float64(s.ny*a.Y)
	return s
}

// apart says whether the segment is surely more than um from the box; mostly it says so when
// it is.
func (s *sieve) apart(r *geom.Rect, um float64) bool {
	if max(s.box.Min.X-r.Max.X, r.Min.X-s.box.Max.X, s.box.Min.Y-r.Max.Y, r.Min.Y-s.box.Max.Y) > um {
		return true
	}
	off := float64(s.nx*(r.Min.X+r.Max.X)/2) + float64(s.ny*(r.Min.Y+r.Max.Y)/2) - s.off
	half := float64(math.Abs(s.nx)*(r.Max.X-r.Min.X)/2) + float64(math.Abs(s.ny)*(r.Max.Y-r.Min.Y)/2)
	return math.Abs(off)-half > um+roundSlack
}

// SegmentBetween is Field.SegmentBetween.
func (v *Vicinity) SegmentBetween(a, b geom.Point, na, nb Nearest) Nearest {
	if n, ok := v.segment(a, b, na, nb); ok {
		return n
	}
	return v.f.SegmentBetween(a, b, na, nb)
}

func (v *Vicinity) segment(a, b geom.Point, na, nb Nearest) (n Nearest, ok bool) {
	n = na
	if nb.Um < n.Um {
		n = nb
	}
	if n.Um == 0 || a == b {
		return n, true
	}
	if !(n.Um < v.room(a, b)) {
		return n, false
	}
	s := sieveOf(a, b)
	found, tied := false, false // between the ends
	for i := range v.pieces {
		e := &v.pieces[i]
		if s.apart(&e.core, n.Um+e.s.grow) {
			continue
		}
		d, on, q := geom.SegmentSegmentDist(a, b, e.a, e.b)
		if d -= e.s.grow; d > n.Um || d == n.Um && !found {
			continue
		}
		if d <= 0 {
			return n, false
		}
		near := nearFeature(e.s, d, on, q)
		if tied = d == n.Um && (tied || near != n); !tied {
			n, found = near, true
		}
	}
	for i := range v.boxes {
		r := &v.boxes[i].Rect
		if s.apart(r, n.Um) {
			continue
		}
		if s.skew { // which cell along a side is nearest, rounding alone decides
			return n, false
		}
		d, on, at := rectSegment(*r, a, b)
		if d > n.Um || d == n.Um && !(found && n.Cell) {
			continue
		}
		if d <= 0 {
			return n, false
		}
		near := Nearest{Um: d, On: on, At: at, Cell: true}
		// All cells along a side are as near to a segment that runs beside it.
		if tied = s.level || d == n.Um && (tied || near != n); !tied || d < n.Um {
			n, found = near, true
		}
	}
	return n, !tied
}

// SegmentClear is Field.SegmentClear.
func (v *Vicinity) SegmentClear(a, b geom.Point, um int64) bool {
	f, need := v.f, float64(um)
	if um <= 0 || um > f.cap || !(need < v.room(a, b)) {
		return f.SegmentClear(a, b, um)
	}
	if !f.open && !(f.borderClear(a, um) && f.borderClear(b, um)) || v.inside(a) || v.inside(b) {
		return false
	}
	s := sieveOf(a, b)
	for i := range v.pieces {
		e := &v.pieces[i]
		if !s.apart(&e.core, need+e.s.grow) {
			if d, _, _ := geom.SegmentSegmentDist(a, b, e.a, e.b); d-e.s.grow < need {
				return false
			}
		}
	}
	for i := range v.boxes {
		r := &v.boxes[i].Rect
		if !s.apart(r, need) {
			d, _, _ := rectSegment(*r, a, b)
			if s.skew && math.Abs(d-need) < roundSlack {
				return f.SegmentClear(a, b, um)
			}
			if d < need {
				return false
			}
		}
	}
	return true
}
