package server

import (
	"context"
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
// them. Each change is looked up in a tree over the route, so that a survey of the
// whole floor costs little more than comparing it. The error is ctx's.
func lastTouched(ctx context.Context, from, to *floor.Map, route []geom.Point, reach float64) (float64, error) {
	diff := floor.Diff(from, to)
	set := to.Settings()
	search := newTouchSearch(route, reach)
	for i, c := range diff.Cells {
		if i%changesPerCheck == 0 && ctx.Err() != nil {
			return 0, ctx.Err()
		}
		search.add(change{bounds: set.CellBounds(c)})
	}
	for i, c := range diff.Features {
		if i%changesPerCheck == 0 && ctx.Err() != nil {
			return 0, ctx.Err()
		}
		if !bearsOnRoutes(c) {
			continue
		}
		for _, t := range []*floor.Feature{c.Before, c.After} {
			if t != nil && t.Kind != floor.Station {
				search.add(change{bounds: t.Shape.Bounds(), shape: &t.Shape})
			}
		}
	}
	return search.end(), nil
}

// changesPerCheck is how many changes are looked up between two looks at the clock.
const changesPerCheck = 64

// change is a part of the floor that differs: a rectangle, or the shape in it.
type change struct {
	bounds geom.Rect
	shape  *floor.Shape
}

// touches says whether the change comes within reach of a segment.
func (c *change) touches(a, b geom.Point, reach float64) bool {
	if geom.RectSegmentDist(c.bounds, a, b) > reach {
		return false
	}
	if c.shape == nil {
		return true
	}
	dist, _ := c.shape.SegmentDist(a, b)
	return dist <= reach
}

// touchSearch finds the last place of a route that any of some changes touches.
type touchSearch struct {
	route []geom.Point
	reach float64
	size  int         // of the leaves, a power of two; leaf i is segment i
	boxes []geom.Rect // a binary tree: 1 is the root, 2n and 2n+1 the children of n

	last  int     // the last segment touched, -1 for none
	piece float64 // how far along it
}

func newTouchSearch(route []geom.Point, reach float64) *touchSearch {
	t := &touchSearch{route: route, reach: reach, size: 1, last: -1}
	n := max(0, len(route)-1)
	for t.size < n {
		t.size *= 2
	}
	t.boxes = make([]geom.Rect, 2*t.size)
	for i := range t.size {
		t.boxes[t.size+i] = geom.EmptyRect()
		if i < n {
			t.boxes[t.size+i] = geom.BoundsOf(route[i], route[i+1])
		}
	}
	for i := t.size - 1; i >= 1; i-- {
		t.boxes[i] = t.boxes[2*i].Union(t.boxes[2*i+1])
	}
	return t
}

// add takes in one change.
func (t *touchSearch) add(c change) {
	near := c.bounds.Grow(t.reach)
	t.visit(1, 0, t.size, near, &c)
}

// visit looks at the segments from lo to before hi, which node holds, from the last
// one down, and leaves out those that can no longer count.
func (t *touchSearch) visit(node, lo, hi int, near geom.Rect, c *change) {
	if hi <= t.last || !near.Intersects(t.boxes[node]) {
		return
	}
	if hi-lo > 1 {
		middle := (lo + hi) / 2
		t.visit(2*node+1, middle, hi, near, c)
		t.visit(2*node, lo, middle, near, c)
		return
	}
	a, b := t.route[lo], t.route[lo+1]
	if !c.touches(a, b, t.reach) {
		return
	}
	if lo > t.last {
		t.last, t.piece = lo, 0
	}
	t.piece = max(t.piece, t.lastPiece(a, b, c))
}

// lastPiece is how far along a touched segment its last touched piece ends.
func (t *touchSearch) lastPiece(a, b geom.Point, c *change) float64 {
	length := geom.Dist(a, b)
	n := max(1, math.Ceil(length/touchStep))
	at := func(k float64) geom.Point {
		return geom.Point{X: a.X + (b.X-a.X)*k/n, Y: a.Y + (b.Y-a.Y)*k/n}
	}
	for k := n; k > 1; k-- {
		end := length * k / n
		if end <= t.piece {
			return t.piece // another change reaches farther
		}
		if c.touches(at(k-1), at(k), t.reach) {
			return end
		}
	}
	return length / n
}

// end is how far along the route the last touched place is, negative for none.
func (t *touchSearch) end() float64 {
	if t.last < 0 {
		return -1
	}
	s := 0.0
	for i := range t.last {
		s += geom.Dist(t.route[i], t.route[i+1])
	}
	return s + t.piece
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
