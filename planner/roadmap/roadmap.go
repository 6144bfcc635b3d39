// Package roadmap is the one interface behind which the classical representations of
// free space stand: grids, quadtree, visibility graph, meadow map, generalized Voronoi graph
// and exact cells. An engineer asks for one by name, sees it over the floor, and
// compares it with the others on the same floor, at the same clearance.
//
// Each implementation is a package below this one. All are pure: one version of a floor
// and a Need in, an immutable Roadmap out, safe for any number of readers.
package roadmap

import (
	"context"
	"errors"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
)

// Need is what a roadmap is for: the clearance that every point of a way over it has,
// and the radius that is kept from closed zones, both whole micrometres.
type Need struct {
	ClearanceUm int64
	Zones       bool
	ZoneUm      int64
}

// Way is a way from start to goal over a roadmap, as straight pieces that keep the Need's
// clearance, its two ends included. LengthUm is the polyline's; ExactUm, where the roadmap
// has arcs that the polyline keeps outside of, the length along these, else 0.
type Way struct {
	Points           []geom.Point
	LengthUm         float64
	ExactUm          float64
	Expanded, Queued int64
}

// ErrTooLarge is wrapped by the error of a Build or Advance that would make more
// nodes or edges than the implementation's stated limit.
var ErrTooLarge = errors.New("roadmap: too large for this floor")

// Roadmap is a representation of the free space of one version of a floor for one Need.
type Roadmap interface {
	// Need is what it is for.
	Need() Need
	// Advance is the roadmap of another version of the same floor, f its field, change
	// what differs. It equals what Build makes from scratch. The error is ctx's or
	// wraps ErrTooLarge.
	Advance(ctx context.Context, f *clearance.Field, change floor.Change) (Roadmap, error)
	// Search finds the roadmap's best way from s to t; ok is false when it has none, which
	// for a roadmap with a bias does not mean that there is none. The error is ctx's.
	Search(ctx context.Context, s, t geom.Point) (w Way, ok bool, err error)
	// Describe is the roadmap as data, in an order that depends on the version alone.
	Describe() Description
}

// Size is how large a roadmap is.
type Size struct {
	Nodes, Edges, Cells int64
	Bytes               int64
}

// Windowed is a Roadmap that may be too large to describe at once. Its Describe is
// DescribeIn of the whole floor, cut off at MaxWindow nodes.
type Windowed interface {
	Roadmap
	// DescribeIn describes the nodes and cells that meet area, and the edges between
	// them; ErrTooLarge is wrapped when there are more than MaxWindow nodes.
	DescribeIn(ctx context.Context, area geom.Rect) (Description, error)
	// Size counts all of it.
	Size() Size
}

// Preparing is a Roadmap whose Describe would take long were it not prepared for.
type Preparing interface {
	Roadmap
	// Prepare does ahead what Describe needs. The error is ctx's.
	Prepare(ctx context.Context) error
}

// MaxWindow is how many nodes a Windowed roadmap describes at most.
const MaxWindow = 200_000

// Size counts what a description holds.
func (d *Description) Size() Size {
	return Size{int64(len(d.Nodes)), int64(len(d.Edges)), int64(len(d.Cells)), d.Bytes}
}

// Description is a roadmap as data. Clearances are to the nearest solid, rounded down,
// at most the floor's cap.
type Description struct {
	Nodes []Node
	Edges []Edge
	Cells []Cell
	// Bytes is about how much memory the roadmap takes.
	Bytes int64
	// Notes say what an engineer should know of this instance, such as the error of a
	// simplified outline: a name, a figure and its unit.
	Notes []Note
}

// Node is a place where edges meet.
type Node struct {
	At          geom.Point
	ClearanceUm int64
}

// Edge joins two nodes along a polyline, ends included.
type Edge struct {
	A, B        int32 // indices of nodes
	Points      []geom.Point
	LengthUm    float64
	ClearanceUm int64 // smallest along it
	WidestUm    int64 // largest along it; 0 when not known
}

// Cell is a convex region, counter-clockwise.
type Cell struct {
	Ring        []geom.Point
	ClearanceUm int64 // smallest in it
}

// Note is a figure about a roadmap.
type Note struct {
	Name  string
	Value float64
	Unit  string // "m", "m2", or "1" for a number
}
