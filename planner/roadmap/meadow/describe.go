package meadow

import (
	"context"
	"fmt"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/cells"
)

// maxWindowEdges is how many edges are described at most; a region of many borders has one for
// each pair of them.
var maxWindowEdges = 1_000_000

// Describe is the relational graph and the regions that have an area, cut off at
// roadmap.MaxWindow nodes or a million edges.
func (r *Roadmap) Describe() roadmap.Description {
	d, _ := r.describe(context.Background(), r.s.Field().Bounds())
	return d
}

// DescribeIn describes the regions whose bounds meet area, their borders and the edges
// between them. The error is ctx's or wraps roadmap.ErrTooLarge.
func (r *Roadmap) DescribeIn(ctx context.Context, area geom.Rect) (roadmap.Description, error) {
	return r.describe(ctx, area)
}

// Size counts all of the roadmap.
func (r *Roadmap) Size() roadmap.Size {
	return roadmap.Size{Nodes: int64(len(r.borders)), Edges: r.edges, Cells: int64(len(r.regions)) - r.flat(), Bytes: r.bytes()}
}

// flat is how many regions have no area; they are cells that were not merged.
func (r *Roadmap) flat() (n int64) {
	for _, l := range r.regions {
		if r.s.Cells[l[0]].Flat() {
			n++
		}
	}
	return n
}

// describe gives what it has so far with an error.
func (r *Roadmap) describe(ctx context.Context, within geom.Rect) (roadmap.Description, error) {
	f := r.s.Field()
	along := func(a, b geom.Point) float64 { return f.Segment(a, b).Um }
	d := roadmap.Description{Bytes: r.bytes(), Notes: r.notes()}
	places := make(map[int32]int32)
	for i, list := range r.at {
		if ctx.Err() != nil {
			return d, context.Cause(ctx)
		}
		if r.bounds(int32(i)).Intersect(within).IsEmpty() {
			continue
		}
		for _, b := range list {
			if _, ok := places[b]; ok {
				continue
			}
			if len(d.Nodes) == roadmap.MaxWindow {
				return d, fmt.Errorf("%w: more than %d nodes in this area", roadmap.ErrTooLarge, roadmap.MaxWindow)
			}
			p := r.s.Mid(r.borders[b])
			places[b] = int32(len(d.Nodes))
			d.Nodes = append(d.Nodes, roadmap.Node{At: p, ClearanceUm: int64(f.At(p).Um)})
		}
		if len(d.Edges)+len(list)*(len(list)-1)/2 > maxWindowEdges {
			return d, fmt.Errorf("%w: more than %d edges in this area", roadmap.ErrTooLarge, maxWindowEdges)
		}
		for k, a := range list {
			if ctx.Err() != nil {
				return d, context.Cause(ctx)
			}
			for _, b := range list[k+1:] {
				a, b := places[a], places[b]
				p, q := d.Nodes[a].At, d.Nodes[b].At
				d.Edges = append(d.Edges, roadmap.Edge{A: a, B: b, Points: []geom.Point{p, q},
					LengthUm: geom.Dist(p, q), ClearanceUm: int64(along(p, q))})
			}
		}
		if ring := r.ring(int32(i)); ring != nil {
			d.Cells = append(d.Cells, roadmap.Cell{Ring: ring, ClearanceUm: cells.Smallest(along, ring)})
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
		{Name: "regions", Value: float64(len(r.regions)), Unit: "1"},
		{Name: "regions without width or height", Value: float64(r.flat()), Unit: "1"},
		{Name: "trapezoids merged", Value: float64(len(r.s.Cells)), Unit: "1"},
		{Name: "shared borders", Value: float64(len(r.borders)), Unit: "1"},
		{Name: "area of regions", Value: area / (geom.UmPerMetre * geom.UmPerMetre), Unit: "m2"},
	}
}

// bounds is the smallest rectangle that holds a region.
func (r *Roadmap) bounds(region int32) geom.Rect {
	b := geom.EmptyRect()
	for _, c := range r.regions[region] {
		b = b.Union(geom.BoundsOf(r.s.Ring(c)...))
	}
	return b
}

// bytes is about how much memory the roadmap takes, without the field.
func (r *Roadmap) bytes() int64 {
	n := r.s.Bytes() + 4*int64(cap(r.of)+cap(r.borders)) + 24*int64(cap(r.regions)+cap(r.at))
	for i, l := range r.regions {
		n += 4 * int64(cap(l)+cap(r.at[i]))
	}
	return n
}
