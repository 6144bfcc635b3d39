package server

import (
	"math"
	"reflect"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// touchStep is the length of the pieces by which a touched stretch of a route is told
// from an untouched one.
const touchStep = geom.UmPerMetre

// lastTouched is how far along a route, in micrometres, the changes from one
// version to another come within reach of it; negative when they do not. It never
// misses a change: changed cells count by the rectangle of their block that holds
// them.
func lastTouched(from, to *floor.Map, route []geom.Point, reach float64) float64 {
	change := floor.Diff(from, to)
	set := to.Settings()
	var near []func(a, b geom.Point) bool
	for _, c := range change.Cells {
		r := set.CellBounds(c)
		near = append(near, func(a, b geom.Point) bool { return geom.RectSegmentDist(r, a, b) <= reach })
	}
	for _, c := range change.Features {
		if !bearsOnRoutes(c) {
			continue
		}
		for _, t := range []*floor.Feature{c.Before, c.After} {
			if t == nil || t.Kind == floor.Station {
				continue
			}
			bounds := t.Shape.Bounds()
			near = append(near, func(a, b geom.Point) bool {
				if geom.RectSegmentDist(bounds, a, b) > reach {
					return false
				}
				dist, _ := t.Shape.SegmentDist(a, b)
				return dist <= reach
			})
		}
	}
	touches := func(a, b geom.Point) bool {
		for _, n := range near {
			if n(a, b) {
				return true
			}
		}
		return false
	}
	last, s := -1.0, 0.0
	for i := 1; i < len(route) && len(near) > 0; i++ {
		a, b := route[i-1], route[i]
		length := geom.Dist(a, b)
		if touches(a, b) {
			last = s + lastTouchedPiece(a, b, length, touches)
		}
		s += length
	}
	return last
}

// lastTouchedPiece is how far along a touched segment its last touched piece ends.
func lastTouchedPiece(a, b geom.Point, length float64, touches func(a, b geom.Point) bool) float64 {
	n := max(1, math.Ceil(length/touchStep))
	at := func(k float64) geom.Point {
		return geom.Point{X: a.X + (b.X-a.X)*k/n, Y: a.Y + (b.Y-a.Y)*k/n}
	}
	for k := n; k > 1; k-- {
		if touches(at(k-1), at(k)) {
			return length * k / n
		}
	}
	return length / n
}

// bearsOnRoutes says whether a changed feature can change a route: a new note does
// not, nor does a station.
func bearsOnRoutes(c floor.FeatureChange) bool {
	if c.Before == nil || c.After == nil {
		return true
	}
	a, b := *c.Before, *c.After
	return a.Kind != b.Kind || a.SpeedMps != b.SpeedMps || a.Heading != b.Heading || !reflect.DeepEqual(a.Shape, b.Shape)
}

// along is how far along a route the place on it nearest to p lies, in micrometres;
// of places equally near the first.
func along(route []geom.Point, p geom.Point) float64 {
	best, at, s := math.Inf(1), 0.0, 0.0
	for i := 1; i < len(route); i++ {
		a, b := route[i-1], route[i]
		if d, foot := geom.SegmentDist(p, a, b); d < best {
			best, at = d, s+geom.Dist(a, foot)
		}
		s += geom.Dist(a, b)
	}
	return at
}
