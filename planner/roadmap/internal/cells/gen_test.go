package cells

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/roadmap"
)

const testCell = 50_000

func slow() bool { return os.Getenv("WIDEBERTH_SLOW") != "" }

func newFloor(t testing.TB, w, h int, open bool, edits ...floor.Edit) *floor.Map {
	t.Helper()
	m, err := floor.New(floor.Settings{ResolutionUm: testCell, Columns: w, Rows: h, OriginX: -1_234_567, OriginY: 7_000_001, CapUm: 2_000_000, OpenBorder: open})
	if err == nil {
		m, err = m.Apply(edits)
	}
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func fieldOf(t testing.TB, m *floor.Map) *clearance.Field {
	t.Helper()
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func build(t testing.TB, m *floor.Map, need roadmap.Need, chord float64) *Space {
	t.Helper()
	s, err := Build(context.Background(), fieldOf(t, m), need, chord)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func paint(x0, y0, x1, y1 int, o floor.Occupancy) floor.Edit {
	return floor.Edit{Kind: floor.PaintRect, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}, Fill: o}
}

// randomSolid is a disc, a thick polyline, a rectangle along the axes or a star.
func randomSolid(rng *rand.Rand, name string, b geom.Rect) *floor.Feature {
	f := &floor.Feature{Name: name, Kind: floor.Solid}
	for {
		p := geom.Point{X: math.Floor(b.Min.X + rng.Float64()*b.Width()), Y: math.Floor(b.Min.Y + rng.Float64()*b.Height())}
		around := func(d float64) geom.Point {
			return b.Nearest(geom.Point{X: math.Round(p.X + (2*rng.Float64()-1)*d), Y: math.Round(p.Y + (2*rng.Float64()-1)*d)})
		}
		f.ToleranceUm = int64(rng.IntN(2)) * int64(rng.IntN(60_000))
		f.RadiusUm, f.WidthUm = 0, 0
		switch rng.IntN(4) {
		case 0:
			f.RadiusUm = int64(1 + rng.IntN(400_000))
			f.Shape = floor.NewDisc(p, f.RadiusUm, f.ToleranceUm)
		case 1:
			f.WidthUm = int64(1 + rng.IntN(300_000))
			f.Shape = floor.NewPolyline([]geom.Point{p, around(1_500_000), around(1_500_000)}, f.WidthUm, f.ToleranceUm)
			if c := f.Shape.Chains[0]; c[0] == c[1] || c[1] == c[2] {
				continue
			}
		case 2:
			q := around(1_500_000)
			ring := []geom.Point{p, {X: q.X, Y: p.Y}, q, {X: p.X, Y: q.Y}}
			if geom.CheckPolygon([][]geom.Point{ring}) != nil {
				continue
			}
			f.Shape = floor.NewPolygon([][]geom.Point{ring}, f.ToleranceUm)
		default:
			n := 3 + rng.IntN(6)
			var ring []geom.Point
			for k := range n {
				a := 2 * math.Pi * (float64(k) + 0.8*rng.Float64()) / float64(n)
				d := 100_000 + 1_400_000*rng.Float64()
				ring = append(ring, b.Nearest(geom.Point{X: math.Round(p.X + d*math.Cos(a)), Y: math.Round(p.Y + d*math.Sin(a))}))
			}
			if geom.CheckPolygon([][]geom.Point{ring}) != nil {
				continue
			}
			f.Shape = floor.NewPolygon([][]geom.Point{ring}, f.ToleranceUm)
		}
		return f
	}
}

func randomFloor(t testing.TB, rng *rand.Rand, w, h int) *floor.Map {
	t.Helper()
	m := newFloor(t, w, h, rng.IntN(4) == 0)
	var edits []floor.Edit
	for range rng.IntN(8) {
		x, y := rng.IntN(w), rng.IntN(h)
		edits = append(edits, paint(x, y, min(w, x+1+rng.IntN(8)), min(h, y+1+rng.IntN(8)), floor.Occupied))
	}
	for i := range 1 + rng.IntN(7) {
		s := randomSolid(rng, fmt.Sprintf("s%d", i), m.Bounds())
		if rng.IntN(3) == 0 && s.Shape.Kind == floor.Polygon { // staircases
			edits = append(edits, floor.Edit{Kind: floor.PaintPolygon, Fill: floor.Occupied, Shape: floor.NewPolygon(s.Shape.Chains, 0)})
			continue
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: s})
	}
	m, err := m.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func randomEdits(rng *rand.Rand, m *floor.Map) []floor.Edit {
	s := m.Settings()
	var out []floor.Edit
	for range 1 + rng.IntN(3) {
		switch rng.IntN(4) {
		case 0, 1:
			x, y := rng.IntN(s.Columns), rng.IntN(s.Rows)
			out = append(out, paint(x, y, min(s.Columns, x+1+rng.IntN(8)), min(s.Rows, y+1+rng.IntN(8)), floor.Occupancy(rng.IntN(3))))
		default:
			ft := randomSolid(rng, string(rune('a'+rng.IntN(5))), m.Bounds())
			if rng.IntN(3) == 0 && ft.Shape.Kind == floor.Polygon {
				ft.Kind, ft.ToleranceUm, ft.Shape.Grow = floor.ClosedZone, 0, 0
			}
			out = append(out, floor.Edit{Kind: floor.PutFeature, Feature: ft})
		}
	}
	for ft := range m.Features() {
		if rng.IntN(12) == 0 {
			return []floor.Edit{{Kind: floor.RemoveFeature, Name: ft.Name}}
		}
	}
	return out
}
