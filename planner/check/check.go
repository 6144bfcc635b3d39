// Package check goes over a route once more with code of its own. It shares nothing
// with the search, the clearance field or the geometry they use: it reads the
// version's cells and features themselves and does its own arithmetic, plainly.
// A fault in either is then likely to show as a disagreement between them.
package check

import (
	"fmt"
	"math"
	"math/bits"
	"sync/atomic"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// SlackUm is how far, in micrometres, float64's rounding may put the checker's
// distances off: a nanometre, where the error of a distance of d is about 1e-15·d for
// solids near the route and no more than 1e-4 of this for any floor of a kilometre.
const SlackUm = 1e-3

// BackwardUm is how far, in micrometres, a straight piece may go against a one-way zone:
// what rounding its two ends to whole micrometres may amount to.
const BackwardUm = 2

// Finding is what was found about a route.
type Finding struct {
	Problem    string  // "" when the route keeps what it must
	SmallestUm float64 // smallest distance to a solid, at most the floor's cap
	Piece      int     // the first straight piece, from 0, with that distance
}

// Way is Of(m).Way.
func Way(m *floor.Map, pts []geom.Point, needUm, radiusUm int64) Finding {
	return Of(m).Way(pts, needUm, radiusUm)
}

// Index is what checking looks up about one version: its features by kind, and its solid
// cells, read block by block as they are first looked at. It is safe for any number of
// callers.
type Index struct {
	m                      *floor.Map
	s                      floor.Settings
	cap, h                 float64
	lo, hi                 geom.Point // the floor
	solids, closed, oneWay []outline
	across                 int // blocks in a row of blocks
	blocks                 []atomic.Pointer[block]
}

type block = [floor.BlockSize]uint64

// Of makes an index, in time proportional to the outlines and to the blocks.
func Of(m *floor.Map) *Index {
	s := m.Settings()
	x := &Index{m: m, s: s, cap: float64(s.CapUm), h: float64(s.ResolutionUm)}
	x.lo = geom.Point{X: float64(s.OriginX), Y: float64(s.OriginY)}
	x.hi = geom.Point{X: float64(s.OriginX + int64(s.Columns)*s.ResolutionUm), Y: float64(s.OriginY + int64(s.Rows)*s.ResolutionUm)}
	x.across = (s.Columns + floor.BlockSize - 1) / floor.BlockSize
	x.blocks = make([]atomic.Pointer[block], x.across*((s.Rows+floor.BlockSize-1)/floor.BlockSize))
	for f := range m.Features() {
		switch f.Kind {
		case floor.Solid:
			x.solids = append(x.solids, outlineOf(f))
		case floor.ClosedZone:
			x.closed = append(x.closed, outlineOf(f))
		case floor.OneWayZone:
			x.oneWay = append(x.oneWay, outlineOf(f))
		}
	}
	return x
}

// block is the solid cells of a block.
func (x *Index) block(bx, by int) *block {
	at := &x.blocks[by*x.across+bx]
	b := at.Load()
	if b == nil {
		b = new(block)
		x.m.SolidBits(bx, by, b)
		if *b == empty {
			b = &empty
		}
		at.Store(b)
	}
	return b
}

var empty block // shared by all blocks without a solid cell

// Way checks a polyline of two or more points: every point of it is on the floor, keeps
// needUm from every solid, and radiusUm from every closed zone, and none of its pieces
// goes backward in a one-way zone. Where needUm is 0 solids, and where radiusUm is 0
// closed zones, may be touched, but neither entered nor passed between where two
// touch. Time is proportional to
// the cells within the smallest distance found, 64 at a time, plus the features.
func (x *Index) Way(pts []geom.Point, needUm, radiusUm int64) Finding {
	if len(pts) == 1 {
		pts = append(pts, pts[0])
	}
	w := x.walker(pts)
	w.near = lists.Get()
	defer w.near.release()
	f := Finding{SmallestUm: w.cap}
	for i := 1; i < len(pts); i++ {
		a, b := pts[i-1], pts[i]
		if !w.onFloor(a) || !w.onFloor(b) {
			f.Problem = fmt.Sprintf("piece %d leaves the floor", i-1)
			return f
		}
		if lo, hi := extent(a, b); !w.near.tells(lo, hi, float64(needUm)) {
			w.look(pts[i-1:], float64(needUm), f.SmallestUm)
		}
		d, what := w.distance(a, b, f.SmallestUm, float64(needUm))
		if d < f.SmallestUm {
			f.SmallestUm, f.Piece = d, i-1
		}
		if d < float64(needUm)-SlackUm {
			f.Problem = fmt.Sprintf("piece %d comes within %.3f µm of %s; %d µm are needed", i-1, d, what, needUm)
			return f
		}
		if z := w.enters(a, b, float64(radiusUm)); z != "" {
			f.Problem = fmt.Sprintf("piece %d comes too near to the closed zone %s", i-1, z)
			return f
		}
		if z := w.against(a, b); z != "" {
			f.Problem = fmt.Sprintf("piece %d goes backward in the one-way zone %s", i-1, z)
			return f
		}
	}
	if needUm == 0 || radiusUm == 0 {
		f.Problem = w.point(pts, needUm == 0, radiusUm == 0)
	}
	return f
}

// outline is a feature near the route.
type outline struct {
	f      *floor.Feature
	lo, hi geom.Point // bounds, grown
}

func outlineOf(f *floor.Feature) outline {
	o := outline{f: f}
	o.lo, o.hi = geom.Point{X: math.Inf(1), Y: math.Inf(1)}, geom.Point{X: math.Inf(-1), Y: math.Inf(-1)}
	for _, c := range f.Shape.Chains {
		l, u := extent(c...)
		o.lo = geom.Point{X: min(o.lo.X, l.X-f.Shape.Grow), Y: min(o.lo.Y, l.Y-f.Shape.Grow)}
		o.hi = geom.Point{X: max(o.hi.X, u.X+f.Shape.Grow), Y: max(o.hi.Y, u.Y+f.Shape.Grow)}
	}
	return o
}

// walker checks one route: an index with what is near the route only.
type walker struct {
	*Index
	solids, closed, oneWay []outline
	near                   *about
}

func (x *Index) walker(pts []geom.Point) *walker {
	lo, hi := extent(pts...)
	near := func(all []outline) (out []outline) {
		for i := range all {
			if all[i].apart(lo, hi) < max(x.cap, 10e6) { // no body is wider than 10 m
				out = append(out, all[i])
			}
		}
		return out
	}
	return &walker{Index: x, solids: near(x.solids), closed: near(x.closed), oneWay: near(x.oneWay)}
}

func extent(pts ...geom.Point) (lo, hi geom.Point) {
	lo, hi = geom.Point{X: math.Inf(1), Y: math.Inf(1)}, geom.Point{X: math.Inf(-1), Y: math.Inf(-1)}
	for _, p := range pts {
		lo = geom.Point{X: min(lo.X, p.X), Y: min(lo.Y, p.Y)}
		hi = geom.Point{X: max(hi.X, p.X), Y: max(hi.Y, p.Y)}
	}
	return lo, hi
}

// apart is how far apart, at least, the outline and a box are.
func (o *outline) apart(lo, hi geom.Point) float64 {
	return max(o.lo.X-hi.X, lo.X-o.hi.X, o.lo.Y-hi.Y, lo.Y-o.hi.Y)
}

func (w *walker) onFloor(p geom.Point) bool {
	return p.X >= w.lo.X && p.X <= w.hi.X && p.Y >= w.lo.Y && p.Y <= w.hi.Y
}

// distance is the smallest distance from ab to a solid, where it is below most, else
// most or more; and what it is to. Windows about the piece grow until something is
// found in one, or they are as wide as most.
func (w *walker) distance(a, b geom.Point, most, need float64) (float64, string) {
	best, what := most, "something"
	if !w.s.OpenBorder {
		for _, p := range [2]geom.Point{a, b} {
			if d := min(p.X-w.lo.X, w.hi.X-p.X, p.Y-w.lo.Y, w.hi.Y-p.Y); d < best {
				best, what = d, "the border"
			}
		}
	}
	lo, hi := extent(a, b)
	outline := func(o *outline) {
		if o.apart(lo, hi) >= best {
			return
		}
		if d := shapeDistance(o.f.Shape, a, b); d < best {
			best, what = d, o.f.Name
		}
	}
	reach := need + w.h
	if w.near.tells(lo, hi, need) {
		for _, o := range w.near.solids {
			outline(o)
		}
		limit := min(w.near.reach, best)
		if d := w.listed(a, b, lo, hi, limit); d < limit {
			best, what = d, "a cell"
		}
		if best <= w.near.reach {
			return best, what
		}
		reach = 2 * w.near.reach
	}
	for i := range w.solids {
		outline(&w.solids[i])
	}
	for ; ; reach *= 2 {
		reach = min(reach, best)
		if d := w.cells(a, b, reach); d < reach {
			best, what = d, "a cell"
		}
		if reach >= best {
			return best, what
		}
	}
}

// cells is the smallest distance from ab to a solid cell below reach, else reach.
func (w *walker) cells(a, b geom.Point, reach float64) float64 {
	if b.Y < a.Y {
		a, b = b, a
	}
	best := reach
	first := int(math.Floor((a.Y - reach - w.lo.Y) / w.h))
	last := int(math.Floor((b.Y + reach - w.lo.Y) / w.h))
	slope := 0.0
	if b.Y > a.Y {
		slope = (b.X - a.X) / (b.Y - a.Y)
	}
	lo, hi := extent(a, b)
	left := max(0, int(math.Floor((lo.X-reach-w.lo.X)/w.h)))
	right := min(w.s.Columns-1, int(math.Floor((hi.X+reach-w.lo.X)/w.h)))
	for row := max(0, first); row <= min(w.s.Rows-1, last); row++ {
		if !w.any(row, left, right) {
			continue
		}
		y0 := w.lo.Y + float64(row)*w.h
		y1 := y0 + w.h
		gap := max(y0-b.Y, a.Y-y1, 0)
		if gap >= best {
			continue
		}
		// The part of ab within best of the row, and best to either side of it.
		x0, x1 := min(a.X, b.X), max(a.X, b.X)
		if b.Y > a.Y {
			p, q := a.X+max(0, y0-best-a.Y)*slope, b.X-max(0, b.Y-y1-best)*slope
			x0, x1 = max(x0, min(p, q)), min(x1, max(p, q))
		}
		c0 := max(0, int(math.Floor((x0-best-w.lo.X)/w.h)))
		c1 := min(w.s.Columns-1, int(math.Floor((x1+best-w.lo.X)/w.h)))
		best = w.row(a, b, row, c0, c1, x0, x1, gap, best)
	}
	return best
}

// any says whether a row has a solid cell from column c0 to c1.
func (w *walker) any(row, c0, c1 int) bool {
	const size = floor.BlockSize
	for bx := c0 / size; bx <= c1/size; bx++ {
		if w.block(bx, row/size)[row%size]&columns(bx, c0, c1) != 0 {
			return true
		}
	}
	return false
}

// columns are the bits of a row of block bx from column c0 to c1.
func columns(bx, c0, c1 int) uint64 {
	const size = floor.BlockSize
	mask := uint64(math.MaxUint64)
	if skip := c0 - bx*size; skip > 0 {
		mask = mask >> skip << skip
	}
	if over := bx*size + size - 1 - c1; over > 0 {
		mask = mask << over >> over
	}
	return mask
}

// firstRun is where the first run of set bits is and how long it is, and the bits after it.
func firstRun(word uint64) (from, n int, rest uint64) {
	from = bits.TrailingZeros64(word)
	n = bits.TrailingZeros64(^(word >> from))
	return from, n, word &^ ((math.MaxUint64 >> (floor.BlockSize - n)) << from)
}

// row looks at the solid cells of a row from column c0 to c1. From x0 to x1 is the part of ab
// that is nearer than best to the row; gap is how near any of the cells may be.
func (w *walker) row(a, b geom.Point, row, c0, c1 int, x0, x1, gap, best float64) float64 {
	const size = floor.BlockSize
	y := w.lo.Y + float64(row)*w.h
	for bx := c0 / size; bx <= c1/size; bx++ {
		blk := w.block(bx, row/size)
		if blk == &empty {
			continue
		}
		word := blk[row%size] & columns(bx, c0, c1)
		for word != 0 { // by runs of cells that make one box
			var from, n int
			from, n, word = firstRun(word)
			l := w.lo.X + float64(bx*size+from)*w.h
			r := l + float64(n)*w.h
			if side := max(0, l-x1, x0-r); side*side+gap*gap >= best*best {
				continue
			}
			best = min(best, boxDistance(l, y, r, y+w.h, a, b))
			if gap >= best {
				return best
			}
		}
	}
	return best
}

// enters is the first closed zone nearer to ab than radius.
func (w *walker) enters(a, b geom.Point, radius float64) string {
	lo, hi := extent(a, b)
	for i := range w.closed {
		o := &w.closed[i]
		if o.apart(lo, hi) < radius && shapeDistance(o.f.Shape, a, b) < radius-SlackUm {
			return o.f.Name
		}
	}
	return ""
}

// against is the first one-way zone in which ab goes backward.
func (w *walker) against(a, b geom.Point) string {
	lo, hi := extent(a, b)
	for i := range w.oneWay {
		o := &w.oneWay[i]
		if o.apart(lo, hi) > 0 {
			continue
		}
		ahead := (b.X-a.X)*math.Cos(o.f.Heading) + (b.Y-a.Y)*math.Sin(o.f.Heading)
		if ahead >= -BackwardUm {
			continue
		}
		for _, share := range insideShares(o.f.Shape, a, b) {
			if share*ahead < -BackwardUm-SlackUm {
				return o.f.Name
			}
		}
	}
	return ""
}
