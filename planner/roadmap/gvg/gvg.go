// Package gvg is the generalized Voronoi graph as a roadmap (Choset & Burdick,
// "Sensor-Based Exploration: The Hierarchical Generalized Voronoi Graph", 2000): nodes are the
// places equally far from three or more solids, edges those equally far from two, as
// package voronoi traces them, exactly for raster cells and vector solids alike. An update
// traces the blocks near a change anew, as the waves of Lau, Sprunk & Burgard
// ("Efficient Grid-Based Spatial Representations for Robot Navigation in Dynamic
// Environments", 2013) touch only what a change reaches.
//
// The graph is followed up to the floor's clearance cap. Beyond it nothing tells one
// solid from another, and a way crosses such open floor straight or along its rim.
package gvg

import (
	"context"
	"errors"
	"fmt"
	"sync"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/voronoi"
)

// Graph is the generalized Voronoi graph of one version, for one Need.
type Graph struct {
	need  roadmap.Need
	graph *voronoi.Graph
	open  *anyangle.Mesh // where clearance is the cap
	roads *voronoi.Roads
	size  func() roadmap.Size
}

var _ roadmap.Windowed = (*Graph)(nil)

// Build traces the graph from scratch; see voronoi.Build for what it costs. A clearance
// of 0 is taken as 1 µm: an edge needs room on both sides. The error is ctx's, wraps
// roadmap.ErrTooLarge beyond what packages voronoi and anyangle keep, or names the part of
// need that is out of range.
func Build(ctx context.Context, f *clearance.Field, need roadmap.Need) (*Graph, error) {
	need.ClearanceUm = max(need.ClearanceUm, 1)
	if !need.Zones {
		need.ZoneUm = 0
	}
	margin := int64(0)
	if need.Zones {
		margin = need.ClearanceUm - need.ZoneUm
	}
	g, err := voronoi.Build(ctx, f, voronoi.Need{LeastUm: need.ClearanceUm, MostUm: f.Cap(), Zones: need.Zones, MarginUm: margin})
	if err != nil {
		return nil, tooLarge(err)
	}
	open, err := anyangle.Build(ctx, f.Map(), anyangle.Need{ClearanceUm: f.Cap(), Zones: need.Zones, ZoneUm: f.Cap() - margin})
	if err != nil {
		return nil, tooLarge(err)
	}
	return join(ctx, need, g, open)
}

func join(ctx context.Context, need roadmap.Need, g *voronoi.Graph, open *anyangle.Mesh) (*Graph, error) {
	roads, err := voronoi.NewRoads(ctx, g, open)
	if err != nil {
		return nil, err
	}
	r := &Graph{need: need, graph: g, open: open, roads: roads}
	r.size = sync.OnceValue(r.count)
	return r, nil
}

// tooLarge says of what is too large for the packages below that it is so for a roadmap.
func tooLarge(err error) error {
	if errors.Is(err, voronoi.ErrTooLarge) || errors.Is(err, anyangle.ErrTooLarge) {
		return fmt.Errorf("%w: %w", roadmap.ErrTooLarge, err)
	}
	return err
}

// Need is what the graph is for.
func (g *Graph) Need() roadmap.Need { return g.need }

// Advance is the graph of another version of the same floor.
func (g *Graph) Advance(ctx context.Context, f *clearance.Field, change floor.Change) (roadmap.Roadmap, error) {
	if f.Cap() != g.graph.Field().Cap() {
		return Build(ctx, f, g.need)
	}
	graph, err := g.graph.Advance(ctx, f, change)
	if err != nil {
		return nil, tooLarge(err)
	}
	open, err := g.open.Advance(ctx, f.Map(), change)
	if err != nil {
		return nil, tooLarge(err)
	}
	n, err := join(ctx, g.need, graph, open)
	if err != nil {
		return nil, err
	}
	return n, nil
}

// Search finds the shortest way along the edges, and over the floor where clearance is the
// cap. An end goes straight away from what is nearest to it until it meets an edge. A way
// is drawn by chords, so its length may fall short of the edges' by 3e-4 of it.
func (g *Graph) Search(ctx context.Context, s, t geom.Point) (roadmap.Way, bool, error) {
	p, ok, err := g.roads.Balanced(ctx, s, t, g.need.ClearanceUm, 0)
	if err != nil || !ok {
		return roadmap.Way{}, false, tooLarge(err)
	}
	w := roadmap.Way{Expanded: p.Expanded, Queued: p.Queued}
	for _, l := range p.Legs {
		for _, q := range l.Points {
			if n := len(w.Points); n == 0 || w.Points[n-1] != q {
				w.Points = append(w.Points, q)
			}
		}
	}
	if len(w.Points) == 1 {
		w.Points = append(w.Points, w.Points[0])
	}
	for i := 1; i < len(w.Points); i++ {
		w.LengthUm += geom.Dist(w.Points[i-1], w.Points[i])
	}
	return w, true, nil
}
