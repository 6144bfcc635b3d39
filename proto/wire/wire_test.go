package wire_test

import (
	"math"
	"testing"

	"github.com/google/go-cmp/cmp"
	"google.golang.org/protobuf/proto"
	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// farUm is the farthest that a floor reaches: its origin and its side.
const farUm = floor.MaxOriginUm + floor.MaxSide*floor.MaxResolutionUm

func length(lo, hi int64) *rapid.Generator[int64] {
	return rapid.OneOf(rapid.Int64Range(lo, hi), rapid.Int64Range(lo, min(hi, lo+2_000_000)), rapid.Just(hi))
}

func coordinate() *rapid.Generator[float64] {
	return rapid.Map(rapid.OneOf(rapid.Int64Range(-farUm, farUm), rapid.Int64Range(-9_000_000, 9_000_000)),
		func(um int64) float64 { return float64(um) })
}

func point(t *rapid.T) geom.Point {
	return geom.Point{X: coordinate().Draw(t, "x"), Y: coordinate().Draw(t, "y")}
}

func chain(t *rapid.T, least int) []geom.Point {
	return rapid.SliceOfN(rapid.Custom(point), least, least+4).Draw(t, "chain")
}

func rings(t *rapid.T) [][]geom.Point {
	out := [][]geom.Point{chain(t, 3)}
	for range rapid.IntRange(0, 2).Draw(t, "holes") {
		out = append(out, chain(t, 3))
	}
	return out
}

// heading is any in (-pi, pi].
func heading(t *rapid.T) float64 {
	h := rapid.Float64Range(-math.Pi, math.Pi).Draw(t, "heading")
	if h == -math.Pi {
		return math.Pi
	}
	return h
}

// feature is any that a floor can hold, but for whether its outline is simple.
func feature(t *rapid.T) *floor.Feature {
	f := &floor.Feature{Name: rapid.StringMatching(`[a-z0-9][a-z0-9._/-]{0,20}`).Draw(t, "name"), Note: rapid.String().Draw(t, "note")}
	f.Kind = rapid.SampledFrom([]floor.FeatureKind{floor.Solid, floor.ClosedZone, floor.SpeedLimitZone, floor.OneWayZone, floor.Station}).Draw(t, "kind")
	switch f.Kind {
	case floor.Station:
		f.At, f.Heading = point(t), heading(t)
		return f
	case floor.Solid:
		f.ToleranceUm = length(0, floor.MaxToleranceUm).Draw(t, "tolerance")
		switch rapid.SampledFrom([]floor.ShapeKind{floor.Polygon, floor.Polyline, floor.Disc}).Draw(t, "shape") {
		case floor.Polyline:
			f.WidthUm = length(1, floor.MaxWidthUm).Draw(t, "width")
			f.Shape = floor.NewPolyline(chain(t, 2), f.WidthUm, f.ToleranceUm)
			return f
		case floor.Disc:
			f.RadiusUm = length(1, floor.MaxRadiusUm).Draw(t, "radius")
			f.Shape = floor.NewDisc(point(t), f.RadiusUm, f.ToleranceUm)
			return f
		}
	case floor.SpeedLimitZone:
		f.SpeedMps = rapid.Float64Range(floor.MinSpeedMps, floor.MaxSpeedMps).Draw(t, "speed")
	case floor.OneWayZone:
		f.Heading = heading(t)
	}
	f.Shape = floor.NewPolygon(rings(t), f.ToleranceUm)
	return f
}

// travel sends a message over the wire.
func travel[M proto.Message](t *rapid.T, m M) M {
	b, err := proto.Marshal(m)
	if err != nil {
		t.Fatal(err)
	}
	out := m.ProtoReflect().New().Interface().(M)
	if err := proto.Unmarshal(b, out); err != nil {
		t.Fatal(err)
	}
	return out
}

// Whatever a floor can hold comes back to the micrometre.
func TestFeaturesSurviveTheWire(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		want := feature(t)
		got, err := wire.FeatureIn(travel(t, wire.FeatureOut(want)))
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(want, got); d != "" {
			t.Fatalf("came back otherwise (-went +came):\n%s", d)
		}
	})
	if wire.FeatureOut(nil) != nil {
		t.Error("no feature became one")
	}
}

func TestSettingsSurviveTheWire(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		res := length(floor.MinResolutionUm, floor.MaxResolutionUm).Draw(t, "resolution")
		want := floor.Settings{
			ResolutionUm: res,
			Columns:      rapid.IntRange(1, floor.MaxSide).Draw(t, "columns"), Rows: rapid.IntRange(1, floor.MaxSide).Draw(t, "rows"),
			OriginX: rapid.Int64Range(-floor.MaxOriginUm, floor.MaxOriginUm).Draw(t, "x"), OriginY: rapid.Int64Range(-floor.MaxOriginUm, floor.MaxOriginUm).Draw(t, "y"),
			CapUm:         length(res, floor.MaxCapCells*res).Draw(t, "cap"),
			UnknownIsFree: rapid.Bool().Draw(t, "unknown is free"), OpenBorder: rapid.Bool().Draw(t, "open border"),
			Initial: rapid.SampledFrom([]floor.Occupancy{floor.Free, floor.Occupied, floor.Unknown}).Draw(t, "initial"),
		}
		if got := wire.SettingsIn(travel(t, wire.SettingsOut(want))); got != want {
			t.Fatalf("%+v came back as %+v", want, got)
		}
	})
}

// The contract's defaults: 0.05 m, 5 m of clearance or 250 cells, unknown cells.
func TestSettingsDefaults(t *testing.T) {
	for _, c := range []struct {
		in       *pb.FloorSettings
		res, cap int64
	}{
		{&pb.FloorSettings{}, 50_000, 5_000_000},
		{&pb.FloorSettings{ResolutionM: proto.Float64(0.01)}, 10_000, 2_500_000},
		{&pb.FloorSettings{ResolutionM: proto.Float64(10)}, 10_000_000, 10_000_000}, // never below a cell
		{&pb.FloorSettings{ClearanceCapM: 3}, 50_000, 3_000_000},
	} {
		got := wire.SettingsIn(c.in)
		if got.ResolutionUm != c.res || got.CapUm != c.cap || got.Initial != floor.Unknown {
			t.Errorf("%v: %+v, wanted %d, %d, unknown", c.in, got, c.res, c.cap)
		}
	}
}

func TestRectanglesSurviveTheWire(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		r := geom.BoundsOf(point(t), point(t))
		if got := wire.AreaIn(travel(t, wire.AreaOut(r))); got != r {
			t.Fatalf("%v came back as %v", r, got)
		}
		c := floor.CellRect{X0: rapid.IntRange(0, floor.MaxSide-1).Draw(t, "x0"), Y0: rapid.IntRange(0, floor.MaxSide-1).Draw(t, "y0")}
		c.X1, c.Y1 = rapid.IntRange(c.X0+1, floor.MaxSide).Draw(t, "x1"), rapid.IntRange(c.Y0+1, floor.MaxSide).Draw(t, "y1")
		if got := wire.CellRectIn(travel(t, wire.CellRectOut(c))); got != c {
			t.Fatalf("%v came back as %v", c, got)
		}
	})
	if got := wire.AreaOut(geom.EmptyRect()); got != nil {
		t.Errorf("nothing became %v", got)
	}
}

// What comes in metres is rounded as the contract says: coordinates to the nearest
// micrometre, lengths that take room up, headings into (-pi, pi].
func TestRoundingOnEntry(t *testing.T) {
	solid, err := wire.FeatureIn(&pb.Feature{Name: "post", Kind: &pb.Feature_Solid{Solid: &pb.Solid{
		SurveyToleranceM: 0.0000201,
		Shape:            &pb.Solid_Disc{Disc: &pb.Disc{Center: &pb.Point{XM: 1.0000004, YM: 1.0000006}, RadiusM: 0.3500001}},
	}}})
	if err != nil {
		t.Fatal(err)
	}
	if at := solid.Shape.Chains[0][0]; at != (geom.Point{X: 1_000_000, Y: 1_000_001}) {
		t.Errorf("the middle is %v", at)
	}
	if solid.RadiusUm != 350_001 || solid.ToleranceUm != 21 || solid.Shape.Grow != 350_022 {
		t.Errorf("radius %d, tolerance %d, grown by %v", solid.RadiusUm, solid.ToleranceUm, solid.Shape.Grow)
	}
	for _, c := range []struct{ in, want float64 }{
		{0, 0}, {math.Pi, math.Pi}, {-math.Pi, math.Pi}, {float64(float32(math.Pi)), math.Pi},
		{-float64(float32(math.Pi)), math.Pi}, {math.Nextafter(-math.Pi, 0), math.Nextafter(-math.Pi, 0)},
	} {
		if got := wire.Heading(c.in); got != c.want {
			t.Errorf("heading %v is taken as %v, wanted %v", c.in, got, c.want)
		}
	}
}

// What this program does not know is an error, never another thing.
func TestUnknownFeatures(t *testing.T) {
	for _, f := range []*pb.Feature{
		nil, {}, {Kind: &pb.Feature_Solid{}}, {Kind: &pb.Feature_Solid{Solid: &pb.Solid{}}},
		{Kind: &pb.Feature_Zone{}}, {Kind: &pb.Feature_Zone{Zone: &pb.Zone{}}},
	} {
		if got, err := wire.FeatureIn(f); err == nil || got != nil {
			t.Errorf("%v: read as %+v", f, got)
		}
	}
}

func TestEveryOccupancy(t *testing.T) {
	for n := range pb.Occupancy_name {
		o := pb.Occupancy(n)
		want := o
		if o == pb.Occupancy_OCCUPANCY_UNSPECIFIED {
			want = pb.Occupancy_OCCUPANCY_UNKNOWN
		}
		if got := wire.OccupancyOut(wire.OccupancyIn(o)); got != want {
			t.Errorf("%v came back as %v", o, got)
		}
	}
}
