package cellgrid_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/plainfloor"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/cellgrid"
)

func field(t testing.TB, m *floor.Map, err error) *clearance.Field {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func build(t testing.TB, f *clearance.Field, need roadmap.Need, k cellgrid.Kind) *cellgrid.Cells {
	t.Helper()
	c, err := cellgrid.Build(context.Background(), f, need, k)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// TestQuadtreeNodeCounts: figures worked out from the definition of the region quadtree; the
// square's from an exercise of Samet ("Foundations of Multidimensional and Metric Data
// Structures", 2006), its formulas confirmed by enumeration.
func TestQuadtreeNodeCounts(t *testing.T) {
	count := func(q int, solid func(x, y int) bool) int64 {
		n := 1 << q
		c := plainfloor.NewCells(n, n)
		for y := range n {
			for x := range n {
				if solid(x, y) {
					c.Fill(x, y, x+1, y+1, true)
				}
			}
		}
		m, err := c.Floor()
		return cellgrid.Count(field(t, m, err), 0).Nodes
	}
	for _, q := range []int{3, 4, 5, 7} {
		n := 1 << q
		want := func(name string, got, want int64) {
			if got != want {
				t.Errorf("q = %d, %s: %d nodes, want %d", q, name, got, want)
			}
		}
		want("one occupied cell: 4q + 1", count(q, func(x, y int) bool { return x == 3 && y == 5 }), int64(4*q+1))
		want("a full-height wall: 2^(q+2) - 3", count(q, func(x, _ int) bool { return x == 2 }), int64(4*n-3))
		want("the main diagonal: 2^(q+2) - 3", count(q, func(x, y int) bool { return x == y }), int64(4*n-3))
		want("a wall round the border: 2^(q+4) - 16q - 11", count(q, func(x, y int) bool { return x == 0 || y == 0 || x == n-1 || y == n-1 }), int64(16*n-16*q-11))
		want("a checkerboard: (4^(q+1) - 1)/3", count(q, func(x, y int) bool { return (x+y)%2 == 0 }), int64((4*n*n-1)/3))
		for m := 1; m < q; m++ {
			side := 1 << m
			square := func(at int) func(x, y int) bool {
				return func(x, y int) bool { return x >= at && x < at+side && y >= at && y < at+side }
			}
			want(fmt.Sprintf("an aligned square of 2^%d", m), count(q, square(0)), int64(4*(q-m)+1))
			worst := int64(0)
			for at := 0; at+side <= n; at++ {
				worst = max(worst, count(q, square(at)))
			}
			want(fmt.Sprintf("a square of 2^%d at its worst place", m), worst, int64(4*(4*side)+16*(q-m)-27))
			if q == 7 && m == 2 {
				break // the larger ones say no more and take long
			}
		}
	}
}

// TestMixedShare: a room 0.70 m wide, 0.05 m cells and 0.32 m of clearance. No cell is clear as a
// whole. Those with a vertex that has 0.32 m less half a cell's diagonal, 0.285 m, may be in
// part: columns 5 to 8 (vertices 0.30, 0.35, 0.30 m from the walls) and rows 5 to 58.
func TestMixedShare(t *testing.T) {
	c := plainfloor.NewCells(14, 64)
	m, err := c.Floor()
	got := cellgrid.Count(field(t, m, err), 320_000).MixedShare
	if want := 4.0 * 54 / (14 * 64); got != want {
		t.Errorf("mixed share %v, want %v", got, want)
	}
}

// TestSizeCountsWhatIsDescribed on random floors of several blocks.
func TestSizeCountsWhatIsDescribed(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 9))
	for range 4 {
		m, err := plainfloor.Random(rng, 100+rng.IntN(60), 90+rng.IntN(60), 0.1).Floor()
		f := field(t, m, err)
		for _, k := range []cellgrid.Kind{cellgrid.Grid4, cellgrid.Grid8, cellgrid.Quadtree} {
			c := build(t, f, roadmap.Need{ClearanceUm: rng.Int64N(80_000)}, k)
			d, s := c.Describe(), c.Size()
			if d := d.Size(); d != s {
				t.Errorf("kind %d: %+v described, %+v counted", k, d, s)
			}
			for _, e := range d.Edges {
				if e.ClearanceUm < c.Need().ClearanceUm {
					t.Fatalf("kind %d: edge %v has clearance %d µm, %d µm are needed", k, e.Points, e.ClearanceUm, c.Need().ClearanceUm)
				}
			}
		}
	}
}

// TestLawPatchedEqualsRebuilt, and every way found passes the independent checker.
func TestLawPatchedEqualsRebuilt(t *testing.T) {
	ctx := context.Background()
	rng := rand.New(rand.NewPCG(8, 1))
	found := 0
	for range 4 {
		m, err := plainfloor.Random(rng, 90, 75, 0.01).Floor()
		f := field(t, m, err)
		s := m.Settings()
		for _, k := range []cellgrid.Kind{cellgrid.Grid4, cellgrid.Grid8, cellgrid.Quadtree} {
			r := rng.Int64N(4) * 70_000
			var own roadmap.Roadmap = build(t, f, roadmap.Need{ClearanceUm: r, Zones: true, ZoneUm: r}, k)
			own.Describe()
			mm := m
			for n := range 3 {
				x, y := rng.IntN(70), rng.IntN(55)
				at := s.Vertex(rng.IntN(60), rng.IntN(50))
				edits := []floor.Edit{
					{Kind: floor.PaintRect, Fill: floor.Occupancy(rng.IntN(2)), Rect: floor.CellRect{X0: x, Y0: y, X1: x + 1 + rng.IntN(20), Y1: y + 1 + rng.IntN(20)}},
					{Kind: floor.PutFeature, Feature: &floor.Feature{Name: fmt.Sprintf("keep-off-%d", n%2), Kind: floor.ClosedZone, Shape: floor.NewPolygon([][]geom.Point{{
						at, {X: at.X + 1_400_000, Y: at.Y}, {X: at.X, Y: at.Y + 900_000}}}, 0)}},
				}
				next, err := mm.Apply(edits)
				if err != nil {
					t.Fatal(err)
				}
				g := field(t, next, nil)
				if own, err = own.Advance(ctx, g, floor.Diff(mm, next)); err != nil {
					t.Fatal(err)
				}
				mm = next
				fresh := build(t, g, own.Need(), k)
				if !reflect.DeepEqual(own.Describe(), fresh.Describe()) || own.(roadmap.Windowed).Size() != fresh.Size() {
					t.Fatalf("kind %d, clearance %d µm: patched differs from rebuilt", k, r)
				}
				a, b := s.Vertex(rng.IntN(90), rng.IntN(75)), s.Vertex(rng.IntN(90), rng.IntN(75))
				w, ok, err := own.Search(ctx, a, b)
				w2, ok2, err2 := fresh.Search(ctx, a, b)
				if err != nil || err2 != nil || ok != ok2 || !reflect.DeepEqual(w, w2) {
					t.Fatalf("kind %d: %v %v, rebuilt %v %v", k, w, err, w2, err2)
				}
				if ok {
					found++
					if c := check.Way(next, w.Points, r, r); c.Problem != "" {
						t.Errorf("kind %d: %s", k, c.Problem)
					}
				}
			}
		}
	}
	if found < 10 {
		t.Errorf("only %d ways found", found)
	}
}
