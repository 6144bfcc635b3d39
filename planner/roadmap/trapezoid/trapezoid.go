// Package trapezoid is the roadmap of exact cells: the free space at a clearance, cut into
// vertical trapezoids (Latombe, "Robot Motion Planning", 1991, chapter 5; LaValle,
// "Planning Algorithms", 2006, §6.2.2; de Berg, Cheong, van Kreveld & Overmars,
// "Computational Geometry", chapter 6).
//
// Its graph has a node in the middle of each cell and one in the middle of each wall that two
// cells share, and an edge from each cell's middle to each of its walls'. Cells are convex, so
// a way over the graph leaves out the middles of cells: it goes straight from wall to wall.
// As an alternative, WallFollowing leads through the same cells along the grown
// outlines of solids.
//
// Exact means up to OutlineErrorUm: what is in a cell has the clearance, and what has
// OutlineErrorUm more of it is in a cell. Passages between sides along an axis are lost at no
// width. Ends that lie outside the cells by a little are joined by a straight
// piece. One-way zones are not looked at. See package cells for how cells are made
// and what an Advance redoes; its numbering and joining go over all cells.
package trapezoid

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
// most: at the corners of the chords that take the place of arcs.
const OutlineErrorUm = 1000

// chordUm leaves OutlineErrorUm room for rounding.
const chordUm = 990

// MaxCells is the most cells of a Roadmap; what would have more is too large.
const MaxCells = cells.MaxCells

// Roadmap is the exact cells of one version for one Need.
type Roadmap struct{ s *cells.Space }

var _ roadmap.Windowed = (*Roadmap)(nil)

// Build makes the roadmap of field f's version from scratch. The error is ctx's, wraps
// roadmap.ErrTooLarge or names the part of need that is out of range.
func Build(ctx context.Context, f *clearance.Field, need roadmap.Need) (*Roadmap, error) {
	s, err := cells.Build(ctx, f, need, chordUm)
	if err != nil {
		return nil, err
	}
	return &Roadmap{s}, nil
}

// Advance is the roadmap of another version, see roadmap.Roadmap: strips that the change
// touches are cut again.
func (r *Roadmap) Advance(ctx context.Context, f *clearance.Field, change floor.Change) (roadmap.Roadmap, error) {
	s, err := r.s.Advance(ctx, f, change)
	if err != nil {
		return nil, err
	}
	return &Roadmap{s}, nil
}

// Need is what the roadmap is for.
func (r *Roadmap) Need() roadmap.Need { return r.s.Need() }

// star is the graph of the middles of cells and walls.
type star struct{ *cells.Space }

func (g star) Doors() int { return len(g.Walls) }

func (g star) Door(d int32) (at geom.Point, a, b int32) { return g.Mid(d), g.Walls[d].A, g.Walls[d].B }

func (g star) DoorsOf(c int32) []int32 { return g.WallsOf(c) }

// Cost goes by the cell's middle, as the graph's edges do.
func (g star) Cost(from geom.Point, c int32, to geom.Point) float64 {
	m := g.Centroid(c)
	return geom.Dist(from, m) + geom.Dist(m, to)
}

// Search finds the cells whose way over the graph is shortest, by A*, and goes from the middle
// of wall to wall. Time is about proportional to the walls of the cells visited, times the
// walls of one cell.
func (r *Roadmap) Search(ctx context.Context, s, t geom.Point) (w roadmap.Way, ok bool, err error) {
	from, okFrom := r.s.Enter(s)
	to, okTo := r.s.Enter(t)
	if !okFrom || !okTo {
		return w, false, ctx.Err()
	}
	p, ok, err := cells.Find(ctx, star{r.s}, from, to)
	w.Expanded, w.Queued = p.Expanded, p.Queued
	if !ok || err != nil {
		return w, false, err
	}
	places := []geom.Point{s, from.At}
	for _, d := range p.Doors {
		places = append(places, r.s.Mid(d))
	}
	w.Points, w.LengthUm = cells.Polyline(append(places, to.At, t)...)
	return w, true, nil
}

// Describe is the graph and the cells that have an area, cut off at roadmap.MaxWindow nodes.
func (r *Roadmap) Describe() roadmap.Description {
	d, _ := r.describe(context.Background(), r.s.Field().Bounds())
	return d
}

// DescribeIn describes the cells whose bounds meet area, their nodes and edges. The error is
// ctx's or wraps roadmap.ErrTooLarge.
func (r *Roadmap) DescribeIn(ctx context.Context, area geom.Rect) (roadmap.Description, error) {
	return r.describe(ctx, area)
}

// Size counts all of the roadmap.
func (r *Roadmap) Size() roadmap.Size {
	n, w := int64(len(r.s.Cells)), int64(len(r.s.Walls))
	return roadmap.Size{Nodes: n + w, Edges: 2 * w, Cells: n - r.flat(), Bytes: r.s.Bytes()}
}

func (r *Roadmap) flat() (n int64) {
	for i := range r.s.Cells {
		if r.s.Cells[i].Flat() {
			n++
		}
	}
	return n
}

// describe gives what it has so far with an error.
func (r *Roadmap) describe(ctx context.Context, within geom.Rect) (d roadmap.Description, err error) {
	f := r.s.Field()
	d = roadmap.Description{Bytes: r.s.Bytes(), Notes: r.notes()}
	along := func(a, b geom.Point) float64 { return f.Segment(a, b).Um }
	node := func(p geom.Point) int32 {
		if len(d.Nodes) == roadmap.MaxWindow {
			err = fmt.Errorf("%w: more than %d nodes in this area", roadmap.ErrTooLarge, roadmap.MaxWindow)
			return -1
		}
		d.Nodes = append(d.Nodes, roadmap.Node{At: p, ClearanceUm: int64(f.At(p).Um)})
		return int32(len(d.Nodes) - 1)
	}
	places := make(map[int32]int32)
	for i := range r.s.Cells {
		if i%256 == 0 && ctx.Err() != nil {
			return d, ctx.Err()
		}
		k := int32(i)
		ring := r.s.Ring(k)
		if geom.BoundsOf(ring...).Intersect(within).IsEmpty() {
			continue
		}
		if places[k] = node(r.s.Centroid(k)); err != nil {
			return d, err
		}
		if !r.s.Cells[i].Flat() {
			d.Cells = append(d.Cells, roadmap.Cell{Ring: ring, ClearanceUm: cells.Smallest(along, ring)})
		}
	}
	for i, w := range r.s.Walls {
		if i%256 == 0 && ctx.Err() != nil {
			return d, ctx.Err()
		}
		a, okA := places[w.A]
		b, okB := places[w.B]
		if !okA && !okB {
			continue
		}
		mid := r.s.Mid(int32(i))
		n := node(mid)
		if err != nil {
			return d, err
		}
		for _, c := range [2]struct {
			at int32
			ok bool
		}{{a, okA}, {b, okB}} {
			if !c.ok {
				continue
			}
			m := d.Nodes[c.at].At
			d.Edges = append(d.Edges, roadmap.Edge{A: c.at, B: n, Points: []geom.Point{m, mid},
				LengthUm: geom.Dist(m, mid), ClearanceUm: int64(along(m, mid))})
		}
	}
	return d, nil
}

func (r *Roadmap) notes() []roadmap.Note {
	area := 0.0
	for i := range r.s.Cells {
		area += r.s.Cells[i].Area()
	}
	return []roadmap.Note{
		{Name: "outline error", Value: geom.Metres(OutlineErrorUm), Unit: "m"},
		{Name: "cells", Value: float64(len(r.s.Cells)), Unit: "1"},
		{Name: "cells without width or height", Value: float64(r.flat()), Unit: "1"},
		{Name: "shared walls", Value: float64(len(r.s.Walls)), Unit: "1"},
		{Name: "area of cells", Value: area / (geom.UmPerMetre * geom.UmPerMetre), Unit: "m2"},
		{Name: "strips swept", Value: float64(r.s.Strips()), Unit: "1"},
	}
}
