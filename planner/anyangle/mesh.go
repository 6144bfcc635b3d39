package anyangle

import (
	"context"
	"fmt"
	"math"
	"sync/atomic"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/parallel"
)

// Need is what a mesh is for.
type Need struct {
	// ClearanceUm is the clearance that every point of a way must have: at least 0,
	// at most MaxClearanceUm. At 0 freedom is decided by what is solid: a way may
	// touch solids, slide along them and bend at their corners, but not pass between
	// two that touch.
	ClearanceUm int64
	// Zones says whether to stay out of closed zones, ZoneUm away from them (0:
	// their border may be touched).
	Zones  bool
	ZoneUm int64
}

// MaxClearanceUm bounds the clearances of a Need; 100 m is far above any robot's.
const MaxClearanceUm = 100 * geom.UmPerMetre

// NeedError says which field of a Need cannot be served.
type NeedError struct {
	Field string
	Value int64
}

// Error names the field, its value and the wanted range.
func (e *NeedError) Error() string {
	return fmt.Sprintf("%s: %d µm, wanted 0 to %d µm", e.Field, e.Value, MaxClearanceUm)
}

// Mesh is the free space of one version of a floor for one Need, as convex cells.
// It never changes and is safe for any number of readers.
type Mesh struct {
	m      *floor.Map
	need   Need
	bx, by int // blocks from left to right and from bottom to top
	blocks []*block
	o      geom.Point // the floor's lower left corner
	side   float64    // of a whole block
	eps    float64    // distances below it count as none
	crowd  int        // pieces about a block above which they are thinned out

	base []int32 // of each block's components among all
	comp []int32 // leader of each

	lean *Mesh // the same with notches filled, see bridge.go; nil in a lean mesh
}

// Build makes the mesh of a version from scratch, on all processors. The error is
// ctx's, a *NeedError, or ErrTooLarge (by errors.Is) beyond MaxBytes. Time is about proportional to the floor's area in blocks
// plus the outlines of its solids.
func Build(ctx context.Context, m *floor.Map, need Need) (*Mesh, error) {
	if err := need.check(); err != nil {
		return nil, err
	}
	g := newMesh(m, need)
	if err := g.buildAll(ctx); err != nil {
		return nil, err
	}
	return g, nil
}

// buildAll fills a mesh from scratch.
func (g *Mesh) buildAll(ctx context.Context) error {
	g.lean = newMesh(g.m, g.need)
	all := make([]int, len(g.blocks))
	for i := range all {
		all[i] = i
	}
	return g.fill(ctx, make([]*cut, len(all)), make([]*cut, len(all)), all, all)
}

// Need is what the mesh is for.
func (g *Mesh) Need() Need { return g.need }

// Map is the version the mesh was made from.
func (g *Mesh) Map() *floor.Map { return g.m }

func (n Need) check() error {
	if n.ClearanceUm < 0 || n.ClearanceUm > MaxClearanceUm {
		return &NeedError{"clearance", n.ClearanceUm}
	}
	if n.ZoneUm < 0 || n.ZoneUm > MaxClearanceUm {
		return &NeedError{"zone clearance", n.ZoneUm}
	}
	return nil
}

func newMesh(m *floor.Map, need Need) *Mesh {
	s := m.Settings()
	g := &Mesh{
		m: m, need: need, crowd: crowd,
		bx:   (s.Columns + blockCells - 1) / blockCells,
		by:   (s.Rows + blockCells - 1) / blockCells,
		o:    s.Vertex(0, 0),
		side: float64(blockCells * s.ResolutionUm),
	}
	g.blocks = make([]*block, g.bx*g.by)
	// Places of a search are right to a few units in the last place of the largest
	// coordinate.
	size := float64(max(s.Columns, s.Rows)) * float64(s.ResolutionUm)
	g.eps = max(minEpsUm, 64*size*0x1p-52)
	return g
}

// minEpsUm is the least distance that is told from none: a tenth of a nanometre,
// far below the whole micrometre that corners keep.
const minEpsUm = 1e-4

// size is a block's width and height.
func (g *Mesh) size(i int) (w, h int64) {
	s := g.m.Settings()
	x, y := i%g.bx, i/g.bx
	return int64(min(blockCells, s.Columns-x*blockCells)) * s.ResolutionUm,
		int64(min(blockCells, s.Rows-y*blockCells)) * s.ResolutionUm
}

// corner is a block's lower left corner from the floor's.
func (g *Mesh) corner(i int) pt {
	side := int64(blockCells) * g.m.Settings().ResolutionUm
	return pt{int64(i%g.bx) * side, int64(i/g.bx) * side}
}

// growth is by how much a feature is grown, and whether it is an obstacle at all.
func (n Need) growth(k floor.FeatureKind) (float64, bool) {
	switch {
	case k == floor.Solid:
		return float64(n.ClearanceUm), true
	case k == floor.ClosedZone && n.Zones:
		return float64(n.ZoneUm), true
	}
	return 0, false
}

// reachOf is the blocks that a feature's grown outline, or a way's bend about it, can
// touch, borders included.
func (g *Mesh) reachOf(f *floor.Feature) (x0, y0, x1, y1 int, ok bool) {
	grow, ok := g.need.growth(f.Kind)
	if !ok {
		return 0, 0, 0, 0, false
	}
	return g.blocksOf(f.Bounds(), grow+cornerSlack)
}

// blocksOf is the blocks that touch r grown by d.
func (g *Mesh) blocksOf(r geom.Rect, d float64) (x0, y0, x1, y1 int, ok bool) {
	r = r.Grow(d)
	at := func(v float64, most int) int { return int(min(max(math.Floor(v/g.side), -1), float64(most))) }
	x0, y0 = max(0, at(r.Min.X-g.o.X, g.bx)), max(0, at(r.Min.Y-g.o.Y, g.by))
	x1, y1 = min(g.bx-1, at(r.Max.X-g.o.X, g.bx)), min(g.by-1, at(r.Max.Y-g.o.Y, g.by))
	// A rectangle that ends on a border touches the block before it too.
	if x0 > 0 && float64(x0)*g.side == r.Min.X-g.o.X {
		x0--
	}
	if y0 > 0 && float64(y0)*g.side == r.Min.Y-g.o.Y {
		y0--
	}
	return x0, y0, x1, y1, x0 <= x1 && y0 <= y1
}

// fill cuts the blocks listed in fresh, takes the others from cuts (and leanCuts), and
// joins those listed in joins; g.blocks and g.lean.blocks hold the rest already. The error
// is ctx's or a *sizeError.
func (g *Mesh) fill(ctx context.Context, cuts, leanCuts []*cut, fresh, joins []int) error {
	near, rounds := g.pieces(fresh)
	thin := g.need.ClearanceUm > 0
	for _, i := range fresh {
		cuts[i] = nil
	}
	var bytes atomic.Int64
	for i, c := range cuts {
		if c != nil {
			bytes.Add(bytesOf(c, leanCuts[i]))
		}
	}
	err := parallel.Each(ctx, 0, len(fresh), func() func(int) {
		z := newRasterizer(g.need.ClearanceUm, g.m.Settings().ResolutionUm)
		c := &cutter{ctx: ctx}
		return func(k int) {
			if bytes.Load() > maxBytes {
				return
			}
			i := fresh[k]
			w, h := g.size(i)
			all := z.pieces(g.m, i%g.bx, i/g.bx, pt{0, 0}, pt{w, h})
			o := g.corner(i)
			for _, p := range near[i] {
				if p.touches(o.x, o.y, o.x+w, o.y+h) {
					all = append(all, p.moved(o))
				}
			}
			if thin && len(all) > g.crowd {
				all = z.thinOut(all, w, h)
			}
			fills := z.fills(all, w, h)
			cuts[i] = c.cut(w, h, all, thin)
			cuts[i].rounds = rounds[i]
			leanCuts[i] = cuts[i]
			if len(fills) > 0 {
				for k := range fills {
					all = append(all, fills[k].over)
				}
				leanCuts[i] = c.cut(w, h, all, thin)
			}
			bytes.Add(bytesOf(cuts[i], leanCuts[i]))
		}
	})
	if err == nil {
		err = ctx.Err() // a cut may have been left half done
	}
	if err == nil && bytes.Load() > maxBytes {
		err = &sizeError{maxBytes}
	}
	if err != nil {
		return err
	}
	err = parallel.Each(ctx, 0, len(joins), func() func(int) {
		j := &joiner{}
		return func(k int) {
			i := joins[k]
			around, lean := g.around(cuts, i), g.around(leanCuts, i)
			g.blocks[i] = j.join(around, thin)
			g.lean.blocks[i] = g.blocks[i]
			if lean != around {
				g.lean.blocks[i] = j.join(lean, thin)
			}
		}
	})
	if err != nil {
		return err
	}
	g.connect()
	g.lean.connect()
	return nil
}

// pieces are the vector obstacles near each of the blocks listed, and their corners, from the
// floor's lower left corner.
func (g *Mesh) pieces(blocks []int) (near map[int][]*piece, rounds map[int][]round) {
	wanted := make(map[int]bool, len(blocks))
	for _, i := range blocks {
		wanted[i] = true
	}
	near, rounds = make(map[int][]*piece), make(map[int][]round)
	for f := range g.m.Features() {
		x0, y0, x1, y1, ok := g.reachOf(f)
		if !ok || !g.anyWanted(wanted, x0, y0, x1, y1) {
			continue
		}
		grow, _ := g.need.growth(f.Kind)
		g.rounds(f, grow, rounds, wanted)
		shape := shapePieces(f.Shape, grow, g.o)
		for k := range shape {
			p := &shape[k]
			lo := geom.Point{X: float64(p.lo.x) + g.o.X, Y: float64(p.lo.y) + g.o.Y}
			hi := geom.Point{X: float64(p.hi.x) + g.o.X, Y: float64(p.hi.y) + g.o.Y}
			x0, y0, x1, y1, ok := g.blocksOf(geom.Rect{Min: lo, Max: hi}, 0)
			if !ok {
				continue
			}
			for y := y0; y <= y1; y++ {
				for x := x0; x <= x1; x++ {
					if i := x + y*g.bx; wanted[i] {
						near[i] = append(near[i], p)
					}
				}
			}
		}
	}
	return near, rounds
}

func (g *Mesh) anyWanted(wanted map[int]bool, x0, y0, x1, y1 int) bool {
	if len(wanted) == len(g.blocks) {
		return true
	}
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			if wanted[x+y*g.bx] {
				return true
			}
		}
	}
	return false
}

func (g *Mesh) around(cuts []*cut, i int) (n neighbours) {
	x, y := i%g.bx, i/g.bx
	for k := range n {
		dx, dy := k%3-1, k/3-1
		if nx, ny := x+dx, y+dy; nx >= 0 && ny >= 0 && nx < g.bx && ny < g.by {
			n[k] = cuts[nx+ny*g.bx]
		}
	}
	return n
}

// step is how far the neighbour in a direction is in the list of blocks.
func (g *Mesh) step(dir uint8) int { return [5]int{0, 1, g.bx, -1, -g.bx}[dir] }

// connect finds the connected components of the whole.
func (g *Mesh) connect() {
	g.base = make([]int32, len(g.blocks)+1)
	for i, b := range g.blocks {
		g.base[i+1] = g.base[i] + b.comps
	}
	g.comp = make([]int32, g.base[len(g.blocks)])
	for i := range g.comp {
		g.comp[i] = int32(i)
	}
	find := func(i int32) int32 {
		for g.comp[i] != i {
			g.comp[i] = g.comp[g.comp[i]]
			i = g.comp[i]
		}
		return i
	}
	for i, b := range g.blocks {
		for _, r := range b.bridges {
			p, q := find(g.base[i]+r.own), find(g.base[i+g.step(r.dir)]+r.next)
			if p > q {
				p, q = q, p
			}
			g.comp[q] = p
		}
	}
	for i := range g.comp {
		g.comp[i] = g.comp[g.comp[i]] // leaders are the lowest, so settled before
	}
}
