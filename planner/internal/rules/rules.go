// Package rules holds the zones of one version and answers what they forbid: who
// may not enter, which way not to go, how fast to be.
//
// Zones are few (tens, seldom hundreds), so every question is a scan over their
// bounds; the outline itself is looked at only where the bounds meet the question.
package rules

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/touch"
)

// BackwardSlackUm is how far, in micrometres, one straight piece may move against a
// one-way zone's heading before it counts as backward. It covers the rounding of
// the piece's two ends to whole micrometres (at most 0.71 each) and nothing else.
const BackwardSlackUm = 2

// StepSlackUm is the same for the steps of a roadmap, which are not rounded one by one:
// float64's rounding alone, so that a run of ten thousand steps has not gone
// backward by BackwardSlackUm either.
const StepSlackUm = 1e-5

type zone struct {
	f      *floor.Feature
	bounds geom.Rect
	hx, hy float64 // heading of a one-way zone
}

// Rules are the zones of one version, by kind and name. Immutable; safe for any
// number of readers.
type Rules struct{ closed, oneWay, speed []zone }

// Of collects a version's zones. Time is linear in the number of features.
func Of(m *floor.Map) *Rules {
	r := &Rules{}
	for f := range m.Features() {
		z := zone{f: f, bounds: geom.EmptyRect()}
		switch f.Kind {
		case floor.ClosedZone, floor.OneWayZone, floor.SpeedLimitZone:
			z.bounds = f.Shape.Bounds()
		}
		switch f.Kind {
		case floor.ClosedZone:
			r.closed = append(r.closed, z)
		case floor.OneWayZone:
			z.hx, z.hy = math.Cos(f.Heading), math.Sin(f.Heading)
			r.oneWay = append(r.oneWay, z)
		case floor.SpeedLimitZone:
			r.speed = append(r.speed, z)
		}
	}
	return r
}

// Closing are the closed zones alone.
func (r *Rules) Closing() *Rules { return &Rules{closed: r.closed} }

// HasClosed says whether there is a closed zone.
func (r *Rules) HasClosed() bool { return len(r.closed) > 0 }

// HasOneWay says whether there is a one-way zone.
func (r *Rules) HasOneWay() bool { return len(r.oneWay) > 0 }

// Entered is the first closed zone, by name, that the segment ab comes nearer to
// than radius, or, with radius 0, into the inside of; nil when there is none. a may
// equal b.
func (r *Rules) Entered(a, b geom.Point, radius float64) *floor.Feature {
	box := geom.BoundsOf(a, b).Grow(radius)
	for i := range r.closed {
		z := &r.closed[i]
		if !z.bounds.Intersects(box) {
			continue
		}
		if radius > 0 {
			if d, _ := z.f.Shape.SegmentDist(a, b); d < radius {
				return z.f
			}
			continue
		}
		s := touch.Solids{Bounds: box, Shapes: []*floor.Shape{&z.f.Shape}}
		if !s.Clear(a, b) {
			return z.f
		}
	}
	return nil
}

// AppendClosed appends the outlines of the closed zones that the segment ab may touch.
func (r *Rules) AppendClosed(dst []*floor.Shape, a, b geom.Point) []*floor.Shape {
	box := geom.BoundsOf(a, b)
	for i := range r.closed {
		if z := &r.closed[i]; z.bounds.Intersects(box) {
			dst = append(dst, &z.f.Shape)
		}
	}
	return dst
}

// Against is the first one-way zone, by name, inside which the segment from a to b
// moves backward by more than slack micrometres, nil when there is none. The border
// counts as inside.
func (r *Rules) Against(a, b geom.Point, slack float64) *floor.Feature {
	box := geom.BoundsOf(a, b)
	for i := range r.oneWay {
		z := &r.oneWay[i]
		if !z.bounds.Intersects(box) {
			continue
		}
		ahead := float64((b.X-a.X)*z.hx) + float64((b.Y-a.Y)*z.hy)
		if ahead >= -slack {
			continue
		}
		for _, s := range geom.ClipSegment(z.f.Shape.Chains, a, b) {
			if float64((s.To-s.From)*ahead) < -slack {
				return z.f
			}
		}
	}
	return nil
}

// OneWayNear says whether a one-way zone's bounds meet the rectangle.
func (r *Rules) OneWayNear(box geom.Rect) bool {
	for i := range r.oneWay {
		if r.oneWay[i].bounds.Intersects(box) {
			return true
		}
	}
	return false
}

// SpeedLimit is the lowest limit, m/s, of the speed limit zones that hold more than
// a point of the segment ab, and of those that hold a when a equals b; +Inf when
// there is none.
func (r *Rules) SpeedLimit(a, b geom.Point) float64 {
	box := geom.BoundsOf(a, b)
	limit := math.Inf(1)
	long := geom.Dist(a, b)
	for i := range r.speed {
		z := &r.speed[i]
		if z.f.SpeedMps >= limit || !z.bounds.Intersects(box) {
			continue
		}
		for _, s := range geom.ClipSegment(z.f.Shape.Chains, a, b) {
			if a == b || float64((s.To-s.From)*long) > BackwardSlackUm {
				limit = z.f.SpeedMps
				break
			}
		}
	}
	return limit
}

// SpeedCuts appends to cuts where, as shares of the way from a to b, the segment
// enters or leaves a speed limit zone.
func (r *Rules) SpeedCuts(cuts []float64, a, b geom.Point) []float64 {
	box := geom.BoundsOf(a, b)
	for i := range r.speed {
		z := &r.speed[i]
		if !z.bounds.Intersects(box) {
			continue
		}
		for _, s := range geom.ClipSegment(z.f.Shape.Chains, a, b) {
			if s.From != s.To {
				cuts = append(cuts, s.From, s.To)
			}
		}
	}
	return cuts
}

// Closed yields the closed zones' bounds and outlines in order of name.
func (r *Rules) Closed(yield func(geom.Rect, floor.Shape) bool) {
	for i := range r.closed {
		if !yield(r.closed[i].bounds, r.closed[i].f.Shape) {
			return
		}
	}
}

// Shut says whether p is less than depth from a closed zone, distance counting
// negative inside: then so is, less far, everything about p.
func (r *Rules) Shut(p geom.Point, depth float64) bool {
	for i := range r.closed {
		z := &r.closed[i]
		if z.bounds.Dist(p) >= depth && !z.bounds.Contains(p) {
			continue
		}
		d, _ := z.f.Shape.Dist(p)
		if d == 0 {
			d, _ = geom.BorderDist(z.f.Shape.Chains, p)
			d = -d
		}
		if d < depth {
			return true
		}
	}
	return false
}
