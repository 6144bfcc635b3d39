package voronoi

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
)

// slow says whether the long variants run: WIDEBERTH_SLOW=1.
func slow() bool { return os.Getenv("WIDEBERTH_SLOW") == "1" }

// scaled is how often to try: fast, or many times with WIDEBERTH_SLOW=1.
func scaled(fast, many int) int {
	if slow() {
		return many
	}
	return fast
}

const testCell = 50_000

func newFloor(t testing.TB, w, h int, capUm int64, open bool, edits ...floor.Edit) *floor.Map {
	t.Helper()
	f, err := floor.New(floor.Settings{ResolutionUm: testCell, Columns: w, Rows: h, CapUm: capUm, OpenBorder: open})
	if err != nil {
		t.Fatal(err)
	}
	if f, err = f.Apply(edits); err != nil {
		t.Fatal(err)
	}
	return f
}

func paint(x0, y0, x1, y1 int, v floor.Occupancy) floor.Edit {
	return floor.Edit{Kind: floor.PaintRect, Fill: v, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}}
}

func put(name string, s floor.Shape) floor.Edit {
	return floor.Edit{Kind: floor.PutFeature, Feature: solid(name, s)}
}

func solid(name string, s floor.Shape) *floor.Feature {
	f := &floor.Feature{Name: name, Kind: floor.Solid, Shape: s}
	switch s.Kind {
	case floor.Disc:
		f.RadiusUm = int64(s.Grow)
	case floor.Polyline:
		f.WidthUm = int64(2 * s.Grow)
	}
	return f
}

// polygonUm is a polygon from coordinates in micrometres.
func polygonUm(xy ...float64) floor.Shape {
	var ring []geom.Point
	for i := 0; i < len(xy); i += 2 {
		ring = append(ring, geom.Point{X: xy[i], Y: xy[i+1]})
	}
	return floor.NewPolygon([][]geom.Point{ring}, 0)
}

func rectUm(x0, y0, x1, y1 float64) floor.Shape { return polygonUm(x0, y0, x1, y0, x1, y1, x0, y1) }

func fieldOf(t testing.TB, m *floor.Map) *clearance.Field {
	t.Helper()
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func graphOf(t testing.TB, m *floor.Map, need Need) *Graph {
	t.Helper()
	g, err := Build(context.Background(), fieldOf(t, m), need)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

func randomPoint(rng *rand.Rand, b geom.Rect) geom.Point {
	return geom.Point{X: math.Floor(b.Min.X + rng.Float64()*b.Width()), Y: math.Floor(b.Min.Y + rng.Float64()*b.Height())}
}

// randomSolid is a solid of any kind, up to about 3 m across.
func randomSolid(rng *rand.Rand, name string, b geom.Rect) *floor.Feature {
	p := randomPoint(rng, b)
	around := func(d float64) geom.Point {
		return geom.Point{X: math.Round(p.X + (2*rng.Float64()-1)*d), Y: math.Round(p.Y + (2*rng.Float64()-1)*d)}
	}
	tolerance := int64(0)
	if rng.IntN(4) == 0 {
		tolerance = int64(rng.IntN(60_000))
	}
	var s floor.Shape
	var width, radius int64
	switch rng.IntN(5) {
	case 0:
		radius = int64(1 + rng.IntN(400_000))
		s = floor.NewDisc(p, radius, tolerance)
	case 1:
		width = int64(1 + rng.IntN(300_000))
		pts := []geom.Point{p}
		for range 1 + rng.IntN(3) {
			pts = append(pts, around(1_500_000))
		}
		s = floor.NewPolyline(pts, width, tolerance)
	case 2:
		q := around(1_500_000)
		s = floor.NewPolygon([][]geom.Point{{p, {X: q.X + 1, Y: p.Y}, {X: q.X + 1, Y: q.Y + 1}, {X: p.X, Y: q.Y + 1}}}, tolerance)
		if q.X+1 == p.X || q.Y+1 == p.Y {
			return randomSolid(rng, name, b)
		}
	default: // a star about p, often not convex
		n := 3 + rng.IntN(6)
		var ring []geom.Point
		for k := range n {
			a := 2 * math.Pi * (float64(k) + 0.8*rng.Float64()) / float64(n)
			d := 100_000 + 1_400_000*rng.Float64()
			ring = append(ring, geom.Point{X: math.Round(p.X + d*math.Cos(a)), Y: math.Round(p.Y + d*math.Sin(a))})
		}
		if geom.CheckPolygon([][]geom.Point{ring}) != nil {
			return randomSolid(rng, name, b)
		}
		s = floor.NewPolygon([][]geom.Point{ring}, tolerance)
	}
	for _, c := range s.Chains {
		for _, q := range c {
			if !b.Contains(q) {
				return randomSolid(rng, name, b)
			}
		}
	}
	f := solid(name, s)
	f.WidthUm, f.RadiusUm, f.ToleranceUm = width, radius, tolerance
	return f
}

// randomFloor has solids of every kind, raster cells among them.
func randomFloor(t testing.TB, rng *rand.Rand, w, h int) *floor.Map {
	t.Helper()
	var edits []floor.Edit
	for range rng.IntN(6) {
		x, y := rng.IntN(w), rng.IntN(h)
		edits = append(edits, paint(x, y, min(w, x+1+rng.IntN(8)), min(h, y+1+rng.IntN(8)), floor.Occupied))
	}
	for i := range 1 + rng.IntN(7) {
		s := randomSolid(rng, fmt.Sprintf("s%d", i), geom.Rect{Max: geom.Point{X: float64(w) * testCell, Y: float64(h) * testCell}})
		if rng.IntN(3) == 0 && s.Shape.Kind == floor.Polygon { // staircases
			edits = append(edits, floor.Edit{Kind: floor.PaintPolygon, Fill: floor.Occupied, Shape: floor.NewPolygon(s.Shape.Chains, 0)})
			continue
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: s})
	}
	return newFloor(t, w, h, 2_000_000, rng.IntN(4) == 0, edits...)
}
