package floor

import (
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/geom"
)

// On the largest floor products of coordinates take 80 bits. What an edge touches
// in a row is checked at both ends of the run, exactly, with the border cells beside.
func TestPaintIsExactOnTheLargestFloor(t *testing.T) {
	s := Settings{ResolutionUm: MaxResolutionUm, Columns: MaxSide, Rows: MaxCells / MaxSide, OriginX: -MaxOriginUm, OriginY: MaxOriginUm, CapUm: MaxResolutionUm}
	rapid.Check(t, func(t *rapid.T) {
		p := drawPoint(s)
		chains := [][]geom.Point{{p.Draw(t, "a"), p.Draw(t, "b"), p.Draw(t, "c")}}
		if geom.CheckPolygon(chains) != nil {
			t.Skip("no triangle")
		}
		paint := newPaint(s, chains)
		e := rapid.SampledFrom(paint.edges).Draw(t, "edge")
		at := func(x, y int64) geom.Point {
			return geom.Point{X: float64(x + s.OriginX), Y: float64(y + s.OriginY)}
		}
		a, b := at(e.x0, e.y0), at(e.x1, e.y1)
		touches := func(col, row int) bool {
			return geom.RectTouchesSegment(s.CellBounds(CellRect{col, row, col + 1, row + 1}), a, b)
		}
		row := rapid.IntRange(e.r0, e.r1).Draw(t, "row")
		r := e.touched(row, s.ResolutionUm)
		if !touches(r.c0, row) || !touches(r.c1, row) || touches(r.c0-1, row) || touches(r.c1+1, row) {
			t.Fatalf("row %d: columns %d to %d of edge %v to %v", row, r.c0, r.c1, a, b)
		}
		all := geom.BoundsOf(a, b)
		if e.r0 > 0 && s.CellBounds(CellRect{0, e.r0 - 1, s.Columns, e.r0}).Intersects(all) ||
			e.r1 < s.Rows-1 && s.CellBounds(CellRect{0, e.r1 + 1, s.Columns, e.r1 + 2}).Intersects(all) {
			t.Fatalf("edge %v to %v touches rows beyond %d to %d", a, b, e.r0, e.r1)
		}
	})
}

// A drawing, to be seen: # is painted. Touching at an edge or a corner is enough,
// and a hole keeps the cells that lie wholly inside it.
func TestPaintPolygonDrawing(t *testing.T) {
	s := Settings{ResolutionUm: 1000, Columns: 12, Rows: 8, CapUm: 1000}
	k := func(xy ...float64) []geom.Point {
		for i := range xy {
			xy[i] *= 1000
		}
		return pts(xy...)
	}
	for _, c := range []struct {
		name   string
		chains [][]geom.Point
		want   string
	}{
		{"a square on grid lines paints the ring of cells that it touches", [][]geom.Point{k(3, 2, 6, 2, 6, 5, 3, 5)}, `
............
............
..#####.....
..#####.....
..#####.....
..#####.....
..#####.....
............`},
		{"a square off grid lines", [][]geom.Point{k(3.5, 2.5, 6.5, 2.5, 6.5, 5.5, 3.5, 5.5)}, `
............
............
...####.....
...####.....
...####.....
...####.....
............
............`},
		{"a courtyard", [][]geom.Point{k(0.5, 0.5, 11.5, 0.5, 11.5, 7.5, 0.5, 7.5), k(2.5, 1.5, 9.5, 1.5, 9.5, 6.5, 2.5, 6.5)}, `
############
############
###......###
###......###
###......###
###......###
############
############`},
		{"a sliver of slope 2/3: x = 3, 6, 9 at y = 2, 4, 6, on corners of cells", [][]geom.Point{k(0, 0, 12, 7.999, 12, 8)}, `
..........##
........###.
.......###..
.....###....
....###.....
..###.......
.###........
##..........`},
	} {
		m := mustApply(t, mustNew(t, s), Edit{Kind: PaintPolygon, Shape: NewPolygon(c.chains, 0), Fill: Occupied})
		got := ""
		for row := s.Rows - 1; row >= 0; row-- {
			got += "\n"
			for col := range s.Columns {
				got += string(".#"[m.At(col, row)])
			}
		}
		if got != c.want {
			t.Errorf("%s:%s\nwanted%s", c.name, got, c.want)
		}
	}
}
