package server

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/rs/zerolog"
	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	pb "example.com/wideberth/proto/wideberth/v1"
)

// call sends any unary request to the method that takes it.
func (r *running) call(m proto.Message) error {
	var err error
	switch q := m.(type) {
	case *pb.CreateFloorRequest:
		_, err = r.floors.CreateFloor(r.ctx(), q)
	case *pb.GetFloorRequest:
		_, err = r.floors.GetFloor(r.ctx(), q)
	case *pb.ListVersionsRequest:
		_, err = r.floors.ListVersions(r.ctx(), q)
	case *pb.GetVersionRequest:
		_, err = r.floors.GetVersion(r.ctx(), q)
	case *pb.CompareVersionsRequest:
		_, err = r.floors.CompareVersions(r.ctx(), q)
	case *pb.PushPatchRequest:
		_, err = r.floors.PushPatch(r.ctx(), q)
	case *pb.RestoreVersionRequest:
		_, err = r.floors.RestoreVersion(r.ctx(), q)
	case *pb.PlanRequest:
		_, err = r.routes.Plan(r.ctx(), q)
	case *pb.ReplanRequest:
		_, err = r.routes.Replan(r.ctx(), q)
	case *pb.GuideOnceRequest:
		_, err = r.guides.GuideOnce(r.ctx(), q)
	default:
		r.t.Fatalf("no method for %T", m)
	}
	return err
}

func pinned(v int64) *pb.VersionSelector {
	return &pb.VersionSelector{Choice: &pb.VersionSelector_Pinned{Pinned: v}}
}

// Each bad request is refused with its code, its reason and the field or the state
// at fault, within 4 KiB, and leaves the floor as it was.
func TestBadRequestsChangeNothing(t *testing.T) {
	r := start(t)
	before := r.hall()
	base := func(q *pb.PushPatchRequest, v int64) *pb.PushPatchRequest { q.Patch.BaseVersion = v; return q }
	triangle := polygon(1, 2, 2, 2, 2, 3)
	clearRect := func(a *pb.Area) *pb.Edit {
		return &pb.Edit{Action: &pb.Edit_ClearRect{ClearRect: &pb.ClearRect{Area: a}}}
	}
	if _, err := r.floors.PushPatch(r.ctx(), edited(base(push(put(station("x", 1, 1))), 2), func(q *pb.PushPatchRequest) { q.ValidateOnly = true })); err != nil {
		t.Errorf("a trial push: %v", err)
	}
	for _, c := range []struct {
		name   string
		m      proto.Message
		code   codes.Code
		reason string
		says   string // in the message or a violation's field
		meta   string // key=value of the metadata
	}{
		{"NaN", edited(plan(), func(q *pb.PlanRequest) { q.Body.RadiusM = nan }), codes.InvalidArgument, "INVALID_FIELD", "body.radius_m", ""},
		{"infinite", edited(plan(), func(q *pb.PlanRequest) { q.Start = atPose(inf, 0) }), codes.InvalidArgument, "INVALID_FIELD", "start.pose.x_m", ""},
		{"negative resolution", edited(create(), func(q *pb.CreateFloorRequest) { q.Floor, q.Settings.ResolutionM = "yard", proto.Float64(-1) }), codes.InvalidArgument, "INVALID_FIELD", "settings.resolution_m", ""},
		{"zero resolution", edited(create(), func(q *pb.CreateFloorRequest) { q.Floor, q.Settings.ResolutionM = "yard", proto.Float64(0) }), codes.InvalidArgument, "INVALID_FIELD", "settings.resolution_m", ""},
		{"2^31 cells", edited(create(), func(q *pb.CreateFloorRequest) { q.Floor, q.Settings.Columns, q.Settings.Rows = "yard", 65536, 32768 }), codes.InvalidArgument, "INVALID_FIELD", "settings.columns", ""},
		{"floor taken", edited(create(), func(q *pb.CreateFloorRequest) { q.Settings.Rows = 7 }), codes.AlreadyExists, "FLOOR_EXISTS", "floor", "floor=hall"},
		{"self-intersecting", base(push(put(solidPolygon("x", polygon(0, 0, 2, 2, 2, 0, 0, 2)))), 2), codes.InvalidArgument, "INVALID_FIELD", "patch.edits[0].put_feature.feature.solid.polygon.outer.points", ""},
		{"outside the map", base(push(put(solidPolygon("x", polygon(9, 1, 11, 1, 11, 2)))), 2), codes.InvalidArgument, "INVALID_FIELD", "patch.edits[0].put_feature.feature.solid.polygon", ""},
		{"station outside", base(push(put(station("x", 10.5, 1))), 2), codes.InvalidArgument, "INVALID_FIELD", "patch.edits[0].put_feature.feature.station.pose", ""},
		{"cells outside", base(push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Column: 199, Columns: 4, Rows: 1}, Encoding: 1, Cells: []byte{0}})), 2), codes.InvalidArgument, "INVALID_FIELD", "patch.edits[0].paint_occupancy.cells.rect.columns", ""},
		{"clear outside", base(push(clearRect(&pb.Area{MinXM: 20, MaxXM: 21, MaxYM: 1})), 2), codes.InvalidArgument, "INVALID_FIELD", "patch.edits[0].clear_rect.area", ""},
		{"clear along a line between cells", base(push(clearRect(&pb.Area{MinXM: 1, MaxXM: 1, MaxYM: 1})), 2), codes.InvalidArgument, "INVALID_FIELD", "patch.edits[0].clear_rect.area", ""},
		{"second edit bad", base(push(put(solidPolygon("x", triangle)), put(solidPolygon("y", polygon(9, 1, 11, 1, 11, 2)))), 2), codes.InvalidArgument, "INVALID_FIELD", "patch.edits[1].put_feature", ""},
		{"remove what is not there", base(push(&pb.Edit{Action: &pb.Edit_RemoveFeature{RemoveFeature: &pb.RemoveFeature{Name: "ghost"}}}), 2), codes.FailedPrecondition, "FEATURE_NOT_FOUND", "patch.edits[0].remove_feature.name", ""},
		{"stale base", base(push(put(solidPolygon("x", triangle))), 1), codes.Aborted, "STALE_BASE", "base_version: 1", "head_version=2"},
		{"base above head", base(push(put(solidPolygon("x", triangle))), 9), codes.FailedPrecondition, "BASE_ABOVE_HEAD", "base_version: 9", "head_version=2"},
		{"trial of a stale base", edited(base(push(put(solidPolygon("x", triangle))), 1), func(q *pb.PushPatchRequest) { q.ValidateOnly = true }), codes.Aborted, "STALE_BASE", "base_version: 1", "head_version=2"},
		{"no floor", &pb.GetFloorRequest{Floor: "yard"}, codes.NotFound, "FLOOR_NOT_FOUND", `"yard"`, "floor=yard"},
		{"push to no floor", edited(base(push(put(solidPolygon("x", triangle))), 1), func(q *pb.PushPatchRequest) { q.Floor = "yard" }), codes.NotFound, "FLOOR_NOT_FOUND", `"yard"`, "floor=yard"},
		{"unknown version", &pb.GetVersionRequest{Floor: "hall", Version: pinned(7)}, codes.NotFound, "VERSION_NOT_FOUND", "no version 7", "head_version=2"},
		{"compare unknown", &pb.CompareVersionsRequest{Floor: "hall", FromVersion: 1, ToVersion: 8}, codes.NotFound, "VERSION_NOT_FOUND", "no version 8", "head_version=2"},
		{"restore unknown", &pb.RestoreVersionRequest{Floor: "hall", RestoredVersion: 5, BaseVersion: 2, Author: "a", Reason: "b"}, codes.NotFound, "VERSION_NOT_FOUND", "no version 5", "version=5"},
		{"restore on stale base", &pb.RestoreVersionRequest{Floor: "hall", RestoredVersion: 1, BaseVersion: 1, Author: "a", Reason: "b"}, codes.Aborted, "STALE_BASE", "base_version: 1", "head_version=2"},
		{"foreign page token", &pb.ListVersionsRequest{Floor: "hall", PageToken: pageToken("floors", "hall")}, codes.InvalidArgument, "INVALID_FIELD", "page_token", ""},
		{"unknown station", edited(plan(), func(q *pb.PlanRequest) { q.Start = atStation("ramp") }), codes.NotFound, "STATION_NOT_FOUND", "start.station", "station=ramp"},
		{"wall is no station", edited(plan(), func(q *pb.PlanRequest) { q.Goal = atStation("wall") }), codes.NotFound, "STATION_NOT_FOUND", "goal.station", "version=2"},
		{"station of a later version", edited(toBench(), func(q *pb.PlanRequest) { q.Version = pinned(1) }), codes.NotFound, "STATION_NOT_FOUND", "start.station", "version=1"},
		{"pose off the floor", edited(plan(), func(q *pb.PlanRequest) { q.Start = atPose(-0.01, 1) }), codes.InvalidArgument, "INVALID_FIELD", "start.pose.x_m", ""},
		{"body above the cap", edited(plan(), func(q *pb.PlanRequest) { q.Body.RadiusM, q.Body.MarginM = 4, 1.5 }), codes.InvalidArgument, "INVALID_FIELD", "body.radius_m", ""},
		{"preferred above the cap", edited(plan(), func(q *pb.PlanRequest) { q.Body.PreferredClearanceM = 5.5 }), codes.InvalidArgument, "INVALID_FIELD", "body.preferred_clearance_m", ""},
		{"tight above the cap", edited(plan(), func(q *pb.PlanRequest) { q.Options = &pb.PlanOptions{TightBelowM: 6} }), codes.InvalidArgument, "INVALID_FIELD", "options.tight_below_m", ""},
		{"replan from off the floor", edited(replan(), func(q *pb.ReplanRequest) { q.Pose.YM = 5.01 }), codes.InvalidArgument, "INVALID_FIELD", "pose.y_m", ""},
		{"old route off the floor", edited(replan(), func(q *pb.ReplanRequest) { q.Previous.Legs[1].Points[1].XM = 12 }), codes.InvalidArgument, "INVALID_FIELD", "previous.legs[1].points[1].x_m", ""},
		{"replan on no floor", edited(replan(), func(q *pb.ReplanRequest) { q.Previous.CheckedAgainst.Floor = "yard" }), codes.NotFound, "FLOOR_NOT_FOUND", `"yard"`, ""},
		{"hint above the cap", edited(guideOnce(), func(q *pb.GuideOnceRequest) { q.Setup.HintBelowM = 6 }), codes.InvalidArgument, "INVALID_FIELD", "setup.hint_below_m", ""},
		{"quiet above the cap", edited(guideOnce(), func(q *pb.GuideOnceRequest) { q.Setup.QuietAboveM = 6 }), codes.InvalidArgument, "INVALID_FIELD", "setup.quiet_above_m", ""},
	} {
		t.Run(c.name, func(t *testing.T) {
			err := r.call(c.m)
			wantStatus(t, err, c.code, c.reason)
			st := status.Convert(err)
			said := st.Message()
			for _, v := range detail[*errdetails.BadRequest](err).GetFieldViolations() {
				said += "\n" + v.Field
			}
			if !strings.Contains(said, c.says) {
				t.Errorf("%q does not say %q", said, c.says)
			}
			if k, v, ok := strings.Cut(c.meta, "="); ok && metaOf(err)[k] != v {
				t.Errorf("metadata %v, wanted %s", metaOf(err), c.meta)
			}
			if n := proto.Size(st.Proto()); n > maxStatusBytes {
				t.Errorf("%d bytes of status", n)
			}
		})
	}
	if after := r.head(); !proto.Equal(before, after) {
		t.Errorf("the head is %v, wanted %v as before", after, before)
	}
	if list, err := r.floors.ListFloors(r.ctx(), &pb.ListFloorsRequest{}); err != nil || len(list.Floors) != 1 {
		t.Errorf("floors %v, %v; wanted hall alone", list, err)
	}
}

// A stale base names what was touched since, and the digest to look at.
func TestStaleBaseNamesConflicts(t *testing.T) {
	r := start(t)
	r.hall()
	head := r.push(put(solidPolygon("wall", polygon(4.9, 0, 5.1, 0, 5.1, 4, 4.9, 4))))
	q := push(put(solidPolygon("wall", polygon(4.9, 0, 5.1, 0, 5.1, 2, 4.9, 2))))
	q.Patch.BaseVersion, q.AllowRebase = 2, true
	_, err := r.floors.PushPatch(r.ctx(), q)
	wantStatus(t, err, codes.Aborted, "STALE_BASE")
	if m := metaOf(err); m["head_digest"] != head.Digest || !strings.Contains(m["conflicts"], "wall") {
		t.Errorf("metadata %v, wanted the head's digest %s and the wall", m, head.Digest)
	}
	free := push(put(solidPolygon("crate", polygon(8, 4, 8.5, 4, 8.5, 4.5))))
	free.Patch.BaseVersion, free.AllowRebase = 2, true
	if got, err := r.floors.PushPatch(r.ctx(), free); err != nil || got.Version.Stamp.Version != 4 {
		t.Errorf("a rebase that touches nothing of the others: %v, %v", got, err)
	}
}

// The same request id gives the first answer; for another request it is refused.
func TestRequestID(t *testing.T) {
	r := start(t)
	r.hall()
	q := push(put(solidPolygon("crate", polygon(8, 4, 8.5, 4, 8.5, 4.5))))
	q.Patch.BaseVersion, q.RequestId = 2, "spill-0200"
	first, err := r.floors.PushPatch(r.ctx(), q)
	if err != nil {
		t.Fatal(err)
	}
	again, err := r.floors.PushPatch(r.ctx(), q)
	if err != nil || !again.RepeatedRequest || !proto.Equal(first.Version, again.Version) {
		t.Errorf("got %v, %v; wanted the first answer %v", again, err, first)
	}
	q.Patch.Reason = "something else"
	_, err = r.floors.PushPatch(r.ctx(), q)
	wantStatus(t, err, codes.FailedPrecondition, "REQUEST_ID_REUSED")
	if r.head().Version != 3 {
		t.Errorf("head %v, wanted 3", r.head())
	}
}

// A file that is no journal is refused by name at start, and left as it was.
func TestWrongFileAtStart(t *testing.T) {
	path := filepath.Join(t.TempDir(), "notes.txt")
	text := []byte(strings.Repeat("these are not versions\n", 1000))
	if err := os.WriteFile(path, text, 0o600); err != nil {
		t.Fatal(err)
	}
	cfg := DefaultConfig()
	cfg.Data = path
	_, err := New(context.Background(), cfg, zerolog.Nop())
	if err == nil || !strings.Contains(err.Error(), "notes.txt") {
		t.Errorf("got %v, wanted an error that names the file", err)
	}
	if after, e := os.ReadFile(path); e != nil || string(after) != string(text) {
		t.Errorf("the file was changed (%v)", e)
	}
	cfg.Data = filepath.Join(t.TempDir(), "none", "x.db")
	if _, err := New(context.Background(), cfg, zerolog.Nop()); err == nil || !strings.Contains(err.Error(), "x.db") {
		t.Errorf("got %v, wanted an error that names the file", err)
	}
	cfg.Worlds = 0
	if _, err := New(context.Background(), cfg, zerolog.Nop()); err == nil || !strings.Contains(err.Error(), "worlds") {
		t.Errorf("got %v, wanted the configuration's fault", err)
	}
}
