package anyangle

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// rackHall has rows of racks, 2 cells of aisle for each of rack, doors in the racks.
func rackHall(n int) []rect {
	rng := rand.New(rand.NewPCG(7, 7))
	var out []rect
	for y := 40; y+24 <= n-40; y += 24 + 60 {
		for x := 40; x < n-80; {
			l := 120 + rng.IntN(120)
			end := min(x+l, n-40)
			out = append(out, rect{float64(x), float64(y), float64(end), float64(y + 24)})
			x = end + 50 + rng.IntN(20)
		}
	}
	return out
}

// rect is an axis-aligned rectangle in cells.
type rect struct{ x0, y0, x1, y1 float64 }

func (r rect) ring(h, turn float64, n int) []geom.Point {
	s, c := math.Sincos(turn)
	m := float64(n) / 2
	var ring []geom.Point
	for _, p := range [4][2]float64{{r.x0, r.y0}, {r.x1, r.y0}, {r.x1, r.y1}, {r.x0, r.y1}} {
		x, y := p[0]-m, p[1]-m
		q := geom.Point{X: math.Round((m + x*c - y*s) * h), Y: math.Round((m + x*s + y*c) * h)}
		lim := float64(n) * h
		q.X, q.Y = min(max(q.X, 0), lim), min(max(q.Y, 0), lim)
		ring = append(ring, q)
	}
	return ring
}

const benchCell = 50_000

// hallFloor is a rack hall turned about its middle, as raster cells or as polygons.
func hallFloor(tb testing.TB, n int, turn float64, vector bool) *floor.Map {
	f, err := floor.New(floor.Settings{ResolutionUm: benchCell, Columns: n, Rows: n, CapUm: 5_000_000})
	if err != nil {
		tb.Fatal(err)
	}
	var edits []floor.Edit
	for i, r := range rackHall(n) {
		ring := r.ring(benchCell, turn, n)
		s := floor.NewPolygon([][]geom.Point{ring}, 0)
		if vector {
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: fmt.Sprintf("rack-%d", i), Kind: floor.Solid, Shape: s}})
		} else if turn == 0 {
			edits = append(edits, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: int(r.x0), Y0: int(r.y0), X1: int(r.x1), Y1: int(r.y1)}})
		} else {
			edits = append(edits, floor.Edit{Kind: floor.PaintPolygon, Fill: floor.Occupied, Shape: s})
		}
	}
	if f, err = f.Apply(edits); err != nil {
		tb.Fatal(err)
	}
	return f
}

// maze is a perfect maze of corridors some cells wide with walls one cell thick,
// carved depth first.
func maze(n, corridor int) *mask {
	m := newMask(n, n)
	m.fill(0, 0, n, n, true)
	rng := rand.New(rand.NewPCG(3, 3))
	step := corridor + 1
	k := (n - 1) / step
	open := func(x, y int) { m.fill(1+x*step, 1+y*step, 1+x*step+corridor, 1+y*step+corridor, false) }
	seen := make([]bool, k*k)
	stack := [][2]int{{0, 0}}
	seen[0] = true
	open(0, 0)
	for len(stack) > 0 {
		p := stack[len(stack)-1]
		var next [][2]int
		for _, d := range [4][2]int{{1, 0}, {0, 1}, {-1, 0}, {0, -1}} {
			x, y := p[0]+d[0], p[1]+d[1]
			if x >= 0 && y >= 0 && x < k && y < k && !seen[y*k+x] {
				next = append(next, d)
			}
		}
		if len(next) == 0 {
			stack = stack[:len(stack)-1]
			continue
		}
		d := next[rng.IntN(len(next))]
		x, y := p[0]+d[0], p[1]+d[1]
		seen[y*k+x] = true
		open(x, y)
		wx, wy := 1+p[0]*step, 1+p[1]*step
		m.fill(wx+min(0, d[0]), wy+min(0, d[1]), wx+corridor+max(0, d[0]), wy+corridor+max(0, d[1]), false)
		stack = append(stack, [2]int{x, y})
	}
	return m
}

// gridAStar is the plain twin: an array A* over free cells, 8 neighbours without corner
// cutting, octile estimate, ties towards larger g.
type gridAStar struct {
	w, h   int
	free   []bool
	g      []float64
	stamp  []int32
	closed []int32
	now    int32
	q      queue
}

func newGridAStar(w, h int, free []bool) *gridAStar {
	return &gridAStar{w: w, h: h, free: free, g: make([]float64, w*h), stamp: make([]int32, w*h), closed: make([]int32, w*h)}
}

func (a *gridAStar) plan(s, t int) (float64, bool) {
	a.now++
	a.q.reset()
	tx, ty := t%a.w, t/a.w
	est := func(i int) float64 {
		dx, dy := i%a.w-tx, i/a.w-ty
		if dx < 0 {
			dx = -dx
		}
		if dy < 0 {
			dy = -dy
		}
		return float64(max(dx, dy)) + (math.Sqrt2-1)*float64(min(dx, dy))
	}
	a.g[s], a.stamp[s] = 0, a.now
	a.q.push(est(s), 0, int32(s))
	for {
		n, _, ok := a.q.pop()
		if !ok {
			return 0, false
		}
		i := int(n)
		if i == t {
			return a.g[i], true
		}
		if a.closed[i] == a.now {
			continue
		}
		a.closed[i] = a.now
		x, y := i%a.w, i/a.w
		var can [3][3]bool
		for dy := -1; dy <= 1; dy++ {
			for dx := -1; dx <= 1; dx++ {
				nx, ny := x+dx, y+dy
				can[dy+1][dx+1] = nx >= 0 && ny >= 0 && nx < a.w && ny < a.h && a.free[ny*a.w+nx]
			}
		}
		for dy := -1; dy <= 1; dy++ {
			for dx := -1; dx <= 1; dx++ {
				if dx == 0 && dy == 0 || !can[dy+1][dx+1] || !can[1][dx+1] || !can[dy+1][1] {
					continue
				}
				c := 1.0
				if dx != 0 && dy != 0 {
					c = math.Sqrt2
				}
				k := i + dy*a.w + dx
				if g := a.g[i] + c; a.stamp[k] != a.now || g < a.g[k]-1e-9 {
					a.g[k], a.stamp[k] = g, a.now
					a.q.push(g+est(k), g, int32(k))
				}
			}
		}
	}
}

// BenchmarkShortestVsGridAStar reports the total time of the plain twin over that of
// this package (astar/shortest) for the same tasks.
func BenchmarkShortestVsGridAStar(b *testing.B) {
	for _, c := range []struct {
		name string
		mk   func() *floor.Map
		r    int64
	}{
		{"hall1024", func() *floor.Map { return hallFloor(b, 1024, 0, false) }, 450_000},
		{"hall1024-vector", func() *floor.Map { return hallFloor(b, 1024, 0, true) }, 450_000},
		{"turned1024-vector", func() *floor.Map { return hallFloor(b, 1024, 7*math.Pi/180, true) }, 450_000},
		{"turned1024-raster", func() *floor.Map { return hallFloor(b, 1024, 7*math.Pi/180, false) }, 450_000},
		{"hall4096", func() *floor.Map { return hallFloor(b, 4096, 0, false) }, 450_000},
		{"maze512", func() *floor.Map { return maze(512, 4).floor(b, false) }, 0},
		{"random512", func() *floor.Map {
			return randomMask(rand.New(rand.NewPCG(5, 5)), 512, 512, 0.2).floor(b, false)
		}, 0},
	} {
		b.Run(c.name, func(b *testing.B) {
			f := c.mk()
			began := time.Now()
			g, err := Build(context.Background(), f, Need{ClearanceUm: c.r})
			if err != nil {
				b.Fatal(err)
			}
			build := time.Since(began)
			s := f.Settings()
			w, h := s.Columns, s.Rows
			// The twin's mask: cells whose middle has the clearance.
			free := make([]bool, w*h)
			for i := range free {
				p := s.Vertex(i%w, i/w)
				free[i] = g.Contains(geom.Point{X: p.X + benchCell/2, Y: p.Y + benchCell/2})
			}
			twin := newGridAStar(w, h, free)
			rng := rand.New(rand.NewPCG(11, 11))
			type task struct{ s, t int }
			var tasks []task
			for len(tasks) < 100 {
				s, t := rng.IntN(w*h), rng.IntN(w*h)
				if free[s] && free[t] {
					if _, ok := twin.plan(s, t); ok {
						tasks = append(tasks, task{s, t})
					}
				}
			}
			mid := func(i int) geom.Point {
				p := s.Vertex(i%w, i/w)
				return geom.Point{X: p.X + benchCell/2, Y: p.Y + benchCell/2}
			}
			var plain, own time.Duration
			var each []time.Duration
			var expanded int64
			for b.Loop() {
				plain, own, expanded, each = 0, 0, 0, each[:0]
				for _, k := range tasks {
					t0 := time.Now()
					d, _ := twin.plan(k.s, k.t)
					t1 := time.Now()
					way, ok, err := g.Shortest(context.Background(), mid(k.s), mid(k.t))
					t2 := time.Now()
					if err != nil || !ok || way.LengthUm/benchCell > d+1e-6 {
						b.Fatalf("%v to %v: %v, twin %v", mid(k.s), mid(k.t), way.LengthUm/benchCell, d)
					}
					plain += t1.Sub(t0)
					own += t2.Sub(t1)
					each = append(each, t2.Sub(t1))
					expanded += way.Expanded
				}
			}
			slices.Sort(each)
			cells := 0
			for _, k := range g.blocks {
				cells += len(k.cells)
			}
			b.ReportMetric(float64(plain)/float64(own), "astar/shortest")
			b.ReportMetric(float64(each[len(each)/2].Microseconds()), "p50-µs")
			b.ReportMetric(float64(each[len(each)*95/100].Microseconds()), "p95-µs")
			b.ReportMetric(float64(expanded)/float64(len(tasks)), "expanded")
			b.ReportMetric(float64(own.Nanoseconds())/float64(max(1, expanded)), "ns/expanded")
			b.ReportMetric(float64(cells), "cells")
			b.ReportMetric(float64(build.Milliseconds()), "build-ms")
		})
	}
}

// BenchmarkAdvanceVsBuild reports the time of making the mesh from scratch over that
// of bringing it up to date after a change of 1 m² (rebuild/advance).
func BenchmarkAdvanceVsBuild(b *testing.B) {
	for _, n := range []int{1024, 4096} {
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			f := hallFloor(b, n, 0, false)
			need := Need{ClearanceUm: 450_000}
			t0 := time.Now()
			g, err := Build(context.Background(), f, need)
			if err != nil {
				b.Fatal(err)
			}
			scratch := time.Since(t0)
			rng := rand.New(rand.NewPCG(1, 1))
			var took time.Duration
			steps := 0
			for b.Loop() {
				x, y := rng.IntN(n-20), rng.IntN(n-20)
				next, err := f.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupancy(rng.IntN(2)),
					Rect: floor.CellRect{X0: x, Y0: y, X1: x + 20, Y1: y + 20}}})
				if err != nil {
					b.Fatal(err)
				}
				change := floor.Diff(f, next)
				t0 := time.Now()
				if g, err = g.Advance(context.Background(), next, change); err != nil {
					b.Fatal(err)
				}
				took += time.Since(t0)
				steps++
				f = next
			}
			b.ReportMetric(float64(scratch)/(float64(took)/float64(steps)), "rebuild/advance")
			b.ReportMetric(float64(took.Microseconds())/float64(steps), "µs/advance")
		})
	}
}

// BenchmarkBuild reports the time of a mesh from scratch.
func BenchmarkBuild(b *testing.B) {
	f := hallFloor(b, 1024, 7*math.Pi/180, false)
	for b.Loop() {
		if _, err := Build(context.Background(), f, Need{ClearanceUm: 450_000}); err != nil {
			b.Fatal(err)
		}
	}
}
