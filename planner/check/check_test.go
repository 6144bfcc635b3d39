package check_test

import (
	"math"
	"strings"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
)

const m = geom.UmPerMetre

func pt(x, y float64) geom.Point { return geom.Point{X: geom.FromMetres(x), Y: geom.FromMetres(y)} }

func box(x0, y0, x1, y1 float64) floor.Shape {
	return floor.NewPolygon([][]geom.Point{{pt(x0, y0), pt(x1, y0), pt(x1, y1), pt(x0, y1)}}, 0)
}

func hall(t testing.TB, open bool, edits ...floor.Edit) *floor.Map {
	f, err := floor.New(floor.Settings{ResolutionUm: 50_000, Columns: 400, Rows: 200, CapUm: 5 * m, OpenBorder: open})
	if err != nil {
		t.Fatal(err)
	}
	if f, err = f.Apply(edits); err != nil {
		t.Fatal(err)
	}
	return f
}

func put(f floor.Feature) floor.Edit { return floor.Edit{Kind: floor.PutFeature, Feature: &f} }

func cells(x0, y0, x1, y1 int) floor.Edit {
	return floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}}
}

func TestWayMeasures(t *testing.T) {
	f := hall(t, false,
		cells(100, 100, 120, 120), // 5 to 6 m both ways
		put(floor.Feature{Name: "drum", Kind: floor.Solid, Shape: floor.NewDisc(pt(10, 5), 400_000, 0), RadiusUm: 400_000}),
		put(floor.Feature{Name: "rail", Kind: floor.Solid, Shape: floor.NewPolyline([]geom.Point{pt(14, 2), pt(14, 4)}, 100_000, 0), WidthUm: 100_000}),
		put(floor.Feature{Name: "rack", Kind: floor.Solid, Shape: box(16, 5, 18, 7)}))
	for _, c := range []struct {
		name string
		pts  []geom.Point
		want float64 // metres
	}{
		{"above the cells", []geom.Point{pt(2, 6.5), pt(9, 6.5)}, 0.5},
		{"past the cells' corner", []geom.Point{pt(6, 7), pt(7, 6)}, math.Sqrt2 / 2},
		{"left of the drum", []geom.Point{pt(9, 3), pt(9, 7)}, 0.6},
		{"past the rail's round end", []geom.Point{pt(13, 4.5), pt(15, 4.5)}, 0.45},
		{"above the rack", []geom.Point{pt(15, 7.2), pt(19, 7.2)}, 0.2},
		{"along the border", []geom.Point{pt(1, 0.25), pt(9, 0.25)}, 0.25},
		{"through the rack", []geom.Point{pt(15, 6), pt(19, 6)}, 0},
		{"through a cell", []geom.Point{pt(4, 5.5), pt(7, 5.5)}, 0},
		{"in the rack", []geom.Point{pt(17, 6), pt(17, 6)}, 0},
		{"far from all", []geom.Point{pt(2, 3), pt(2.5, 3)}, 2},
	} {
		got := check.Way(f, c.pts, 1, 0)
		if math.Abs(got.SmallestUm-c.want*m) > check.SlackUm {
			t.Errorf("%s: %.6f m, want %.6f", c.name, got.SmallestUm/m, c.want)
		}
		if (got.Problem != "") != (c.want == 0) {
			t.Errorf("%s: problem %q", c.name, got.Problem)
		}
	}
}

func TestWayFindsFaults(t *testing.T) {
	oneWay := floor.Feature{Name: "lane", Kind: floor.OneWayZone, Shape: box(8, 0, 10, 10), Heading: math.Pi / 2}
	f := hall(t, true, cells(100, 100, 120, 120), put(oneWay),
		put(floor.Feature{Name: "wet", Kind: floor.ClosedZone, Shape: box(14, 4, 16, 6)}))
	for _, c := range []struct {
		name string
		pts  []geom.Point
		want string // part of the problem; "" for none
	}{
		{"touching", []geom.Point{pt(2, 6.3), pt(7, 6.3)}, ""},
		{"a micrometre too near", []geom.Point{{X: 2 * m, Y: 6.3*m - 1}, {X: 7 * m, Y: 6.3*m - 1}}, "comes within"},
		{"off an open floor", []geom.Point{pt(1, 1), pt(-1, 1)}, "leaves the floor"},
		{"up the lane", []geom.Point{pt(9, 1), pt(9.5, 9)}, ""},
		{"across the lane", []geom.Point{pt(7, 1), pt(11, 1)}, ""},
		{"down the lane", []geom.Point{pt(7, 1), pt(11, 0.99)}, "backward in the one-way zone lane"},
		{"by the closed zone", []geom.Point{pt(13.8, 1), pt(13.8, 9)}, ""},
		{"into the closed zone", []geom.Point{pt(13.9, 1), pt(13.9, 9)}, "closed zone wet"},
		{"inside the closed zone", []geom.Point{pt(14.5, 5), pt(15, 5)}, "closed zone wet"},
	} {
		got := check.Way(f, c.pts, 300_000, 200_000)
		if (c.want == "") != (got.Problem == "") || !strings.Contains(got.Problem, c.want) {
			t.Errorf("%s: problem %q, want %q", c.name, got.Problem, c.want)
		}
	}
}

// A route of 100 m between racks, checked with a window as wide as the aisle.
func BenchmarkWay100m(b *testing.B) {
	var es []floor.Edit
	for k := range 9 {
		es = append(es, cells(10, 20*k, 390, 20*k+10))
	}
	f := hall(b, false, es...)
	var pts []geom.Point
	for k := range 5 { // back and forth along the aisle at y = 0.75 m, 19 m each
		pts = append(pts, pt(0.4, 0.75+float64(k)/1000), pt(19.5, 0.75+float64(k)/1000))
	}
	b.ReportAllocs()
	for b.Loop() {
		if f := check.Way(f, pts, 200_000, 100_000); f.Problem != "" {
			b.Fatal(f.Problem)
		}
	}
}
