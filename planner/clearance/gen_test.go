package clearance

import (
	"context"
	"fmt"
	"math"
	"os"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

func mustMap(t testing.TB, s floor.Settings, edits ...floor.Edit) *floor.Map {
	t.Helper()
	m, err := floor.New(s)
	if err != nil {
		t.Fatal(err)
	}
	return mustApply(t, m, edits...)
}

func mustApply(t testing.TB, m *floor.Map, edits ...floor.Edit) *floor.Map {
	t.Helper()
	if len(edits) == 0 {
		return m
	}
	m, err := m.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func mustBuild(t testing.TB, m *floor.Map) *Field {
	t.Helper()
	f, err := Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func mustAdvance(t testing.TB, f *Field, m *floor.Map) *Field {
	t.Helper()
	g, err := f.Advance(context.Background(), m, floor.Diff(f.Map(), m))
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// check runs a property n times as often as rapid's flags say, for its cases are small;
// ten times that with WIDEBERTH_SLOW=1 in the environment. rapid prints the seed of
// a failure.
func check(t *testing.T, n int, prop func(*rapid.T)) {
	t.Helper()
	if os.Getenv("WIDEBERTH_SLOW") == "1" {
		n *= 10
	}
	for range n {
		rapid.Check(t, prop)
	}
}

// genSide draws the side of a floor: anything, or about a whole number of blocks.
func genSide(t *rapid.T, most int, label string) int {
	if most > blockSize && rapid.Bool().Draw(t, label+" by block") {
		n := rapid.IntRange(1, most/blockSize).Draw(t, label+" blocks")
		return n*blockSize + rapid.IntRange(-1, 1).Draw(t, label+" rest")
	}
	return rapid.IntRange(1, most).Draw(t, label)
}

// genSettings draws a small floor. Odd resolutions and origins keep cells off round
// numbers; caps that are no whole number of cells exercise the last rung.
func genSettings(t *rapid.T, most int) floor.Settings {
	res := rapid.SampledFrom([]int64{1000, 50_000, 49_999, 77_777}).Draw(t, "resolution")
	cells := rapid.IntRange(2, 14).Draw(t, "cap cells")
	wide, tall := most, most
	switch rapid.IntRange(0, 9).Draw(t, "floor") {
	case 0: // a cap of more than a block, up to the limit
		cells = rapid.IntRange(30, floor.MaxCapCells-1).Draw(t, "cap cells")
	case 1: // over more than one tile
		wide, tall = 8, 5*most
	case 2:
		wide, tall = 5*most, 8
	}
	return floor.Settings{
		ResolutionUm: res,
		Columns:      genSide(t, wide, "columns"),
		Rows:         genSide(t, tall, "rows"),
		OriginX:      rapid.Int64Range(-3_000_000, 3_000_000).Draw(t, "origin x"),
		OriginY:      rapid.Int64Range(-3_000_000, 3_000_000).Draw(t, "origin y"),
		CapUm:        int64(cells)*res + rapid.Int64Range(0, res-1).Draw(t, "cap rest"),

		UnknownIsFree: rapid.Bool().Draw(t, "unknown is free"),
		OpenBorder:    rapid.Bool().Draw(t, "open border"),
		Initial:       rapid.SampledFrom([]floor.Occupancy{floor.Free, floor.Free, floor.Free, floor.Unknown}).Draw(t, "initial"),
	}
}

// genPoint draws a point about the floor: on the lattice, or anywhere, a little beyond
// the border too.
func genPoint(t *rapid.T, s floor.Settings, beyond int64) geom.Point {
	x := rapid.Int64Range(-beyond, int64(s.Columns)*s.ResolutionUm+beyond).Draw(t, "x")
	y := rapid.Int64Range(-beyond, int64(s.Rows)*s.ResolutionUm+beyond).Draw(t, "y")
	if rapid.IntRange(0, 3).Draw(t, "by a block's edge") == 0 {
		side := blockSize * s.ResolutionUm
		x = max(-beyond, min((x+side/2)/side*side+rapid.Int64Range(-3, 3).Draw(t, "off")*s.ResolutionUm/2, int64(s.Columns)*s.ResolutionUm+beyond))
	}
	if rapid.Bool().Draw(t, "on lattice") {
		x, y = x/s.ResolutionUm*s.ResolutionUm, y/s.ResolutionUm*s.ResolutionUm
	}
	return geom.Point{X: float64(s.OriginX + x), Y: float64(s.OriginY + y)}
}

// genPlace is a point to ask about, which need not be whole micrometres.
func genPlace(t *rapid.T, s floor.Settings, beyond int64) geom.Point {
	p := genPoint(t, s, beyond)
	if rapid.Bool().Draw(t, "fraction") {
		p.X += rapid.Float64Range(0, 1).Draw(t, "dx")
		p.Y += rapid.Float64Range(0, 1).Draw(t, "dy")
	}
	return p
}

// genSolid draws a polygon (with a hole at times), a polyline or a disc.
func genSolid(t *rapid.T, s floor.Settings) floor.Feature {
	ft := floor.Feature{Kind: floor.Solid, Name: fmt.Sprintf("s%d", rapid.IntRange(0, 20).Draw(t, "name"))}
	if rapid.IntRange(0, 3).Draw(t, "tolerant") == 0 {
		ft.ToleranceUm = rapid.Int64Range(1, s.ResolutionUm).Draw(t, "tolerance")
	}
	switch rapid.IntRange(0, 2).Draw(t, "shape") {
	case 0:
		ft.Shape = floor.NewPolygon(genPolygon(t, s), ft.ToleranceUm)
	case 1:
		ft.WidthUm = rapid.Int64Range(1, 2*s.ResolutionUm).Draw(t, "width")
		switch rapid.IntRange(0, 3).Draw(t, "thick") {
		case 0:
			ft.WidthUm = 2 * s.ResolutionUm
		case 1:
			ft.WidthUm *= 20
		}
		chain := []geom.Point{genPoint(t, s, 0)}
		for range rapid.IntRange(1, 5).Draw(t, "points") {
			q := genPoint(t, s, 0)
			switch last := chain[len(chain)-1]; rapid.IntRange(0, 2).Draw(t, "turn") {
			case 0:
				q.X = last.X
			case 1:
				q.Y = last.Y
			}
			chain = append(chain, q)
		}
		ft.Shape = floor.NewPolyline(chain, ft.WidthUm, ft.ToleranceUm)
	default:
		ft.RadiusUm = rapid.Int64Range(1, 3*s.ResolutionUm).Draw(t, "radius")
		ft.Shape = floor.NewDisc(genPoint(t, s, 0), ft.RadiusUm, ft.ToleranceUm)
	}
	return ft
}

func genPolygon(t *rapid.T, s floor.Settings) [][]geom.Point {
	p, q := genPoint(t, s, 0), genPoint(t, s, 0)
	box := geom.BoundsOf(p, q)
	if rapid.Bool().Draw(t, "small") {
		box = box.Intersect(geom.Rect{Min: box.Min, Max: geom.Point{X: box.Min.X + 4*float64(s.ResolutionUm), Y: box.Min.Y + 3*float64(s.ResolutionUm)}})
	}
	at := func(x, y float64) geom.Point {
		return geom.Point{X: box.Min.X + math.Round(x*box.Width()), Y: box.Min.Y + math.Round(y*box.Height())}
	}
	switch rapid.IntRange(0, 2).Draw(t, "polygon") {
	case 0:
		return [][]geom.Point{{at(0, 0), at(1, 0), at(1, 1), at(0, 1)}}
	case 1: // an L, clockwise
		return [][]geom.Point{{at(0, 0), at(0, 1), at(0.5, 1), at(0.5, 0.5), at(1, 0.5), at(1, 0)}}
	}
	return [][]geom.Point{ // oblique, with a hole
		{at(0.5, 0), at(1, 0.5), at(0.5, 1), at(0, 0.5)},
		{at(0.4, 0.4), at(0.6, 0.4), at(0.5, 0.6)},
	}
}

// genEdits draws a patch that applies to m.
func genEdits(t *rapid.T, m *floor.Map) []floor.Edit {
	s := m.Settings()
	var edits []floor.Edit
	gone := map[string]bool{}
	for range rapid.IntRange(1, 6).Draw(t, "edits") {
		switch rapid.IntRange(0, 6).Draw(t, "edit") {
		case 0, 1:
			r := genCells(t, s)
			fill := rapid.SampledFrom([]floor.Occupancy{floor.Free, floor.Occupied, floor.Occupied, floor.Unknown}).Draw(t, "fill")
			edits = append(edits, floor.Edit{Kind: floor.PaintRect, Rect: r, Fill: fill})
		case 2:
			edits = append(edits, floor.Edit{Kind: floor.ClearRect, Rect: genCells(t, s)})
		case 3:
			var names []string
			for ft := range m.Features() {
				if !gone[ft.Name] {
					names = append(names, ft.Name)
				}
			}
			if len(names) == 0 {
				continue
			}
			name := rapid.SampledFrom(names).Draw(t, "removed")
			gone[name] = true
			edits = append(edits, floor.Edit{Kind: floor.RemoveFeature, Name: name})
		default:
			ft := genSolid(t, s)
			gone[ft.Name] = true // one edit a name
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &ft})
		}
	}
	return edits
}

func genCells(t *rapid.T, s floor.Settings) floor.CellRect {
	x := rapid.IntRange(0, s.Columns-1).Draw(t, "column")
	y := rapid.IntRange(0, s.Rows-1).Draw(t, "row")
	return floor.CellRect{
		X0: x, Y0: y,
		X1: min(s.Columns, x+rapid.IntRange(1, 6).Draw(t, "across")),
		Y1: min(s.Rows, y+rapid.IntRange(1, 6).Draw(t, "up")),
	}
}

// tryApply applies edits that may be refused (a polygon without area).
func tryApply(t *rapid.T, m *floor.Map, edits []floor.Edit) *floor.Map {
	if len(edits) == 0 {
		return m
	}
	next, err := m.Apply(edits)
	if err != nil {
		t.Logf("refused: %v", err)
		if len(edits) > 1 {
			return tryApply(t, m, edits[1:])
		}
		return m
	}
	return next
}

// genMap draws a floor and a few patches on it.
func genMap(t *rapid.T, most int) *floor.Map {
	m, err := floor.New(genSettings(t, most))
	if err != nil {
		t.Fatal(err)
	}
	for range rapid.IntRange(0, 3).Draw(t, "patches") {
		m = tryApply(t, m, genEdits(t, m))
	}
	return m
}

// plainAt is the clearance at p by looking at every solid in turn: the twin that
// shares nothing with the field.
func plainAt(m *floor.Map, p geom.Point) float64 {
	return plainOver(m, func(r geom.Rect) float64 { return r.Dist(p) }, func(s *floor.Shape) float64 { d, _ := s.Dist(p); return d }, geom.Rect{Min: p, Max: p})
}

// plainRect is the smallest clearance over a closed rectangle, plainly.
func plainRect(m *floor.Map, q geom.Rect) float64 {
	return plainOver(m, func(r geom.Rect) float64 {
		dx := max(0, r.Min.X-q.Max.X, q.Min.X-r.Max.X)
		dy := max(0, r.Min.Y-q.Max.Y, q.Min.Y-r.Max.Y)
		return geom.Dist(geom.Point{X: dx}, geom.Point{Y: dy})
	}, func(s *floor.Shape) float64 { return s.RectDist(q) }, q)
}

// plainSegment is the smallest clearance over a closed segment, plainly.
func plainSegment(m *floor.Map, a, b geom.Point) float64 {
	return plainOver(m, func(r geom.Rect) float64 { return geom.RectSegmentDist(r, a, b) },
		func(s *floor.Shape) float64 { d, _ := s.SegmentDist(a, b); return d }, geom.BoundsOf(a, b))
}

func plainOver(m *floor.Map, cell func(geom.Rect) float64, shape func(*floor.Shape) float64, extent geom.Rect) float64 {
	s := m.Settings()
	d := float64(s.CapUm)
	if !s.OpenBorder {
		b := m.Bounds()
		d = min(d, extent.Min.X-b.Min.X, b.Max.X-extent.Max.X, extent.Min.Y-b.Min.Y, b.Max.Y-extent.Max.Y)
	}
	near := s.TouchedCells(extent.Grow(d)) // cells farther than the cap do not matter
	for r := near.Y0; r < near.Y1; r++ {
		for c := near.X0; c < near.X1; c++ {
			if m.Solid(c, r) {
				d = min(d, cell(s.CellBounds(floor.CellRect{X0: c, Y0: r, X1: c + 1, Y1: r + 1})))
			}
		}
	}
	for ft := range m.Features() {
		if ft.Kind == floor.Solid {
			d = min(d, shape(&ft.Shape))
		}
	}
	return max(0, d)
}
