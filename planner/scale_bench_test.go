package planner_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"runtime"
	"slices"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	"example.com/wideberth/planner/internal/plainfloor"
)

// aislesCrossed is how many rows of racks lie between start and goal of the tasks below.
const aislesCrossed = 8

// acrossAisles draws a task in a rack hall of n by n cells: from the middle of an aisle to that
// of another, aislesCrossed rows of racks away and at most 10 m along.
func acrossAisles(rng *rand.Rand, n int, o planner.Options) planner.Request {
	const first, apart = 40 + 24 + 30, 24 + 60 // cells, as the hall is made
	aisles := (n - 40 - 24 - 40) / apart
	k := rng.IntN(aisles - aislesCrossed)
	x := 100 + rng.IntN(n-200)
	at := func(x, k int) planner.Pose {
		return planner.Pose{At: geom.Point{X: float64(x) * plainfloor.CellUm, Y: float64(first+apart*k) * plainfloor.CellUm}}
	}
	from, to := at(x, k), at(min(max(x+rng.IntN(400)-200, 100), n-100), k+aislesCrossed)
	if rng.IntN(2) == 0 {
		from, to = to, from
	}
	return planner.Request{Body: body(0.45), Start: from, Goal: to, Options: o}
}

// BenchmarkPlanAsHallGrows plans between aisles with as many rows of racks in between on halls of
// 1 to 64 million cells. It reports the median over tasks of the time of World.Plan, each the
// least of five, in microseconds for shortest and balanced; in milliseconds the making of a world, its first plan (which
// makes a mesh), and a patch of 1 m² with the first plan on the new version; and what
// the version and all that is kept for it take in memory. Run it with -benchtime 1x.
func BenchmarkPlanAsHallGrows(b *testing.B) {
	for _, n := range []int{1024, 2048, 4096, 8192} {
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			before := heapInUse()
			m, err := plainfloor.RackHall(n, 0, false)
			if err != nil {
				b.Fatal(err)
			}
			start := time.Now()
			w := newWorld(b, m)
			made := time.Since(start)
			rng := rand.New(rand.NewPCG(21, uint64(n)))
			short, roomy := planner.Options{Preference: planner.Shortest}, planner.Options{Preference: planner.Balanced}
			first := planOnce(b, w, acrossAisles(rng, n, short))
			planOnce(b, w, acrossAisles(rng, n, roomy))
			const tasks = 60
			for b.Loop() {
				for _, o := range []struct {
					name string
					o    planner.Options
				}{{"shortest_p50_us", short}, {"balanced_p50_us", roomy}} {
					var took []time.Duration
					for range tasks {
						took = append(took, planQuietly(b, w, acrossAisles(rng, n, o.o)))
					}
					b.ReportMetric(1000*ms(median(took)), o.name)
				}
			}
			var took []time.Duration
			for range 15 {
				q := acrossAisles(rng, n, short)
				x, y := rng.IntN(n-20), rng.IntN(n-20) // mostly far from the way
				start := time.Now()
				next, err := m.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: x, Y0: y, X1: x + 20, Y1: y + 20}}})
				if err != nil {
					b.Fatal(err)
				}
				v, err := w.Advance(context.Background(), next)
				if err != nil {
					b.Fatal(err)
				}
				if _, err := v.Plan(context.Background(), q); err != nil {
					b.Fatal(err)
				}
				took = append(took, time.Since(start))
			}
			b.ReportMetric(ms(made), "build_ms")
			b.ReportMetric(ms(first), "first_ms")
			b.ReportMetric(ms(median(took)), "push_plan_ms")
			b.ReportMetric(float64(heapInUse()-before)/1e6, "heap_MB")
			b.ReportMetric(0, "ns/op") // a mixture
			runtime.KeepAlive(w)
		})
	}
}

func planOnce(b *testing.B, w *planner.World, q planner.Request) time.Duration {
	start := time.Now()
	mustRoute(b, w, q)
	return time.Since(start)
}

// planQuietly is the least time of five plans, for other work on the machine only adds.
func planQuietly(b *testing.B, w *planner.World, q planner.Request) time.Duration {
	least := planOnce(b, w, q)
	for range 4 {
		least = min(least, planOnce(b, w, q))
	}
	return least
}

func ms(d time.Duration) float64 { return float64(d.Nanoseconds()) / 1e6 }

func median(ds []time.Duration) time.Duration {
	slices.Sort(ds)
	return ds[len(ds)/2]
}

func heapInUse() uint64 {
	var s runtime.MemStats
	runtime.GC()
	runtime.GC()
	runtime.ReadMemStats(&s)
	return s.HeapAlloc
}
