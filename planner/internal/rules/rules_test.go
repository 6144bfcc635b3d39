package rules_test

import (
	"math"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/rules"
)

const m = geom.UmPerMetre

func pt(x, y float64) geom.Point { return geom.Point{X: geom.FromMetres(x), Y: geom.FromMetres(y)} }

// zones: a lane going up from x = 2 to 4, a closed zone from x = 6 to 8, and two speed
// limits of which the slower lies within the other; all from y = 2 to 8.
func zones(t *testing.T) *rules.Rules {
	f, err := floor.New(floor.Settings{ResolutionUm: 50_000, Columns: 400, Rows: 200, CapUm: 5 * m})
	if err != nil {
		t.Fatal(err)
	}
	put := func(name string, kind floor.FeatureKind, x0, x1, speed float64) floor.Edit {
		s := floor.NewPolygon([][]geom.Point{{pt(x0, 2), pt(x1, 2), pt(x1, 8), pt(x0, 8)}}, 0)
		return floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: name, Kind: kind, Shape: s, SpeedMps: speed, Heading: math.Pi / 2}}
	}
	if f, err = f.Apply([]floor.Edit{put("lane", floor.OneWayZone, 2, 4, 0), put("wet", floor.ClosedZone, 6, 8, 0),
		put("slow", floor.SpeedLimitZone, 10, 16, 0.5), put("slower", floor.SpeedLimitZone, 12, 14, 0.2)}); err != nil {
		t.Fatal(err)
	}
	return rules.Of(f)
}

func TestAgainst(t *testing.T) {
	r := zones(t)
	for _, c := range []struct {
		name string
		a, b geom.Point
		want bool
	}{
		{"up", pt(3, 3), pt(3, 7), false},
		{"down", pt(3, 7), pt(3, 3), true},
		{"across", pt(1, 5), pt(5, 5), false},
		{"across, two micrometres down", geom.Point{X: 2 * m, Y: 5 * m}, geom.Point{X: 4 * m, Y: 5*m - 2}, false},
		{"across, three micrometres down", geom.Point{X: 2 * m, Y: 5 * m}, geom.Point{X: 4 * m, Y: 5*m - 3}, true},
		{"down along the border", pt(2, 7), pt(2, 3), true},
		{"down beside it", pt(1.9, 7), pt(1.9, 3), false},
		{"down past a corner", pt(3, 9), pt(5, 7), false},
		{"down into a corner", pt(3, 9), pt(5, 6.5), true},
	} {
		if got := r.Against(c.a, c.b, rules.BackwardSlackUm) != nil; got != c.want {
			t.Errorf("%s: %t", c.name, got)
		}
	}
}

func TestEnteredAndShut(t *testing.T) {
	r := zones(t)
	for _, c := range []struct {
		name          string
		p             geom.Point
		radius        float64
		entered, shut bool // shut: everything within 0.5 m is entered, too
	}{
		{"touching", pt(5.7, 5), 0.3 * m, false, false},
		{"a micrometre in", geom.Point{X: 5.7*m + 1, Y: 5 * m}, 0.3 * m, true, false},
		{"a point on the border", pt(6, 5), 0, false, false},
		{"a point a micrometre in", geom.Point{X: 6*m + 1, Y: 5 * m}, 0, true, false},
		{"inside, near the border", pt(6.4, 5), 0, true, false},
		{"deep inside", pt(7, 5), 0, true, true},
		{"near the border, wide body", pt(6.1, 5), 0.5 * m, true, true},
		{"past the corner", pt(5.7, 8.3), 0.4 * m, false, false},
	} {
		if f := r.Entered(c.p, c.p, c.radius); (f != nil) != c.entered || f != nil && f.Name != "wet" {
			t.Errorf("%s: entered %v", c.name, f)
		}
		if got := r.Shut(c.p, c.radius-0.5*m); got != c.shut {
			t.Errorf("%s: shut %t", c.name, got)
		}
	}
}

func TestSpeedLimit(t *testing.T) {
	r := zones(t)
	for _, c := range []struct {
		name string
		a, b geom.Point
		want float64
	}{
		{"outside", pt(9, 5), pt(9.9, 5), math.Inf(1)},
		{"up to the border", pt(9, 5), pt(10, 5), math.Inf(1)},
		{"from the border on", pt(10, 5), pt(11, 5), 0.5},
		{"through both", pt(9, 5), pt(17, 5), 0.2},
		{"standing on the border", pt(10, 5), pt(10, 5), 0.5},
	} {
		if got := r.SpeedLimit(c.a, c.b); got != c.want {
			t.Errorf("%s: %g, want %g", c.name, got, c.want)
		}
	}
	cuts := r.SpeedCuts(nil, pt(8, 5), pt(18, 5))
	want := map[float64]bool{0.2: true, 0.4: true, 0.6: true, 0.8: true}
	if len(cuts) != 4 {
		t.Fatalf("cuts %v", cuts)
	}
	for _, c := range cuts {
		if !want[math.Round(c*1e9)/1e9] {
			t.Errorf("cut at %g", c)
		}
	}
}
