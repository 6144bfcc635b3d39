package planner_test

import (
	"context"
	"math"
	"runtime"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner"
)

// rackHall is a hall of n by n cells of 0.05 m: rows of racks 1.2 m deep and 3 m apart, each cut
// by a cross aisle of 2.5 m at a place that moves along from row to row.
func rackHall(tb testing.TB, n int) *floor.Map {
	set := settings(0, 0, float64(n)*0.05, float64(n)*0.05, 0.05)
	var es []floor.Edit
	rack := func(x0, x1, y int) {
		if x1 > x0 {
			es = append(es, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: x0, Y0: y, X1: x1, Y1: min(y+24, n)}})
		}
	}
	for k, y := 0, 60; y < n-60; k, y = k+1, y+84 {
		gap := 60 + (k*397)%(n-200)
		rack(0, gap, y)
		rack(gap+50, n, y)
	}
	return newMap(tb, set, es...)
}

func hallRequest(n int, rm planner.Roadmap, pref planner.Preference) planner.Request {
	b := body(0.4)
	b.MarginUm, b.PreferredUm = 100_000, 1_000_000
	far := float64(n)*0.05 - 1
	return planner.Request{Body: b, Start: pose(1, 1), Goal: pose(far, far), Options: planner.Options{
		Preference: pref, Roadmap: rm, TightWeight: 1, TightBelowUm: 1_000_000,
	}}
}

// plainAStar is the twin: A* as a textbook has it, over arrays of the whole floor's cells, a
// binary heap, float64 costs, the distance to solids looked up by nothing but the mask.
func plainAStar(free []bool, n, from, to int) float64 {
	type node struct {
		f  float64
		id int
	}
	g := make([]float64, n*n)
	for i := range g {
		g[i] = math.Inf(1)
	}
	closed := make([]bool, n*n)
	h := func(id int) float64 {
		dx, dy := math.Abs(float64(id%n-to%n)), math.Abs(float64(id/n-to/n))
		return max(dx, dy) + (math.Sqrt2-1)*min(dx, dy)
	}
	heap := []node{{h(from), from}}
	push := func(v node) {
		heap = append(heap, v)
		for i := len(heap) - 1; i > 0 && heap[i].f < heap[(i-1)/2].f; i = (i - 1) / 2 {
			heap[i], heap[(i-1)/2] = heap[(i-1)/2], heap[i]
		}
	}
	pop := func() node {
		v := heap[0]
		heap[0] = heap[len(heap)-1]
		heap = heap[:len(heap)-1]
		for i := 0; ; {
			c := 2*i + 1
			if c >= len(heap) {
				break
			}
			if c+1 < len(heap) && heap[c+1].f < heap[c].f {
				c++
			}
			if heap[i].f <= heap[c].f {
				break
			}
			heap[i], heap[c] = heap[c], heap[i]
			i = c
		}
		return v
	}
	g[from] = 0
	for len(heap) > 0 {
		v := pop()
		if v.id == to {
			return g[to]
		}
		if closed[v.id] {
			continue
		}
		closed[v.id] = true
		x, y := v.id%n, v.id/n
		at := func(x, y int) bool { return x >= 0 && y >= 0 && x < n && y < n && free[y*n+x] }
		for dy := -1; dy <= 1; dy++ {
			for dx := -1; dx <= 1; dx++ {
				if dx == 0 && dy == 0 || !at(x+dx, y+dy) || !at(x+dx, y) || !at(x, y+dy) {
					continue
				}
				k := (y+dy)*n + x + dx
				if c := g[v.id] + math.Hypot(float64(dx), float64(dy)); c < g[k] {
					g[k] = c
					push(node{c + h(k), k})
				}
			}
		}
	}
	return math.Inf(1)
}

// Plans on a hall of 1024 by 1024 cells, as times the plain twin's A* takes for the same
// grid; the first on a version with no free cells known yet, and the first after a patch.
func BenchmarkPlanRackHall(b *testing.B) {
	const n = 1024
	f := rackHall(b, n)
	w := newWorld(b, f)
	free := make([]bool, n*n)
	for r := range n {
		for c := range n {
			free[r*n+c] = true
			// Cells within 10 of a solid or the border, as the body's 0.5 m has it.
			if c < 10 || r < 10 || c >= n-10 || r >= n-10 {
				free[r*n+c] = false
			}
		}
	}
	for r := range n {
		for c := range n {
			if f.Solid(c, r) {
				for y := max(0, r-10); y <= min(n-1, r+10); y++ {
					for x := max(0, c-10); x <= min(n-1, c+10); x++ {
						free[y*n+x] = free[y*n+x] && math.Hypot(float64(max(0, abs(x-c)-1)), float64(max(0, abs(y-r)-1))) >= 10
					}
				}
			}
		}
	}
	var twin float64
	b.Run("twin", func(b *testing.B) {
		for b.Loop() {
			if plainAStar(free, n, 20*n+20, (n-21)*n+n-21) > 1e9 {
				b.Fatal("the twin finds no way")
			}
		}
		twin = float64(b.Elapsed()) / float64(b.N)
	})
	ctx := context.Background()
	for _, c := range []struct {
		name string
		rm   planner.Roadmap
		pref planner.Preference
		raw  bool
	}{
		{"grid8 unstraightened", planner.Grid8, planner.Shortest, true},
		{"shortest", planner.Auto, planner.Shortest, false},
		{"balanced", planner.Auto, planner.Balanced, false},
		{"quadtree", planner.Quadtree, planner.Shortest, false},
	} {
		b.Run(c.name, func(b *testing.B) {
			q := hallRequest(n, c.rm, c.pref)
			q.Options.KeepRoadmapPath = c.raw
			b.ReportAllocs()
			for b.Loop() {
				if a, err := w.Plan(ctx, q); err != nil || a.Route == nil {
					b.Fatal(a.Refusal, err)
				}
			}
			b.ReportMetric(float64(b.Elapsed())/float64(b.N)/twin, "twins")
		})
	}
	b.Run("first after a patch", func(b *testing.B) {
		q := hallRequest(n, planner.Auto, planner.Shortest)
		next := newMapFrom(b, f, []floor.Edit{solidBox("pallet", 10, 2, 11, 3)})
		for b.Loop() {
			b.StopTimer()
			v, err := w.Advance(ctx, next)
			if err != nil {
				b.Fatal(err)
			}
			b.StartTimer()
			if a, err := v.Plan(ctx, q); err != nil || a.Route == nil {
				b.Fatal(a.Refusal, err)
			}
		}
		b.ReportMetric(float64(b.Elapsed())/float64(b.N)/twin, "twins")
	})
}

func abs(v int) int { return max(v, -v) }

// What one plan across an open floor of 4096 by 4096 cells allocates.
func BenchmarkPlanLargeFloor(b *testing.B) {
	const n = 4096
	w := newWorld(b, rackHall(b, n))
	q := hallRequest(n, planner.Auto, planner.Balanced)
	var m0, m1 runtime.MemStats
	runtime.ReadMemStats(&m0)
	b.ReportAllocs()
	for b.Loop() {
		if a, err := w.Plan(context.Background(), q); err != nil || a.Route == nil {
			b.Fatal(a.Refusal, err)
		}
	}
	runtime.ReadMemStats(&m1)
	b.ReportMetric(float64(m1.HeapSys-m0.HeapSys)/(1<<20), "MiB-heap-grown")
}
