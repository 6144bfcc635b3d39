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
	"example.com/wideberth/planner/internal/plainfloor"
)

const benchCell = plainfloor.CellUm

// hallFloor is a rack hall turned about its middle, as raster cells or as polygons.
func hallFloor(tb testing.TB, n int, turn float64, vector bool) *floor.Map {
	f, err := plainfloor.RackHall(n, turn, vector)
	if err != nil {
		tb.Fatal(err)
	}
	return f
}

// maze is a perfect maze of corridors some cells wide with walls one cell thick.
func maze(n, corridor int) *mask {
	c := plainfloor.Maze(n, corridor)
	return &mask{c.W, c.H, c.Solid}
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
			twin := plainfloor.NewAStar(w, h, free)
			rng := rand.New(rand.NewPCG(11, 11))
			type task struct{ s, t int }
			var tasks []task
			for len(tasks) < 100 {
				s, t := rng.IntN(w*h), rng.IntN(w*h)
				if free[s] && free[t] {
					if _, ok := twin.Plan(s, t); ok {
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
					d, _ := twin.Plan(k.s, k.t)
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
