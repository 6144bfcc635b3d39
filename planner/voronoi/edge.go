package voronoi

import (
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// EndKind says why an edge ends.
type EndKind uint8

// The kinds of end.
const (
	Branch EndKind = iota + 1 // three or more edges meet, or an edge meets itself
	Least                     // clearance falls to Need.LeastUm
	Most                      // clearance rises to Need.MostUm
	Rim                       // an open border
)

// End is an end of an edge.
type End struct {
	At          geom.Point
	ClearanceUm float64
	Kind        EndKind
	// Node is the same for all ends at one place, and for no others. Each end's own At may be off
	// the others' by rounding.
	Node int32
}

// Gate is a narrowest place: X and Y are nearest places of two pieces of solid with
// nothing solid in the open disc on the diameter XY.
type Gate struct {
	X, Y     geom.Point
	At       geom.Point // half way between
	WidthUm  float64    // |XY|: twice the clearance at At
	Features [2]string  // of X and Y; "" for a cell or the border
}

// Edge is a Voronoi edge between two ends, or a closed one.
type Edge struct {
	From, To   End
	LengthUm   float64
	SmallestUm float64 // smallest clearance along it
	SmallestAt geom.Point
	Closed     bool // no ends: From and To are one place of it

	g    *Graph
	arcs []step
}

// step is an arc of the graph, in or against the direction in which clearance rises.
type step struct {
	block, arc int32
	down       bool
}

func (g *Graph) arc(s step) *arc { return &g.blocks[s.block].arcs[s.arc] }

// place is a block's place on the floor; rounding does not put it beyond the border.
func (g *Graph) place(block int32, p vec) geom.Point {
	o := g.corner(int(block))
	return geom.Point{X: g.o.X + min(max(o.x+p.x, 0), g.w), Y: g.o.Y + min(max(o.y+p.y, 0), g.ht)}
}

// nodeOf is the node, among all, at the end of an arc: its upper end or its lower.
func (g *Graph) nodeOf(block, arc int32, upper bool) int32 {
	a := &g.blocks[block].arcs[arc]
	n := a.from
	if upper {
		n = a.to
	}
	return g.lead[g.base[block]+n]
}

// ends lists the arcs at every node: those of node n are list[at[n]:at[n+1]], each as a step
// that leaves the node.
func (g *Graph) ends() (at []int32, list []step) {
	at = make([]int32, len(g.lead)+1)
	g.eachArc(func(b, k int32) {
		at[g.nodeOf(b, k, false)+1]++
		at[g.nodeOf(b, k, true)+1]++
	})
	for i := range g.lead {
		at[i+1] += at[i]
	}
	list = make([]step, at[len(g.lead)])
	next := slices.Clone(at)
	put := func(n int32, s step) { list[next[n]] = s; next[n]++ }
	g.eachArc(func(b, k int32) {
		put(g.nodeOf(b, k, false), step{b, k, false})
		put(g.nodeOf(b, k, true), step{b, k, true})
	})
	return at, list
}

func (g *Graph) eachArc(f func(block, arc int32)) {
	for b := range g.blocks {
		for k := range g.blocks[b].arcs {
			f(int32(b), int32(k))
		}
	}
}

// Edges yields all edges, in an order that is the same each time.
func (g *Graph) Edges(yield func(Edge) bool) {
	at, list := g.ends()
	seen := make([][]bool, len(g.blocks))
	for i, b := range g.blocks {
		seen[i] = make([]bool, len(b.arcs))
	}
	far := func(s step) int32 { return g.nodeOf(s.block, s.arc, !s.down) }
	follow := func(from int32, s step) Edge {
		e := Edge{g: g}
		n := from
		for {
			seen[s.block][s.arc] = true
			e.arcs = append(e.arcs, s)
			n = far(s)
			if n == from || at[n+1]-at[n] != 2 {
				break
			}
			next := list[at[n]]
			if next.block == s.block && next.arc == s.arc {
				next = list[at[n]+1]
			}
			s = next
		}
		g.describe(&e, at, from, n)
		return e
	}
	for _, closed := range [2]bool{false, true} {
		for n := range int32(len(g.lead)) {
			if (at[n+1]-at[n] == 2) != closed {
				continue
			}
			for _, s := range list[at[n]:at[n+1]] {
				if !seen[s.block][s.arc] && !yield(follow(n, s)) {
					return
				}
			}
		}
	}
}

func (g *Graph) describe(e *Edge, at []int32, from, to int32) {
	end := func(n int32, s step, upper bool) End {
		a := g.arc(s)
		p, um := a.curve.at(a.s0), a.um0
		if upper {
			p, um = a.curve.at(a.s1), a.um1
		}
		v := End{At: g.place(s.block, p), ClearanceUm: um, Kind: Branch, Node: n}
		switch {
		case at[n+1]-at[n] != 1:
		case um <= max(leastUm, float64(g.need.LeastUm))+joinUm:
			v.Kind = Least
		case um >= g.most-joinUm:
			v.Kind = Most
		default:
			v.Kind = Rim
		}
		return v
	}
	first, last := e.arcs[0], e.arcs[len(e.arcs)-1]
	e.From, e.To = end(from, first, first.down), end(to, last, !last.down)
	e.Closed = from == to && at[from+1]-at[from] == 2
	for i, s := range e.arcs {
		a := g.arc(s)
		e.LengthUm += a.length(a.s0, a.s1)
		if i == 0 || a.um0 < e.SmallestUm {
			e.SmallestUm, e.SmallestAt = a.um0, g.place(s.block, a.curve.at(a.s0))
		}
	}
}

// Near says whether the edge may meet r: whether a block that it runs through does.
func (e Edge) Near(r geom.Rect) bool {
	for i, s := range e.arcs {
		if i > 0 && e.arcs[i-1].block == s.block {
			continue
		}
		o, b := e.g.corner(int(s.block)), e.g.box(int(s.block))
		at := func(x, y float64) geom.Point { return geom.Point{X: e.g.o.X + o.x + x, Y: e.g.o.Y + o.y + y} }
		// An arc is within its block but for rounding.
		if (geom.Rect{Min: at(b.x0-1, b.y0-1), Max: at(b.x1+1, b.y1+1)}).Intersects(r) {
			return true
		}
	}
	return false
}

// Points draws the edge from From to To: a polyline off it by at most half a millimetre, with
// a point wherever the nearest elements change and wherever clearance is least among its
// neighbours, and the clearance at each point. Between points clearance is that of
// the edge, which rises or falls throughout.
func (e Edge) Points() (pts []geom.Point, clearanceUm []float64) {
	for i, s := range e.arcs {
		a := e.g.arc(s)
		s0, s1 := a.s0, a.s1
		if s.down {
			s0, s1 = s1, s0
		}
		drawn := e.g.draw(s, s0, s1, -inf)
		o := e.g.corner(int(s.block))
		for k, p := range drawn {
			if k == 0 && i > 0 {
				continue
			}
			at := min(max(a.param(vec{p.X - e.g.o.X - o.x, p.Y - e.g.o.Y - o.y}), min(s0, s1)), max(s0, s1))
			pts, clearanceUm = append(pts, p), append(clearanceUm, a.clearance(at))
		}
	}
	return pts, clearanceUm
}

// flatUm is how much clearance may change along an arc for it to count as a passage of
// one width: far above rounding, far below a micrometre.
const flatUm = 1e-5

// Gates yields the narrowest places: where clearance rises on both sides along the
// edges, or, in a passage of one width that is wider beyond both its ends, the middle
// of a piece of it.
func (g *Graph) Gates(yield func(Gate) bool) {
	at, list := g.ends()
	group := make([]int32, len(g.lead))
	for i := range group {
		group[i] = int32(i)
	}
	longest := map[int32]step{}
	var flats []step
	g.eachArc(func(b, k int32) {
		if a := &g.blocks[b].arcs[k]; a.um1-a.um0 < flatUm {
			flats = append(flats, step{b, k, false})
			x, y := find(group, g.nodeOf(b, k, false)), find(group, g.nodeOf(b, k, true))
			group[max(x, y)] = min(x, y)
		}
	})
	span := func(s step) float64 { a := g.arc(s); return a.length(a.s0, a.s1) }
	for _, s := range flats {
		n := find(group, g.nodeOf(s.block, s.arc, false))
		if old, ok := longest[n]; !ok || span(s) > span(old) {
			longest[n] = s
		}
	}
	rises, falls := make([]int32, len(g.lead)), make([]int32, len(g.lead))
	for n := range int32(len(g.lead)) {
		l := find(group, n)
		for _, s := range list[at[n]:at[n+1]] {
			switch a := g.arc(s); {
			case a.um1-a.um0 < flatUm:
			case s.down:
				falls[l]++
			default:
				rises[l]++
			}
		}
	}
	for n := range int32(len(g.lead)) {
		if group[n] != n || falls[n] > 0 || rises[n] < 2 {
			continue
		}
		s, flat := longest[n]
		if !flat {
			s = list[at[n]]
		}
		a := g.arc(s)
		if a.j < 0 {
			continue // along an open border: one solid alone
		}
		p := a.s0
		if flat {
			p = (a.s0 + a.s1) / 2
		}
		if !yield(g.gateAt(s.block, a, p)) {
			return
		}
	}
}

// gateAt is the gate at parameter s of an arc.
func (g *Graph) gateAt(block int32, a *arc, s float64) Gate {
	near, p := g.blocks[block].near, a.curve.at(s)
	v := Gate{At: g.place(block, p), WidthUm: 2 * a.clearance(s)}
	v.X = g.place(block, near[a.i].foot(p))
	v.Features[0] = near[a.i].name
	v.Y = v.X
	if a.j >= 0 {
		v.Y = g.place(block, near[a.j].foot(p))
		v.Features[1] = near[a.j].name
	}
	return v
}
