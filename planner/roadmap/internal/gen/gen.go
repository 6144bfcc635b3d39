// Package gen makes random floors of cells and solids of every kind for tests, much of which
// touches or coincides. Nothing served uses it.
package gen

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Slow says whether the long variants are asked for.
func Slow() bool { return os.Getenv("WIDEBERTH_SLOW") == "1" }

// Empty is a floor of w by h free cells of 50 mm.
func Empty(t testing.TB, w, h int, open bool) *floor.Map {
	t.Helper()
	f, err := floor.New(floor.Settings{ResolutionUm: 50_000, Columns: w, Rows: h, CapUm: 5_000_000, OpenBorder: open})
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// Put adds solids.
func Put(t testing.TB, f *floor.Map, shapes ...floor.Shape) *floor.Map {
	t.Helper()
	var edits []floor.Edit
	for i, s := range shapes {
		ft := &floor.Feature{Name: fmt.Sprintf("s%d-%d", i, f.FeatureCount()), Kind: floor.Solid, Shape: s}
		switch s.Kind {
		case floor.Polyline:
			ft.WidthUm = int64(2 * s.Grow)
		case floor.Disc:
			ft.RadiusUm = int64(s.Grow)
		case floor.Polygon:
			ft.ToleranceUm = int64(s.Grow)
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: ft})
	}
	return Apply(t, f, edits...)
}

// Apply carries out edits.
func Apply(t testing.TB, f *floor.Map, edits ...floor.Edit) *floor.Map {
	t.Helper()
	f, err := f.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// Paint makes cells occupied.
func Paint(x0, y0, x1, y1 int) floor.Edit {
	return floor.Edit{Kind: floor.PaintRect, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}, Fill: floor.Occupied}
}

// Within is a random place on whole micrometres.
func Within(rng *rand.Rand, b geom.Rect) geom.Point {
	return geom.Point{X: math.Floor(b.Min.X + rng.Float64()*b.Width()), Y: math.Floor(b.Min.Y + rng.Float64()*b.Height())}
}

// Shape is on whole micrometres, or on the cells' lattice, where much coincides.
func Shape(rng *rand.Rand, b geom.Rect) floor.Shape {
	grid := []float64{1, 50_000}[rng.IntN(2)]
	at := Within(rng, b)
	clip := func(x, y float64) geom.Point {
		return b.Nearest(geom.Point{X: math.Round((at.X+x)/grid) * grid, Y: math.Round((at.Y+y)/grid) * grid})
	}
	size := 100_000 + rng.Float64()*900_000
	switch rng.IntN(4) {
	case 0:
		return floor.NewDisc(clip(0, 0), int64(math.Ceil(size/3/grid)*grid), 0)
	case 1:
		pts := []geom.Point{clip(0, 0)}
		for range 1 + rng.IntN(3) {
			if p := clip((rng.Float64()-0.5)*size, (rng.Float64()-0.5)*size); p != pts[len(pts)-1] {
				pts = append(pts, p)
			}
		}
		if len(pts) < 2 {
			return Shape(rng, b)
		}
		return floor.NewPolyline(pts, 2*(1+rng.Int64N(100_000)), 0)
	case 2:
		a := float64(rng.IntN(2)) * rng.Float64() * math.Pi
		s, c := math.Sincos(a)
		w, h := size/2, size/2*rng.Float64()+10_000
		var ring []geom.Point
		for _, k := range [4][2]float64{{-w, -h}, {w, -h}, {w, h}, {-w, h}} {
			ring = append(ring, clip(k[0]*c-k[1]*s, k[0]*s+k[1]*c))
		}
		if geom.CheckPolygon([][]geom.Point{ring}) != nil {
			return Shape(rng, b)
		}
		return floor.NewPolygon([][]geom.Point{ring}, 0)
	}
	n := 3 + rng.IntN(7)
	var ring []geom.Point
	for k := range n {
		s, c := math.Sincos(2 * math.Pi * float64(k) / float64(n))
		l := size / 2 * (0.2 + 0.8*rng.Float64())
		ring = append(ring, clip(l*c, l*s))
	}
	if geom.CheckPolygon([][]geom.Point{ring}) != nil {
		return Shape(rng, b)
	}
	return floor.NewPolygon([][]geom.Point{ring}, int64(rng.IntN(2)*rng.IntN(30_000)))
}

// Floor has cells and solids of every kind; some are put twice.
func Floor(t testing.TB, rng *rand.Rand, w, h int) *floor.Map {
	f := Empty(t, w, h, rng.IntN(3) == 0)
	var edits []floor.Edit
	for range rng.IntN(5) {
		x, y := rng.IntN(w), rng.IntN(h)
		edits = append(edits, Paint(x, y, min(w, x+1+rng.IntN(8)), min(h, y+1+rng.IntN(8))))
	}
	for range rng.IntN(10) {
		x, y := rng.IntN(w), rng.IntN(h)
		edits = append(edits, Paint(x, y, x+1, y+1))
	}
	var shapes []floor.Shape
	for range rng.IntN(6) {
		s := Shape(rng, f.Bounds())
		shapes = append(shapes, s)
		if rng.IntN(4) == 0 {
			shapes = append(shapes, s)
		}
		if s.Kind == floor.Polygon && rng.IntN(3) == 0 {
			edits = append(edits, floor.Edit{Kind: floor.PaintPolygon, Fill: floor.Occupied, Shape: floor.NewPolygon(s.Chains, 0)})
		}
	}
	return Put(t, Apply(t, f, edits...), shapes...)
}
