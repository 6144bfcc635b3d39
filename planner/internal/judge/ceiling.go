package judge

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
)

// ceiling bounds the clearance over ab from above, by a convex piece of the solid n.
func (j *Judge) ceiling(a, b geom.Point, n clearance.Nearest) float64 {
	switch {
	case n.Feature != nil:
		return shapeCeiling(&n.Feature.Shape, a, b)
	case n.Border:
		return borderCeiling(j.Field.Bounds(), n.At, a, b)
	case n.Cell:
		return j.cellCeiling(a, b, n)
	}
	return math.Inf(1)
}

// shapeCeiling takes an edge of the outline: a convex part of the solid.
func shapeCeiling(s *floor.Shape, a, b geom.Point) float64 {
	best := math.Inf(1)
	for c, d := range s.Edges {
		da, _ := geom.SegmentDist(a, c, d)
		if da >= best {
			continue
		}
		db, _ := geom.SegmentDist(b, c, d)
		best = min(best, max(da, db))
	}
	return best - s.Grow
}

// borderCeiling takes the side that at lies on.
func borderCeiling(r geom.Rect, at, a, b geom.Point) float64 {
	switch {
	case at.X == r.Min.X:
		return max(a.X, b.X) - r.Min.X
	case at.X == r.Max.X:
		return r.Max.X - min(a.X, b.X)
	case at.Y == r.Min.Y:
		return max(a.Y, b.Y) - r.Min.Y
	case at.Y == r.Max.Y:
		return r.Max.Y - min(a.Y, b.Y)
	}
	return math.Inf(1)
}

// cellCeiling takes the run of solid cells, along its row or its column, about the
// cell that n names.
func (j *Judge) cellCeiling(a, b geom.Point, n clearance.Nearest) float64 {
	m := j.Field.Map()
	s := m.Settings()
	res := float64(s.ResolutionUm)
	o := geom.Point{X: float64(s.OriginX), Y: float64(s.OriginY)}
	d := geom.Dist(n.On, n.At)
	if d == 0 {
		return math.Inf(1)
	}
	// A micrometre beyond the outline, away from the place asked about.
	c := int(math.Floor((n.At.X + (n.At.X-n.On.X)/d - o.X) / res))
	r := int(math.Floor((n.At.Y + (n.At.Y-n.On.Y)/d - o.Y) / res))
	if c < 0 || r < 0 || c >= s.Columns || r >= s.Rows || !m.Solid(c, r) {
		return math.Inf(1)
	}
	cell := func(c0, r0, c1, r1 int) float64 {
		q := geom.Rect{
			Min: geom.Point{X: o.X + float64(float64(c0)*res), Y: o.Y + float64(float64(r0)*res)},
			Max: geom.Point{X: o.X + float64(float64(c1+1)*res), Y: o.Y + float64(float64(r1+1)*res)},
		}
		return max(q.Dist(a), q.Dist(b))
	}
	span := func(v, w, origin float64, limit int) (lo, hi int) {
		lo = int(max(0, math.Floor((min(v, w)-origin)/res)))
		hi = int(min(float64(limit-1), math.Floor((max(v, w)-origin)/res)))
		return lo, hi
	}
	lo, hi := span(a.X, b.X, o.X, s.Columns)
	c0, c1 := c, c
	for c0 > lo && m.Solid(c0-1, r) {
		c0--
	}
	for c1 < hi && m.Solid(c1+1, r) {
		c1++
	}
	best := cell(c0, r, c1, r)
	lo, hi = span(a.Y, b.Y, o.Y, s.Rows)
	r0, r1 := r, r
	for r0 > lo && m.Solid(c, r0-1) {
		r0--
	}
	for r1 < hi && m.Solid(c, r1+1) {
		r1++
	}
	return min(best, cell(c, r0, c, r1))
}
