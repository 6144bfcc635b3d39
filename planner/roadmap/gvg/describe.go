package gvg

import (
	"context"
	"fmt"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/voronoi"
)

// Describe is the graph as data, cut off at roadmap.MaxWindow nodes. A closed edge has one
// node, where it begins and ends.
func (g *Graph) Describe() roadmap.Description {
	d, _ := g.describe(context.Background(), g.graph.Field().Bounds())
	return d
}

// DescribeIn describes the edges with a straight piece whose bounds meet area, and their nodes.
// Those in blocks elsewhere are not drawn. The error is ctx's or wraps roadmap.ErrTooLarge.
func (g *Graph) DescribeIn(ctx context.Context, area geom.Rect) (roadmap.Description, error) {
	return g.describe(ctx, area)
}

// Size counts all of the graph.
func (g *Graph) Size() roadmap.Size { return g.size() }

func (g *Graph) count() roadmap.Size {
	s := roadmap.Size{Bytes: g.graph.Bytes()}
	nodes := map[int32]bool{}
	for e := range g.graph.Edges {
		s.Edges++
		nodes[e.From.Node], nodes[e.To.Node] = true, true
	}
	s.Nodes = int64(len(nodes))
	return s
}

// describe gives what it has so far with an error.
func (g *Graph) describe(ctx context.Context, within geom.Rect) (roadmap.Description, error) {
	d := roadmap.Description{Bytes: g.graph.Bytes()}
	capUm := float64(g.graph.Field().Cap())
	down := func(um float64) int64 { return int64(math.Floor(min(um+roundingUm, capUm))) }
	ids := map[int32]int32{}
	node := func(e voronoi.End) (int32, bool) {
		id, ok := ids[e.Node]
		if !ok {
			if id = int32(len(d.Nodes)); id == roadmap.MaxWindow {
				return 0, false
			}
			ids[e.Node] = id
			d.Nodes = append(d.Nodes, roadmap.Node{At: e.At, ClearanceUm: down(e.ClearanceUm)})
		}
		return id, true
	}
	seen := 0
	for e := range g.graph.Edges {
		if seen++; seen%256 == 0 && ctx.Err() != nil {
			return d, context.Cause(ctx)
		}
		if !e.Near(within) {
			continue
		}
		pts, um := e.Points()
		if !meets(pts, within) {
			continue
		}
		most := 0.0
		for _, v := range um {
			most = max(most, v)
		}
		a, okA := node(e.From)
		b, okB := node(e.To)
		if !okA || !okB {
			return d, fmt.Errorf("%w: more than %d nodes in this area", roadmap.ErrTooLarge, roadmap.MaxWindow)
		}
		d.Edges = append(d.Edges, roadmap.Edge{
			A: a, B: b, Points: pts,
			LengthUm: e.LengthUm, ClearanceUm: down(e.SmallestUm), WidestUm: down(most),
		})
	}
	return d, nil
}

func meets(pts []geom.Point, area geom.Rect) bool {
	for i := 1; i < len(pts); i++ {
		if geom.BoundsOf(pts[i-1], pts[i]).Intersects(area) {
			return true
		}
	}
	return false
}

// roundingUm is float64's rounding of clearances, with room to spare.
const roundingUm = 1e-5
