package voronoi

import (
	"context"
	"fmt"
	"math"
	"slices"
	"sync/atomic"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/parallel"
)

// slackUm is how much further than Need.MostUm edges are traced, so that every edge is
// followed to where a mesh of that clearance certainly holds it.
const slackUm = anyangle.DeltaUm

// Need is which edges are wanted.
type Need struct {
	// LeastUm and MostUm bound the clearance along the edges: 0 <= LeastUm <= MostUm,
	// MostUm at least 1 µm and at most the floor's cap. Edges are never
	// traced where clearance is below 0.2 µm.
	LeastUm, MostUm int64
	// Zones says whether closed zones count as solids. The distance to a zone then
	// counts MarginUm more than it is, since a body keeps its margin from solids only;
	// LeastUm must be at least MarginUm.
	Zones    bool
	MarginUm int64
}

// NeedError says which field of a Need cannot be served.
type NeedError struct {
	Field    string
	Value    int64
	From, To int64 // wanted range
}

// Error names the field, its value and the wanted range.
func (e *NeedError) Error() string {
	return fmt.Sprintf("%s: %d µm, wanted %d to %d µm", e.Field, e.Value, e.From, e.To)
}

func (n Need) check(capUm int64) error {
	switch {
	case n.MostUm < 1 || n.MostUm > capUm:
		return &NeedError{"most", n.MostUm, 1, capUm}
	case n.LeastUm < 0 || n.LeastUm > n.MostUm:
		return &NeedError{"least", n.LeastUm, 0, n.MostUm}
	case n.MarginUm < 0 || n.MarginUm > n.LeastUm:
		return &NeedError{"margin", n.MarginUm, 0, n.LeastUm}
	}
	return nil
}

// Graph is the Voronoi edges of one version of a floor. It never changes and is safe
// for any number of readers.
type Graph struct {
	frame
	f      *clearance.Field
	cells  [][]site  // sites of the raster, by block
	shapes [][]*site // sites of features that reach into the block
	blocks []*block
	links  [][]link         // to the blocks to the right and above
	zones  []*floor.Feature // closed zones that count
	base   []int32          // of each block's nodes among all
	lead   []int32          // of each node: the lowest of those it is one with
}

// link says that a node of a block and one of another are one.
type link struct {
	own   int32
	block int32
	other int32
}

// Build traces the edges of a version from scratch, on all processors. The error is
// ctx's, a *NeedError, or wraps ErrTooLarge. Time is about proportional to the length of the edges and
// the number of sites, plus the floor's area in blocks.
func Build(ctx context.Context, f *clearance.Field, need Need) (*Graph, error) {
	if err := need.check(f.Cap()); err != nil {
		return nil, err
	}
	g := newGraph(f, need)
	n := len(g.blocks)
	all := make([]int, n)
	for i := range all {
		all[i] = i
	}
	var sites atomic.Int64
	err := parallel.Each(ctx, 0, n, func() func(int) {
		return func(i int) {
			if sites.Load() <= maxSites {
				g.cells[i] = g.cellSites(f.Map(), i%g.nx, i/g.nx)
				sites.Add(int64(len(g.cells[i])))
			}
		}
	})
	if err == nil && sites.Load() > maxSites {
		err = tooManySites()
	}
	if err != nil {
		return nil, err
	}
	for ft := range f.Map().Features() {
		g.enter(ft)
	}
	if g.sites() > maxSites {
		return nil, tooManySites()
	}
	if err := g.trace(ctx, all, nil); err != nil {
		return nil, err
	}
	g.join(all)
	return g, nil
}

func newGraph(f *clearance.Field, need Need) *Graph {
	g := &Graph{frame: newFrame(f.Map().Settings(), need), f: f}
	if need.Zones {
		for ft := range f.Map().Features() {
			if ft.Kind == floor.ClosedZone {
				g.zones = append(g.zones, ft)
			}
		}
	}
	n := g.nx * g.ny
	g.cells = make([][]site, n)
	g.shapes = make([][]*site, n)
	g.blocks = make([]*block, n)
	g.links = make([][]link, n)
	return g
}

// Need is what the graph is for.
func (g *Graph) Need() Need { return g.need }

// Field is the clearance the graph was made from.
func (g *Graph) Field() *clearance.Field { return g.f }

// enter adds a feature's sites to the blocks they reach into.
func (g *Graph) enter(ft *floor.Feature) {
	sites := g.featureSites(ft)
	for k := range sites {
		s := &sites[k]
		x0, y0, x1, y1 := g.blocksNear(s.bounds(), 0)
		for y := y0; y <= y1; y++ {
			for x := x0; x <= x1; x++ {
				g.shapes[y*g.nx+x] = append(g.shapes[y*g.nx+x], s)
			}
		}
	}
}

// gather is the sites that may be nearest somewhere in a block, from its corner, in
// their order.
func (g *Graph) gather(i int) []site {
	o, b := g.corner(i), g.box(i)
	reach := g.reach(i)
	var out []site
	add := func(s *site) {
		q := s.moved(o)
		if boxDist(b, &q) <= reach {
			out = append(out, q)
		}
	}
	for _, s := range g.borderSites() {
		add(&s)
	}
	seen := map[*site]bool{}
	x0, y0, x1, y1 := g.blocksNear(box{b.x0 + o.x, b.y0 + o.y, b.x1 + o.x, b.y1 + o.y}, reach)
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			for k := range g.cells[y*g.nx+x] {
				add(&g.cells[y*g.nx+x][k])
			}
			for _, s := range g.shapes[y*g.nx+x] {
				if !seen[s] {
					seen[s] = true
					add(s)
				}
			}
		}
	}
	// The nearest to the middle is within the block's radius of being nearest anywhere.
	mid, rad := b.mid(), b.radius()
	least := math.Inf(1)
	for k := range out {
		d, _, _ := out[k].closed(mid)
		least = min(least, d)
	}
	out = slices.DeleteFunc(out, func(s site) bool {
		d, _, _ := s.closed(mid)
		return d > least+2*rad+1
	})
	return slices.Clone(sortSites(out)) // kept: without the room of those left out
}

// reach is the largest clearance in a block that matters.
func (g *Graph) reach(i int) float64 {
	var most int32
	x, y := i%g.nx*floor.BlockSize, i/g.nx*floor.BlockSize
	for r := y; r <= min(y+floor.BlockSize+1, g.set.Rows); r++ {
		for c := x; c <= min(x+floor.BlockSize+1, g.set.Columns); c++ {
			most = max(most, g.f.Vertex(c, r))
		}
	}
	if int64(most) >= g.f.Cap() {
		return g.most + 1
	}
	// No place is further than half a cell's diagonal from a vertex.
	return min(g.most, float64(most)+1+g.h*math.Sqrt2/2) + 1
}

// boxDist is a lower bound of the distance of a site from a box.
func boxDist(b box, s *site) float64 {
	e := s.a
	if s.straight {
		e = s.end()
	}
	r := geom.Rect{Min: geom.Point{X: b.x0, Y: b.y0}, Max: geom.Point{X: b.x1, Y: b.y1}}
	return geom.RectSegmentDist(r, geom.Point{X: s.a.x, Y: s.a.y}, geom.Point{X: e.x, Y: e.y}) - s.grow - tieUm
}

// trace makes the blocks listed. Where may is given and a block's sites are those of
// the old block that it holds, that one is kept. The error is ctx's or wraps ErrTooLarge.
func (g *Graph) trace(ctx context.Context, list []int, may func(i int) *block) error {
	for _, i := range list {
		g.blocks[i] = nil
	}
	var bytes atomic.Int64
	for _, b := range g.blocks {
		if b != nil {
			bytes.Add(b.bytes())
		}
	}
	err := parallel.Each(ctx, 0, len(list), func() func(int) {
		t := &tracer{ctx: ctx}
		return func(n int) {
			if bytes.Load() > maxBytes {
				return
			}
			i := list[n]
			near := g.gather(i)
			if may != nil {
				if old := may(i); old != nil && slices.Equal(old.near, near) {
					g.blocks[i] = old
				}
			}
			if g.blocks[i] == nil {
				g.blocks[i] = g.traceBlock(t, i, near)
			}
			bytes.Add(g.blocks[i].bytes())
		}
	})
	if err == nil && bytes.Load() > maxBytes {
		err = tooManyBytes()
	}
	return err
}

func (g *Graph) traceBlock(t *tracer, i int, near []site) *block {
	o, b := g.corner(i), g.box(i)
	t.near, t.mid, t.rims = near, b.mid(), g.rims(i)
	t.least, t.most = max(leastUm, float64(g.need.LeastUm)), g.most
	t.rimAt = box{-o.x, -o.y, g.w - o.x, g.ht - o.y}
	t.pieces, t.cands = t.pieces[:0], t.cands[:0]
	var zones []*floor.Feature
	r := geom.Rect{Min: geom.Point{X: g.o.X + o.x + b.x0, Y: g.o.Y + o.y + b.y0}, Max: geom.Point{X: g.o.X + o.x + b.x1, Y: g.o.Y + o.y + b.y1}}
	for _, z := range g.zones {
		if z.Bounds().Intersects(r) {
			zones = append(zones, z)
		}
	}
	t.inside = func(p vec) bool {
		q := geom.Point{X: g.o.X + o.x + p.x, Y: g.o.Y + o.y + p.y}
		if g.f.At(q).Um == 0 {
			return true
		}
		for _, z := range zones {
			if geom.InPolygon(z.Shape.Chains, q) {
				return true
			}
		}
		return false
	}
	var shapes []*floor.Feature // of the sites, when first asked for
	t.buried = func(mid vec, rad float64) bool {
		q := geom.Point{X: g.o.X + o.x + mid.x, Y: g.o.Y + o.y + mid.y}
		if !t.inside(mid) {
			return false
		}
		if shapes == nil {
			shapes = g.shapesOf(near)
		}
		return slices.ContainsFunc(shapes, func(ft *floor.Feature) bool {
			return ft.Bounds().Contains(q) && depth(&ft.Shape, q) > rad
		})
	}
	ids := make([]int32, len(near))
	for k := range ids {
		ids[k] = int32(k)
	}
	t.boxes, t.levels, t.missed = 0, t.levels[:0], 0
	t.square(b, ids, false, 0, 0)
	return finish(near, b, t.merge(), t.mid, t.rimAt)
}

// shapesOf are the features that sites belong to.
func (g *Graph) shapesOf(near []site) []*floor.Feature {
	out := []*floor.Feature{}
	seen := map[string]bool{"": true}
	for k := range near {
		if name := near[k].name; !seen[name] {
			seen[name] = true
			if ft, ok := g.f.Map().Feature(name); ok {
				out = append(out, ft)
			}
		}
	}
	return out
}
