package voronoi

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
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/internal/testfloor"
)

// rackHall has rows of racks 1.2 m deep and 3 m apart, cut by aisles of 2.5 to 3.5 m.
func rackHall(n int) (out [][4]float64) {
	rng := rand.New(rand.NewPCG(7, 7))
	for y := 40; y+24 <= n-40; y += 24 + 60 {
		for x := 40; x < n-80; {
			end := min(x+120+rng.IntN(120), n-40)
			out = append(out, [4]float64{float64(x), float64(y), float64(end), float64(y + 24)})
			x = end + 50 + rng.IntN(20)
		}
	}
	return out
}

// hallFloor is a rack hall turned about its middle, as raster cells or as polygons.
func hallFloor(tb testing.TB, n int, turn float64, vector bool) *floor.Map {
	s, c := math.Sincos(turn)
	mid, lim := float64(n)/2, float64(n)*testCell
	var edits []floor.Edit
	for i, r := range rackHall(n) {
		var ring []geom.Point
		for _, p := range [4][2]float64{{r[0], r[1]}, {r[2], r[1]}, {r[2], r[3]}, {r[0], r[3]}} {
			x, y := p[0]-mid, p[1]-mid
			ring = append(ring, geom.Point{X: min(max(math.Round((mid+x*c-y*s)*testCell), 0), lim), Y: min(max(math.Round((mid+x*s+y*c)*testCell), 0), lim)})
		}
		shape := floor.NewPolygon([][]geom.Point{ring}, 0)
		switch {
		case vector:
			edits = append(edits, put(fmt.Sprintf("rack-%d", i), shape))
		case turn == 0:
			edits = append(edits, paint(int(r[0]), int(r[1]), int(r[2]), int(r[3]), floor.Occupied))
		default:
			edits = append(edits, floor.Edit{Kind: floor.PaintPolygon, Fill: floor.Occupied, Shape: shape})
		}
	}
	return newFloor(tb, n, n, 5_000_000, false, edits...)
}

func clutter(tb testing.TB, n int, share float64) *floor.Map {
	rng := rand.New(rand.NewPCG(5, 5))
	cells := make([]byte, n*n/4)
	for i := range n * n {
		if rng.Float64() < share {
			cells[i/4] |= 1 << (2 * (i % 4))
		}
	}
	return newFloor(tb, n, n, 5_000_000, false, floor.Edit{Kind: floor.PaintCells, Rect: floor.CellRect{X1: n, Y1: n}, Cells: cells})
}

var benchFloors = []struct {
	name string
	mk   func(tb testing.TB) *floor.Map
}{
	{"hall1024", func(tb testing.TB) *floor.Map { return hallFloor(tb, 1024, 0, false) }},
	{"hall1024-vector", func(tb testing.TB) *floor.Map { return hallFloor(tb, 1024, 0, true) }},
	{"turned1024-vector", func(tb testing.TB) *floor.Map { return hallFloor(tb, 1024, 7*math.Pi/180, true) }},
	{"turned1024-raster", func(tb testing.TB) *floor.Map { return hallFloor(tb, 1024, 7*math.Pi/180, false) }},
	{"hall4096", func(tb testing.TB) *floor.Map { return hallFloor(tb, 4096, 0, false) }},
	{"random512", func(tb testing.TB) *floor.Map { return clutter(tb, 512, 0.2) }},
	{"auction-hall", testfloor.Hall},
}

// BenchmarkAdvanceVsBuild reports the time of tracing all edges over that of bringing
// them up to date after a change of 1 m² (rebuild/advance).
func BenchmarkAdvanceVsBuild(b *testing.B) {
	for _, c := range benchFloors {
		b.Run(c.name, func(b *testing.B) {
			f := c.mk(b)
			field := fieldOf(b, f)
			t0 := time.Now()
			g, err := Build(context.Background(), field, Need{MostUm: min(5_000_000, field.Cap())})
			if err != nil {
				b.Fatal(err)
			}
			scratch := time.Since(t0)
			arcs := 0
			for _, k := range g.blocks {
				arcs += len(k.arcs)
			}
			rng := rand.New(rand.NewPCG(1, 1))
			var took time.Duration
			steps := 0
			s := f.Settings()
			for b.Loop() {
				x, y := rng.IntN(s.Columns-20), rng.IntN(s.Rows-20)
				next, err := f.Apply([]floor.Edit{paint(x, y, x+20, y+20, floor.Occupancy(rng.IntN(2)))})
				if err != nil {
					b.Fatal(err)
				}
				change := floor.Diff(f, next)
				if field, err = field.Advance(context.Background(), next, change); err != nil {
					b.Fatal(err)
				}
				t0 := time.Now()
				if g, err = g.Advance(context.Background(), field, change); err != nil {
					b.Fatal(err)
				}
				took += time.Since(t0)
				steps++
				f = next
			}
			b.ReportMetric(float64(scratch)/(float64(took)/float64(steps)), "rebuild/advance")
			b.ReportMetric(float64(took.Microseconds())/float64(steps), "µs/advance")
			b.ReportMetric(float64(scratch.Milliseconds()), "ms/build")
			b.ReportMetric(float64(arcs), "arcs")
		})
	}
}

// BenchmarkRoadsAdvanceVsNew reports the time of joining all edges with the open floor over that
// of bringing the roads up to date after a change of 1 m² (new/advance).
func BenchmarkRoadsAdvanceVsNew(b *testing.B) {
	for _, c := range benchFloors {
		if c.name == "random512" || c.name == "hall4096" && testing.Short() {
			continue
		}
		b.Run(c.name, func(b *testing.B) {
			ctx := context.Background()
			f := c.mk(b)
			s := f.Settings()
			field := fieldOf(b, f)
			g, err := Build(ctx, field, Need{MostUm: min(5_000_000, field.Cap())})
			if err != nil {
				b.Fatal(err)
			}
			open, err := anyangle.Build(ctx, f, anyangle.Need{ClearanceUm: 1_200_000})
			if err != nil {
				b.Fatal(err)
			}
			w, err := NewRoads(ctx, g, open)
			if err != nil {
				b.Fatal(err)
			}
			rng := rand.New(rand.NewPCG(1, 1))
			var whole, took []time.Duration
			paved, steps := 0, 0
			for b.Loop() {
				x, y := rng.IntN(s.Columns-20), rng.IntN(s.Rows-20)
				next, err := f.Apply([]floor.Edit{paint(x, y, x+20, y+20, floor.Occupancy(rng.IntN(2)))})
				if err != nil {
					b.Fatal(err)
				}
				change := floor.Diff(f, next)
				if field, err = field.Advance(ctx, next, change); err != nil {
					b.Fatal(err)
				}
				if g, err = g.Advance(ctx, field, change); err != nil {
					b.Fatal(err)
				}
				if open, err = open.Advance(ctx, next, change); err != nil {
					b.Fatal(err)
				}
				t0 := time.Now()
				n, err := w.Advance(ctx, g, open)
				if err != nil {
					b.Fatal(err)
				}
				t1 := time.Now()
				if _, err = NewRoads(ctx, g, open); err != nil {
					b.Fatal(err)
				}
				took, whole = append(took, t1.Sub(t0)), append(whole, time.Since(t1))
				for i := range n.paved {
					if n.paved[i] != w.paved[i] {
						paved++
					}
				}
				steps++
				f, w = next, n
			}
			slices.Sort(took)
			slices.Sort(whole)
			b.ReportMetric(float64(whole[steps/2])/float64(took[steps/2]), "new/advance")
			b.ReportMetric(float64(took[steps/2].Microseconds()), "µs/advance")
			b.ReportMetric(float64(whole[steps/2].Microseconds()), "µs/new")
			b.ReportMetric(float64(paved)/float64(steps), "blocks-paved")
			b.ReportMetric(float64(len(w.roads)), "roads")
		})
	}
}

// BenchmarkPlan reports how long roads take to make, and the median and 95th percentile of plans
// between random places, the first time (open distances to be searched for) and again.
func BenchmarkPlan(b *testing.B) {
	for _, c := range benchFloors {
		if c.name == "random512" || c.name == "hall4096" && testing.Short() {
			continue
		}
		for _, p := range []int64{800_000, 1_200_000, 5_000_000} {
			b.Run(fmt.Sprintf("%s/p=%.1fm", c.name, float64(p)/1e6), func(b *testing.B) {
				const r = 450_000
				ctx := context.Background()
				field := fieldOf(b, c.mk(b))
				g, err := Build(ctx, field, Need{MostUm: min(5_000_000, field.Cap())})
				if err != nil {
					b.Fatal(err)
				}
				open, err := anyangle.Build(ctx, field.Map(), anyangle.Need{ClearanceUm: p})
				if err != nil {
					b.Fatal(err)
				}
				t0 := time.Now()
				w, err := NewRoads(ctx, g, open)
				if err != nil {
					b.Fatal(err)
				}
				paved := time.Since(t0)
				rng := rand.New(rand.NewPCG(11, 11))
				bounds := field.Bounds()
				type task struct{ s, t geom.Point }
				var tasks []task
				for len(tasks) < 100 {
					s, t := randomPoint(rng, bounds), randomPoint(rng, bounds)
					if field.At(s).Um < r || field.At(t).Um < r {
						continue
					}
					if beta, ok, _ := w.Widest(ctx, s, t); ok && beta.ClearanceUm >= r {
						tasks = append(tasks, task{s, t})
					}
				}
				var first, again []time.Duration
				var expanded, opened, searched int64
				for b.Loop() {
					first, again = first[:0], again[:0]
					expanded, opened, searched = 0, 0, 0
					for pass := range 2 {
						for _, k := range tasks {
							t0 := time.Now()
							path, ok, err := w.Balanced(ctx, k.s, k.t, r, 1)
							if p == 5_000_000 {
								path, _, ok, err = w.Clearest(ctx, k.s, k.t, r)
							}
							d := time.Since(t0)
							if err != nil || !ok {
								b.Fatal(k, ok, err)
							}
							if pass == 0 {
								first = append(first, d)
								expanded += path.Expanded
								opened += path.Opened
							} else {
								again = append(again, d)
								searched += path.Opened
							}
						}
					}
				}
				slices.Sort(first)
				slices.Sort(again)
				b.ReportMetric(float64(paved.Microseconds())/1e3, "ms/roads")
				b.ReportMetric(float64(w.Portals()), "portals")
				b.ReportMetric(float64(len(w.roads)), "roads")
				b.ReportMetric(float64(first[50].Microseconds()), "p50-first-µs")
				b.ReportMetric(float64(first[95].Microseconds()), "p95-first-µs")
				b.ReportMetric(float64(again[50].Microseconds()), "p50-µs")
				b.ReportMetric(float64(again[95].Microseconds()), "p95-µs")
				b.ReportMetric(float64(expanded)/100, "expanded")
				b.ReportMetric(float64(opened)/100, "opened-first")
				b.ReportMetric(float64(searched)/100, "opened")
			})
		}
	}
}
