package voronoi

import (
	"container/heap"
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/clearance"
)

// flood is the widest way between two places of a fine square lattice, moving to the
// eight neighbours, by the clearance of its places alone. With places step apart, a
// disc's way passes within step/sqrt2 of a place, and a move between neighbours may
// pass step/sqrt2 nearer to a solid than both: the answer is within 1.5 step of the
// truth.
func flood(f *clearance.Field, step float64, s, t [2]int) float64 {
	b := f.Bounds()
	nx, ny := int(b.Width()/step)+1, int(b.Height()/step)+1
	um := make([]float64, nx*ny)
	for i := range um {
		um[i] = f.At(geom.Point{X: b.Min.X + float64(i%nx)*step, Y: b.Min.Y + float64(i/nx)*step}).Um
	}
	best := make([]float64, nx*ny)
	h := &wide{}
	from, to := s[1]*nx+s[0], t[1]*nx+t[0]
	best[from] = um[from]
	heap.Push(h, wideItem{um[from], from})
	for h.Len() > 0 {
		it := heap.Pop(h).(wideItem)
		if it.i == to {
			return it.um
		}
		if it.um < best[it.i] {
			continue
		}
		for dy := -1; dy <= 1; dy++ {
			for dx := -1; dx <= 1; dx++ {
				x, y := it.i%nx+dx, it.i/nx+dy
				if x < 0 || y < 0 || x >= nx || y >= ny {
					continue
				}
				k := y*nx + x
				if v := min(it.um, um[k]); v > best[k] {
					best[k] = v
					heap.Push(h, wideItem{v, k})
				}
			}
		}
	}
	return 0
}

type wideItem struct {
	um float64
	i  int
}
type wide []wideItem

func (w wide) Len() int           { return len(w) }
func (w wide) Less(i, j int) bool { return w[i].um > w[j].um }
func (w wide) Swap(i, j int)      { w[i], w[j] = w[j], w[i] }
func (w *wide) Push(v any)        { *w = append(*w, v.(wideItem)) }
func (w *wide) Pop() any          { v := (*w)[len(*w)-1]; *w = (*w)[:len(*w)-1]; return v }

// TestClearestHasTheLargestBottleneck checks beta against a flood of the clearance
// field, and the way found: it has that clearance, and among the ways along the edges that
// have it none is shorter (Dijkstra's).
func TestClearestHasTheLargestBottleneck(t *testing.T) {
	const seed = 8
	t.Logf("seed %d", seed)
	cases, tight, none := 20, 0, 0
	if slow() {
		cases = 400
	}
	const step = testCell / 2
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 30+rng.IntN(70), 30+rng.IntN(70))
		g := graphOf(t, m, Need{MostUm: 2_000_000})
		w := roadsOf(t, g, []int64{2_000_000, 500_000}[rng.IntN(2)])
		b := m.Bounds()
		for range 3 {
			pick := func() [2]int {
				return [2]int{rng.IntN(int(b.Width()/step) + 1), rng.IntN(int(b.Height()/step) + 1)}
			}
			i, j := pick(), pick()
			s, e := geom.Point{X: float64(i[0]) * step, Y: float64(i[1]) * step}, geom.Point{X: float64(j[0]) * step, Y: float64(j[1]) * step}
			want := min(flood(g.f, step, i, j), w.p)
			path, beta, ok, err := w.Clearest(context.Background(), s, e, 0)
			if err != nil {
				t.Fatal(err)
			}
			got := 0.0
			if ok {
				got = beta.ClearanceUm
			}
			if math.Abs(got-want) > 1.5*step {
				t.Fatalf("case %d: %v to %v: bottleneck %+v, by flooding %v", k, s, e, beta, want)
			}
			if !ok {
				none++
				continue
			}
			if beta.ClearanceUm < w.p {
				tight++
				if d := g.f.At(beta.At).Um; math.Abs(d-beta.ClearanceUm) > 1e-3 {
					t.Fatalf("case %d: clearance %v at the bottleneck %+v", k, d, beta)
				}
			}
			pts := path.points()
			least := math.Inf(1)
			for n := 1; n < len(pts); n++ {
				least = min(least, g.f.Segment(pts[n-1], pts[n]).Um)
			}
			if len(pts) > 1 && least < beta.ClearanceUm-check.SlackUm {
				t.Fatalf("case %d: clearance %v along the way, its bottleneck %v", k, least, beta.ClearanceUm)
			}
			checkPath(t, k, m, &path, s, e, int64(beta.ClearanceUm), 0)
			if d := dijkstra(t, w, s, e, beta.ClearanceUm-tieUm, 0); math.Abs(d-path.CostUm) > 1e-9*d+1e-6 {
				t.Fatalf("case %d: %v to %v: cost %v, Dijkstra's %v", k, s, e, path.CostUm, d)
			}
		}
	}
	t.Logf("%d narrow, %d refused", tight, none)
	if tight < cases/2 || none == 0 {
		t.Error("too few cases of a kind")
	}
}

// TestGatesAreGabrielPairs checks that the open disc on a gate's diameter is empty and
// its ends are on solids.
func TestGatesAreGabrielPairs(t *testing.T) {
	const seed = 9
	t.Logf("seed %d", seed)
	gates := 0
	for k := range scaled(60, 1500) {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 40+rng.IntN(100), 40+rng.IntN(100))
		g := graphOf(t, m, Need{MostUm: 2_000_000})
		for v := range g.Gates {
			gates++
			if !within(geom.Dist(v.X, v.Y), v.WidthUm, 1e-3) {
				t.Fatalf("case %d: %+v is %v wide", k, v, geom.Dist(v.X, v.Y))
			}
			if d := g.f.At(v.At).Um; !within(2*d, v.WidthUm, 1e-3) {
				t.Fatalf("case %d: solids %v from the middle of %+v", k, d, v)
			}
			for _, p := range [2]geom.Point{v.X, v.Y} {
				if d := g.f.At(p).Um; d > 1e-3 {
					t.Fatalf("case %d: %v of %+v is %v from the nearest solid", k, p, v, d)
				}
			}
		}
	}
	if gates < 150 {
		t.Errorf("%d gates", gates)
	}
	t.Logf("%d gates", gates)
}

// TestEdgesAreDrawnWithTheirClearance checks the points of edges against the field.
func TestEdgesAreDrawnWithTheirClearance(t *testing.T) {
	const seed = 16
	t.Logf("seed %d", seed)
	edges := 0
	for k := range 30 {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 40+rng.IntN(100), 40+rng.IntN(100))
		g := graphOf(t, m, Need{MostUm: 1_900_000})
		for e := range g.Edges {
			edges++
			pts, um := e.Points()
			length, least := 0.0, math.Inf(1)
			for i, p := range pts {
				if d := g.f.At(p).Um; !within(d, um[i], 1e-3) {
					t.Fatalf("case %d: clearance %v at %v, said to be %v", k, d, p, um[i])
				}
				if i > 0 {
					length += geom.Dist(pts[i-1], p)
				}
				least = min(least, um[i])
			}
			if !within(least, e.SmallestUm, 1e-3) || length > e.LengthUm+1 || length < e.LengthUm*0.99-drawUm {
				t.Fatalf("case %d: %+v drawn %v long, clearance %v", k, e, length, least)
			}
			if geom.Dist(pts[0], e.From.At) > 1 || geom.Dist(pts[len(pts)-1], e.To.At) > 1 {
				t.Fatalf("case %d: %+v drawn from %v to %v", k, e, pts[0], pts[len(pts)-1])
			}
		}
	}
	t.Logf("%d edges", edges)
}

// Two doors, the ends beside walls with less room than either: the wider door counts, not
// the nearer.
func TestRoomiestLeavesOutTheEnds(t *testing.T) {
	const side = 8_000_000
	m, err := newFloor(t, 160, 160, 2_000_000, false).Apply([]floor.Edit{
		put("a", rectUm(3_900_000, 0, 4_100_000, 1_000_000)), put("b", rectUm(3_900_000, 2_000_000, 4_100_000, 6_000_000)),
		put("c", rectUm(3_900_000, 7_400_000, 4_100_000, side)),
	})
	if err != nil {
		t.Fatal(err)
	}
	w := roadsOf(t, graphOf(t, m, Need{MostUm: 2_000_000}), 2_000_000)
	s, e := geom.Point{X: 3_700_000, Y: 2_500_000}, geom.Point{X: 4_300_000, Y: 2_500_000}
	for _, c := range []struct {
		beta float64
		find func() (Path, Bottleneck, bool, error)
	}{
		{200_000, func() (Path, Bottleneck, bool, error) { return w.Clearest(context.Background(), s, e, 200_000) }},
		{700_000, func() (Path, Bottleneck, bool, error) { return w.Roomiest(context.Background(), s, e, 200_000) }},
	} {
		p, b, ok, err := c.find()
		if err != nil || !ok || math.Abs(b.ClearanceUm-c.beta) > 1e-3 {
			t.Fatalf("%+v, %v, %v, wanted %v", b, ok, err, c.beta)
		}
		high := 0.0
		for _, q := range p.points() {
			high = max(high, q.Y)
		}
		if (high > 5_000_000) != (c.beta == 700_000) {
			t.Errorf("bottleneck %v: the way goes up to %v", c.beta, high)
		}
		if f := check.Way(m, p.points(), 200_000, 1); f.Problem != "" {
			t.Error(f.Problem)
		}
	}
	if _, _, ok, _ := w.Roomiest(context.Background(), s, e, 200_001); ok {
		t.Error("found, with ends that have less than is required")
	}
}
