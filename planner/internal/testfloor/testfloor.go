// Package testfloor makes floors for tests of the planner: random ones, each from its
// generator's seed, and the demonstration floor. Nothing served uses it.
package testfloor

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
	"example.com/wideberth/proto/wire"
	"example.com/wideberth/testdata"
)

// CellUm is the side of a cell of these floors.
const CellUm = 50_000

// Slow says whether slow suites are wanted.
func Slow() bool { return os.Getenv("WIDEBERTH_SLOW") != "" }

// New is a floor of w by h cells, far from the frame's origin.
func New(t testing.TB, w, h int, open bool, edits ...floor.Edit) *floor.Map {
	t.Helper()
	m, err := floor.New(floor.Settings{ResolutionUm: CellUm, Columns: w, Rows: h,
		OriginX: -1_234_567, OriginY: 7_000_001, CapUm: 2_000_000, OpenBorder: open})
	if err == nil {
		m, err = m.Apply(edits)
	}
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// Field is the clearance field of a floor.
func Field(t testing.TB, m *floor.Map) *clearance.Field {
	t.Helper()
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// Paint fills the cells from (x0, y0) up to, but not with, (x1, y1).
func Paint(x0, y0, x1, y1 int, o floor.Occupancy) floor.Edit {
	return floor.Edit{Kind: floor.PaintRect, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}, Fill: o}
}

// Solid puts a polygon, its points in micrometres from the lower left corner of m.
func Solid(m *floor.Map, name string, ring ...[2]float64) floor.Edit {
	o := m.Settings().Vertex(0, 0)
	var pts []geom.Point
	for _, p := range ring {
		pts = append(pts, geom.Point{X: o.X + p[0], Y: o.Y + p[1]})
	}
	return floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: name, Kind: floor.Solid,
		Shape: floor.NewPolygon([][]geom.Point{pts}, 0)}}
}

// Apply carries out edits.
func Apply(t testing.TB, m *floor.Map, edits ...floor.Edit) *floor.Map {
	t.Helper()
	m, err := m.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// Point is a random whole-micrometre point of b.
func Point(rng *rand.Rand, b geom.Rect) geom.Point {
	return geom.Point{X: math.Floor(b.Min.X + rng.Float64()*b.Width()), Y: math.Floor(b.Min.Y + rng.Float64()*b.Height())}
}

// Star is the ring of a random star about p, of 3 to 8 corners up to most away; it may be
// out of true when b cuts it off.
func Star(rng *rand.Rand, p geom.Point, most float64, b geom.Rect) []geom.Point {
	n := 3 + rng.IntN(6)
	var ring []geom.Point
	for k := range n {
		a := 2 * math.Pi * (float64(k) + 0.8*rng.Float64()) / float64(n)
		d := most/15 + most*14/15*rng.Float64()
		ring = append(ring, b.Nearest(geom.Point{X: math.Round(p.X + d*math.Cos(a)), Y: math.Round(p.Y + d*math.Sin(a))}))
	}
	return ring
}

// RandomSolid is a disc, a thick polyline, a rectangle along the axes or a star.
func RandomSolid(rng *rand.Rand, name string, b geom.Rect) *floor.Feature {
	f := &floor.Feature{Name: name, Kind: floor.Solid}
	for {
		p := Point(rng, b)
		around := func(d float64) geom.Point {
			return b.Nearest(geom.Point{X: math.Round(p.X + (2*rng.Float64()-1)*d), Y: math.Round(p.Y + (2*rng.Float64()-1)*d)})
		}
		f.ToleranceUm = int64(rng.IntN(2)) * int64(rng.IntN(60_000))
		f.RadiusUm, f.WidthUm = 0, 0
		var ring []geom.Point
		switch rng.IntN(4) {
		case 0:
			f.RadiusUm = int64(1 + rng.IntN(400_000))
			f.Shape = floor.NewDisc(p, f.RadiusUm, f.ToleranceUm)
			return f
		case 1:
			f.WidthUm = int64(1 + rng.IntN(300_000))
			q, r := around(1_500_000), around(1_500_000)
			if p == q || q == r {
				continue
			}
			f.Shape = floor.NewPolyline([]geom.Point{p, q, r}, f.WidthUm, f.ToleranceUm)
			return f
		case 2:
			q := around(1_500_000)
			ring = []geom.Point{p, {X: q.X, Y: p.Y}, q, {X: p.X, Y: q.Y}}
		default:
			ring = Star(rng, p, 1_500_000, b)
		}
		if geom.CheckPolygon([][]geom.Point{ring}) == nil {
			f.Shape = floor.NewPolygon([][]geom.Point{ring}, f.ToleranceUm)
			return f
		}
	}
}

// Random is a floor of w by h cells with a few solids of all kinds.
func Random(t testing.TB, rng *rand.Rand, w, h int) *floor.Map {
	t.Helper()
	m := New(t, w, h, rng.IntN(4) == 0)
	var edits []floor.Edit
	for range rng.IntN(8) {
		x, y := rng.IntN(w), rng.IntN(h)
		edits = append(edits, Paint(x, y, min(w, x+1+rng.IntN(8)), min(h, y+1+rng.IntN(8)), floor.Occupied))
	}
	for i := range 1 + rng.IntN(7) {
		s := RandomSolid(rng, fmt.Sprintf("s%d", i), m.Bounds())
		if rng.IntN(3) == 0 && s.Shape.Kind == floor.Polygon { // staircases
			edits = append(edits, floor.Edit{Kind: floor.PaintPolygon, Fill: floor.Occupied, Shape: floor.NewPolygon(s.Shape.Chains, 0)})
			continue
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: s})
	}
	return Apply(t, m, edits...)
}

// Edits are a few random edits of a floor: cells painted, solids and closed zones put,
// features removed.
func Edits(rng *rand.Rand, m *floor.Map) []floor.Edit { return EditsOf(rng, m, RandomSolid) }

// EditsOf is Edits with solids of another making.
func EditsOf(rng *rand.Rand, m *floor.Map, solid func(*rand.Rand, string, geom.Rect) *floor.Feature) []floor.Edit {
	s := m.Settings()
	var out []floor.Edit
	for range 1 + rng.IntN(3) {
		switch rng.IntN(4) {
		case 0, 1:
			x, y := rng.IntN(s.Columns), rng.IntN(s.Rows)
			out = append(out, Paint(x, y, min(s.Columns, x+1+rng.IntN(8)), min(s.Rows, y+1+rng.IntN(8)), floor.Occupancy(rng.IntN(3))))
		default:
			ft := solid(rng, string(rune('a'+rng.IntN(5))), m.Bounds())
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

// Hall is the demonstration floor.
func Hall(t testing.TB) *floor.Map {
	t.Helper()
	l, err := testdata.Hall()
	if err != nil {
		t.Fatal(err)
	}
	s := wire.SettingsIn(l.Settings)
	m, err := floor.New(s)
	if err != nil {
		t.Fatal(err)
	}
	var edits []floor.Edit
	for _, e := range l.Edits {
		switch {
		case e.GetClearRect() != nil:
			edits = append(edits, floor.Edit{Kind: floor.ClearRect, Rect: s.CellRectOf(wire.AreaIn(e.GetClearRect().GetArea()))})
		case e.GetPaintOccupancy() != nil:
			r := e.GetPaintOccupancy().GetRect()
			edits = append(edits, floor.Edit{Kind: floor.PaintRect, Rect: wire.CellRectIn(r.GetRect()), Fill: wire.OccupancyIn(r.GetOccupancy())})
		case e.GetPutFeature() != nil:
			f, err := wire.FeatureIn(e.GetPutFeature().GetFeature())
			if err != nil {
				t.Fatal(err)
			}
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: f})
		default:
			t.Fatalf("an edit of the hall that is not known here: %v", e)
		}
	}
	return Apply(t, m, edits...)
}
