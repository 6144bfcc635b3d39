package voronoi

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/check"
)

func roadsOf(t testing.TB, g *Graph, p int64) *Roads {
	t.Helper()
	need := anyangle.Need{ClearanceUm: p, Zones: g.need.Zones}
	if need.Zones {
		need.ZoneUm = p - g.need.MarginUm
	}
	open, err := anyangle.Build(context.Background(), g.f.Map(), need)
	if err != nil {
		t.Fatal(err)
	}
	w, err := NewRoads(context.Background(), g, open)
	if err != nil {
		t.Fatal(err)
	}
	return w
}

// dijkstra is the plain twin: every portal to every other by the shortest way in Open,
// every tight road with the clearance, the two ends, and no estimate (Dijkstra 1959).
func dijkstra(t testing.TB, w *Roads, s, g geom.Point, r, weight float64) float64 {
	t.Helper()
	from, ok1 := w.enter(s)
	to, ok2 := w.enter(g)
	if !ok1 || !ok2 || from.um < r || to.um < r {
		return math.Inf(1)
	}
	n := len(w.nodes)
	type edge struct {
		to   int
		cost float64
	}
	adj := make([][]edge, n+2)
	link := func(a, b int, c float64) { adj[a] = append(adj[a], edge{b, c}); adj[b] = append(adj[b], edge{a, c}) }
	tight := 1 + weight
	for _, v := range w.roads {
		if v.um0 >= r-tieUm {
			link(int(v.a), int(v.b), tight*v.length)
		}
	}
	at := func(i int) geom.Point {
		return [...]func() geom.Point{func() geom.Point { return w.nodes[min(i, n-1)].at }, func() geom.Point { return from.to }, func() geom.Point { return to.to }}[max(0, i-n+1)]()
	}
	var inOpen []int
	for i, v := range w.nodes {
		if v.part >= 0 {
			inOpen = append(inOpen, i)
		}
	}
	for k, e := range [2]*entry{&from, &to} {
		if e.road < 0 {
			inOpen = append(inOpen, n+k)
			continue
		}
		v := w.roads[e.road]
		a := w.g.arc(v.step)
		link(n+k, int(v.b), tight*a.length(e.s, v.s1))
		if v.um0 >= r-tieUm {
			link(n+k, int(v.a), tight*a.length(v.s0, e.s))
		}
	}
	if from.road >= 0 && from.road == to.road {
		link(n, n+1, tight*w.g.arc(w.roads[from.road].step).length(from.s, to.s))
	}
	for i, b := range inOpen {
		for _, a := range inOpen[:i] {
			// Asked in the search's direction: which of two ways of one length, and how it is
			// rounded, is the mesh's affair.
			x, y := a, b
			if b == n {
				x, y = b, a
			}
			way, ok, err := w.open.Shortest(context.Background(), at(x), at(y))
			if err != nil {
				t.Fatal(err)
			}
			if ok {
				link(a, b, way.LengthUm)
			}
		}
	}
	d := make([]float64, n+2)
	done := make([]bool, n+2)
	for i := range d {
		d[i] = math.Inf(1)
	}
	d[n] = 0
	for {
		i := -1
		for k := range d {
			if !done[k] && !math.IsInf(d[k], 1) && (i < 0 || d[k] < d[i]) {
				i = k
			}
		}
		if i < 0 || i == n+1 {
			return d[n+1] + tight*(from.length+to.length)
		}
		done[i] = true
		for _, e := range adj[i] {
			d[e.to] = min(d[e.to], d[i]+e.cost)
		}
	}
}

func (p *Path) points() (out []geom.Point) {
	for _, l := range p.Legs {
		out = appendNew(out, l.Points)
	}
	return out
}

// checkPath checks a path with code that shares nothing with the search.
func checkPath(t *testing.T, k int, m *floor.Map, p *Path, s, g geom.Point, r int64, w float64) {
	t.Helper()
	pts := p.points()
	if pts[0] != s || pts[len(pts)-1] != g {
		t.Fatalf("case %d: from %v to %v, wanted %v to %v", k, pts[0], pts[len(pts)-1], s, g)
	}
	length, tight := 0.0, 0.0
	for i, l := range p.Legs {
		along := 0.0
		for n := 1; n < len(l.Points); n++ {
			along += geom.Dist(l.Points[n-1], l.Points[n])
		}
		// Chords off by d are shorter by d/3R; 1e-3 for the radii there are here.
		if along > l.LengthUm+1e-3 || along < l.LengthUm*(1-1e-3)-1 {
			t.Fatalf("case %d: leg %d is %v long, said to be %v", k, i, along, l.LengthUm)
		}
		if i > 0 && p.Legs[i-1].Points[len(p.Legs[i-1].Points)-1] != l.Points[0] {
			t.Fatalf("case %d: leg %d begins at %v, after %v", k, i, l.Points, p.Legs[i-1].Points)
		}
		length += l.LengthUm
		if l.Tight {
			tight += l.LengthUm
		}
	}
	if c := length + w*tight; math.Abs(c-p.CostUm) > 1e-9*c+1e-3 {
		t.Fatalf("case %d: cost %v, its legs' %v", k, p.CostUm, c)
	}
	if f := check.Way(m, pts, r, 1); f.Problem != "" {
		for i, l := range p.Legs {
			t.Logf("leg %d tight %v: %v", i, l.Tight, l.Points[:min(6, len(l.Points))])
		}
		t.Fatalf("case %d: r %d: %s %+v", k, r, f.Problem, f)
	}
}

func freePoint(rng *rand.Rand, o *plain, r float64) (geom.Point, bool) {
	for range 50 {
		p := randomPoint(rng, o.m.Bounds())
		if d, _, _ := o.feet(p); d >= r {
			return p, true
		}
	}
	return geom.Point{}, false
}

// TestBalancedEqualsDijkstra compares the cost with the plain twin's and checks every
// path, and that one is found exactly when the widest way is wide enough.
func TestBalancedEqualsDijkstra(t *testing.T) {
	const seed = 5
	t.Logf("seed %d", seed)
	cases, found, none, mixed := 35, 0, 0, 0
	if slow() {
		cases = 500
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 40+rng.IntN(100), 40+rng.IntN(100))
		o := plainOf(m)
		g := graphOf(t, m, Need{MostUm: 2_000_000})
		p := []int64{300_000, 600_000, 1_000_000, 2_000_000, 433_333}[rng.IntN(5)]
		w := roadsOf(t, g, p)
		for range 3 {
			r := []int64{0, 1, 100_000, 250_000, p}[rng.IntN(5)]
			r = min(r, p)
			weight := []float64{0, 0.5, 1, 3}[rng.IntN(4)]
			s, ok1 := freePoint(rng, o, float64(max(1, r)))
			e, ok2 := freePoint(rng, o, float64(max(1, r)))
			if !ok1 || !ok2 {
				continue
			}
			path, ok, err := w.Balanced(context.Background(), s, e, r, weight)
			if err != nil {
				t.Fatal(err)
			}
			want := dijkstra(t, w, s, e, float64(r), weight)
			if ok != !math.IsInf(want, 1) || ok && math.Abs(path.CostUm-want) > 1e-9*want+1e-6 {
				t.Fatalf("case %d: %v to %v at %d, %d, weight %v: cost %v (%v), Dijkstra's %v", k, s, e, r, p, weight, path.CostUm, ok, want)
			}
			beta, joined, err := w.Widest(context.Background(), s, e)
			if err != nil {
				t.Fatal(err)
			}
			// Clearances between p and the mesh's shortfall above it may be lost.
			if ok != (joined && beta.ClearanceUm >= float64(r)-tieUm) && r < p {
				t.Fatalf("case %d: %v to %v at %d, %d: found %v, widest %v %+v", k, s, e, r, p, ok, joined, beta)
			}
			if !ok {
				none++
				continue
			}
			found++
			if len(path.Legs) > 2 {
				mixed++
			}
			checkPath(t, k, m, &path, s, e, r, weight)
		}
	}
	t.Logf("%d found, %d of them of more than two legs; %d refused", found, mixed, none)
	if found < cases || mixed < cases/10 || none == 0 {
		t.Error("too few cases of a kind")
	}
}

func TestArgumentsOutOfRange(t *testing.T) {
	m := newFloor(t, 64, 64, 1_000_000, false)
	g := graphOf(t, m, Need{MostUm: 1_000_000})
	w := roadsOf(t, g, 500_000)
	p := geom.Point{X: 1_600_000, Y: 1_600_000}
	var re *RangeError
	for _, c := range []struct {
		r int64
		w float64
	}{{-1, 0}, {500_001, 0}, {0, -1}, {0, math.NaN()}, {0, 1e7}} {
		if _, _, err := w.Balanced(context.Background(), p, p, c.r, c.w); !errors.As(err, &re) {
			t.Errorf("r %v, weight %v: error %v", c.r, c.w, err)
		}
	}
	var ne *NeedError
	for _, n := range []Need{{}, {MostUm: 1_000_001}, {LeastUm: 5, MostUm: 4}, {LeastUm: -1, MostUm: 4}, {MostUm: 4, MarginUm: 1}} {
		if _, err := Build(context.Background(), g.f, n); !errors.As(err, &ne) {
			t.Errorf("%+v: error %v", n, err)
		}
	}
	for _, n := range []anyangle.Need{{ClearanceUm: 0}, {ClearanceUm: 1_000_001}, {ClearanceUm: 5, Zones: true}} {
		open, err := anyangle.Build(context.Background(), m, n)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := NewRoads(context.Background(), g, open); !errors.Is(err, ErrMesh) {
			t.Errorf("%+v: error %v", n, err)
		}
	}
}
