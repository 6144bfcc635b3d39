package voronoi

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"sync"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
)

// Roads joins a graph's edges with the open floor of one preferred clearance p: the
// parts of edges outside Open = {clearance >= p} are tight, and their ends in it
// are portals. Open is taken as a mesh has it, which may fall anyangle.DeltaUm short; an
// edge is followed to where the mesh takes it up. Roads serve every required clearance up
// to p. They never change, but for distances that are remembered, and are safe for
// any number of users.
type Roads struct {
	g     *Graph
	open  *anyangle.Mesh
	p     float64
	nodes []place
	roads []road
	at    []int32 // roads of node n: ends[at[n]:at[n+1]]
	ends  []int32
	// of arc k of block b: pieces[arcBase[b]+k] to the next
	arcBase []int32
	pieces  []int32

	portals [][]int32    // by part of Open: nodes in rising order
	samples []geom.Point // a place of each part
	likely  []int32      // parts, those looked for most often first
	forest  *forest
	known   known
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
// Time is proportional to the number of arcs, plus the number of portals times that of
// the parts of Open.
func NewRoads(ctx context.Context, g *Graph, open *anyangle.Mesh) (*Roads, error) {
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
	if err := w.pave(ctx); err != nil {
		return nil, err
	}
	if err := w.part(ctx); err != nil {
		return nil, err
	}
	w.index()
	w.forest = w.grow()
	return w, nil
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

// pave finds the tight pieces of all arcs.
func (w *Roads) pave(ctx context.Context) error {
	g := w.g
	ids := make([]int32, len(g.lead))
	for i := range ids {
		ids[i] = -1
	}
	node := func(b, k int32, upper bool) int32 {
		n := g.nodeOf(b, k, upper)
		if ids[n] < 0 {
			a := &g.blocks[b].arcs[k]
			p, um := a.curve.at(a.s0), a.um0
			if upper {
				p, um = a.curve.at(a.s1), a.um1
			}
			ids[n] = w.newNode(g.place(b, p), um)
		}
		return ids[n]
	}
	w.arcBase = make([]int32, len(g.blocks)+1)
	for i, b := range g.blocks {
		w.arcBase[i+1] = w.arcBase[i] + int32(len(b.arcs))
	}
	w.pieces = make([]int32, 1, w.arcBase[len(g.blocks)]+1)
	for b := range int32(len(g.blocks)) {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		for k := range int32(len(g.blocks[b].arcs)) {
			w.paveArc(b, k, node)
			w.pieces = append(w.pieces, int32(len(w.roads)))
		}
	}
	return nil
}

func (w *Roads) newNode(at geom.Point, um float64) int32 {
	w.nodes = append(w.nodes, place{at, um, -1})
	return int32(len(w.nodes) - 1)
}

// paveArc adds the tight pieces of an arc: below p all of it, from p to the mesh's
// shortfall above it as far as the mesh does not hold it.
func (w *Roads) paveArc(b, k int32, node func(b, k int32, upper bool) int32) {
	a := &w.g.blocks[b].arcs[k]
	high := w.p + anyangle.DeltaUm
	if a.um0 >= high {
		return
	}
	at := func(s float64) geom.Point { return w.g.place(b, a.curve.at(s)) }
	lay := func(from, to int32, s0, s1 float64) {
		w.roads = append(w.roads, road{
			a: from, b: to, step: step{b, k, false}, s0: s0, s1: s1,
			um0: a.clearance(s0), length: a.length(s0, s1),
		})
	}
	s, low := a.s0, int32(-1)
	if a.um0 < w.p-tieUm {
		if a.um1 < w.p-tieUm {
			lay(node(b, k, false), node(b, k, true), a.s0, a.s1)
			return
		}
		low = node(b, k, false)
		if a.um1 <= w.p+tieUm {
			lay(low, node(b, k, true), a.s0, a.s1)
			return
		}
		s = a.levelBetween(w.p)
		n := w.newNode(at(s), w.p)
		lay(low, n, a.s0, s)
		low = n
	}
	// From here on the arc is in Open; the mesh may lack some of it.
	top, clipped := a.s1, a.um1 > high
	if clipped {
		top = a.levelBetween(high)
	}
	p, q := at(s), at(top)
	inP, inQ := w.open.Contains(p), w.open.Contains(q)
	if inP && inQ && w.open.Connected(p, q) {
		return
	}
	if low < 0 {
		low = node(b, k, false)
	}
	if inQ && !inP {
		// Where the mesh takes the arc up.
		out, in := s, top
		for range 60 {
			m := (out + in) / 2
			if w.open.Contains(at(m)) {
				in = m
			} else {
				out = m
			}
		}
		in = stepTo(in, top)
		lay(low, w.newNode(at(in), a.clearance(in)), s, in)
		return
	}
	if clipped {
		lay(low, w.newNode(q, high), s, top)
		return
	}
	lay(low, node(b, k, true), s, top)
}

// insideUm is how far beyond the place at which a mesh first holds it a portal is put:
// a mesh holds places that are off it by a little rounding, but a search from there may
// see nothing.
const insideUm = joinUm

func stepTo(s, top float64) float64 {
	if top > s {
		return min(top, s+insideUm)
	}
	return max(top, s-insideUm)
}

// levelBetween is the parameter between the arc's ends at which clearance is um, which
// is between the clearances there.
func (a *arc) levelBetween(um float64) float64 {
	var at [2]float64
	best, off := a.s1, math.Inf(1)
	for _, s := range a.levels(at[:0], um) {
		s = min(max(s, min(a.s0, a.s1)), max(a.s0, a.s1))
		if d := math.Abs(a.clearance(s) - um); d < off {
			best, off = s, d
		}
	}
	return best
}

// part finds the portals and which part of Open each leads to.
func (w *Roads) part(ctx context.Context) error {
	for n := range w.nodes {
		v := &w.nodes[n]
		if v.um < w.p-tieUm || !w.open.Contains(v.at) {
			continue
		}
		if ctx.Err() != nil {
			return ctx.Err()
		}
		v.part = w.partOf(v.at)
		if v.part < 0 {
			v.part = int32(len(w.samples))
			w.samples = append(w.samples, v.at)
			w.portals = append(w.portals, nil)
			w.likely = append(w.likely, v.part)
		}
		w.portals[v.part] = append(w.portals[v.part], int32(n))
		// Nodes come block by block: the next portal is likely of the same part.
		k := slices.Index(w.likely, v.part)
		copy(w.likely[1:k+1], w.likely[:k])
		w.likely[0] = v.part
	}
	slices.SortFunc(w.likely, func(a, b int32) int {
		return cmp.Or(cmp.Compare(len(w.portals[b]), len(w.portals[a])), cmp.Compare(a, b))
	})
	return nil
}

// partOf is the part of Open that holds p, which is in the mesh; -1 when no portal
// leads there.
func (w *Roads) partOf(p geom.Point) int32 {
	for _, k := range w.likely {
		if w.open.Connected(p, w.samples[k]) {
			return k
		}
	}
	return -1
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

// maxKnown bounds how many open distances are remembered, at about 40 bytes each.
const maxKnown = 1 << 18

// known remembers open distances between portals.
type known struct {
	mu   sync.RWMutex
	dist map[[2]int32]float64
}

func (n *known) get(a, b int32) (float64, bool) {
	n.mu.RLock()
	defer n.mu.RUnlock()
	d, ok := n.dist[[2]int32{min(a, b), max(a, b)}]
	return d, ok
}

func (n *known) put(a, b int32, d float64) {
	n.mu.Lock()
	defer n.mu.Unlock()
	if n.dist == nil {
		n.dist = make(map[[2]int32]float64)
	}
	if len(n.dist) < maxKnown {
		n.dist[[2]int32{min(a, b), max(a, b)}] = d
	}
}
