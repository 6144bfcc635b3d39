// Package visibility is the visibility graph of the grown solids: for a disc the tangent
// graph (Chew, "Planning the shortest path for a disc in O(n² log n) time", SoCG 1985).
//
// Its nodes are the arcs of the grown outline (package grown): circles about convex corners,
// ends of thick lines and discs, as far as they border free space. Its edges are the common
// tangents of two arcs, and of an arc and an end of the way, that keep the clearance. A
// shortest way runs along tangents and arcs alone. For a point the arcs are corners, and
// this is the plain visibility graph (Lozano-Pérez & Wesley 1979).
//
// # What is exact
//
// Vector solids are taken as they are. The outline of the raster is simplified on the
// outside when the clearance is more than a cell (grown.Simplified): notches up to one cell
// deep are filled, which takes the teeth off walls that slant across the cells, and gaps
// between cells that add no more than growing by a quarter of a cell would, in
// rows and in columns; OutlineErrorUm is one and a half cells. With L*(x) the true optimum at clearance x, L*(r) <= LengthUm <= L*(r + OutlineErrorUm), but for
// ArcErrorUm at each arc and for ends in notches, which may first go up to three cells straight
// out. Whether a tangent is clear is decided on the true solids: a way always keeps r.
//
// # Cost
//
// Building finds the outline only. The tangents of an arc are found when a search first
// comes to it, and are kept for all later ones: n arcs give O(n) tangents to look at,
// each decided by a walk through the field that ends at the first solid in its way. This
// takes the place of the rotational sweep (Lee 1978), which would have to look at all n
// corners' sides as well; a blocked tangent ends within a few metres on any
// floor that has walls. The whole graph takes O(n²) such walks (Describe).
//
// arcs.go has the nodes, tangent.go the edges, search.go the search, way.go makes
// polylines, advance.go keeps what a change cannot touch.
package visibility

import (
	"context"
	"fmt"
	"sync/atomic"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/parallel"
	"example.com/wideberth/planner/internal/rules"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/grown"
)

// MaxArcs bounds the arcs of a graph; beyond it Build refuses.
const MaxArcs = 20_000

// MaxDescribed is how many arcs a graph may have for Describe to give its edges too.
const MaxDescribed = 4_000

// MaxKept is how many tangents a graph remembers, each in either direction; beyond it they
// are found anew for each search.
const MaxKept = 8_000_000

// ArcErrorUm is how far, in micrometres, a way's polyline stands off from the arcs it goes
// along, outward.
const ArcErrorUm = 50.0

// slackUm is how much wider than the clearance, in micrometres, arcs are taken, so that
// the rounding of oblique tangents does not bring them nearer. Tangents along x and y are
// exact, and go without. A passage that only oblique ones lead through must be wider by twice
// that.
const slackUm = 1.0 / 64

// Graph is the visibility graph of one version of a floor. It never changes but for
// tangents found and remembered, and is safe for any number of readers.
type Graph struct {
	need  roadmap.Need
	field *clearance.Field
	rules *rules.Rules
	errUm float64 // of the raster's outline
	arcs  []arc
	links []atomic.Pointer[[]link] // by node: arc and sense
	kept  atomic.Int64             // in all of links
}

var _ roadmap.Preparing = (*Graph)(nil)

// Build makes the graph of f's version. The error is ctx's, or wraps roadmap.ErrTooLarge
// beyond MaxArcs, or says that the clearance is above the floor's cap. Time is that of
// grown.Simplified.
func Build(ctx context.Context, f *clearance.Field, need roadmap.Need) (*Graph, error) {
	if need.ClearanceUm > f.Cap() {
		return nil, fmt.Errorf("visibility: clearance %d µm, at most the floor's cap of %d µm", need.ClearanceUm, f.Cap())
	}
	g := &Graph{need: need, field: f, rules: &rules.Rules{}, errUm: outlineError(f.Map().Settings(), need)}
	if need.Zones {
		g.rules = rules.Of(f.Map()).Closing()
	}
	o, err := grown.Simplified(ctx, f.Map(), need, g.errUm)
	if err != nil {
		return nil, err
	}
	g.arcs = arcsOf(o, f)
	if len(g.arcs) > MaxArcs {
		return nil, fmt.Errorf("visibility: %d corners, at most %d: %w", len(g.arcs), MaxArcs, roadmap.ErrTooLarge)
	}
	g.links = make([]atomic.Pointer[[]link], 2*len(g.arcs))
	return g, nil
}

// outlineRoomUm is by how much, in micrometres, the clearance must be above a cell's side for
// notches of that depth to be filled (grown.Simplified).
const outlineRoomUm = 1000

// outlineError is by how much the raster's outline may be simplified.
func outlineError(s floor.Settings, need roadmap.Need) float64 {
	if need.ClearanceUm <= s.ResolutionUm+outlineRoomUm {
		return 0
	}
	return 1.5 * float64(s.ResolutionUm)
}

// OutlineErrorUm is how much more clearance, in micrometres, a way may need than the true
// solids ask for before the graph is sure to have it.
func (g *Graph) OutlineErrorUm() float64 { return g.errUm }

// Need is what the graph is for.
func (g *Graph) Need() roadmap.Need { return g.need }

// judge decides for one goroutine.
func (g *Graph) judge() *judge.Judge {
	return judge.New(g.field, g.rules, g.need.ClearanceUm, g.need.ZoneUm)
}

// Complete finds all tangents, up to MaxKept, now rather than when they are first asked for. The
// error is ctx's.
func (g *Graph) Complete(ctx context.Context) error {
	return parallel.Each(ctx, 0, len(g.links), func() func(int) {
		j := g.judge()
		return func(k int) { g.linksOf(int32(k), j) }
	})
}

// Prepare finds the tangents that Describe gives, which takes seconds for MaxDescribed
// arcs. The error is ctx's.
func (g *Graph) Prepare(ctx context.Context) error {
	if len(g.arcs) > MaxDescribed {
		return ctx.Err()
	}
	return g.Complete(ctx)
}

// Describe is the graph as data: a node in the middle of each arc, an edge for each
// tangent, from where it leaves one arc to where it meets the other. Edges are left out
// beyond MaxDescribed arcs. An edge's clearance is that required of it: it touches arcs
// at that clearance; where it runs between closed zones it may be more.
func (g *Graph) Describe() roadmap.Description {
	d := roadmap.Description{Bytes: int64(len(g.arcs)) * (arcBytes + 16)}
	for i := range g.arcs {
		a := &g.arcs[i]
		at := a.place(a.long / 2) // outside of the circle by slackUm, so that rounding down gives its radius
		d.Nodes = append(d.Nodes, roadmap.Node{At: at, ClearanceUm: int64(g.field.At(at).Um)})
	}
	d.Notes = append(d.Notes,
		roadmap.Note{Name: "outline error", Value: g.errUm / 1e6, Unit: "m"},
		roadmap.Note{Name: "arc error", Value: ArcErrorUm / 1e6, Unit: "m"})
	if len(g.arcs) > MaxDescribed {
		d.Notes = append(d.Notes, roadmap.Note{Name: "corners up to which edges are listed", Value: MaxDescribed, Unit: "1"})
		return d
	}
	_ = g.Complete(context.Background()) // nothing ends it
	j := g.judge()
	defer j.Release()
	for k := range g.links {
		node := int32(k)
		for _, l := range g.linksOf(node, j) {
			d.Bytes += linkBytes
			if l.to>>1 < node>>1 {
				continue // the same tangent the other way
			}
			t, _ := g.between(node, l.to)
			d.Edges = append(d.Edges, roadmap.Edge{
				A: node >> 1, B: l.to >> 1, Points: twoPoints(t), LengthUm: l.length, ClearanceUm: g.need.ClearanceUm,
			})
		}
	}
	return d
}
