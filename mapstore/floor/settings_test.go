package floor

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/geom"
)

// hall is a floor of 400 by 300 cells of 0.05 m: 20 m by 15 m.
var hall = Settings{ResolutionUm: 50_000, Columns: 400, Rows: 300, CapUm: 5_000_000}

func TestValidateNamesEveryFault(t *testing.T) {
	for _, c := range []struct {
		name   string
		change func(*Settings)
		want   string
	}{
		{"fine", func(*Settings) {}, ""},
		{"the largest", func(s *Settings) {
			*s = Settings{ResolutionUm: MaxResolutionUm, Columns: 65_536, Rows: 4096, OriginX: MaxOriginUm, OriginY: -MaxOriginUm, CapUm: 2_500_000_000, Initial: Unknown}
		}, ""},
		{"the smallest", func(s *Settings) { *s = Settings{ResolutionUm: 1000, Columns: 1, Rows: 1, CapUm: 1000} }, ""},
		{"all at once", func(s *Settings) {
			*s = Settings{ResolutionUm: 999, Columns: 0, Rows: 65_537, OriginX: MaxOriginUm + 1, OriginY: math.MinInt64, CapUm: 0, Initial: 3}
		}, "resolution_m: 0.000999 m, wanted 0.001 m to 10 m; columns: 0, wanted 1 to 65536; rows: 65537, wanted 1 to 65536; " +
			"origin.x_m: 1000000000.000001 m, wanted -1000000000 m to 1000000000 m; " +
			"origin.y_m: -9223372036854.775808 m, wanted -1000000000 m to 1000000000 m; " +
			"initial_occupancy: 3, wanted free, occupied or unknown"},
		{"too many cells", func(s *Settings) { s.Columns, s.Rows = 65_536, 4097 }, "columns: 65536 columns of 4097 rows are 268500992 cells, wanted at most 268435456"},
		{"cap below a cell", func(s *Settings) { s.CapUm = 49_999 }, "clearance_cap_m: 0.049999 m, wanted 0.05 m to 12.5 m (1 to 250 cells)"},
		{"cap above 250 cells", func(s *Settings) { s.CapUm = 12_500_001 }, "clearance_cap_m: 12.500001 m, wanted 0.05 m to 12.5 m (1 to 250 cells)"},
	} {
		s := hall
		c.change(&s)
		got := ""
		if err := s.Validate(); err != nil {
			got = err.Error()
		}
		if got != c.want {
			t.Errorf("%s:\n got %s\nwant %s", c.name, got, c.want)
		}
		if m, err := New(s); (err == nil) != (c.want == "") || (m == nil) != (err != nil) {
			t.Errorf("%s: New gave %v, %v", c.name, m, err)
		}
	}
}

// Everything on the largest floor at the farthest origin stays below 2^53.
func TestCoordinatesStayExact(t *testing.T) {
	s := Settings{ResolutionUm: MaxResolutionUm, Columns: 65_536, Rows: 4096, OriginX: MaxOriginUm, OriginY: MaxOriginUm, CapUm: MaxResolutionUm}
	b := s.Bounds().Grow(MaxRadiusUm + MaxToleranceUm)
	if b.Max.X >= 1<<53 || b.Max.X+1 == b.Max.X || int64(s.Bounds().Max.X) != MaxOriginUm+65_536*MaxResolutionUm {
		t.Errorf("bounds %v", b)
	}
}

// The three ways from places to cells, against the definition for each cell.
//
//	   |  a  |  b  |     a point on the line belongs to b,
//	---+-----+-----+--   touches a and b,
//	                     meets the open square of neither
func TestPlacesToCells(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := drawSettings().Draw(t, "settings")
		s.Columns, s.Rows = min(s.Columns, 12), min(s.Rows, 12)
		p := rapid.OneOf(drawPoint(s), rapid.Custom(func(t *rapid.T) geom.Point {
			q := drawPoint(s).Draw(t, "on floor")
			d := rapid.Float64Range(-2, 2)
			return geom.Point{X: q.X + d.Draw(t, "dx")*float64(s.ResolutionUm), Y: q.Y + d.Draw(t, "dy")*float64(s.ResolutionUm)}
		}))
		a, b := p.Draw(t, "a"), p.Draw(t, "b")
		r := geom.BoundsOf(a, b)
		open, closed := CellRect{}, CellRect{}
		var holds []CellRect
		for row := range s.Rows {
			for col := range s.Columns {
				cell := CellRect{col, row, col + 1, row + 1}
				sq := s.CellBounds(cell)
				if sq.Intersects(r) {
					closed = closed.Union(cell)
				}
				if sq.Min.X < r.Max.X && r.Min.X < sq.Max.X && sq.Min.Y < r.Max.Y && r.Min.Y < sq.Max.Y {
					open = open.Union(cell)
				}
				if sq.Contains(a) {
					holds = append(holds, cell)
				}
			}
		}
		if got := s.CellRectOf(r); got != open {
			t.Fatalf("CellRectOf(%v) = %v, cell by cell %v", r, got, open)
		}
		if got := s.TouchedCells(r); got != closed {
			t.Fatalf("TouchedCells(%v) = %v, cell by cell %v", r, got, closed)
		}
		col, row, ok := s.CellAt(a)
		if ok != (len(holds) > 0) || ok && holds[len(holds)-1] != (CellRect{col, row, col + 1, row + 1}) {
			t.Fatalf("CellAt(%v) = %d, %d, %v, cells that hold it: %v", a, col, row, ok, holds)
		}
	})
}

func TestMetresAreWrittenExactly(t *testing.T) {
	for um, want := range map[int64]string{0: "0 m", 1: "0.000001 m", -50_000: "-0.05 m", 12_500_000: "12.5 m", math.MinInt64: "-9223372036854.775808 m"} {
		if got := metres(um); got != want {
			t.Errorf("%d: %s, wanted %s", um, got, want)
		}
	}
}
