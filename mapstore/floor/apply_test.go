package floor

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"example.com/wideberth/mapstore/geom"
)

func mustNew(t testing.TB, s Settings) *Map {
	t.Helper()
	m, err := New(s)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func mustApply(t testing.TB, m *Map, edits ...Edit) *Map {
	t.Helper()
	next, err := m.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return next
}

func disc(name string, x, y float64, radius int64) *Feature {
	return &Feature{Name: name, Kind: Solid, RadiusUm: radius, Shape: NewDisc(geom.Point{X: x, Y: y}, radius, 0)}
}

func put(f *Feature) Edit { return Edit{Kind: PutFeature, Feature: f} }

// Every refusal names the field in the contract's words, the value and what was
// wanted, and changes nothing.
func TestApplyRefuses(t *testing.T) {
	square := [][]geom.Point{pts(0, 0, 1e6, 0, 1e6, 1e6, 0, 1e6)}
	solid := func(s Shape, width, radius, tolerance int64) Edit {
		return put(&Feature{Name: "x", Kind: Solid, Shape: s, WidthUm: width, RadiusUm: radius, ToleranceUm: tolerance})
	}
	poly := func(chains ...[]geom.Point) Edit { return solid(NewPolygon(chains, 0), 0, 0, 0) }
	zone := func(kind FeatureKind, speed, heading float64) Edit {
		return put(&Feature{Name: "x", Kind: kind, Shape: NewPolygon(square, 0), SpeedMps: speed, Heading: heading})
	}
	many := make([]geom.Point, MaxRingPoints+1)
	manyHoles := append([][]geom.Point{}, square...)
	for range MaxHoles + 1 {
		manyHoles = append(manyHoles, square[0])
	}
	for _, c := range []struct {
		name string
		edit Edit
		want string
	}{
		{"no kind", Edit{}, ": kind 0, wanted put_feature, remove_feature, paint_occupancy or clear_rect"},
		{"no feature", Edit{Kind: PutFeature}, "put_feature.feature: missing"},
		{"no name", put(&Feature{Kind: Station}), `put_feature.feature.name: "", wanted 1 to 63 of a-z, 0-9, '-', '_', '.', '/', first a letter or digit`},
		{"capital", put(&Feature{Name: "Rack", Kind: Station}), `put_feature.feature.name: "Rack", wanted`},
		{"long name", put(&Feature{Name: strings.Repeat("a", 64), Kind: Station}), `wanted 1 to 63 of a-z`},
		{"long note", put(&Feature{Name: "x", Note: strings.Repeat("é", 501), Kind: Station}), "put_feature.feature.note: 501 characters, wanted at most 500, in UTF-8"},
		{"note not in UTF-8", put(&Feature{Name: "x", Note: "\xff", Kind: Station}), "put_feature.feature.note: "},
		{"no kind of feature", put(&Feature{Name: "x"}), "put_feature.feature: kind 0, wanted solid, zone or station"},
		{"station off the floor", put(&Feature{Name: "x", Kind: Station, At: geom.Point{X: 20_000_001}}), "put_feature.feature.station.pose.x_m: 20.000001 m lies outside the floor, wanted 0 m to 20 m"},
		{"station at half a micrometre", put(&Feature{Name: "x", Kind: Station, At: geom.Point{Y: 0.5}}), "put_feature.feature.station.pose.y_m: 0.5 µm, wanted a whole number of micrometres"},
		{"station facing -pi", put(&Feature{Name: "x", Kind: Station, Heading: -math.Pi}), "put_feature.feature.station.pose.heading_rad: -3.141592653589793 rad, wanted above -pi, at most pi"},
		{"station facing nowhere", put(&Feature{Name: "x", Kind: Station, Heading: math.NaN()}), "put_feature.feature.station.pose.heading_rad: NaN rad"},
		{"solid of no shape", solid(Shape{}, 0, 0, 0), "put_feature.feature.solid: outline of kind 0, wanted polygon, polyline or disc"},
		{"tolerance", solid(NewPolygon(square, 1_000_001), 0, 0, 1_000_001), "put_feature.feature.solid.survey_tolerance_m: 1.000001 m, wanted 0 m to 1 m"},
		{"grown by something else", solid(NewPolygon(square, 5), 0, 0, 7), "put_feature.feature.solid: outline grown by 5 µm, its width, radius and tolerance say 7 µm"},
		{"no rings", poly(), "put_feature.feature.solid.polygon.outer: missing"},
		{"two points", poly(pts(0, 0, 1, 1)), "put_feature.feature.solid.polygon.outer.points: 2 points, wanted 3 to 10000"},
		{"many points", poly(many), "put_feature.feature.solid.polygon.outer.points: 10001 points, wanted 3 to 10000"},
		{"many holes", poly(manyHoles...), "put_feature.feature.solid.polygon.holes: 101 holes, wanted at most 100"},
		{"point off the floor", poly(pts(0, 0, 1, 0, 1, -1)), "put_feature.feature.solid.polygon.outer.points[2].y_m: -1e-06 m lies outside the floor, wanted 0 m to 15 m"},
		{"hole's point not a number", poly(square[0], pts(1, 1, 2, math.NaN(), 2, 2)), "put_feature.feature.solid.polygon.holes[0].points[1].y_m: NaN m lies outside"},
		{"bow tie", poly(pts(0, 0, 2e6, 2e6, 2e6, 0, 0, 2e6)), "put_feature.feature.solid.polygon.outer.points[2]: the edge from here meets the edge from point 0 of the outer ring at (1, 1) m"},
		{"hole outside", poly(square[0], pts(2e6, 2e6, 3e6, 2e6, 3e6, 3e6)), "put_feature.feature.solid.polygon.holes[0].points[0]: lies outside the outer ring at (2, 2) m"},
		{"no area", poly(pts(0, 0, 1e6, 1e6, 2e6, 2e6)), "put_feature.feature.solid.polygon.outer: encloses no area"},
		{"polyline of a point", solid(NewPolyline(pts(0, 0), 9, 0), 9, 0, 0), "put_feature.feature.solid.polyline.points: 1 points, wanted 2 to 10000"},
		{"polyline off the floor", solid(NewPolyline(pts(0, 0, 0, 16e6), 9, 0), 9, 0, 0), "put_feature.feature.solid.polyline.points[1].y_m: 16 m lies outside the floor"},
		{"polyline too wide", solid(NewPolyline(pts(0, 0, 1, 1), 100_000_001, 0), 100_000_001, 0, 0), "put_feature.feature.solid.polyline.width_m: 100.000001 m, wanted 0.000001 m to 100 m"},
		{"polyline of no width", solid(NewPolyline(pts(0, 0, 1, 1), 0, 0), 0, 0, 0), "put_feature.feature.solid.polyline.width_m: 0 m"},
		{"disc without middle", solid(Shape{Kind: Disc}, 0, 0, 0), "put_feature.feature.solid.disc.center: missing"},
		{"disc off the floor", put(disc("x", -1, 0, 9)), "put_feature.feature.solid.disc.center.x_m: -1e-06 m lies outside"},
		{"disc too large", put(disc("x", 0, 0, 1_000_000_001)), "put_feature.feature.solid.disc.radius_m: 1000.000001 m, wanted 0.000001 m to 1000 m"},
		{"zone of a disc", put(&Feature{Name: "x", Kind: ClosedZone, Shape: NewDisc(geom.Point{}, 1, 0)}), "put_feature.feature.zone.area: wanted a polygon"},
		{"zone off the floor", put(&Feature{Name: "x", Kind: ClosedZone, Shape: NewPolygon([][]geom.Point{pts(0, 0, 21e6, 0, 0, 1)}, 0)}), "put_feature.feature.zone.area.outer.points[1].x_m: 21 m lies outside"},
		{"speed 0", zone(SpeedLimitZone, 0, 0), "put_feature.feature.zone.speed_limit.max_speed_mps: 0 m/s, wanted 0.001 m/s to 20 m/s"},
		{"speed of no finite time", zone(SpeedLimitZone, 1e-320, 0), "put_feature.feature.zone.speed_limit.max_speed_mps: 1e-320 m/s"},
		{"speed NaN", zone(SpeedLimitZone, math.NaN(), 0), "put_feature.feature.zone.speed_limit.max_speed_mps: NaN m/s"},
		{"one way", zone(OneWayZone, 0, 3.2), "put_feature.feature.zone.one_way.heading_rad: 3.2 rad"},
		{"remove a missing one", Edit{Kind: RemoveFeature, Name: "y"}, `remove_feature.name: there is no feature "y"`},
		{"remove no name", Edit{Kind: RemoveFeature}, `remove_feature.name: "", wanted 1 to 63`},
		{"rectangle left of the floor", Edit{Kind: PaintRect, Rect: CellRect{-1, 0, 1, 1}}, "paint_occupancy.rect.rect.column: -1, wanted 0 to 399"},
		{"rectangle above the floor", Edit{Kind: PaintRect, Rect: CellRect{0, 300, 1, 301}}, "paint_occupancy.rect.rect.row: 300, wanted 0 to 299"},
		{"rectangle of no columns", Edit{Kind: PaintRect, Rect: CellRect{5, 0, 5, 1}}, "paint_occupancy.rect.rect.columns: 0, wanted 1 to 395 from column 5 on"},
		{"rectangle too high", Edit{Kind: PaintRect, Rect: CellRect{0, 299, 1, 301}}, "paint_occupancy.rect.rect.rows: 2, wanted 1 to 1 from row 299 on"},
		{"rectangle of 3", Edit{Kind: PaintRect, Rect: CellRect{0, 0, 1, 1}, Fill: 3}, "paint_occupancy.rect.occupancy: 3, wanted free, occupied or unknown"},
		{"painted polygon off the floor", Edit{Kind: PaintPolygon, Shape: NewPolygon([][]geom.Point{pts(0, 0, 1, 0, 1, 15_000_001)}, 0)}, "paint_occupancy.polygon.polygon.outer.points[2].y_m: 15.000001 m lies outside"},
		{"painted polygon of 3", Edit{Kind: PaintPolygon, Shape: NewPolygon(square, 0), Fill: 3}, "paint_occupancy.polygon.occupancy: 3"},
		{"painted disc", Edit{Kind: PaintPolygon, Shape: NewDisc(geom.Point{}, 1, 0)}, "paint_occupancy.polygon.polygon: wanted a polygon"},
		{"cells too few", Edit{Kind: PaintCells, Rect: CellRect{0, 0, 5, 1}, Cells: []byte{0}}, "paint_occupancy.cells.cells: 1 bytes, wanted 2 for 5 cells"},
		{"cells off the floor", Edit{Kind: PaintCells, Rect: CellRect{398, 0, 401, 1}, Cells: []byte{0}}, "paint_occupancy.cells.rect.columns: 3, wanted 1 to 2 from column 398 on"},
		{"a cell of 3", Edit{Kind: PaintCells, Rect: CellRect{7, 9, 10, 11}, Cells: []byte{0, 0b1100}}, "paint_occupancy.cells.cells: cell 5 (column 9, row 10) holds 3, wanted 0, 1 or 2"},
		{"a far cell of 3", Edit{Kind: PaintCells, Rect: CellRect{0, 0, 40, 2}, Cells: append(make([]byte, 12), 0xc0, 0, 0, 0, 0, 0, 0, 0)}, "paint_occupancy.cells.cells: cell 51 (column 11, row 1) holds 3"},
		{"spare bits", Edit{Kind: PaintCells, Rect: CellRect{0, 0, 3, 1}, Cells: []byte{0x40}}, "paint_occupancy.cells.cells: spare bits of the last byte are set, wanted 0"},
		{"spare bits that would be a 3", Edit{Kind: PaintCells, Rect: CellRect{0, 0, 3, 1}, Cells: []byte{0xc0}}, "paint_occupancy.cells.cells: spare bits of the last byte are set, wanted 0"},
		{"clear beyond the floor", Edit{Kind: ClearRect, Rect: CellRect{0, 0, 401, 1}}, "clear_rect.area: cells {0 0 401 1}, wanted cells of the floor"},
	} {
		m := mustNew(t, hall)
		digest := m.Digest()
		next, err := m.Apply([]Edit{put(disc("first", 1, 1, 1)), c.edit})
		var e *EditError
		if !errors.As(err, &e) || next != nil || e.Index != 1 || !strings.HasPrefix(e.Path+": "+e.Problem, c.want) && !strings.Contains(e.Problem, c.want) {
			t.Errorf("%s: %v\nwanted %s", c.name, err, c.want)
		}
		if m.Digest() != digest || m.FeatureCount() != 0 {
			t.Errorf("%s: the map changed", c.name)
		}
	}
}

func TestApplyLimits(t *testing.T) {
	m := mustNew(t, hall)
	if _, err := m.Apply(make([]Edit, MaxEdits+1)); err == nil || err.Error() != "edits[10000]: 10001 edits, wanted at most 10000" {
		t.Errorf("too many edits: %v", err)
	}
	big := mustNew(t, Settings{ResolutionUm: 1000, Columns: 16_384, Rows: 16_384, CapUm: 1000})
	c := big.Bounds().Corners()
	paint := Edit{Kind: PaintPolygon, Shape: NewPolygon([][]geom.Point{c[:]}, 0), Fill: Occupied}
	if _, err := big.Apply([]Edit{paint}); err != nil {
		t.Errorf("painting the largest floor once: %v", err)
	}
	_, err := big.Apply([]Edit{paint, paint, paint, paint, paint, paint, paint, paint})
	if err == nil || !strings.Contains(err.Error(), "paint_occupancy.polygon.polygon: painting polygons takes") {
		t.Errorf("painting the largest floor over and over: %v", err)
	}
	all := Edit{Kind: PaintCells, Rect: CellRect{0, 0, 16_384, 16_384}, Cells: make([]byte, MaxCells/4)}
	if _, err := big.Apply([]Edit{all, {Kind: PaintCells, Rect: CellRect{0, 0, 1, 1}, Cells: []byte{0}}}); err == nil || !strings.Contains(err.Error(), "268435457 cells up to here in this patch, wanted at most 268435456") {
		t.Errorf("too many cells: %v", err)
	}
}

func TestFeatureCountLimit(t *testing.T) {
	m := mustNew(t, hall)
	edits := make([]Edit, 0, MaxEdits)
	for i := range MaxFeatures {
		edits = append(edits, put(&Feature{Name: fmt.Sprintf("s%05d", i), Kind: Station}))
		if len(edits) == MaxEdits {
			m = mustApply(t, m, edits...)
			edits = edits[:0]
		}
	}
	if m.FeatureCount() != MaxFeatures {
		t.Fatalf("%d features", m.FeatureCount())
	}
	if _, err := m.Apply([]Edit{put(disc("one-more", 0, 0, 1))}); err == nil || !strings.Contains(err.Error(), "the floor would have 100001 features, wanted at most 100000") {
		t.Errorf("one more: %v", err)
	}
	mustApply(t, m, put(disc("s00000", 0, 0, 1)))
	mustApply(t, m, Edit{Kind: RemoveFeature, Name: "s00000"}, put(disc("one-more", 0, 0, 1)))
}

func TestVertexLimit(t *testing.T) {
	m := mustNew(t, hall)
	chain := make([]geom.Point, MaxRingPoints)
	rail := func(i int) Edit {
		return put(&Feature{Name: fmt.Sprintf("rail-%03d", i), Kind: Solid, WidthUm: 2, Shape: NewPolyline(chain, 2, 0)})
	}
	var edits []Edit
	for i := range MaxVertices / MaxRingPoints {
		edits = append(edits, rail(i))
	}
	m = mustApply(t, m, edits...)
	if _, err := m.Apply([]Edit{put(disc("one-more", 0, 0, 1))}); err == nil || !strings.Contains(err.Error(), "the floor's features would have 2000001 points, wanted at most 2000000") {
		t.Errorf("one more: %v", err)
	}
	mustApply(t, m, rail(7))
}

// What means nothing for a kind of feature is not kept, and does not count.
func TestFeaturesAreCanonical(t *testing.T) {
	m := mustNew(t, hall)
	plain := mustApply(t, m, put(&Feature{Name: "dock", Kind: Station, At: geom.Point{X: 5, Y: 5}, Heading: 0}))
	odd := mustApply(t, m, put(&Feature{Name: "dock", Kind: Station, At: geom.Point{X: 5, Y: 5}, Heading: math.Copysign(0, -1), SpeedMps: 3, WidthUm: 9}))
	if plain.Digest() != odd.Digest() {
		t.Error("fields without meaning change the digest")
	}
	if f, _ := odd.Feature("dock"); f.SpeedMps != 0 || f.WidthUm != 0 {
		t.Errorf("kept %+v", f)
	}
}

// An empty patch and one that changes nothing give equal content.
func TestNothingChanged(t *testing.T) {
	m := mustApply(t, mustNew(t, hall), put(disc("a", 1e6, 1e6, 5)), Edit{Kind: PaintRect, Rect: CellRect{3, 3, 90, 90}, Fill: Occupied})
	for _, edits := range [][]Edit{
		nil,
		{put(disc("a", 1e6, 1e6, 5))},
		{{Kind: PaintRect, Rect: CellRect{10, 10, 20, 20}, Fill: Occupied}},
		{{Kind: ClearRect}},
		{{Kind: ClearRect, Rect: CellRect{0, 0, 400, 300}}, {Kind: PaintRect, Rect: CellRect{3, 3, 90, 90}, Fill: Occupied}},
	} {
		if next := mustApply(t, m, edits...); next.Digest() != m.Digest() || !Diff(m, next).IsEmpty() {
			t.Errorf("%v changed the content", edits)
		}
	}
}
