package anyangle

import (
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/internal/plainfloor"
)

// mask is a raster for tests, row 0 at the bottom.
type mask struct {
	w, h  int
	solid []bool
}

func newMask(w, h int) *mask { return &mask{w, h, make([]bool, w*h)} }

func (m *mask) at(x, y int) bool {
	return x < 0 || y < 0 || x >= m.w || y >= m.h || m.solid[y*m.w+x]
}

func (m *mask) fill(x0, y0, x1, y1 int, v bool) {
	for y := max(0, y0); y < min(m.h, y1); y++ {
		for x := max(0, x0); x < min(m.w, x1); x++ {
			m.solid[y*m.w+x] = v
		}
	}
}

func (m *mask) edit() floor.Edit {
	cells := make([]byte, (m.w*m.h+3)/4)
	for i, s := range m.solid {
		if s {
			cells[i/4] |= 1 << (2 * (i % 4))
		}
	}
	return floor.Edit{Kind: floor.PaintCells, Rect: floor.CellRect{X1: m.w, Y1: m.h}, Cells: cells}
}

func (m *mask) floor(t testing.TB, open bool) *floor.Map {
	t.Helper()
	f, err := floor.New(floor.Settings{ResolutionUm: 50_000, Columns: m.w, Rows: m.h, CapUm: 5_000_000, OpenBorder: open})
	if err != nil {
		t.Fatal(err)
	}
	f, err = f.Apply([]floor.Edit{m.edit()})
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// randomMask has single cells solid with probability p.
func randomMask(rng *rand.Rand, w, h int, p float64) *mask {
	c := plainfloor.Random(rng, w, h, p)
	return &mask{c.W, c.H, c.Solid}
}
