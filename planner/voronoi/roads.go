package voronoi

import (
	"context"
	"errors"
	"fmt"
	"sync"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/internal/parallel"
)

// Roads joins a graph's edges with the open floor of one preferred clearance p: the
// parts of edges outside Open = {clearance >= p} are tight, and their ends in it
// are portals. Open is taken as a mesh has it, which may fall anyangle.DeltaUm short; an
// edge is followed to where the mesh takes it up. Roads serve every required clearance up
// to p. They never change and are safe for any number of users.
type Roads struct {
	g     *Graph
	open  *anyangle.Mesh
	p     float64
	paved []*paved // by block
	first []int32  // the first road of each block
	nodes []place
	roads []road
	at    []int32 // roads of node n: ends[at[n]:at[n+1]]
	ends  []int32

	portals [][]int32 // by part of Open: nodes in rising order
	parts   []int32   // of the mesh, to parts with portals; -1 for the others
	forest  func() *forest
	nets    struct {
		mu   sync.Mutex
		list []keyed
	}
}

// place is a node of the roads.
type place struct {
	at   geom.Point
	um   float64
	part int32 // of Open that it is a portal of, -1 for none
}

// road is a tight piece of an arc, clearance rising from node a to node b.
type road struct {
	a, b   int32
	step   step
	s0, s1 float64
	um0    float64
	length float64
}

// ErrMesh says that a mesh does not fit a graph.
var ErrMesh = errors.New("voronoi: the mesh does not fit the graph")

// NewRoads joins the edges of g with the open floor. open must be a mesh of the same
// map for the preferred clearance p, 1 <= p <= Need.MostUm, and for closed zones, where
// the graph has them, p less Need.MarginUm. The error is ctx's or wraps ErrMesh.
// Time is proportional to the number of arcs, those about p taking most of it.
func NewRoads(ctx context.Context, g *Graph, open *anyangle.Mesh) (*Roads, error) {
	return newRoads(ctx, g, open, nil)
}

// Advance makes the roads of another version of the same floor, g and open being that
// version's, for the same p. Blocks that g and open share with this version's, as their
// own Advance leaves them, are not paved again. The result answers as NewRoads' does,
// to the last bit. Beside the blocks that changed, time is some tens of nanoseconds an arc, for
// numbering. The error is ctx's or wraps ErrMesh.
func (w *Roads) Advance(ctx context.Context, g *Graph, open *anyangle.Mesh) (*Roads, error) {
	if g.frame != w.g.frame || open.Need() != w.open.Need() {
		return NewRoads(ctx, g, open)
	}
	return newRoads(ctx, g, open, w)
}

func newRoads(ctx context.Context, g *Graph, open *anyangle.Mesh, old *Roads) (*Roads, error) {
	n := open.Need()
	switch {
	case open.Map() != g.f.Map():
		return nil, fmt.Errorf("%w: it is of another version", ErrMesh)
	case n.ClearanceUm < 1 || n.ClearanceUm > g.need.MostUm:
		return nil, fmt.Errorf("%w: clearance %d µm, wanted 1 to %d µm", ErrMesh, n.ClearanceUm, g.need.MostUm)
	case n.Zones != g.need.Zones || n.Zones && n.ZoneUm != n.ClearanceUm-g.need.MarginUm:
		return nil, fmt.Errorf("%w: zones %v at %d µm, wanted %v at %d µm", ErrMesh, n.Zones, n.ZoneUm, g.need.Zones, n.ClearanceUm-g.need.MarginUm)
	}
	w := &Roads{g: g, open: open, p: float64(n.ClearanceUm)}
	w.paved = make([]*paved, len(g.blocks))
	list := make([]int, 0, len(g.blocks))
	for i := range g.blocks {
		if old != nil && old.holds(i, w) {
			w.paved[i] = old.paved[i]
		} else {
			list = append(list, i)
		}
	}
	err := parallel.Each(ctx, 0, len(list), func() func(int) {
		v := &paver{g: g, open: open, p: w.p}
		return func(k int) { w.paved[list[k]] = v.pave(int32(list[k])) }
	})
	if err != nil {
		return nil, err
	}
	w.number()
	w.index()
	w.forest = sync.OnceValue(w.grow)
	return w, nil
}

// holds says whether what w has in block i is what n will have.
func (w *Roads) holds(i int, n *Roads) bool {
	if w.g.blocks[i] != n.g.blocks[i] || w.paved[i].afar {
		return false
	}
	b, o := w.g.box(i), w.g.corner(i)
	at := func(x, y float64) geom.Point { return geom.Point{X: w.g.o.X + o.x + x, Y: w.g.o.Y + o.y + y} }
	return n.open.SharesAround(w.open, geom.Rect{Min: at(b.x0-1, b.y0-1), Max: at(b.x1+1, b.y1+1)})
}

// Graph is the graph that the roads are of.
func (w *Roads) Graph() *Graph { return w.g }

// Open is the mesh of the open floor.
func (w *Roads) Open() *anyangle.Mesh { return w.open }

// Portals is how many places lead from edges into the open floor.
func (w *Roads) Portals() int {
	n := 0
	for _, v := range w.portals {
		n += len(v)
	}
	return n
}

// number gives the stops of all blocks their numbers, those that are one node the same,
// and finds the portals and which part of Open each leads to.
func (w *Roads) number() {
	g := w.g
	ids := make([]int32, len(g.lead))
	for i := range ids {
		ids[i] = -1
	}
	w.parts = make([]int32, w.open.Parts())
	for i := range w.parts {
		w.parts[i] = -1
	}
	roads, stops := 0, 0
	w.first = make([]int32, len(g.blocks)+1)
	for i, k := range w.paved {
		roads += len(k.roads)
		stops += len(k.stops)
		w.first[i+1] = int32(roads)
	}
	w.roads, w.nodes = make([]road, 0, roads), make([]place, 0, stops)
	var number []int32
	for i, k := range w.paved {
		number = number[:0]
		for n := range k.stops {
			v := &k.stops[n]
			id := int32(len(w.nodes))
			if v.own >= 0 {
				lead := g.lead[g.base[i]+v.own]
				if ids[lead] >= 0 {
					number = append(number, ids[lead])
					continue
				}
				ids[lead] = id
			}
			number = append(number, id)
			w.nodes = append(w.nodes, place{v.at, v.um, w.lead(id, k.spots[v.spot0:v.spot1])})
		}
		for _, r := range k.roads {
			r.a, r.b = number[r.a], number[r.b]
			w.roads = append(w.roads, r)
		}
	}
}

// lead makes node id a portal of the part of Open that holds its spots, and is that part's number;
// -1 when there are none.
func (w *Roads) lead(id int32, spots []anyangle.Spot) int32 {
	if len(spots) == 0 {
		return -1
	}
	part := w.open.Part(spots[0])
	for _, s := range spots[1:] {
		part = min(part, w.open.Part(s))
	}
	if w.parts[part] < 0 {
		w.parts[part] = int32(len(w.portals))
		w.portals = append(w.portals, nil)
	}
	k := w.parts[part]
	w.portals[k] = append(w.portals[k], id)
	return k
}

// partOf is the part of Open that holds p, which is in the mesh; -1 when no portal
// leads there.
func (w *Roads) partOf(p geom.Point) int32 {
	var at [8]anyangle.Spot
	best := int32(-1)
	for _, s := range w.open.Spots(at[:0], p) {
		if k := w.parts[w.open.Part(s)]; k >= 0 && (best < 0 || k < best) {
			best = k
		}
	}
	return best
}

// piecesOf are the roads from the first to before the last that an arc has.
func (w *Roads) piecesOf(block, arc int32) (from, to int32) {
	k := w.paved[block]
	return w.first[block] + k.pieces[arc], w.first[block] + k.pieces[arc+1]
}

func (w *Roads) index() {
	w.at = make([]int32, len(w.nodes)+1)
	for i := range w.roads {
		w.at[w.roads[i].a+1]++
		w.at[w.roads[i].b+1]++
	}
	for i := range w.nodes {
		w.at[i+1] += w.at[i]
	}
	w.ends = make([]int32, w.at[len(w.nodes)])
	next := make([]int32, len(w.nodes))
	copy(next, w.at)
	for i := range w.roads {
		for _, n := range [2]int32{w.roads[i].a, w.roads[i].b} {
			w.ends[next[n]] = int32(i)
			next[n]++
		}
	}
}
