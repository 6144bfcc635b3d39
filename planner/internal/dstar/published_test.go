package dstar

import (
	"context"
	"math"
	"strings"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/internal/roadmap"
)

// gridOf makes a floor of unit cells of 1 m from rows, the first the uppermost; * is solid.
func gridOf(t *testing.T, rows ...string) *world {
	set := floor.Settings{ResolutionUm: 1_000_000, Columns: len(rows[0]), Rows: len(rows), CapUm: 1_000_000, OpenBorder: true}
	w := newWorld(t, set)
	for i, row := range rows {
		for c := range row {
			if row[c] == '*' {
				r := len(rows) - 1 - i
				w = w.apply(t, paint(floor.Occupied, c, r, c+1, r+1))
			}
		}
	}
	return w
}

func inMetres(t *testing.T, s *Session, q *roadmap.Query) float64 {
	p, out, err := s.Plan(context.Background(), q, true)
	if err != nil || out != roadmap.Found {
		t.Fatal(out, err)
	}
	return p.CostUm / 1e6
}

// Figures 6 and 7 of Koenig & Likhachev, IEEE T-RO 21(3), 2005, doi:10.1109/TRO.2004.838026, as
// transcribed in gonum v0.17.0, graph/path/dynamic/dstarlite_test.go: start row 1 column 0, goal
// row 4 column 2 from the top. The published path takes 4 moves, two of them past corners;
// without those it takes 5 straight ones, down the left and along the bottom (own count).
func TestFigures6And7(t *testing.T) {
	w := gridOf(t,
		"...",
		".*.",
		".*.",
		".*.",
		"...",
	)
	var s Session
	if got := inMetres(t, &s, (&asked{from: oneCell(0, 3), to: oneCell(2, 0)}).query(w)); math.Abs(got-5) > 1e-9 {
		t.Fatalf("%v m, want 5", got)
	}
}

// Figure 2 of the same paper, as transcribed there, with its door open and closed: start row 14
// column 1, goal row 6 column 14 from the top. Published with diagonal moves of sqrt 2 that may
// cut corners: 17 + 3 sqrt 2 closed, 13 + 4 sqrt 2 open. With cutting forbidden, worked out
// apart with Dijkstra's algorithm: 22.414213562 and 19.828427125. Here the robot sets out
// through the open door, finds it closed on its way, and then open again.
func TestFigure2(t *testing.T) {
	rows := strings.Fields(`
		..................
		..................
		..................
		..................
		..................
		..................
		....*.*...........
		*****.***.........
		..................
		......***.........
		......*...........
		......*...........
		......*...........
		*****.*...........
		......*...........`)
	open := gridOf(t, rows...)
	// Row 8 from the top is row 6 from below.
	door := func(fill floor.Occupancy) floor.Edit { return paint(fill, 6, 6, 7, 7) }
	closed := open.apply(t, door(floor.Occupied))
	a := asked{from: oneCell(1, 0), to: oneCell(14, 8)}
	const wantOpen, wantClosed = 19.828427125, 22.414213562
	var s Session
	for i, step := range []struct {
		w    *world
		want float64
	}{{open, wantOpen}, {closed, wantClosed}, {open, wantOpen}, {closed, wantClosed}} {
		if got := inMetres(t, &s, a.query(step.w)); math.Abs(got-step.want) > 1e-9 {
			t.Fatalf("question %d: %v m, want %v", i, got, step.want)
		}
		if s.Mended() != (i > 0) {
			t.Fatalf("question %d: mended %t", i, s.Mended())
		}
	}
	// Six moves on, before the door, which then closes: what is left must agree with a search
	// that knew it from the start.
	a.from = oneCell(5, 4)
	var fresh Session
	if got, want := inMetres(t, &s, a.query(closed)), inMetres(t, &fresh, a.query(closed)); got != want {
		t.Fatalf("%v m, want %v", got, want)
	}
}
