package clearance

import (
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Touching collects what may touch the closed segment ab: solid cells that do, those next to
// one another in a row as one box, appended to cells; and the solid features whose outlines come within roundSlack of it or
// may hold it. Time is linear in the cells and pieces along ab.
func (f *Field) Touching(cells []geom.Rect, a, b geom.Point) ([]geom.Rect, []*floor.Feature) {
	var features []*floor.Feature
	if !finite(a) || !finite(b) {
		return cells, nil
	}
	lo, hi := a, b
	if lo.Y > hi.Y {
		lo, hi = hi, lo
	}
	for r := max(0, f.cellAt(lo.Y-f.oy, 0, f.rows)-1); r <= min(f.rows-1, f.cellAt(hi.Y-f.oy, 0, f.rows)+1); r++ {
		y := f.oy + float64(r)*f.h
		x0, x1 := xWithin(lo, hi, y-roundSlack, y+f.h+roundSlack)
		last := min(f.cols-1, f.cellAt(x1-f.ox, 0, f.cols)+1)
		for c := f.nextSolid(max(0, f.cellAt(x0-f.ox, 0, f.cols)-1), last, r); c >= 0; {
			q := f.cellRect(c, r)
			next := f.nextSolid(c+1, last, r)
			for ; next == c+1; next = f.nextSolid(c+1, last, r) {
				c = next
			}
			q.Max.X = f.cellRect(c, r).Max.X
			if geom.RectTouchesSegment(q, a, b) {
				cells = append(cells, q)
			}
			c = next
		}
	}
	add := func(ft *floor.Feature) {
		if !slices.Contains(features, ft) {
			features = append(features, ft)
		}
	}
	f.pieces(a, b, []stretch{{0, 1}}, roundSlack, func(s *solid, p *piece) bool {
		if d, _, _ := geom.SegmentSegmentDist(a, b, p.a, p.b); d-s.grow <= roundSlack {
			add(s.feature)
		}
		return true
	})
	for _, p := range [2]geom.Point{a, b} {
		x, y, _, _ := f.bucketRange(geom.Rect{Min: p, Max: p})
		for _, e := range f.buckets.at(x, y) {
			if e.area && e.s.holds(p) {
				add(e.s.feature)
			}
		}
	}
	return cells, features
}
