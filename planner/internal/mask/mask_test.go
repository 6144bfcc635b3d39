package mask

import (
	"context"
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/rules"
)

type testingT interface {
	Helper()
	Fatal(args ...any)
}

func newSet(t testingT, s floor.Settings, fs ...*floor.Feature) *Set {
	t.Helper()
	m, err := floor.New(s)
	if err != nil {
		t.Fatal(err)
	}
	var es []floor.Edit
	for _, f := range fs {
		es = append(es, floor.Edit{Kind: floor.PutFeature, Feature: f})
	}
	if m, err = m.Apply(es); err != nil {
		t.Fatal(err)
	}
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	return NewSet(f, rules.Of(m))
}

func square(x0, y0, x1, y1 float64) floor.Shape {
	return floor.NewPolygon([][]geom.Point{{{X: x0, Y: y0}, {X: x1, Y: y0}, {X: x1, Y: y1}, {X: x0, Y: y1}}}, 0)
}

// Growing a unit square by r covers 1 + 4r + πr² (Steiner 1840: 3.785398163
// at r = 0.5). Cells that are not wholly clear cover that, and beyond it at most a
// cell's diagonal all round: (4 + 2πr)·h·sqrt 2, and a corner's worth.
func TestFreeCellsLeaveTheGrownSquare(t *testing.T) {
	const res, r = 20_000.0, 500_000
	set := floor.Settings{ResolutionUm: res, Columns: 300, Rows: 300, CapUm: 1_000_000, OpenBorder: true}
	m := newSet(t, set, &floor.Feature{Name: "square", Kind: floor.Solid, Shape: square(2_507_003, 2_411_017, 3_507_003, 3_411_017)}).Mask(Key{Um: r})
	taken := 0
	for row := range set.Rows {
		for col := range set.Columns {
			if !m.Free(col, row) {
				taken++
			}
		}
	}
	area := float64(taken) * res * res / 1e12
	want := 1 + 4*0.5 + math.Pi*0.25
	h := res / 1e6
	if over := (4+math.Pi)*h*math.Sqrt2 + 2*math.Pi*h*h; area < want || area > want+over {
		t.Errorf("cells taken cover %.6f m², want %.6f to %.6f", area, want, want+over)
	}
}

// Cells against each closed zone, one by one.
func TestClosedZonesShutWholeCells(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		set := floor.Settings{ResolutionUm: 50_000, Columns: rapid.IntRange(10, 140).Draw(t, "columns"), Rows: rapid.IntRange(10, 140).Draw(t, "rows"), CapUm: 2_000_000, OpenBorder: true}
		w, h := int64(set.Columns)*set.ResolutionUm, int64(set.Rows)*set.ResolutionUm
		var ps []geom.Point
		for range 3 {
			ps = append(ps, geom.Point{X: float64(rapid.Int64Range(0, w).Draw(t, "x")), Y: float64(rapid.Int64Range(0, h).Draw(t, "y"))})
		}
		if geom.Orient(ps[0], ps[1], ps[2]) == 0 {
			return
		}
		zone := &floor.Feature{Name: "zone", Kind: floor.ClosedZone, Shape: floor.NewPolygon([][]geom.Point{ps}, 0)}
		k := Key{RadiusUm: max(0, rapid.Int64Range(-100_000, 600_000).Draw(t, "radius")), Zones: true}
		m := newSet(t, set, zone).Mask(k)
		for row := range set.Rows {
			for col := range set.Columns {
				lo := geom.Point{X: float64(col) * 50_000, Y: float64(row) * 50_000}
				cell := geom.Rect{Min: lo, Max: geom.Point{X: lo.X + 50_000, Y: lo.Y + 50_000}}
				d := zone.Shape.RectDist(cell)
				want := d >= float64(k.RadiusUm)
				if k.RadiusUm == 0 { // the open square, to a thousandth of a micrometre
					if want = zone.Shape.RectDist(cell.Grow(-1e-3)) > 0; !want && d == 0 && zone.Shape.RectDist(cell.Grow(-2e-3)) > 0 {
						continue
					}
				}
				if m.Free(col, row) != want {
					t.Fatalf("cell (%d, %d), %f µm from the zone: free is %t", col, row, d, m.Free(col, row))
				}
			}
		}
	})
}

func TestSetKeepsWhatWasUsedLast(t *testing.T) {
	s := newSet(t, floor.Settings{ResolutionUm: 50_000, Columns: 64, Rows: 64, CapUm: 2_000_000})
	first := s.Mask(Key{Um: 1})
	for k := range int64(Limit + 10) {
		s.Mask(Key{Um: 10 + k})
		if s.Mask(Key{Um: 1}) != first {
			t.Fatalf("dropped after %d others although it was in use", k)
		}
	}
	if n := len(*s.list.Load()); n != Limit {
		t.Errorf("%d masks kept, want %d", n, Limit)
	}
}
