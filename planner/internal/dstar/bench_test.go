package dstar

import (
	"context"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/internal/roadmap"
)

// rackHall is a hall of n by n cells of 0.05 m: rows of racks 1.2 m deep and 3 m apart, each
// cut by a cross aisle of 2.5 m at a place that moves along from row to row.
func rackHall(b *testing.B, n int) *world {
	w := newWorld(b, floor.Settings{ResolutionUm: 50_000, Columns: n, Rows: n, CapUm: 2_000_000})
	var es []floor.Edit
	rack := func(x0, x1, y int) {
		if x1 > x0 {
			es = append(es, paint(floor.Occupied, x0, y, x1, min(y+24, n)))
		}
	}
	for k, y := 0, 60; y < n-60; k, y = k+1, y+84 {
		gap := 60 + (k*397)%(n-200)
		rack(0, gap, y)
		rack(gap+50, n, y)
	}
	return w.apply(b, es...)
}

// stop is where a robot replans, on which version.
type stop struct {
	w  *world
	at roadmap.Cell
}

// drive is a robot's way through a hall: every 5 m a pallet of 0.8 m by 1.2 m is put down on its
// path, so many cells ahead, and is gone at the stop after.
func drive(b *testing.B, w *world, a asked, ahead int) (stops []stop) {
	q := a.query(w)
	p, out, err := roadmap.Grid(context.Background(), q, true)
	if err != nil || out != roadmap.Found {
		b.Fatal(out, err)
	}
	var cells []roadmap.Cell
	for i := 1; i < len(p.Points); i++ {
		c, _ := q.Frame.CellAt(p.Points[i-1])
		to, _ := q.Frame.CellAt(p.Points[i])
		for ; c != to; c = (roadmap.Cell{Col: c.Col + sign(to.Col-c.Col), Row: c.Row + sign(to.Row-c.Row)}) {
			cells = append(cells, c)
		}
	}
	const every = 100 // cells
	for i := every; i+ahead+every < len(cells); i += every {
		c := cells[i+ahead]
		v := w.apply(b, paint(floor.Occupied, c.Col-8, c.Row-12, c.Col+8, c.Row+12))
		at := a
		at.from = oneCell(cells[i].Col, cells[i].Row)
		if s := new(Session); len(at.query(v).From) == 1 {
			if _, out, _ := s.Plan(context.Background(), at.query(v), true); out == roadmap.Found {
				stops = append(stops, stop{v, cells[i]}, stop{w, cells[i]})
			}
		}
	}
	return stops
}

func sign(v int) int { return min(1, max(-1, v)) }

// Repair against planning from scratch, as a robot crosses a hall of 1024 by 1024 cells and finds
// a pallet on its path, which is cleared away again when it has replanned. plan/dstar is the time
// of plans from scratch by this package over that of repairs, astar/dstar that of package
// roadmap's A*.
func BenchmarkRepairVsPlan(b *testing.B) {
	for _, c := range []struct {
		name  string
		ahead int
		pref  []int64
	}{{"near 1.5 m", 30, nil}, {"near 5 m", 100, nil}, {"mid 30 m", 600, nil}, {"near 1.5 m balanced", 30, []int64{1_000_000, 875_000, 750_000, 625_000}}} {
		b.Run(c.name, func(b *testing.B) {
			const n = 1024
			w := rackHall(b, n)
			a := asked{need: 500_000, from: oneCell(20, 20), to: oneCell(n-20, n-20)}
			if a.levels = c.pref; c.pref != nil {
				a.weight = 1
			}
			stops := drive(b, w, a, c.ahead)
			var plan, astar, repair time.Duration
			var planned, repaired int64
			ctx := context.Background()
			for b.Loop() {
				var kept Session
				if _, _, err := kept.Plan(ctx, a.query(w), true); err != nil {
					b.Fatal(err)
				}
				for _, st := range stops {
					at := a
					at.from = oneCell(st.at.Col, st.at.Row)
					q := at.query(st.w)
					t0 := time.Now()
					_, out, _ := kept.Plan(ctx, q, true)
					repair += time.Since(t0)
					repaired += q.Count.Expanded
					q = at.query(st.w)
					t0 = time.Now()
					var s Session
					_, _, _ = s.Plan(ctx, q, true)
					s.Release()
					plan += time.Since(t0)
					planned += q.Count.Expanded
					t0 = time.Now()
					_, _, _ = roadmap.Grid(ctx, q, true)
					astar += time.Since(t0)
					if out != roadmap.Found {
						b.Fatal(out)
					}
				}
			}
			b.ReportMetric(float64(plan)/float64(repair), "plan/dstar")
			b.ReportMetric(float64(astar)/float64(repair), "astar/dstar")
			b.ReportMetric(float64(planned)/float64(repaired), "expansions")
			b.ReportMetric(float64(repair.Microseconds())/float64(b.N*len(stops)), "µs/repair")
			b.ReportMetric(float64(plan.Microseconds())/float64(b.N*len(stops)), "µs/plan")
			b.ReportMetric(0, "ns/op")
		})
	}
}
