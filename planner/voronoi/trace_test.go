package voronoi

import (
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// plain measures a floor with nothing of this package: every solid cell, feature and
// border side by itself.
type plain struct {
	m     *floor.Map
	cells []geom.Rect
	cap   float64
}

func plainOf(m *floor.Map) *plain {
	p := &plain{m: m, cap: float64(m.Settings().CapUm)}
	s := m.Settings()
	for r := range s.Rows {
		for c := range s.Columns {
			if m.Solid(c, r) {
				p.cells = append(p.cells, s.CellBounds(floor.CellRect{X0: c, Y0: r, X1: c + 1, Y1: r + 1}))
			}
		}
	}
	return p
}

// feet are the distances from p to every solid and the places of each that are
// nearest, one for every side of a feature.
func (o *plain) feet(p geom.Point) (d float64, feet []geom.Point, dists []float64) {
	add := func(q geom.Point, v float64) { feet, dists = append(feet, q), append(dists, v) }
	for _, c := range o.cells {
		q := c.Nearest(p)
		add(q, geom.Dist(p, q))
	}
	for ft := range o.m.Features() {
		if ft.Kind != floor.Solid {
			continue
		}
		if d, _ := ft.Shape.Dist(p); d == 0 {
			return 0, nil, nil
		}
		for a, b := range ft.Shape.Edges {
			d, q := geom.SegmentDist(p, a, b)
			t := ft.Shape.Grow / d
			add(geom.Point{X: q.X + t*(p.X-q.X), Y: q.Y + t*(p.Y-q.Y)}, d-ft.Shape.Grow)
		}
	}
	if b := o.m.Bounds(); !o.m.Settings().OpenBorder {
		for _, q := range []geom.Point{{X: b.Min.X, Y: p.Y}, {X: b.Max.X, Y: p.Y}, {X: p.X, Y: b.Min.Y}, {X: p.X, Y: b.Max.Y}} {
			add(q, geom.Dist(p, q))
		}
	}
	d = math.Inf(1)
	for _, v := range dists {
		d = min(d, v)
	}
	return d, feet, dists
}

// nearest is the distance from p to the nearest solid, and the place of it.
func (o *plain) nearest(p geom.Point) (d float64, foot geom.Point) {
	d = math.Inf(1)
	dd, feet, dists := o.feet(p)
	if dd == 0 {
		return 0, p
	}
	for i, v := range dists {
		if v < d {
			d, foot = v, feet[i]
		}
	}
	return d, foot
}

// onEdges is the distance from p to the nearest arc.
func (g *Graph) onEdges(p geom.Point) float64 {
	d, _ := g.edgeNear(p)
	return d
}

// edgeNear is the distance from p to the nearest arc, and the clearance there.
func (g *Graph) edgeNear(p geom.Point) (best, um float64) {
	q := vec{p.X - g.o.X, p.Y - g.o.Y}
	best = math.Inf(1)
	x0, y0, x1, y1 := g.blocksNear(box{q.x, q.y, q.x, q.y}, 1)
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			b := g.blocks[y*g.nx+x]
			l := q.sub(g.corner(y*g.nx + x))
			for i := range b.arcs {
				a := &b.arcs[i]
				s := min(max(a.param(l), min(a.s0, a.s1)), max(a.s0, a.s1))
				if d := a.at(s).sub(l).length(); d < best {
					best, um = d, a.clearance(s)
				}
			}
		}
	}
	return best, um
}

// every calls f for places along all arcs.
func (g *Graph) every(n int, f func(a *arc, p geom.Point, um float64)) {
	for i, b := range g.blocks {
		o := g.corner(i)
		for k := range b.arcs {
			a := &b.arcs[k]
			for m := range n {
				s := a.s0 + (a.s1-a.s0)*(float64(m)+0.5)/float64(n)
				q := a.at(s)
				f(a, geom.Point{X: g.o.X + o.x + q.x, Y: g.o.Y + o.y + q.y}, a.clearance(s))
			}
		}
	}
}

func TestPlacesOfEdgesHaveTwoNearestPlaces(t *testing.T) {
	const seed = 1
	t.Logf("seed %d", seed)
	cases := 8
	if slow() {
		cases = 600
	}
	count := 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 30+rng.IntN(100), 30+rng.IntN(100))
		o := plainOf(m)
		g := graphOf(t, m, Need{MostUm: 2_000_000})
		g.every(3, func(a *arc, p geom.Point, um float64) {
			count++
			d, feet, dists := o.feet(p)
			// 1e-5 µm: ten times what ties are told apart by.
			if math.Abs(d-um) > 1e-5 {
				t.Fatalf("case %d: clearance %v at %v, said to be %v", k, d, p, um)
			}
			if a.j < 0 {
				return
			}
			apart := 0.0
			for i, v := range dists {
				for j, w := range dists[:i] {
					if v < d+1e-5 && w < d+1e-5 {
						apart = max(apart, geom.Dist(feet[i], feet[j]))
					}
				}
			}
			if apart < 1e-7*d {
				t.Fatalf("case %d: %v has one nearest place, %v away", k, p, d)
			}
		})
	}
	t.Logf("%d places", count)
}

// TestEveryJumpIsOnAnEdge walks along random lines: wherever the nearest place of the
// solids jumps there must be an edge.
func TestEveryJumpIsOnAnEdge(t *testing.T) {
	const seed = 2
	t.Logf("seed %d", seed)
	cases := 3
	if slow() {
		cases = 300
	}
	jumps := 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 30+rng.IntN(100), 30+rng.IntN(100))
		o := plainOf(m)
		g := graphOf(t, m, Need{MostUm: 2_000_000})
		for range 6 {
			a, b := randomPoint(rng, m.Bounds()), randomPoint(rng, m.Bounds())
			at := func(s float64) geom.Point { return geom.Point{X: a.X + s*(b.X-a.X), Y: a.Y + s*(b.Y-a.Y)} }
			const steps = 200
			for n := range steps {
				s0, s1 := float64(n)/steps, float64(n+1)/steps
				d0, f0 := o.nearest(at(s0))
				d1, f1 := o.nearest(at(s1))
				if d0 == 0 || d1 == 0 {
					continue
				}
				// The foot of a place moves continuously but for jumps: halve on the side
				// where it moves more.
				for range 60 {
					sm := (s0 + s1) / 2
					dm, fm := o.nearest(at(sm))
					if dm == 0 {
						d0 = 0
						break
					}
					if geom.Dist(f0, fm) > geom.Dist(fm, f1) {
						s1, f1, d1 = sm, fm, dm
					} else {
						s0, f0, d0 = sm, fm, dm
					}
				}
				if d0 == 0 || d0 > 2_000_000 || d0 < 10 || geom.Dist(f0, f1) < 1e-3*d0 {
					continue
				}
				jumps++
				// Halving stops at rounding, about 1e-9 µm, which moves the place where two feet are
				// equally far by that times d over their distance; 1e-3 µm leaves room.
				if off := g.onEdges(at(s0)); off > 1e-3*d0/geom.Dist(f0, f1) {
					t.Fatalf("case %d: no edge at %v, %v from %v and %v: the next is %v away", k, at(s0), d0, f0, f1, off)
				}
			}
		}
	}
	t.Logf("%d jumps", jumps)
}

// degrees counts arcs at every node.
func (g *Graph) degrees() []int {
	deg := make([]int, len(g.lead))
	for i, b := range g.blocks {
		for k := range b.arcs {
			deg[g.lead[g.base[i]+b.arcs[k].from]]++
			deg[g.lead[g.base[i]+b.arcs[k].to]]++
		}
	}
	return deg
}

// TestEdgesEndOnlyWhereTheyMay checks the topology: an edge ends at the bounds of
// clearance or on an open border, nowhere else.
func TestEdgesEndOnlyWhereTheyMay(t *testing.T) {
	const seed = 3
	t.Logf("seed %d", seed)
	cases := 60
	if slow() {
		cases = 3000
	}
	nodes := 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 30+rng.IntN(200), 30+rng.IntN(200))
		g := graphOf(t, m, Need{MostUm: 2_000_000})
		g.checkEnds(t, k)
		nodes += len(g.lead)
	}
	t.Logf("%d nodes", nodes)
}

func (g *Graph) checkEnds(t *testing.T, k any) {
	t.Helper()
	deg := g.degrees()
	least := max(leastUm, float64(g.need.LeastUm))
	for i, b := range g.blocks {
		o := g.corner(i)
		for n, v := range b.nodes {
			id := g.base[i] + int32(n)
			if g.lead[id] != id {
				continue
			}
			p := v.at.add(o)
			rim := g.set.OpenBorder && (p.x < 1 || p.y < 1 || p.x > g.w-1 || p.y > g.ht-1)
			if deg[id] == 1 && v.um > least+8*joinUm && v.um < g.most-1e-3 && !rim {
				t.Fatalf("case %v: an edge ends at %v, clearance %v", k, p, v.um)
			}
		}
	}
}
