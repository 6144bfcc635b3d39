package floor

import (
	"maps"
	"math"
	"slices"
	"testing"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/geom"
)

// model is a Map written plainly: a slice of cells and a map of features.
type model struct {
	s        Settings
	cells    []Occupancy
	features map[string]*Feature
}

func newModel(s Settings) *model {
	m := &model{s: s, cells: make([]Occupancy, s.Columns*s.Rows), features: map[string]*Feature{}}
	for i := range m.cells {
		m.cells[i] = s.Initial
	}
	return m
}

func (m *model) clone() *model {
	return &model{m.s, slices.Clone(m.cells), maps.Clone(m.features)}
}

func (m *model) cell(col, row int) *Occupancy { return &m.cells[row*m.s.Columns+col] }

// apply assumes a valid edit.
func (m *model) apply(e Edit) {
	fill := func(r CellRect, v func(col, row int) Occupancy) {
		for row := r.Y0; row < r.Y1; row++ {
			for col := r.X0; col < r.X1; col++ {
				*m.cell(col, row) = v(col, row)
			}
		}
	}
	switch e.Kind {
	case PutFeature:
		m.features[e.Feature.Name] = e.Feature
	case RemoveFeature:
		delete(m.features, e.Name)
	case PaintRect:
		fill(e.Rect, func(int, int) Occupancy { return e.Fill })
	case ClearRect:
		fill(e.Rect, func(int, int) Occupancy { return Free })
	case PaintCells:
		i := 0
		fill(e.Rect, func(int, int) Occupancy {
			v := Occupancy(e.Cells[i/4] >> (i % 4 * 2) & 3)
			i++
			return v
		})
	case PaintPolygon:
		fill(m.s.AllCells(), func(col, row int) Occupancy {
			if e.Shape.RectDist(m.s.CellBounds(CellRect{col, row, col + 1, row + 1})) == 0 {
				return e.Fill
			}
			return *m.cell(col, row)
		})
	}
}

func (m *model) names() []string { return slices.Sorted(maps.Keys(m.features)) }

// rebuild makes the same content from scratch, cell by cell.
func (m *model) rebuild(t *rapid.T) *Map {
	s := m.s
	base, err := New(s)
	if err != nil {
		t.Fatal(err)
	}
	var edits []Edit
	names := m.names()
	slices.Reverse(names)
	for _, n := range names {
		edits = append(edits, Edit{Kind: PutFeature, Feature: m.features[n]})
	}
	for row := range s.Rows {
		for col := range s.Columns {
			edits = append(edits, Edit{Kind: PaintRect, Rect: CellRect{col, row, col + 1, row + 1}, Fill: *m.cell(col, row)})
		}
	}
	for chunk := range slices.Chunk(edits, MaxEdits) {
		if base, err = base.Apply(chunk); err != nil {
			t.Fatal(err)
		}
	}
	return base
}

// compare reads m in every way there is and wants what the model says.
func (m *model) compare(t *rapid.T, got *Map) {
	s := m.s
	for row := range s.Rows {
		for col := range s.Columns {
			want := *m.cell(col, row)
			if v := got.At(col, row); v != want {
				t.Fatalf("At(%d, %d) = %d, model %d", col, row, v, want)
			}
			solid := want == Occupied || want == Unknown && !s.UnknownIsFree
			if got.Solid(col, row) != solid {
				t.Fatalf("Solid(%d, %d) = %v", col, row, !solid)
			}
		}
	}
	for by := 0; by*BlockSize < s.Rows; by++ {
		for bx := 0; bx*BlockSize < s.Columns; bx++ {
			words := [BlockSize]uint64{0: 1 << 63, 63: 1}
			anySolid, allSolid := got.SolidBits(bx, by, &words)
			var want [BlockSize]uint64
			wantAny, wantAll := false, true
			for y := range min(BlockSize, s.Rows-by*BlockSize) {
				for x := range min(BlockSize, s.Columns-bx*BlockSize) {
					solid := got.Solid(bx*BlockSize+x, by*BlockSize+y)
					if solid {
						want[y] |= 1 << x
					}
					wantAny, wantAll = wantAny || solid, wantAll && solid
				}
			}
			if words != want || anySolid != wantAny || allSolid != wantAll {
				t.Fatalf("SolidBits(%d, %d) = %v %v, model %v %v", bx, by, anySolid, allSolid, wantAny, wantAll)
			}
		}
	}
	r := drawRect(s).Draw(t, "read")
	prefix := []byte{0xff}
	packed := got.ReadCells(prefix, r)
	if packed[0] != 0xff || len(packed) != 1+packedLen(r) {
		t.Fatalf("ReadCells(%v) gave %d bytes", r, len(packed)-1)
	}
	for i := range 4 * (len(packed) - 1) {
		v := Occupancy(packed[1+i/4] >> (i % 4 * 2) & 3)
		w := r.X1 - r.X0
		want := Free
		if i < int(r.Count()) {
			want = *m.cell(r.X0+i%w, r.Y0+i/w)
		}
		if v != want {
			t.Fatalf("ReadCells(%v) cell %d = %d, model %d", r, i, v, want)
		}
	}
	var names []string
	for f := range got.Features() {
		names = append(names, f.Name)
		if d := cmp.Diff(m.features[f.Name], f); d != "" {
			t.Fatalf("feature %q (-model +map):\n%s", f.Name, d)
		}
		if again, ok := got.Feature(f.Name); !ok || again != f {
			t.Fatalf("Feature(%q) = %v, %v", f.Name, again, ok)
		}
	}
	if !slices.Equal(names, m.names()) || got.FeatureCount() != len(names) {
		t.Fatalf("features %v (count %d), model %v", names, got.FeatureCount(), m.names())
	}
}

func drawSettings() *rapid.Generator[Settings] {
	return rapid.Custom(func(t *rapid.T) Settings {
		side := rapid.OneOf(rapid.IntRange(1, 40), rapid.SampledFrom([]int{63, 64, 65, 128, 129, 200}))
		res := rapid.SampledFrom([]int64{1000, 50_000, 33_333}).Draw(t, "resolution")
		return Settings{
			ResolutionUm: res, CapUm: 100 * res,
			Columns: side.Draw(t, "columns"), Rows: side.Draw(t, "rows"),
			OriginX:       rapid.SampledFrom([]int64{0, -777_777, 12_345_678_901}).Draw(t, "origin x"),
			OriginY:       rapid.Int64Range(-1_000_000, 1_000_000).Draw(t, "origin y"),
			UnknownIsFree: rapid.Bool().Draw(t, "unknown is free"),
			OpenBorder:    rapid.Bool().Draw(t, "open border"),
			Initial:       Occupancy(rapid.IntRange(0, 2).Draw(t, "initial")),
		}
	})
}

func drawRect(s Settings) *rapid.Generator[CellRect] {
	return rapid.Custom(func(t *rapid.T) CellRect {
		x0 := rapid.IntRange(0, s.Columns-1).Draw(t, "x0")
		y0 := rapid.IntRange(0, s.Rows-1).Draw(t, "y0")
		return CellRect{x0, y0, rapid.IntRange(x0+1, s.Columns).Draw(t, "x1"), rapid.IntRange(y0+1, s.Rows).Draw(t, "y1")}
	})
}

// drawPoint favours places on lines between cells.
func drawPoint(s Settings) *rapid.Generator[geom.Point] {
	axis := func(cells int) *rapid.Generator[int64] {
		return rapid.OneOf(
			rapid.Map(rapid.IntRange(0, cells), func(i int) int64 { return int64(i) * s.ResolutionUm }),
			rapid.Int64Range(0, int64(cells)*s.ResolutionUm))
	}
	return rapid.Custom(func(t *rapid.T) geom.Point {
		return geom.Point{
			X: float64(s.OriginX + axis(s.Columns).Draw(t, "x")),
			Y: float64(s.OriginY + axis(s.Rows).Draw(t, "y")),
		}
	})
}

// drawPolygon draws simple polygons, holes included.
func drawPolygon(s Settings) *rapid.Generator[[][]geom.Point] {
	p := drawPoint(s)
	return rapid.Custom(func(t *rapid.T) [][]geom.Point {
		for try := 0; ; try++ {
			chains := [][]geom.Point{rapid.SliceOfN(p, 3, 6).Draw(t, "outer")}
			if rapid.Bool().Draw(t, "with hole") {
				chains = append(chains, rapid.SliceOfN(p, 3, 3).Draw(t, "hole"))
			}
			if geom.CheckPolygon(chains) == nil {
				return chains
			}
			if geom.CheckPolygon(chains[:1]) == nil {
				return chains[:1]
			}
			if try == 20 {
				b := s.Bounds()
				c := b.Corners()
				return [][]geom.Point{c[:]}
			}
		}
	})
}

func drawFeature(s Settings, name string) *rapid.Generator[*Feature] {
	return rapid.Custom(func(t *rapid.T) *Feature {
		f := &Feature{Name: name, Note: rapid.SampledFrom([]string{"", "until the 04:00 auction", "água"}).Draw(t, "note")}
		heading := rapid.SampledFrom([]float64{0, math.Pi, -1.5, 1e-300})
		f.Kind = rapid.SampledFrom([]FeatureKind{Solid, ClosedZone, SpeedLimitZone, OneWayZone, Station}).Draw(t, "kind")
		switch f.Kind {
		case Station:
			f.At, f.Heading = drawPoint(s).Draw(t, "at"), heading.Draw(t, "heading")
			return f
		case Solid:
			f.ToleranceUm = rapid.Int64Range(0, MaxToleranceUm).Draw(t, "tolerance")
			switch rapid.IntRange(1, 3).Draw(t, "shape") {
			case 1:
				f.Shape = NewPolygon(drawPolygon(s).Draw(t, "polygon"), f.ToleranceUm)
			case 2:
				f.WidthUm = rapid.Int64Range(1, 1_000_000).Draw(t, "width")
				f.Shape = NewPolyline(rapid.SliceOfN(drawPoint(s), 2, 5).Draw(t, "chain"), f.WidthUm, f.ToleranceUm)
			case 3:
				f.RadiusUm = rapid.Int64Range(1, 1_000_000).Draw(t, "radius")
				f.Shape = NewDisc(drawPoint(s).Draw(t, "center"), f.RadiusUm, f.ToleranceUm)
			}
			return f
		}
		f.Shape = NewPolygon(drawPolygon(s).Draw(t, "area"), 0)
		switch f.Kind {
		case SpeedLimitZone:
			f.SpeedMps = rapid.Float64Range(0.01, MaxSpeedMps).Draw(t, "speed")
		case OneWayZone:
			f.Heading = heading.Draw(t, "heading")
		}
		return f
	})
}

var drawName = rapid.SampledFrom([]string{"a", "ab", "abc", "abd", "b", "b/1", "b/10", "b/2", "rack-01", "rack-02", "rack-1"})

// drawEdit draws an edit that the model's content allows.
func drawEdit(m *model) *rapid.Generator[Edit] {
	s := m.s
	return rapid.Custom(func(t *rapid.T) Edit {
		fill := Occupancy(rapid.IntRange(0, 2).Draw(t, "fill"))
		switch rapid.SampledFrom([]EditKind{PutFeature, RemoveFeature, PaintRect, PaintPolygon, PaintCells, ClearRect}).Draw(t, "edit") {
		case RemoveFeature:
			if len(m.features) > 0 {
				return Edit{Kind: RemoveFeature, Name: rapid.SampledFrom(m.names()).Draw(t, "name")}
			}
			fallthrough
		case PutFeature:
			return Edit{Kind: PutFeature, Feature: drawFeature(s, drawName.Draw(t, "name")).Draw(t, "feature")}
		case PaintPolygon:
			return Edit{Kind: PaintPolygon, Shape: NewPolygon(drawPolygon(s).Draw(t, "polygon"), 0), Fill: fill}
		case PaintCells:
			r := drawRect(s).Draw(t, "rect")
			cells := make([]byte, packedLen(r))
			seed := rapid.Uint64().Draw(t, "cells")
			for i := range r.Count() {
				seed = seed*6364136223846793005 + 1442695040888963407 // Knuth's MMIX generator
				cells[i/4] |= byte(seed>>33%3) << (i % 4 * 2)
			}
			return Edit{Kind: PaintCells, Rect: r, Cells: cells}
		case ClearRect:
			return Edit{Kind: ClearRect, Rect: drawRect(s).Draw(t, "rect")}
		}
		return Edit{Kind: PaintRect, Rect: drawRect(s).Draw(t, "rect"), Fill: fill}
	})
}

// A random history is compared with the plain model after every patch: every
// reader, the digest of the same content made from scratch, the differences,
// the encodings, and, at the end, every version made on the way (law 1).
func TestMapAgainstModel(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := drawSettings().Draw(t, "settings")
		cur, err := New(s)
		if err != nil {
			t.Fatal(err)
		}
		want := newModel(s)
		versions, models := []*Map{cur}, []*model{want}
		for range rapid.IntRange(1, 4).Draw(t, "patches") {
			want = want.clone()
			var edits []Edit
			for range rapid.IntRange(1, 4).Draw(t, "edits") {
				e := drawEdit(want).Draw(t, "edit")
				want.apply(e)
				edits = append(edits, e)
			}
			next, err := cur.Apply(edits)
			if err != nil {
				t.Fatalf("valid edits refused: %v", err)
			}
			want.compare(t, next)
			compareDiff(t, models[len(models)-1], want, Diff(cur, next))
			checkTouched(t, TouchedBy(edits, cur), Diff(cur, next), s)
			decoded, err := DecodeEdits(EncodeEdits(edits))
			if err != nil {
				t.Fatal(err)
			}
			if again, err := cur.Apply(decoded); err != nil || again.Digest() != next.Digest() {
				t.Fatalf("edits changed by their encoding: %v", err)
			}
			versions, models, cur = append(versions, next), append(models, want), next
		}
		i := rapid.IntRange(0, len(versions)-1).Draw(t, "rebuilt version")
		if versions[i].Digest() != models[i].rebuild(t).Digest() {
			t.Fatal("the digest depends on history")
		}
		for i := range versions {
			models[i].compare(t, versions[i])
			back, err := Decode(versions[i].Encode())
			if err != nil {
				t.Fatal(err)
			}
			if back.Digest() != versions[i].Digest() || back.Settings() != s {
				t.Fatal("content changed by its encoding")
			}
			models[i].compare(t, back)
			j := rapid.IntRange(0, i).Draw(t, "other version")
			compareDiff(t, models[i], models[j], Diff(versions[i], versions[j]))
			if same := Diff(versions[i], versions[j]).IsEmpty(); same != (versions[i].Digest() == versions[j].Digest()) {
				t.Fatal("equal digests and no difference are not the same")
			}
		}
	})
}

func compareDiff(t *rapid.T, a, b *model, got Change) {
	var count int64
	perBlock := map[[2]int]CellRect{}
	for row := range a.s.Rows {
		for col := range a.s.Columns {
			if *a.cell(col, row) != *b.cell(col, row) {
				count++
				k := [2]int{row / BlockSize, col / BlockSize}
				perBlock[k] = perBlock[k].Union(CellRect{col, row, col + 1, row + 1})
			}
		}
	}
	if got.CellCount != count {
		t.Fatalf("Diff counts %d cells, model %d", got.CellCount, count)
	}
	var cells []CellRect
	for _, k := range slices.SortedFunc(maps.Keys(perBlock), func(p, q [2]int) int { return slices.Compare(p[:], q[:]) }) {
		cells = append(cells, perBlock[k])
	}
	if d := cmp.Diff(cells, got.Cells); d != "" {
		t.Fatalf("Diff cells (-model +map):\n%s", d)
	}
	var features []FeatureChange
	all := maps.Clone(a.features)
	maps.Copy(all, b.features)
	for _, n := range slices.Sorted(maps.Keys(all)) {
		if before, after := a.features[n], b.features[n]; !cmp.Equal(before, after) {
			features = append(features, FeatureChange{before, after})
		}
	}
	if d := cmp.Diff(features, got.Features); d != "" {
		t.Fatalf("Diff features (-model +map):\n%s", d)
	}
}

// What changed lies within what the edits say they touch.
func checkTouched(t *rapid.T, touched geom.Rect, c Change, s Settings) {
	if changed := c.Bounds(s); !changed.IsEmpty() && touched.Union(changed) != touched {
		t.Fatalf("touched %v does not hold the change %v", touched, changed)
	}
}
