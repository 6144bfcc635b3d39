package planner_test

import (
	"context"
	"math"
	"math/rand/v2"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"gonum.org/v1/gonum/graph"
	"gonum.org/v1/gonum/graph/path"
	"gonum.org/v1/gonum/graph/simple"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/plainfloor"
)

// benchFloor is a floor for the benchmarks of shortest, with the radius of the body on it
// and how many tasks are planned.
type benchFloor struct {
	name   string
	make   func() (*floor.Map, error)
	radius float64
	tasks  int
}

const turned = 7 * math.Pi / 180

var benchFloors = []benchFloor{
	{"hall1024", func() (*floor.Map, error) { return plainfloor.RackHall(1024, 0, false) }, 0.45, 100},
	{"hall1024-turned", func() (*floor.Map, error) { return plainfloor.RackHall(1024, turned, true) }, 0.45, 100},
	{"hall1024-turned-cells", func() (*floor.Map, error) { return plainfloor.RackHall(1024, turned, false) }, 0.45, 100},
	{"hall4096", func() (*floor.Map, error) { return plainfloor.RackHall(4096, 0, false) }, 0.45, 20},
	{"hall4096-turned", func() (*floor.Map, error) { return plainfloor.RackHall(4096, turned, true) }, 0.45, 20},
	{"office1024", func() (*floor.Map, error) { return plainfloor.Office(1024).Floor() }, 0.45, 100},
	{"maze512", func() (*floor.Map, error) { return plainfloor.Maze(512, 4).Floor() }, 0, 100},
	{"random512", func() (*floor.Map, error) {
		return plainfloor.Random(rand.New(rand.NewPCG(5, 5)), 512, 512, 0.2).Floor()
	}, 0, 100},
}

// benchTask is a start and a goal: cells, and their middles as a request.
type benchTask struct {
	s, t int
	q    planner.Request
}

// prepared is a benchFloor with a world, the twin on the same free cells, and tasks that
// both can solve.
type prepared struct {
	m     *floor.Map
	w     *planner.World
	free  []bool
	twin  *plainfloor.AStar
	tasks []benchTask
}

func prepare(b *testing.B, f benchFloor) *prepared {
	b.Helper()
	m, err := f.make()
	if err != nil {
		b.Fatal(err)
	}
	p := &prepared{m: m, w: newWorld(b, m), free: freeCells(b, m, int64(f.radius*1e6))}
	s := m.Settings()
	p.twin = plainfloor.NewAStar(s.Columns, s.Rows, p.free)
	rng := rand.New(rand.NewPCG(11, 11))
	middle := func(i int) planner.Pose {
		at := s.Vertex(i%s.Columns, i/s.Columns)
		return planner.Pose{At: geom.Point{X: at.X + plainfloor.CellUm/2, Y: at.Y + plainfloor.CellUm/2}}
	}
	for len(p.tasks) < f.tasks {
		from, to := rng.IntN(len(p.free)), rng.IntN(len(p.free))
		if p.free[from] && p.free[to] {
			if _, ok := p.twin.Plan(from, to); ok {
				p.tasks = append(p.tasks, benchTask{from, to, shortest(body(f.radius), middle(from), middle(to))})
			}
		}
	}
	for _, k := range p.tasks { // makes the mesh and what else is made on first use
		p.shortestIn(b, k)
	}
	return p
}

// freeCells are the cells that keep the clearance as a whole, those that grids search.
func freeCells(b *testing.B, m *floor.Map, um int64) []bool {
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		b.Fatal(err)
	}
	s := m.Settings()
	free := make([]bool, s.Columns*s.Rows)
	var bits [floor.BlockSize]uint64
	for y := 0; y < s.Rows; y += floor.BlockSize {
		for x := 0; x < s.Columns; x += floor.BlockSize {
			f.ClearBits(x/floor.BlockSize, y/floor.BlockSize, um, &bits)
			for r := y; r < min(y+floor.BlockSize, s.Rows); r++ {
				for c := x; c < min(x+floor.BlockSize, s.Columns); c++ {
					free[r*s.Columns+c] = bits[r-y]>>(c-x)&1 == 1
				}
			}
		}
	}
	return free
}

// shortestIn is the length in cells of what World.Plan answers.
func (p *prepared) shortestIn(b *testing.B, k benchTask) float64 {
	a, err := p.w.Plan(context.Background(), k.q)
	if err != nil || a.Route == nil {
		b.Fatalf("%v to %v: %+v, %v", k.q.Start.At, k.q.Goal.At, a.Refusal, err)
	}
	return a.Route.LengthUm / plainfloor.CellUm
}

// BenchmarkShortestVsGridAStar reports the total time of the plain twin over that of World.Plan
// (search, description and check) for the same tasks (astar/shortest), each going through all of
// them in its turn; and that over World.Plan's where the two take turns at each task, so that a
// plan finds its memory driven out of the processor's caches by the twin's (astar/cold).
func BenchmarkShortestVsGridAStar(b *testing.B) {
	for _, f := range benchFloors {
		b.Run(f.name, func(b *testing.B) {
			p := prepare(b, f)
			var plain, own, cold time.Duration
			var each []time.Duration
			for b.Loop() {
				plain, own, cold, each = 0, 0, 0, each[:0]
				for _, k := range p.tasks {
					t0 := time.Now()
					p.shortestIn(b, k)
					each = append(each, time.Since(t0))
					own += each[len(each)-1]
				}
				for _, k := range p.tasks {
					t0 := time.Now()
					d, _ := p.twin.Plan(k.s, k.t)
					t1 := time.Now()
					got := p.shortestIn(b, k)
					t2 := time.Now()
					if got > d+1e-6 {
						b.Fatalf("%v to %v: %v cells, the twin %v", k.q.Start.At, k.q.Goal.At, got, d)
					}
					plain += t1.Sub(t0)
					cold += t2.Sub(t1)
				}
			}
			slices.Sort(each)
			b.ReportMetric(float64(plain)/float64(own), "astar/shortest")
			b.ReportMetric(float64(plain)/float64(cold), "astar/cold")
			b.ReportMetric(float64(each[len(each)/2].Nanoseconds())/1e3, "p50_us")
			b.ReportMetric(float64(each[len(each)*95/100].Nanoseconds())/1e3, "p95_us")
		})
	}
}

// cellGraph is the free cells as gonum's A* takes them, 8 neighbours without corner cutting.
type cellGraph struct {
	w, h int
	free []bool
}

func (g *cellGraph) open(x, y int) bool {
	return x >= 0 && y >= 0 && x < g.w && y < g.h && g.free[y*g.w+x]
}

func (g *cellGraph) From(id int64) graph.Nodes {
	x, y := int(id)%g.w, int(id)/g.w
	var out nodeList
	for dy := -1; dy <= 1; dy++ {
		for dx := -1; dx <= 1; dx++ {
			if (dx != 0 || dy != 0) && g.open(x+dx, y+dy) && g.open(x+dx, y) && g.open(x, y+dy) {
				out.ids = append(out.ids, id+int64(dy*g.w+dx))
			}
		}
	}
	return &out
}

func (g *cellGraph) Edge(u, v int64) graph.Edge {
	return simple.Edge{F: simple.Node(u), T: simple.Node(v)}
}

func (g *cellGraph) Weight(u, v int64) (float64, bool) {
	if d := max(u-v, v-u); d == 1 || d == int64(g.w) {
		return 1, true
	}
	return math.Sqrt2, true
}

// nodeList is a graph.Nodes over ids.
type nodeList struct {
	ids []int64
	at  int
}

func (n *nodeList) Next() bool       { n.at++; return n.at <= len(n.ids) }
func (n *nodeList) Len() int         { return len(n.ids) - n.at }
func (n *nodeList) Reset()           { n.at = 0 }
func (n *nodeList) Node() graph.Node { return simple.Node(n.ids[n.at-1]) }

// BenchmarkShortestVsGonum reports the total time of A* over an implicit graph, with a
// general-purpose library, over that of World.Plan (gonum/shortest), each going through all tasks
// in its turn: the library leaves much garbage, the collecting of which is its own time. Ten
// tasks make few plans, so these are the mean of ten passes; the first one alone is gonum/first.
func BenchmarkShortestVsGonum(b *testing.B) {
	for _, f := range benchFloors {
		if f.name != "hall1024" && f.name != "maze512" {
			continue
		}
		f.tasks = 10
		b.Run(f.name, func(b *testing.B) {
			p := prepare(b, f)
			s := p.m.Settings()
			g := &cellGraph{s.Columns, s.Rows, p.free}
			const passes = 10
			var theirs, own, first time.Duration
			long := make([]float64, len(p.tasks))
			for b.Loop() {
				theirs, own, first = 0, 0, 0
				runtime.GC()
				for n := range passes {
					t0 := time.Now()
					for i, k := range p.tasks {
						long[i] = p.shortestIn(b, k)
					}
					if own += time.Since(t0); n == 0 {
						first = own
					}
				}
				for i, k := range p.tasks {
					t0 := time.Now()
					tree, _ := path.AStar(simple.Node(k.s), simple.Node(k.t), g, func(u, v graph.Node) float64 {
						dx, dy := math.Abs(float64(u.ID()%int64(g.w)-v.ID()%int64(g.w))), math.Abs(float64(u.ID()/int64(g.w)-v.ID()/int64(g.w)))
						return max(dx, dy) + (math.Sqrt2-1)*min(dx, dy)
					})
					d := tree.WeightTo(int64(k.t))
					theirs += time.Since(t0)
					if long[i] > d+1e-6 {
						b.Fatalf("%v cells, gonum %v", long[i], d)
					}
				}
			}
			b.ReportMetric(float64(theirs)/float64(own)*passes, "gonum/shortest")
			b.ReportMetric(float64(theirs)/float64(first), "gonum/first")
		})
	}
}

// BenchmarkReplanVsPlan takes routes half driven and changes of 1 m² somewhere on the floor, and
// reports the time of a fresh plan over that of a replan that kept the route without a
// search, and over that of one that searched (plan/kept, plan/searched), each in the
// session that its route was planned in; then reportMending's.
func BenchmarkReplanVsPlan(b *testing.B) {
	for _, f := range benchFloors {
		if f.name == "hall1024" || f.name == "hall4096" || f.name == "office1024" {
			b.Run(f.name, func(b *testing.B) { replanVsPlan(b, prepare(b, f), f.name == "hall1024") })
		}
	}
}

func replanVsPlan(b *testing.B, p *prepared, mending bool) {
	ctx := context.Background()
	s := p.m.Settings()
	rng := rand.New(rand.NewPCG(21, 21))
	var kept, searched, planKept, planSearched time.Duration
	nKept, nSearched := 0, 0
	for b.Loop() {
		x, y := rng.IntN(s.Columns-20), rng.IntN(s.Rows-20)
		after := newMapFrom(b, p.m, []floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupancy(rng.IntN(2)),
			Rect: floor.CellRect{X0: x, Y0: y, X1: x + 20, Y1: y + 20}}})
		v, err := p.w.Advance(ctx, after)
		if err != nil {
			b.Fatal(err)
		}
		for range 10 {
			k := p.tasks[rng.IntN(len(p.tasks))]
			var planned planner.Session
			first, err := p.w.PlanIn(ctx, &planned, k.q)
			if err != nil || first.Route == nil {
				b.Fatal(first, err)
			}
			r := first.Route
			q := again(r, p.m, k.q, along(r, 0.5))
			// The better of four each, taking turns at going first: once alone would time
			// which of the two found the floor in the caches.
			var a planner.ReplanAnswer
			replan, fresh := time.Duration(math.MaxInt64), time.Duration(math.MaxInt64)
			for turn := range 8 {
				s := planned
				t0 := time.Now()
				if (turn+turn/2)%2 == 0 {
					if a, err = v.ReplanIn(ctx, &s, q); err != nil {
						b.Fatal(err)
					}
					replan = min(replan, time.Since(t0))
				} else {
					if _, err := v.Plan(ctx, q.Request); err != nil {
						b.Fatal(err)
					}
					fresh = min(fresh, time.Since(t0))
				}
			}
			if a.Kept && a.Counters.Expanded == 0 {
				kept, planKept, nKept = kept+replan, planKept+fresh, nKept+1
			} else {
				searched, planSearched, nSearched = searched+replan, planSearched+fresh, nSearched+1
			}
		}
	}
	b.ReportMetric(float64(planKept)/float64(max(1, kept)), "plan/kept")
	b.ReportMetric(float64(planSearched)/float64(max(1, searched)), "plan/searched")
	b.ReportMetric(float64(nKept)/float64(nKept+nSearched), "kept-share")
	b.ReportMetric(float64(planKept.Microseconds())/float64(max(1, nKept)), "plan_us")
	b.ReportMetric(float64(kept.Microseconds())/float64(max(1, nKept)), "kept_us")
	if mending {
		reportMending(b, p)
	}
}

// BenchmarkParallelPlans reports the time of the same plans one after the other over that on
// all processors (speedup). Plans take a tenth of a millisecond, less than handing one over
// a channel to a sleeping goroutine can cost, so that workers take the next one by a
// counter; and each goes over the tasks several times, so that the last plans, with
// no other beside them, count for little. Both ways take turns, which evens out what
// else the machine does.
func BenchmarkParallelPlans(b *testing.B) {
	p := prepare(b, benchFloors[0])
	const passes = 10
	run := func(workers int) time.Duration {
		var next atomic.Int64
		var wg sync.WaitGroup
		t0 := time.Now()
		for range workers {
			wg.Go(func() {
				for {
					i := int(next.Add(1)) - 1
					if i >= passes*len(p.tasks) {
						return
					}
					if a, err := p.w.Plan(context.Background(), p.tasks[i%len(p.tasks)].q); err != nil || a.Route == nil {
						b.Error(a.Refusal, err)
					}
				}
			})
		}
		wg.Wait()
		return time.Since(t0)
	}
	var one, all time.Duration
	for b.Loop() {
		one += run(1)
		all += run(runtime.GOMAXPROCS(0))
	}
	b.ReportMetric(float64(one)/float64(all), "speedup")
	b.ReportMetric(float64(runtime.GOMAXPROCS(0)), "processors")
}
