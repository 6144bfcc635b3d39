package roadmap

import (
	"context"
	"fmt"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/mask"
	"example.com/wideberth/planner/internal/rules"
)

// cellsOf makes a mask, at clearance 0, of a floor of 2^q by 2^q cells with an open border.
func cellsOf(t *testing.T, q int, solid func(c, r int) bool) *mask.Mask {
	t.Helper()
	n := 1 << q
	m, err := floor.New(floor.Settings{ResolutionUm: 50_000, Columns: n, Rows: n, CapUm: 50_000, OpenBorder: true})
	if err != nil {
		t.Fatal(err)
	}
	packed := make([]byte, (n*n+3)/4)
	for r := range n {
		for c := range n {
			if k := r*n + c; solid(c, r) {
				packed[k/4] |= byte(floor.Occupied) << (2 * (k % 4))
			}
		}
	}
	if m, err = m.Apply([]floor.Edit{{Kind: floor.PaintCells, Rect: floor.CellRect{X1: n, Y1: n}, Cells: packed}}); err != nil {
		t.Fatal(err)
	}
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	return mask.NewSet(f, rules.Of(m)).Mask(mask.Key{})
}

// nodes counts a region quadtree's nodes from its leaves: every inner node has four children.
func nodes(m *mask.Mask, q int) int {
	leaves := map[[2]int]bool{}
	for r := range 1 << q {
		for c := range 1 << q {
			l := LeafAt(m, nil, Cell{c, r})
			if l.Size > 1<<q {
				l.Size = 1 << q
			}
			leaves[[2]int{l.Col, l.Row}] = true
		}
	}
	return (4*len(leaves) - 1) / 3
}

// Node counts of region quadtrees: from the definition; that of a square after an exercise in
// Samet, Foundations of Multidimensional and Metric Data Structures, 2006.
func TestQuadtreeNodeCounts(t *testing.T) {
	for _, q := range []int{4, 5, 6} {
		n := 1 << q
		for _, c := range []struct {
			name  string
			want  int
			solid func(c, r int) bool
		}{
			{"9 one cell", 4*q + 1, func(c, r int) bool { return c == 5 && r == 2 }},
			{"9a wall", 4*n - 3, func(c, r int) bool { return c == 6 }},
			{"9a diagonal", 4*n - 3, func(c, r int) bool { return c == r }},
			{"9b border", 16*n - 16*q - 11, func(c, r int) bool { return c == 0 || r == 0 || c == n-1 || r == n-1 }},
			{"9c checkerboard", (4*n*n - 1) / 3, func(c, r int) bool { return (c+r)%2 == 0 }},
			{"9d square, best place", 4*(q-2) + 1, func(c, r int) bool { return c>>2 == 1 && r>>2 == 2 }},
			{"9d square, worst place", 4*16 + 16*(q-2) - 27, func(c, r int) bool {
				a := n/2 - 1
				return c >= a && c < a+4 && r >= a && r < a+4
			}},
		} {
			t.Run(fmt.Sprintf("%s, q=%d", c.name, q), func(t *testing.T) {
				if got := nodes(cellsOf(t, q, c.solid), q); got != c.want {
					t.Errorf("%d nodes, want %d", got, c.want)
				}
			})
		}
	}
}
