package server

import (
	"bytes"
	"compress/flate"
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/reflect/protoreflect"

	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

var nan, inf = math.NaN(), math.Inf(1)

func pt(x, y float64) *pb.Point { return &pb.Point{XM: x, YM: y} }

func ring(xy ...float64) *pb.Ring {
	r := &pb.Ring{}
	for i := 0; i < len(xy); i += 2 {
		r.Points = append(r.Points, pt(xy[i], xy[i+1]))
	}
	return r
}

func polygon(xy ...float64) *pb.Polygon { return &pb.Polygon{Outer: ring(xy...)} }

func atPose(x, y float64) *pb.Place {
	return &pb.Place{Where: &pb.Place_Pose{Pose: &pb.Pose{XM: x, YM: y}}}
}

func atStation(name string) *pb.Place { return &pb.Place{Where: &pb.Place_Station{Station: name}} }

func solidPolygon(name string, g *pb.Polygon) *pb.Feature {
	return &pb.Feature{Name: name, Kind: &pb.Feature_Solid{Solid: &pb.Solid{Shape: &pb.Solid_Polygon{Polygon: g}}}}
}

func put(t *pb.Feature) *pb.Edit {
	return &pb.Edit{Action: &pb.Edit_PutFeature{PutFeature: &pb.PutFeature{Feature: t}}}
}

func paintCells(b *pb.CellBlock) *pb.Edit {
	return &pb.Edit{Action: &pb.Edit_PaintOccupancy{PaintOccupancy: &pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Cells{Cells: b}}}}
}

func push(edits ...*pb.Edit) *pb.PushPatchRequest {
	return &pb.PushPatchRequest{Floor: "hall", Patch: &pb.Patch{BaseVersion: 1, Author: "shift", Reason: "test", Edits: edits}}
}

func create() *pb.CreateFloorRequest {
	return &pb.CreateFloorRequest{Floor: "hall", Author: "survey", Settings: &pb.FloorSettings{Columns: 200, Rows: 100}}
}

func plan() *pb.PlanRequest {
	return &pb.PlanRequest{Floor: "hall", Body: &pb.Body{RadiusM: 0.3}, Start: atPose(1, 1), Goal: atPose(8, 4)}
}

func oldRoute() *pb.Route {
	return &pb.Route{
		CheckedAgainst: &pb.VersionStamp{Floor: "hall", Version: 1, Digest: strings.Repeat("0a", 32)},
		Body:           &pb.Body{RadiusM: 0.3}, Goal: &pb.Pose{XM: 8, YM: 4},
		Legs: []*pb.Leg{
			{Points: []*pb.RoutePoint{{XM: 1, YM: 1}, {XM: 4, YM: 2}}},
			{Points: []*pb.RoutePoint{{XM: 4, YM: 2}, {XM: 8, YM: 4}}},
		},
	}
}

func replan() *pb.ReplanRequest {
	return &pb.ReplanRequest{Previous: oldRoute(), Pose: &pb.Pose{XM: 2, YM: 1.5}}
}

func planMany() *pb.PlanManyRequest {
	return &pb.PlanManyRequest{
		Floor: "hall", Body: &pb.Body{RadiusM: 0.3},
		Starts: []*pb.Place{atPose(1, 1), atPose(2, 1)}, Goals: []*pb.Place{atPose(8, 4), atStation("bench")},
	}
}

func guideOnce() *pb.GuideOnceRequest {
	return &pb.GuideOnceRequest{Setup: &pb.GuideSetup{Route: oldRoute()}, Report: &pb.GuideReport{Pose: &pb.Pose{XM: 2, YM: 1.5}}}
}

// longRoute has that many points, joints counted once, in that many legs.
func longRoute(points, legs int) []*pb.Leg {
	out := make([]*pb.Leg, legs)
	last := &pb.RoutePoint{}
	for i := range out {
		n := points/legs + 1
		if i == legs-1 {
			n = points - (legs-1)*(n-1)
		}
		out[i] = &pb.Leg{Points: []*pb.RoutePoint{last}}
		for len(out[i].Points) < n {
			last = &pb.RoutePoint{XM: last.XM + 0.05}
			out[i].Points = append(out[i].Points, last)
		}
	}
	return out
}

// edited is m after f.
func edited[T any](m T, f func(T)) T { f(m); return m }

func deflated(b []byte) []byte {
	var out bytes.Buffer
	w, _ := flate.NewWriter(&out, flate.BestCompression) // the level is valid
	w.Write(b)
	w.Close()
	return out.Bytes()
}

// Every bad input is refused with the field that is at fault, the value, and the
// range that is wanted.
func TestBadInputNamesTheField(t *testing.T) {
	bow := polygon(0, 0, 2, 2, 2, 0, 0, 2) // crosses itself
	cases := []struct {
		name  string
		m     proto.Message
		field string
		says  string
	}{
		{"no floor", edited(create(), func(r *pb.CreateFloorRequest) { r.Floor = "" }), "floor", `"", wanted 1 to 63`},
		{"capital in floor", &pb.GetFloorRequest{Floor: "Hall"}, "floor", "first a letter"},
		{"no settings", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings = nil }), "settings", "not set"},
		{"resolution negative", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.ResolutionM = proto.Float64(-0.05) }), "settings.resolution_m", "-0.05, wanted 0.001 to 10"},
		{"resolution zero", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.ResolutionM = proto.Float64(0) }), "settings.resolution_m", "0, wanted 0.001 to 10"},
		{"resolution too small", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.ResolutionM = proto.Float64(0.0009) }), "settings.resolution_m", "0.0009, wanted 0.001 to 10"},
		{"resolution NaN", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.ResolutionM = proto.Float64(nan) }), "settings.resolution_m", "NaN"},
		{"resolution not whole", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.ResolutionM = proto.Float64(0.05000025) }), "settings.resolution_m", "whole number of micrometres"},
		{"2^31 cells", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.Columns, r.Settings.Rows = 65536, 32768 }), "settings.columns", "2147483648 cells, wanted at most 268435456"},
		{"columns overflow", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.Columns = math.MaxInt32 }), "settings.columns", "wanted 1 to 65536"},
		{"origin infinite", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.Origin = pt(0, -inf) }), "settings.origin.y_m", "-Inf"},
		{"cap above 250 cells", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.ClearanceCapM = 12.6 }), "settings.clearance_cap_m", "wanted 0.05 m to 12.5 m"},
		{"unknown occupancy", edited(create(), func(r *pb.CreateFloorRequest) { r.Settings.InitialOccupancy = 9 }), "settings.initial_occupancy", "9, wanted"},
		{"author too long", edited(create(), func(r *pb.CreateFloorRequest) { r.Author = strings.Repeat("å", 101) }), "author", "101 characters, wanted 1 to 100"},
		{"request id not ASCII", edited(create(), func(r *pb.CreateFloorRequest) { r.RequestId = "blå" }), "request_id", "printable ASCII"},
		{"request id too long", edited(create(), func(r *pb.CreateFloorRequest) { r.RequestId = strings.Repeat("x", 65) }), "request_id", "65 bytes, wanted at most 64"},
		{"page size", &pb.ListFloorsRequest{PageSize: -1}, "page_size", "-1, wanted 0 to 1000"},
		{"page token", &pb.ListVersionsRequest{Floor: "hall", PageToken: strings.Repeat("x", 600)}, "page_token", "600 bytes"},
		{"wait", &pb.GetVersionRequest{Floor: "hall", Version: &pb.VersionSelector{MaxWaitS: 10.5}}, "version.max_wait_s", "10.5, wanted 0 to 10"},
		{"pinned", &pb.GetVersionRequest{Floor: "hall", Version: &pb.VersionSelector{Choice: &pb.VersionSelector_Pinned{}}}, "version.pinned", "0, wanted 1"},
		{"at least", &pb.GetVersionRequest{Floor: "hall", Version: &pb.VersionSelector{Choice: &pb.VersionSelector_AtLeast{AtLeast: -4}}}, "version.at_least", "-4, wanted 1"},
		{"from version", &pb.CompareVersionsRequest{Floor: "hall"}, "from_version", "0, wanted 1"},
		{"restore base", &pb.RestoreVersionRequest{Floor: "hall", RestoredVersion: 1, Author: "a", Reason: "b"}, "base_version", "0, wanted 1"},
		{"area turned", &pb.ReadFloorRequest{Floor: "hall", Area: &pb.Area{MinXM: 2, MaxXM: 1}}, "area.max_x_m", "1, wanted 2"},
		{"after version", &pb.WatchVersionsRequest{Floor: "hall", AfterVersion: -1}, "after_version", "-1, wanted 0"},

		{"no patch", &pb.PushPatchRequest{Floor: "hall"}, "patch", "not set"},
		{"no edits", push(), "patch.edits", "0 edits, wanted 1 to 10000"},
		{"no action", push(&pb.Edit{}), "patch.edits[0]", "no action"},
		{"no feature", push(put(nil)), "patch.edits[0].put_feature.feature", "not set"},
		{"no kind", push(put(&pb.Feature{Name: "x"})), "patch.edits[0].put_feature.feature", "no kind"},
		{"feature name", push(put(solidPolygon("-x", polygon(0, 0, 1, 0, 1, 1)))), "patch.edits[0].put_feature.feature.name", `"-x", wanted`},
		{"self-intersecting polygon", push(put(solidPolygon("x", bow))), "patch.edits[0].put_feature.feature.solid.polygon.outer.points", ""},
		{"two points", push(put(solidPolygon("x", polygon(0, 0, 1, 1)))), "patch.edits[0].put_feature.feature.solid.polygon.outer.points", "2 points, wanted 3 to 10000"},
		{"NaN point", push(put(solidPolygon("x", polygon(0, 0, 1, nan, 1, 1)))), "patch.edits[0].put_feature.feature.solid.polygon.outer.points[1].y_m", "NaN"},
		{"hole outside", push(put(solidPolygon("x", &pb.Polygon{Outer: ring(0, 0, 4, 0, 4, 4, 0, 4), Holes: []*pb.Ring{ring(5, 5, 6, 5, 6, 6)}}))), "patch.edits[0].put_feature.feature.solid.polygon.holes[0].points", ""},
		{"too many holes", push(put(solidPolygon("x", &pb.Polygon{Outer: ring(0, 0, 4, 0, 4, 4), Holes: make([]*pb.Ring, 101)}))), "patch.edits[0].put_feature.feature.solid.polygon.holes", "101 holes"},
		{"disc radius", push(put(&pb.Feature{Name: "x", Kind: &pb.Feature_Solid{Solid: &pb.Solid{Shape: &pb.Solid_Disc{Disc: &pb.Disc{Center: pt(1, 1)}}}}})), "patch.edits[0].put_feature.feature.solid.disc.radius_m", "0, wanted 1e-06 to 1000"},
		{"tolerance", push(put(edited(solidPolygon("x", polygon(0, 0, 1, 0, 1, 1)), func(f *pb.Feature) { f.GetSolid().SurveyToleranceM = inf }))), "patch.edits[0].put_feature.feature.solid.survey_tolerance_m", "+Inf"},
		{"zone without rule", push(put(&pb.Feature{Name: "x", Kind: &pb.Feature_Zone{Zone: &pb.Zone{Area: polygon(0, 0, 1, 0, 1, 1)}}})), "patch.edits[0].put_feature.feature.zone", "no rule"},
		{"speed limit", push(put(&pb.Feature{Name: "x", Kind: &pb.Feature_Zone{Zone: &pb.Zone{Area: polygon(0, 0, 1, 0, 1, 1), Rule: &pb.Zone_SpeedLimit{SpeedLimit: &pb.SpeedLimitRule{}}}}})), "patch.edits[0].put_feature.feature.zone.speed_limit.max_speed_mps", "0, wanted 0.001 to 20"},
		{"station heading", push(put(&pb.Feature{Name: "x", Kind: &pb.Feature_Station{Station: &pb.Station{Pose: &pb.Pose{HeadingRad: 4}}}})), "patch.edits[0].put_feature.feature.station.pose.heading_rad", "4, wanted above -pi"},
		{"paint nothing", push(&pb.Edit{Action: &pb.Edit_PaintOccupancy{}}), "patch.edits[0].paint_occupancy", "nothing set"},
		{"short cells", push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 4, Rows: 2}, Encoding: 1, Cells: []byte{0}})), "patch.edits[0].paint_occupancy.cells.cells", "1 bytes, wanted 2"},
		{"cell of 3", push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 4, Rows: 1}, Encoding: 1, Cells: []byte{0x30}})), "patch.edits[0].paint_occupancy.cells.cells", "cell of 3"},
		{"spare bits", push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 3, Rows: 1}, Encoding: 1, Cells: []byte{0x40}})), "patch.edits[0].paint_occupancy.cells.cells", "spare bits"},
		{"no encoding", push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 4, Rows: 1}, Cells: []byte{0}})), "patch.edits[0].paint_occupancy.cells.encoding", "UNSPECIFIED"},
		{"not DEFLATE", push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 4, Rows: 1}, Encoding: 2, Cells: []byte{0xff}})), "patch.edits[0].paint_occupancy.cells.cells", "not a DEFLATE stream"},
		{"DEFLATE bomb", push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 4, Rows: 1}, Encoding: 2, Cells: deflated(make([]byte, 64<<20))})), "patch.edits[0].paint_occupancy.cells.cells", "unfolds to more than the 1 bytes"},
		{"DEFLATE short", push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 400, Rows: 1}, Encoding: 2, Cells: deflated(make([]byte, 9))})), "patch.edits[0].paint_occupancy.cells.cells", "ends after 9 bytes, wanted 100"},
		{"2^31 cells in a block", push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 65536, Rows: 32768}, Encoding: 2})), "patch.edits[0].paint_occupancy.cells.rect", "2147483648 cells, wanted at most 268435456"},

		{"no body", edited(plan(), func(r *pb.PlanRequest) { r.Body = nil }), "body", "not set"},
		{"radius NaN", edited(plan(), func(r *pb.PlanRequest) { r.Body.RadiusM = nan }), "body.radius_m", "NaN, wanted 0 to 10"},
		{"radius negative", edited(plan(), func(r *pb.PlanRequest) { r.Body.RadiusM = -0.1 }), "body.radius_m", "-0.1, wanted 0 to 10"},
		{"preferred below required", edited(plan(), func(r *pb.PlanRequest) { r.Body.PreferredClearanceM = 0.2 }), "body.preferred_clearance_m", "0.2, wanted the required clearance 0.3"},
		{"speed of no finite time", edited(plan(), func(r *pb.PlanRequest) { r.Body.MaxSpeedMps = 1e-320 }), "body.max_speed_mps", "1e-320, wanted 0.001 to 20"},
		{"braking lost in rounding", edited(plan(), func(r *pb.PlanRequest) { r.Body.BrakingMps2 = 1e-310 }), "body.braking_mps2", "1e-310, wanted 0.001 to 10"},
		{"braking negative", edited(plan(), func(r *pb.PlanRequest) { r.Body.BrakingMps2 = -0.5 }), "body.braking_mps2", "-0.5, wanted 0.001 to 10"},
		{"speed infinite", edited(plan(), func(r *pb.PlanRequest) { r.Body.MaxSpeedMps = inf }), "body.max_speed_mps", "+Inf"},
		{"reaction", edited(plan(), func(r *pb.PlanRequest) { r.Body.ReactionS = 0.001 }), "body.reaction_s", "0.001, wanted 0.01 to 10"},
		{"no start", edited(plan(), func(r *pb.PlanRequest) { r.Start = nil }), "start", "wanted a pose or a station"},
		{"start infinite", edited(plan(), func(r *pb.PlanRequest) { r.Start = atPose(inf, 1) }), "start.pose.x_m", "+Inf"},
		{"station name", edited(plan(), func(r *pb.PlanRequest) { r.Goal = atStation("Dock 4") }), "goal.station", `"Dock 4", wanted`},
		{"unknown preference", edited(plan(), func(r *pb.PlanRequest) { r.Options = &pb.PlanOptions{Preference: 7} }), "options.preference", "7, wanted one of the values 0 to 3"},
		{"clearest over a grid", edited(plan(), func(r *pb.PlanRequest) {
			r.Options = &pb.PlanOptions{Preference: pb.Preference_PREFERENCE_CLEAREST, Roadmap: pb.Roadmap_ROADMAP_GRID8}
		}), "options.roadmap", "ROADMAP_GRID8, wanted none with PREFERENCE_CLEAREST"},
		{"clearest from cell to cell", edited(plan(), func(r *pb.PlanRequest) {
			r.Options = &pb.PlanOptions{Preference: pb.Preference_PREFERENCE_CLEAREST, KeepRoadmapPath: true}
		}), "options.keep_roadmap_path", "true, wanted false"},
		{"many balanced over convex cells", edited(planMany(), func(r *pb.PlanManyRequest) {
			r.Options = &pb.PlanOptions{Roadmap: pb.Roadmap_ROADMAP_CONVEX_CELLS}
		}), "options.roadmap", "ROADMAP_CONVEX_CELLS, wanted"},
		{"unknown roadmap", edited(plan(), func(r *pb.PlanRequest) { r.Options = &pb.PlanOptions{Roadmap: -1} }), "options.roadmap", "-1"},
		{"weight", edited(plan(), func(r *pb.PlanRequest) { r.Options = &pb.PlanOptions{TightWeight: 101} }), "options.tight_weight", "101, wanted 0 to 100"},
		{"budget", edited(plan(), func(r *pb.PlanRequest) { r.Options = &pb.PlanOptions{TimeBudgetS: 31} }), "options.time_budget_s", "31, wanted 0.001 to 30"},
		{"spacing", edited(plan(), func(r *pb.PlanRequest) { r.Options = &pb.PlanOptions{MaxSpacingM: 0.01} }), "options.max_spacing_m", "0.01, wanted 0.05"},

		{"no previous", edited(replan(), func(r *pb.ReplanRequest) { r.Previous = nil }), "previous", "not set"},
		{"no legs", edited(replan(), func(r *pb.ReplanRequest) { r.Previous.Legs = nil }), "previous.legs", "0 legs, wanted 1"},
		{"one point", edited(replan(), func(r *pb.ReplanRequest) { r.Previous.Legs[0].Points = r.Previous.Legs[0].Points[:1] }), "previous.legs[0].points", "1 points, wanted 2"},
		{"legs apart", edited(replan(), func(r *pb.ReplanRequest) { r.Previous.Legs[1].Points[0].XM = 5 }), "previous.legs[1].points[0]", "wanted the last point of the leg before"},
		{"point NaN", edited(replan(), func(r *pb.ReplanRequest) { r.Previous.Legs[1].Points[1].YM = nan }), "previous.legs[1].points[1].y_m", "NaN"},
		{"too many points", edited(replan(), func(r *pb.ReplanRequest) { r.Previous.Legs = longRoute(maxRoutePoints+1, 3) }), "previous.legs[2].points", "100001 points, wanted at most 100000"},
		{"too many legs", edited(replan(), func(r *pb.ReplanRequest) { r.Previous.Legs = make([]*pb.Leg, maxRouteLegs+1) }), "previous.legs", "10001 legs, wanted 1 to 10000"},
		{"digest", edited(replan(), func(r *pb.ReplanRequest) { r.Previous.CheckedAgainst.Digest = "beef" }), "previous.checked_against.digest", "64 lower-case hex digits"},
		{"switch share", edited(replan(), func(r *pb.ReplanRequest) { r.SwitchShare = 1.5 }), "switch_share", "1.5, wanted 0 to 1"},

		{"many without goals", edited(planMany(), func(r *pb.PlanManyRequest) { r.Goals = nil }), "goals", "0 places, wanted 1 to 1000"},
		{"too many starts", edited(planMany(), func(r *pb.PlanManyRequest) { r.Starts = make([]*pb.Place, maxPairs+1) }), "starts", "1001 places, wanted 1 to 1000"},
		{"too many pairs", edited(planMany(), func(r *pb.PlanManyRequest) { r.Goals = slices.Repeat(r.Goals, 251) }), "goals", "502 goals for 2 starts are 1004 pairs, wanted at most 1000"},
		{"many goal", edited(planMany(), func(r *pb.PlanManyRequest) { r.Goals[1] = atStation("Bench") }), "goals[1].station", "\"Bench\""},
		{"many start", edited(planMany(), func(r *pb.PlanManyRequest) { r.Starts[1] = nil }), "starts[1]", "wanted a pose or a station"},
		{"many body", edited(planMany(), func(r *pb.PlanManyRequest) { r.Body = nil }), "body", "not set"},
		{"many options", edited(planMany(), func(r *pb.PlanManyRequest) { r.Options = &pb.PlanOptions{TimeBudgetS: 31} }), "options.time_budget_s", "31"},
		{"many detail", edited(planMany(), func(r *pb.PlanManyRequest) { r.Detail = 3 }), "detail", "wanted one of the values 0 to 2"},
		{"many budget", edited(planMany(), func(r *pb.PlanManyRequest) { r.TimeBudgetS = 601 }), "time_budget_s", "601, wanted 0.001 to 600"},

		{"guide nothing", &pb.GuideRequest{}, "message", "wanted a setup or a report"},
		{"guide spread", edited(guideOnce(), func(r *pb.GuideOnceRequest) { r.Report.PositionSpreadM = 11 }), "report.position_spread_m", "11, wanted 0 to 10"},
		{"guide speed", edited(guideOnce(), func(r *pb.GuideOnceRequest) { r.Report.SpeedMps = -21 }), "report.speed_mps", "-21, wanted -20 to 20"},
		{"guide stamp", edited(guideOnce(), func(r *pb.GuideOnceRequest) { r.Report.StampS = nan }), "report.stamp_s", "NaN"},
		{"guide hysteresis", edited(guideOnce(), func(r *pb.GuideOnceRequest) { r.Setup.HintBelowM, r.Setup.QuietAboveM = 1, 0.5 }), "setup.quiet_above_m", "0.5, wanted hint_below_m (1) or more"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			err := validate(c.m)
			var in *inputError
			if !errors.As(err, &in) {
				t.Fatalf("got %v, wanted an input error", err)
			}
			for _, f := range in.list {
				if strings.HasPrefix(f.path, c.field) && strings.Contains(f.problem, c.says) {
					return
				}
			}
			t.Errorf("got %v, wanted %s: ...%s...", in.list, c.field, c.says)
		})
	}
}

// What the contract allows passes, the odd corners too.
func TestGoodInputPasses(t *testing.T) {
	for name, m := range map[string]proto.Message{
		"create":        create(),
		"plan":          plan(),
		"replan":        replan(),
		"many":          planMany(),
		"most pairs":    edited(planMany(), func(r *pb.PlanManyRequest) { r.Goals = slices.Repeat(r.Goals, 250) }),
		"guide":         guideOnce(),
		"point body":    edited(plan(), func(r *pb.PlanRequest) { r.Body = &pb.Body{} }),
		"longest route": edited(replan(), func(r *pb.ReplanRequest) { r.Previous.Legs = longRoute(maxRoutePoints, 3) }),
		"float32 pi":    edited(plan(), func(r *pb.PlanRequest) { r.Goal.GetPose().HeadingRad = float64(float32(math.Pi)) }),
		"atan2 -pi":     edited(plan(), func(r *pb.PlanRequest) { r.Goal.GetPose().HeadingRad = math.Atan2(math.Copysign(0, -1), -1) }),
		"big page":      &pb.ListFloorsRequest{PageSize: math.MaxInt32},
		"deflated":      push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 5, Rows: 1}, Encoding: 2, Cells: deflated([]byte{0x98, 0x02})})),
		"author umlau":  edited(create(), func(r *pb.CreateFloorRequest) { r.Author = strings.Repeat("ü", 100) }),
	} {
		if err := validate(m); err != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// All faults come together; beyond 20 they are counted.
func TestAllFaultsTogether(t *testing.T) {
	r := plan()
	r.Floor, r.Body.RadiusM, r.Goal = "", nan, nil
	var in *inputError
	if !errors.As(validate(r), &in) || len(in.list) != 3 {
		t.Fatalf("got %v, wanted three faults", in)
	}
	many := push()
	for range 500 {
		many.Patch.Edits = append(many.Patch.Edits, &pb.Edit{})
	}
	if !errors.As(validate(many), &in) || len(in.list) != maxFaults || in.more != 480 {
		t.Errorf("got %d and %d more, wanted 20 and 480", len(in.list), in.more)
	}
}

// Every message that a client may send has a validator, and a message that has
// none is refused.
func TestEveryRequestHasAValidator(t *testing.T) {
	n := 0
	for _, file := range []protoreflect.FileDescriptor{pb.File_wideberth_v1_floor_service_proto, pb.File_wideberth_v1_route_service_proto, pb.File_wideberth_v1_guide_service_proto, pb.File_wideberth_v1_roadmap_service_proto} {
		for i := range file.Services().Len() {
			methods := file.Services().Get(i).Methods()
			for j := range methods.Len() {
				in := methods.Get(j).Input().FullName()
				if validators[string(in)] == nil {
					t.Errorf("%s: %s has no validator", methods.Get(j).FullName(), in)
				}
				n++
			}
		}
	}
	if n != len(validators) {
		t.Errorf("%d methods, %d validators", n, len(validators))
	}
	if err := validate(&pb.Point{}); !errors.Is(err, errUnchecked) {
		t.Errorf("a message without validator: got %v, wanted %v", err, errUnchecked)
	}
}

// Many small compressed blocks may not unfold to more than one floor's cells.
func TestPatchOfBombsIsBounded(t *testing.T) {
	cells := deflated(make([]byte, wire.CellBytes(65536*2048)))
	var edits []*pb.Edit
	for range 3 {
		edits = append(edits, paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 65536, Rows: 2048}, Encoding: 2, Cells: cells}))
	}
	var in *inputError
	if !errors.As(validate(push(edits...)), &in) || len(in.list) != 1 || !strings.HasPrefix(in.list[0].path, "patch.edits[2].") {
		t.Errorf("got %v, wanted the third block refused alone", in)
	}
}
