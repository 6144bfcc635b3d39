package planner

import (
	"context"
	"errors"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/voronoi"
)

const (
	// GraphLimit is how many graphs of Voronoi edges a World keeps: one for each margin
	// that bodies keep, and one without closed zones. A graph takes about 3 MB for a
	// million cells of a cluttered floor, and never more than voronoi.MaxBytes and a fifth.
	GraphLimit = 6
	// RoadsLimit is how many joinings of edges and open floor a World keeps: three for
	// each of a dozen kinds of body (preferred clearance, cap, without zones). They take a
	// megabyte or two each beside what they rest on.
	RoadsLimit = 36
)

// graphKey is what a graph is traced for. Edges are traced up to the floor's cap, whatever
// is preferred: that costs half as much again at most, and one graph serves all bodies of
// a margin. Without zones there is no margin.
type graphKey struct {
	marginUm int64
	zones    bool
}

func (k graphKey) need(capUm int64) voronoi.Need {
	return voronoi.Need{LeastUm: max(1, k.marginUm), MostUm: capUm, Zones: k.zones, MarginUm: k.marginUm}
}

// roadKey is what roads are made for: a preferred clearance over a graph.
type roadKey struct {
	um int64
	graphKey
}

func (k roadKey) mesh() meshKey {
	if !k.zones {
		return meshKey{um: k.um}
	}
	return meshKey{k.um, k.um - k.marginUm, true}
}

// ways are the structures of one version that routes in any direction are found on.
type ways struct {
	meshes *meshes
	graphs *shelf[graphKey, *voronoi.Graph]
	roads  *shelf[roadKey, *voronoi.Roads]
}

func newWays(f *clearance.Field, g *meshes) *ways {
	w := &ways{meshes: g}
	w.graphs = &shelf[graphKey, *voronoi.Graph]{limit: GraphLimit, make: func(ctx context.Context, k graphKey) (*voronoi.Graph, error) {
		return voronoi.Build(ctx, f, k.need(f.Cap()))
	}}
	w.roads = &shelf[roadKey, *voronoi.Roads]{limit: RoadsLimit, make: func(ctx context.Context, k roadKey) (*voronoi.Roads, error) {
		graph, open, err := w.under(ctx, k)
		if err != nil {
			return nil, err
		}
		return voronoi.NewRoads(ctx, graph, open)
	}}
	return w
}

// under is what roads rest on. Asking for it keeps it in use.
func (w *ways) under(ctx context.Context, k roadKey) (*voronoi.Graph, *anyangle.Mesh, error) {
	graph, err := w.graphs.get(ctx, k.graphKey)
	if err != nil {
		return nil, nil, err
	}
	open, err := w.meshes.get(ctx, k.mesh())
	return graph, open, err
}

// carry makes the structures of another version of the same floor, of field f, from those
// that are made and in use. The error is ctx's.
func (w *ways) carry(ctx context.Context, f *clearance.Field, change floor.Change) (*ways, error) {
	g, err := carryMeshes(ctx, w.meshes, f.Map(), change)
	if err != nil {
		return nil, err
	}
	n := newWays(f, g)
	err = w.graphs.carry(ctx, n.graphs, func(ctx context.Context, _ graphKey, g *voronoi.Graph) (*voronoi.Graph, error) {
		return g.Advance(ctx, f, change)
	})
	if err != nil {
		return nil, err
	}
	return n, w.roads.carry(ctx, n.roads, func(ctx context.Context, k roadKey, old *voronoi.Roads) (*voronoi.Roads, error) {
		// Where more kinds of bodies are asked for than there is room, what roads rest on may
		// have gone; making it anew for each version would keep all waiting for the version.
		if !n.graphs.has(k.graphKey) || !n.meshes.has(k.mesh()) {
			return nil, errLeftOut
		}
		graph, open, err := n.under(ctx, k)
		if err != nil {
			return nil, err
		}
		return old.Advance(ctx, graph, open)
	})
}

// unlessUnfit is nil for what says that there can be no such structure, or no search
// over it.
func unlessUnfit(err error) error {
	var mesh *anyangle.NeedError
	var graph *voronoi.NeedError
	var arg *voronoi.RangeError
	if errors.As(err, &mesh) || errors.As(err, &graph) || errors.As(err, &arg) ||
		errors.Is(err, voronoi.ErrMesh) || errors.Is(err, voronoi.ErrTooLarge) || errors.Is(err, anyangle.ErrTooLarge) {
		return nil
	}
	return err
}
