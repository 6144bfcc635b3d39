package planner_test

import (
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"gonum.org/v1/gonum/graph"
	"gonum.org/v1/gonum/graph/iterator"
	"gonum.org/v1/gonum/graph/path"
	"gonum.org/v1/gonum/graph/simple"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// gridFloor paints a floor from rows of text, the first the uppermost, '*' solid. Cells are 1 m
// wide, so that lengths read in cells.
func gridFloor(t testing.TB, rows ...string) *floor.Map {
	s := settings(0, 0, float64(len(rows[0])), float64(len(rows)), 1)
	packed := make([]byte, (s.Columns*s.Rows+3)/4)
	for i, row := range rows {
		for c, ch := range row {
			if k := (s.Rows-1-i)*s.Columns + c; ch == '*' {
				packed[k/4] |= byte(floor.Occupied) << (2 * (k % 4))
			}
		}
	}
	return newMap(t, s, floor.Edit{Kind: floor.PaintCells, Rect: floor.CellRect{X1: s.Columns, Y1: s.Rows}, Cells: packed})
}

// cellPose is the middle of a cell given by text row and column.
func cellPose(f *floor.Map, row, col int) planner.Pose {
	s := f.Settings()
	h := float64(s.ResolutionUm)
	return planner.Pose{At: geom.Point{
		X: float64(s.OriginX) + (float64(col)+0.5)*h,
		Y: float64(s.OriginY) + (float64(s.Rows-1-row)+0.5)*h,
	}}
}

// onGrid plans a point body's path from cell to cell over a roadmap, unstraightened.
func onGrid(from, to planner.Pose, rm planner.Roadmap) planner.Request {
	q := shortest(body(0), from, to)
	q.Options.Roadmap, q.Options.KeepRoadmapPath = rm, true
	return q
}

// grid is a gonum graph of a floor's free cells. cut allows diagonal moves past a
// solid cell's corner.
type grid struct {
	f         *floor.Map
	diag, cut bool
}

func (g grid) free(c, r int) bool {
	s := g.f.Settings()
	return c >= 0 && r >= 0 && c < s.Columns && r < s.Rows && !g.f.Solid(c, r)
}

func (g grid) id(c, r int) int64 { return int64(r*g.f.Settings().Columns + c) }

// From makes grid a traverse.Graph, and Weight a path.Weighting.
func (g grid) From(id int64) graph.Nodes {
	n := int64(g.f.Settings().Columns)
	c, r := int(id%n), int(id/n)
	var out []graph.Node
	for dr := -1; dr <= 1; dr++ {
		for dc := -1; dc <= 1; dc++ {
			if dc == 0 && dr == 0 || !g.free(c+dc, r+dr) {
				continue
			}
			if dc != 0 && dr != 0 && (!g.diag || !g.cut && !(g.free(c+dc, r) && g.free(c, r+dr))) {
				continue
			}
			out = append(out, simple.Node(g.id(c+dc, r+dr)))
		}
	}
	return iterator.NewOrderedNodes(out)
}

func (g grid) Edge(u, v int64) graph.Edge { return nil }

func (g grid) Weight(u, v int64) (float64, bool) {
	n := int64(g.f.Settings().Columns)
	return math.Hypot(float64(u%n-v%n), float64(u/n-v/n)), true
}

// twin is the length of the shortest path by gonum's Dijkstra, in cells.
func (g grid) twin(from, to planner.Pose) float64 {
	s := g.f.Settings()
	cell := func(p planner.Pose) int64 {
		h := float64(s.ResolutionUm)
		return g.id(int((p.At.X-float64(s.OriginX))/h), int((p.At.Y-float64(s.OriginY))/h))
	}
	return path.DijkstraFrom(simple.Node(cell(from)), g).WeightTo(cell(to))
}

func cells(r *planner.Route, f *floor.Map) float64 {
	return r.LengthUm / float64(f.Settings().ResolutionUm)
}

// near1e9 is a relative tolerance for sums of some hundred float64 steps.
func near1e9(got, want float64) bool { return math.Abs(got-want) <= 1e-9*want }

// Koenig & Likhachev, "Fast Replanning for Navigation in Unknown Terrain", IEEE T-RO 2005,
// doi 10.1109/TRO.2004.838026, figures 2, 6 and 7, as transcribed in gonum v0.17.0,
// graph/path/dynamic/dstarlite_test.go. The figures allow cutting corners, which a
// body may not: the published lengths check the grids and the twin, the lengths without
// cutting (computed with gonum's Dijkstra) the search. Figures 6-7 count 4 moves, of
// which one is diagonal.
func TestPublishedGrids(t *testing.T) {
	fig6 := []string{"...", ".*.", ".*.", ".*.", "..."}
	fig2 := []string{
		"..................", "..................", "..................", "..................",
		"..................", "..................", "....*.*...........", "*****.***.........",
		"......*...........", "......***.........", "......*...........", "......*...........",
		"......*...........", "*****.*...........", "......*...........",
	}
	open8 := append([]string(nil), fig2...)
	open8[8] = ".................."
	for _, c := range []struct {
		name             string
		rows             []string
		from, to         [2]int
		cutting, without float64
	}{
		{"figures 6-7", fig6, [2]int{1, 0}, [2]int{4, 2}, 3 + math.Sqrt2, 5},
		{"figure 2", fig2, [2]int{14, 1}, [2]int{6, 14}, 21.242640687119287, 22.414213562},
		{"figure 2, row 8 open", open8, [2]int{14, 1}, [2]int{6, 14}, 18.656854249492383, 19.828427125},
	} {
		f := gridFloor(t, c.rows...)
		from, to := cellPose(f, c.from[0], c.from[1]), cellPose(f, c.to[0], c.to[1])
		if got := (grid{f, true, true}).twin(from, to); !near1e9(got, c.cutting) {
			t.Errorf("%s: with cutting %.12f, published %.12f", c.name, got, c.cutting)
		}
		if got := (grid{f, true, false}).twin(from, to); !near1e9(got, c.without) {
			t.Errorf("%s: twin without cutting %.12f, want %.12f", c.name, got, c.without)
		}
		got := cells(mustRoute(t, newWorld(t, f), onGrid(from, to, planner.Grid8)), f)
		if !near1e9(got, c.without) {
			t.Errorf("%s: %.12f, want %.12f", c.name, got, c.without)
		}
	}
}

// Octile distance max + (sqrt 2 - 1) min, by hand.
func TestOctileOnOpenFloor(t *testing.T) {
	f := newMap(t, settings(0, 0, 20, 20, 1))
	w := newWorld(t, f)
	for _, c := range []struct {
		dc, dr       int
		octile, four float64
	}{{3, 4, 5.242640687119285, 7}, {5, 12, 14.071067811865476, 17}} {
		from, to := cellPose(f, 15, 3), cellPose(f, 15-c.dr, 3+c.dc)
		if got := cells(mustRoute(t, w, onGrid(from, to, planner.Grid8)), f); !near1e9(got, c.octile) {
			t.Errorf("(%d, %d): %.12f, want %.12f", c.dc, c.dr, got, c.octile)
		}
		if got := cells(mustRoute(t, w, onGrid(from, to, planner.Grid4)), f); !near1e9(got, c.four) {
			t.Errorf("(%d, %d) on 4 neighbours: %.12f, want %.12f", c.dc, c.dr, got, c.four)
		}
	}
}

// randomFloor has a share of its cells solid.
func randomFloor(t testing.TB, rnd *rand.Rand, cols, rows int, share float64) *floor.Map {
	s := settings(0, 0, float64(cols), float64(rows), 1)
	packed := make([]byte, (cols*rows+3)/4)
	for i := range cols * rows {
		if rnd.Float64() < share {
			packed[i/4] |= byte(floor.Occupied) << (2 * (i % 4))
		}
	}
	return newMap(t, s, floor.Edit{Kind: floor.PaintCells, Rect: floor.CellRect{X1: cols, Y1: rows}, Cells: packed})
}

func TestGridSearchAgainstDijkstra(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 2))
	routes := 0
	for range 40 {
		f := randomFloor(t, rnd, 30+rnd.IntN(110), 30+rnd.IntN(110), 0.1+0.25*rnd.Float64())
		w := newWorld(t, f)
		for range 4 {
			s := f.Settings()
			from, to := cellPose(f, rnd.IntN(s.Rows), rnd.IntN(s.Columns)), cellPose(f, rnd.IntN(s.Rows), rnd.IntN(s.Columns))
			for _, rm := range []planner.Roadmap{planner.Grid8, planner.Grid4} {
				want := (grid{f, rm == planner.Grid8, false}).twin(from, to)
				a := plan(t, w, onGrid(from, to, rm))
				if a.Route == nil {
					if a.Refusal.Reason == planner.NoPassage && !math.IsInf(want, 1) {
						t.Fatalf("roadmap %d: refused, the twin finds %f", rm, want)
					}
					continue
				}
				routes++
				if got := cells(a.Route, f); !near1e9(got, want) && want > 0 {
					t.Fatalf("roadmap %d: %.12f, the twin finds %.12f", rm, got, want)
				}
				if a.Route.Bound.Kind != planner.RoadmapOptimum {
					t.Fatalf("bound %+v", a.Route.Bound)
				}
			}
		}
	}
	if routes < 50 {
		t.Fatalf("only %d routes compared", routes)
	}
}
