package client_test

import (
	"context"
	"net"
	"path/filepath"
	"testing"
	"time"

	"github.com/rs/zerolog"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/encoding/protojson"

	"example.com/wideberth/client"
	"example.com/wideberth/mapstore/floor"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/server"
)

// Every kind of feature, with lengths that do not fit the grid.
const everyKind = `{"author": "engineer", "reason": "all kinds", "base_version": "1", "edits": [
  {"put_feature": {"feature": {"name": "block", "note": "concrete", "solid": {"survey_tolerance_m": 0.0123, "polygon": {
    "outer": {"points": [{"x_m": 1, "y_m": 1}, {"x_m": 3.333333, "y_m": 1}, {"x_m": 3, "y_m": 3}, {"x_m": 1, "y_m": 3}]},
    "holes": [{"points": [{"x_m": 1.5, "y_m": 1.5}, {"x_m": 2, "y_m": 1.5}, {"x_m": 2, "y_m": 2}]}]}}}}},
  {"put_feature": {"feature": {"name": "rail", "solid": {"polyline": {"width_m": 0.35, "points": [{"x_m": 4, "y_m": 0.7}, {"x_m": 5.1, "y_m": 1.3}]}}}}},
  {"put_feature": {"feature": {"name": "post", "solid": {"disc": {"center": {"x_m": 6, "y_m": 3}, "radius_m": 0.123457}}}}},
  {"put_feature": {"feature": {"name": "closed", "zone": {"closed": {}, "area": {"outer": {"points": [{"x_m": 7, "y_m": 0}, {"x_m": 8, "y_m": 0}, {"x_m": 8, "y_m": 1}]}}}}}},
  {"put_feature": {"feature": {"name": "slow", "zone": {"speed_limit": {"max_speed_mps": 0.3}, "area": {"outer": {"points": [{"x_m": 7, "y_m": 2}, {"x_m": 8, "y_m": 2}, {"x_m": 8, "y_m": 3}]}}}}}},
  {"put_feature": {"feature": {"name": "lane", "zone": {"one_way": {"heading_rad": 3.141592653589793}, "area": {"outer": {"points": [{"x_m": 5, "y_m": 2}, {"x_m": 6, "y_m": 2}, {"x_m": 6, "y_m": 3}]}}}}}},
  {"put_feature": {"feature": {"name": "dock", "station": {"pose": {"x_m": 0.5, "y_m": 0.5, "heading_rad": -1.25}}}}},
  {"paint_occupancy": {"rect": {"rect": {"column": 3, "row": 70, "columns": 20, "rows": 5}, "occupancy": "OCCUPANCY_OCCUPIED"}}},
  {"paint_occupancy": {"rect": {"rect": {"column": 100, "row": 70, "columns": 7, "rows": 3}, "occupancy": "OCCUPANCY_UNKNOWN"}}}
]}`

// A mirrored version is the service's own: the digests agree, and a digest that does not is
// found out.
func TestMirroredMapIsTheServicesOwn(t *testing.T) {
	t.Parallel()
	ctx := t.Context()
	c, stop := serve()
	t.Cleanup(stop)
	newHall(ctx, c)
	patch := &wideberthv1.Patch{}
	if err := protojson.Unmarshal([]byte(everyKind), patch); err != nil {
		t.Fatal(err)
	}
	pushed, err := c.PushPatch(ctx, &wideberthv1.PushPatchRequest{Floor: "hall", Patch: patch})
	if err != nil {
		t.Fatal(err)
	}
	content, err := c.ReadFloor(ctx, "hall", client.Pinned(2))
	if err != nil {
		t.Fatal(err)
	}
	m, err := content.Map()
	if err != nil {
		t.Fatal(err)
	}
	if got := pushed.GetVersion().GetStamp().GetDigest(); got != content.Stamp.GetDigest() || len(got) != 64 {
		t.Errorf("digest %q was read, %q pushed", content.Stamp.GetDigest(), got)
	}
	if m.At(3, 70) != floor.Occupied || m.At(23, 70) != floor.Free || m.At(106, 72) != floor.Unknown {
		t.Errorf("cells hold %v, %v, %v", m.At(3, 70), m.At(23, 70), m.At(106, 72))
	}
	if f, ok := m.Feature("post"); !ok || f.RadiusUm != 123_457 {
		t.Errorf("post %+v, want a radius of 123,457 um", f)
	}
	content.Cells[0] ^= 1 // free becomes occupied
	if _, err := content.Map(); err == nil {
		t.Error("a map with another cell passed for the service's")
	}
}

func TestSurveyOfManyCellsArrives(t *testing.T) {
	t.Parallel()
	ctx := t.Context()
	c, stop := serve()
	t.Cleanup(stop)
	newHall(ctx, c)
	cells := make([]byte, 50*30/4)
	for i := range cells {
		cells[i] = byte(i) & 0b01_10_01_10
	}
	v, err := c.LoadCells(ctx, client.CellLoad{
		Floor: "hall", Base: 1, Author: "survey", Reason: "yearly",
		Rect: &wideberthv1.CellRect{Column: 11, Row: 5, Columns: 50, Rows: 30}, Cells: cells,
	})
	if err != nil {
		t.Fatal(err)
	}
	content, err := c.ReadFloor(ctx, "hall", client.Pinned(v.GetStamp().GetVersion()))
	if err != nil {
		t.Fatal(err)
	}
	for j := range 30 {
		for i := range 50 {
			k := j*50 + i
			if want := floor.Occupancy(cells[k/4] >> (2 * (k % 4)) & 3); content.At(11+i, 5+j) != want {
				t.Fatalf("cell %d,%d holds %v, want %v", 11+i, 5+j, content.At(11+i, 5+j), want)
			}
		}
	}
	_, err = c.LoadCells(ctx, client.CellLoad{
		Floor: "hall", Base: 1, Author: "survey", Reason: "on a stale base",
		Rect: &wideberthv1.CellRect{Column: 11, Row: 5, Columns: 50, Rows: 30}, Cells: cells,
	})
	if status.Code(err) != codes.Aborted {
		t.Errorf("stale base: %v, want ABORTED", err)
	}
}

// A robot is guided along its route, and told when a newer version touches the rest of it.
func TestGuideFollowsAFloorThatChanges(t *testing.T) {
	t.Parallel()
	ctx, cancel := context.WithTimeout(t.Context(), 20*time.Second)
	defer cancel()
	c, stop := serve()
	t.Cleanup(stop)
	newHall(ctx, c)
	answer, err := c.Plan(ctx, &wideberthv1.PlanRequest{
		Floor: "hall", Start: at(1, 2), Goal: at(7, 2), Body: &wideberthv1.Body{RadiusM: 0.4},
	})
	if err != nil {
		t.Fatal(err)
	}
	g := c.Guide(ctx, &wideberthv1.GuideSetup{Route: answer.GetRoute()})
	defer g.Close()
	ask := func(sequence int64, x float64) *wideberthv1.Hint {
		t.Helper()
		stamp := float64(sequence) / 10
		if err := g.Report(&wideberthv1.GuideReport{Sequence: sequence, StampS: stamp, Pose: &wideberthv1.Pose{XM: x, YM: 2}, SpeedMps: 0.5}); err != nil {
			t.Fatal(err)
		}
		h, err := g.Next(ctx)
		if err != nil {
			t.Fatal(err)
		}
		if h.GetSequence() != sequence || client.Advice(h, stamp) != h.GetState() {
			t.Errorf("hint %v, want one to report %d that may be followed", h, sequence)
		}
		return h
	}
	if h := ask(1, 2); h.GetState() != wideberthv1.GuideState_GUIDE_STATE_CLEAR {
		t.Errorf("in the open: %v, want clear", h)
	}
	if _, err := c.PushPatch(ctx, &wideberthv1.PushPatchRequest{Floor: "hall", Patch: &wideberthv1.Patch{
		BaseVersion: 1, Author: "night shift", Reason: "spill", Edits: []*wideberthv1.Edit{spill(5, 2, 0.5)},
	}}); err != nil {
		t.Fatal(err)
	}
	if h := ask(2, 2.1); h.GetState() != wideberthv1.GuideState_GUIDE_STATE_REPLAN_ADVISED || h.GetStamp().GetVersion() != 2 {
		t.Errorf("after a spill on the route: %v, want a replan advised on version 2", h)
	}
	if _, err := c.GuideOnce(ctx, &wideberthv1.GuideOnceRequest{}); status.Code(err) != codes.InvalidArgument {
		t.Errorf("GuideOnce without a setup: %v, want INVALID_ARGUMENT", err)
	} else if p := client.FieldProblems(err); len(p) == 0 {
		t.Errorf("no field named in %v", err)
	}
}

// A watch outlives the server: what was pushed after it came back is told, once.
func TestWatchOutlivesAServer(t *testing.T) {
	t.Parallel()
	ctx := t.Context()
	data := filepath.Join(t.TempDir(), "floors.db")
	addr, stop := start(t, "127.0.0.1:0", data)
	c, err := client.Dial(addr, client.WithBackoff(10*time.Millisecond, 100*time.Millisecond))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = c.Close() })
	newHall(ctx, c)

	var got []int64
	broken := false
	for ev, err := range c.Watch(ctx, "hall", 0) {
		switch {
		case err != nil:
			t.Fatal(err)
		case ev.Broken != nil:
			broken = true
		case ev.Version != nil:
			got = append(got, ev.Version.GetStamp().GetVersion())
		}
		if len(got) == 1 && !broken && ev.Version != nil {
			stop()
			_, stop = start(t, addr, data)
			go func() { // the loop is busy with the break meanwhile
				_, err := c.PushPatch(ctx, &wideberthv1.PushPatchRequest{Floor: "hall", Patch: &wideberthv1.Patch{
					BaseVersion: 1, Author: "night shift", Reason: "spill", Edits: []*wideberthv1.Edit{spill(4, 2, 0.5)},
				}})
				if err != nil {
					t.Error(err)
				}
			}()
		}
		if len(got) == 2 {
			break
		}
	}
	stop()
	if !broken || got[0] != 1 || got[1] != 2 {
		t.Errorf("versions %v, broken %v; want 1, a break, 2", got, broken)
	}
}

// start runs a server on a file. stop ends it and waits.
func start(t *testing.T, addr, data string) (listening string, stop func()) {
	t.Helper()
	cfg := server.DefaultConfig()
	cfg.Data = data
	ctx, cancel := context.WithCancel(context.Background())
	s, err := server.New(ctx, cfg, zerolog.Nop())
	if err != nil {
		cancel()
		t.Fatal(err)
	}
	lis, err := net.Listen("tcp", addr)
	if err != nil {
		cancel()
		t.Fatal(err)
	}
	done := make(chan error, 1)
	go func() { done <- s.Serve(ctx, lis) }()
	return lis.Addr().String(), func() {
		cancel()
		if err := <-done; err != nil {
			t.Errorf("the server ended with %v", err)
		}
	}
}
