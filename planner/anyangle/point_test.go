package anyangle

import (
	"container/heap"
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/geom"
)

// latticeSees says whether the open segment between lattice vertices avoids solid
// cells and does not pass between two that touch, by walking over the cells exactly.
func (m *mask) latticeSees(ax, ay, bx, by int) bool {
	dx, dy := bx-ax, by-ay
	sx, sy := sign(dx), sign(dy)
	dx, dy = dx*sx, dy*sy
	solid := func(x, y int) bool { // the cell whose corner nearest to a is (x, y) in steps from a
		cx, cy := ax+sx*x, ay+sy*y
		if sx < 0 {
			cx--
		}
		if sy < 0 {
			cy--
		}
		return m.at(cx, cy)
	}
	if dx == 0 {
		for y := 0; y < dy; y++ {
			c := ay + sy*y
			if sy < 0 {
				c--
			}
			if m.at(ax-1, c) && m.at(ax, c) {
				return false
			}
		}
		return m.throughVertices(ax, ay, 0, sy, dy)
	}
	if dy == 0 {
		for x := 0; x < dx; x++ {
			c := ax + sx*x
			if sx < 0 {
				c--
			}
			if m.at(c, ay-1) && m.at(c, ay) {
				return false
			}
		}
		return m.throughVertices(ax, ay, sx, 0, dx)
	}
	x, y := 0, 0
	for {
		if solid(x, y) {
			return false
		}
		// Which border of cell (x, y) does the segment leave by?
		switch c := (x+1)*dy - (y+1)*dx; {
		case c < 0:
			x++
		case c > 0:
			y++
		default:
			if x+1 == dx {
				return true
			}
			if solid(x+1, y) && solid(x, y+1) {
				return false
			}
			x++
			y++
		}
	}
}

// throughVertices says whether a way along a lattice line passes between no two
// cells that touch in a vertex of it.
func (m *mask) throughVertices(ax, ay, sx, sy, n int) bool {
	for i := 1; i < n; i++ {
		x, y := ax+sx*i, ay+sy*i
		a, b, c, d := m.at(x-1, y-1), m.at(x, y-1), m.at(x-1, y), m.at(x, y)
		if a && d && !b && !c || b && c && !a && !d {
			return false
		}
	}
	return true
}

func sign(a int) int {
	switch {
	case a < 0:
		return -1
	case a > 0:
		return 1
	}
	return 0
}

type graphItem struct {
	d float64
	i int
}
type graphHeap []graphItem

func (h graphHeap) Len() int           { return len(h) }
func (h graphHeap) Less(i, j int) bool { return h[i].d < h[j].d }
func (h graphHeap) Swap(i, j int)      { h[i], h[j] = h[j], h[i] }
func (h *graphHeap) Push(x any)        { *h = append(*h, x.(graphItem)) }
func (h *graphHeap) Pop() any          { o := *h; x := o[len(o)-1]; *h = o[:len(o)-1]; return x }

// latticeShortest is Dijkstra over the visibility graph of the convex corners, in cells.
func (m *mask) latticeShortest(sx, sy, gx, gy int) float64 {
	type v struct{ x, y int }
	vs := []v{{sx, sy}, {gx, gy}}
	for y := 0; y <= m.h; y++ {
		for x := 0; x <= m.w; x++ {
			n := 0
			for _, s := range []bool{m.at(x-1, y-1), m.at(x, y-1), m.at(x-1, y), m.at(x, y)} {
				if s {
					n++
				}
			}
			if n == 1 {
				vs = append(vs, v{x, y})
			}
		}
	}
	d := make([]float64, len(vs))
	for i := range d {
		d[i] = math.Inf(1)
	}
	d[0] = 0
	h := &graphHeap{{0, 0}}
	for h.Len() > 0 {
		it := heap.Pop(h).(graphItem)
		if it.d > d[it.i] {
			continue
		}
		if it.i == 1 {
			return it.d
		}
		for k := range vs {
			nd := it.d + math.Hypot(float64(vs[k].x-vs[it.i].x), float64(vs[k].y-vs[it.i].y))
			if nd < d[k] && m.latticeSees(vs[it.i].x, vs[it.i].y, vs[k].x, vs[k].y) {
				d[k] = nd
				heap.Push(h, graphItem{nd, k})
			}
		}
	}
	return math.Inf(1)
}

// TestPointRobotIsOptimal compares with the visibility graph of the solid cells.
func TestPointRobotIsOptimal(t *testing.T) {
	const seed = 1
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 0))
	found, cases := 0, 400
	if slow() {
		cases = 8000
	}
	for k := range cases {
		w, h := 3+rng.IntN(20), 3+rng.IntN(20)
		if k%10 == 0 {
			w, h = 50+rng.IntN(40), 50+rng.IntN(40)
		}
		p := []float64{0.05, 0.2, 0.35, 0.45}[k%4]
		if w > 40 {
			p = 0.03
		}
		m := randomMask(rng, w, h, p)
		if k%4 == 3 { // long walls over several blocks
			w, h = 70+rng.IntN(90), 10+rng.IntN(140)
			m = newMask(w, h)
			for range 3 + rng.IntN(12) {
				x, y := rng.IntN(w), rng.IntN(h)
				m.fill(x, y, x+1+rng.IntN(40), y+1+rng.IntN(30), true)
			}
		}
		g, err := Build(context.Background(), m.floor(t, false), Need{})
		if err != nil {
			t.Fatal(err)
		}
		for range 6 {
			sx, sy, gx, gy := rng.IntN(w+1), rng.IntN(h+1), rng.IntN(w+1), rng.IntN(h+1)
			if sx == gx && sy == gy {
				continue
			}
			want := m.latticeShortest(sx, sy, gx, gy)
			way, ok, err := g.Shortest(context.Background(), at50(sx, sy), at50(gx, gy))
			if err != nil {
				t.Fatal(err)
			}
			if !ok {
				if !math.IsInf(want, 1) {
					t.Fatalf("case %d: (%d,%d) to (%d,%d): no way, wanted %v", k, sx, sy, gx, gy, want)
				}
				continue
			}
			found++
			if got := way.LengthUm / 50_000; math.IsInf(want, 1) || math.Abs(got-want) > 1e-9*want+1e-9 {
				t.Fatalf("case %d (%dx%d): (%d,%d) to (%d,%d): %v, wanted %v\n%v\n%s", k, w, h, sx, sy, gx, gy, got, want, way.Points, m)
			}
		}
	}
	if found < 500 {
		t.Errorf("only %d ways found", found)
	}
}

func at50(x, y int) geom.Point { return geom.Point{X: float64(x) * 50_000, Y: float64(y) * 50_000} }

func (m *mask) String() string {
	var b []byte
	for y := m.h - 1; y >= 0; y-- {
		for x := range m.w {
			c := byte('.')
			if m.at(x, y) {
				c = '#'
			}
			b = append(b, c)
		}
		b = append(b, '\n')
	}
	return string(b)
}
