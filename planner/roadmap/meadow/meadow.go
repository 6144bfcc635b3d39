// Package meadow is the meadow map: the free space at a clearance as few convex regions,
// the relational graph through the middles of the borders that they share (Arkin,
// "Navigational Planning for Mobile Robots", 1990), and path relaxation, which slides the
// places where a way passes borders until it is short (Thorpe, "Path Relaxation: Path
// Planning for a Mobile Robot", AAAI 1984).
//
// Regions come from the vertical trapezoids of package cells as Hertel & Mehlhorn merge
// triangles ("Fast Triangulation of Simple Polygons", FCT 1983): a wall between two
// cells goes when what it parts is convex at both its ends. As walls are upright, one that
// goes leaves the others as needed as they were, so that the regions are the same in any
// order. Of triangles their method leaves at most four times as many regions as need be;
// for trapezoids the paper proves no such bound. Here, every wall that stays is needed
// at an inner corner of the free space, of which each has two walls at most.
//
// Arcs of grown outlines become few chords outside them, so that regions are few: what has
// OutlineErrorUm more than the clearance is in a region, and nothing without it is.
// Sides along an axis are exact. One-way zones are not looked at.
package meadow

import (
	"context"
	"fmt"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/cells"
)

// OutlineErrorUm is how far, in micrometres, grown outlines stand off from the true ones at
// most: 25 mm, at the corners of the chords that take the place of arcs.
const OutlineErrorUm = 25_000

// chordUm leaves OutlineErrorUm room for rounding.
const chordUm = OutlineErrorUm - 10

// The limits of a Roadmap; what would have more is too large.
const (
	MaxCells = cells.MaxCells // trapezoids before they are merged
	MaxEdges = 1 << 22        // pairs of borders of one region, all regions together
)

// Roadmap is the meadow map of one version for one Need.
type Roadmap struct {
	s       *cells.Space
	regions [][]int32 // cells from left to right
	of      []int32   // the region of each cell
	borders []int32   // walls between regions
	at      [][]int32 // borders of each region
	edges   int64
}

var _ roadmap.Windowed = (*Roadmap)(nil)

// Build makes the roadmap of field f's version from scratch. The error is ctx's, wraps
// roadmap.ErrTooLarge or names the part of need that is out of range.
func Build(ctx context.Context, f *clearance.Field, need roadmap.Need) (*Roadmap, error) {
	s, err := cells.Build(ctx, f, need, chordUm)
	if err != nil {
		return nil, err
	}
	return merge(s)
}

// Advance is the roadmap of another version, see roadmap.Roadmap: strips that the change
// touches are cut again, all cells are merged again.
func (r *Roadmap) Advance(ctx context.Context, f *clearance.Field, change floor.Change) (roadmap.Roadmap, error) {
	s, err := r.s.Advance(ctx, f, change)
	if err != nil {
		return nil, err
	}
	n, err := merge(s)
	if err != nil {
		return nil, err
	}
	return n, nil
}

// Need is what the roadmap is for.
func (r *Roadmap) Need() roadmap.Need { return r.s.Need() }

// merge makes regions of the cells of a space, in time linear in them.
func merge(s *cells.Space) (*Roadmap, error) {
	r := &Roadmap{s: s, of: make([]int32, len(s.Cells))}
	for i := range r.of {
		r.of[i] = -1
	}
	next := make([]int32, len(s.Cells))
	begins := make([]bool, len(s.Cells))
	for i := range next {
		next[i], begins[i] = -1, true
	}
	for _, w := range s.Walls {
		if goes(s, &w) {
			next[w.A], begins[w.B] = w.B, false
		}
	}
	for i := range s.Cells {
		if !begins[i] {
			continue
		}
		var region []int32
		for c := int32(i); c >= 0; c = next[c] {
			r.of[c] = int32(len(r.regions))
			region = append(region, c)
		}
		r.regions = append(r.regions, region)
	}
	r.at = make([][]int32, len(r.regions))
	for i, w := range s.Walls {
		a, b := r.of[w.A], r.of[w.B]
		if a == b {
			continue
		}
		d := int32(len(r.borders))
		r.borders = append(r.borders, int32(i))
		r.at[a], r.at[b] = append(r.at[a], d), append(r.at[b], d)
	}
	for _, l := range r.at {
		r.edges += int64(len(l)) * int64(len(l)-1) / 2
	}
	if r.edges > MaxEdges {
		return nil, fmt.Errorf("%w: %d edges between borders, at most %d", roadmap.ErrTooLarge, r.edges, MaxEdges)
	}
	return r, nil
}

// goes says whether a wall goes: it is a whole side of both its cells, and the free space
// is convex at both its ends.
func goes(s *cells.Space, w *cells.Wall) bool {
	a, b := &s.Cells[w.A], &s.Cells[w.B]
	if a.Flat() || b.Flat() || a.X1 != w.X || b.X0 != w.X ||
		a.Lo1 != w.Lo || b.Lo0 != w.Lo || a.Hi1 != w.Hi || b.Hi0 != w.Hi {
		return false
	}
	lower, upper := a.Bends(b)
	return lower > 0 && upper > 0
}

// ring is a region's outline, counter-clockwise; nil when it has no area.
func (r *Roadmap) ring(region int32) []geom.Point {
	list := r.regions[region]
	var low, high []geom.Point
	put := func(x, lo, hi int64) {
		low = append(low, r.s.Point(float64(x), float64(lo)))
		high = append(high, r.s.Point(float64(x), float64(hi)))
	}
	for i, c := range list {
		k := &r.s.Cells[c]
		if k.Flat() {
			return nil
		}
		if i == 0 {
			put(k.X0, k.Lo0, k.Hi0)
		}
		put(k.X1, k.Lo1, k.Hi1)
	}
	for i := len(high) - 1; i >= 0; i-- {
		low = append(low, high[i])
	}
	pts, _ := cells.Polyline(low...)
	if pts[0] == pts[len(pts)-1] {
		pts = pts[:len(pts)-1]
	}
	// A corner in line, of two cells whose sides go straight on, is none.
	out := pts[:0:0]
	for i, p := range pts {
		if geom.Orient(pts[(i+len(pts)-1)%len(pts)], p, pts[(i+1)%len(pts)]) != 0 {
			out = append(out, p)
		}
	}
	return out
}
