package server

import (
	"bytes"
	"context"
	"errors"
	"io"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/protobuf/proto"

	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// What was acknowledged is there after a restart, digest and all.
func TestRestartKeepsEveryVersion(t *testing.T) {
	path := filepath.Join(t.TempDir(), "hall.db")
	where := func(c *Config) { c.Data = path }
	r := start(t, where)
	head := r.hall()
	r.stop()
	r = start(t, where)
	if got := r.head(); !proto.Equal(got, head) {
		t.Errorf("head %v after a restart, wanted %v", got, head)
	}
	if got := r.route(toBench()); got.CheckedAgainst.Version != 2 {
		t.Errorf("planned on %v, wanted version 2", got.CheckedAgainst)
	}
}

// An empty data path leaves nothing behind.
func TestTemporaryDataGoesAway(t *testing.T) {
	dir := t.TempDir()
	t.Setenv("TMPDIR", dir)
	r := start(t, func(c *Config) { c.Data = "" })
	r.hall()
	made, err := filepath.Glob(filepath.Join(dir, "wideberth-*", "*"))
	if err != nil || len(made) == 0 {
		t.Fatalf("no temporary journal in %s (%v)", dir, err)
	}
	r.stop()
	if left, err := filepath.Glob(filepath.Join(dir, "*")); err != nil || len(left) > 0 {
		t.Errorf("left behind: %v (%v)", left, err)
	}
}

// Pages hold every version once, newest first.
func TestListVersions(t *testing.T) {
	r := start(t)
	r.hall()
	for i := range 5 {
		r.push(put(station("s", 1, 1+float64(i)/10)))
	}
	var got []int64
	q := &pb.ListVersionsRequest{Floor: "hall", PageSize: 3}
	for {
		page, err := r.floors.ListVersions(r.ctx(), q)
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range page.Versions {
			got = append(got, v.Stamp.Version)
		}
		if q.PageToken = page.NextPageToken; q.PageToken == "" {
			break
		}
	}
	for i, v := range got {
		if v != int64(7-i) || len(got) != 7 {
			t.Fatalf("versions %v, wanted 7 to 1", got)
		}
	}
}

// A patch comes back as it was sent.
func TestGetVersionGivesThePatchBack(t *testing.T) {
	r := start(t)
	r.hall()
	edits := []*pb.Edit{
		put(&pb.Feature{Name: "rail", Note: "east side", Kind: &pb.Feature_Solid{Solid: &pb.Solid{
			SurveyToleranceM: 0.01, Shape: &pb.Solid_Polyline{Polyline: &pb.Polyline{Points: []*pb.Point{pt(1, 4), pt(2, 4.5)}, WidthM: 0.15}}}}}),
		put(&pb.Feature{Name: "drum", Kind: &pb.Feature_Solid{Solid: &pb.Solid{Shape: &pb.Solid_Disc{Disc: &pb.Disc{Center: pt(7, 4), RadiusM: 0.3}}}}}),
		put(&pb.Feature{Name: "lane", Kind: &pb.Feature_Zone{Zone: &pb.Zone{
			Area: &pb.Polygon{Outer: ring(6, 1, 8, 1, 8, 3, 6, 3), Holes: []*pb.Ring{ring(6.5, 1.5, 7, 1.5, 7, 2)}},
			Rule: &pb.Zone_OneWay{OneWay: &pb.OneWayRule{HeadingRad: 1.5}}}}}),
		put(&pb.Feature{Name: "slow", Kind: &pb.Feature_Zone{Zone: &pb.Zone{Area: polygon(1, 1, 2, 1, 2, 2), Rule: &pb.Zone_SpeedLimit{SpeedLimit: &pb.SpeedLimitRule{MaxSpeedMps: 0.4}}}}}),
		put(&pb.Feature{Name: "shut", Kind: &pb.Feature_Zone{Zone: &pb.Zone{Area: polygon(3, 4, 4, 4, 4, 5), Rule: &pb.Zone_Closed{Closed: &pb.ClosedRule{}}}}}),
		paintCells(&pb.CellBlock{Rect: &pb.CellRect{Column: 10, Row: 80, Columns: 5, Rows: 1}, Encoding: pb.CellEncoding_CELL_ENCODING_TWO_BIT, Cells: []byte{0x98, 0x02}}),
		{Action: &pb.Edit_ClearRect{ClearRect: &pb.ClearRect{Area: &pb.Area{MinXM: 0.5, MinYM: 4, MaxXM: 1, MaxYM: 4.5}}}},
		{Action: &pb.Edit_RemoveFeature{RemoveFeature: &pb.RemoveFeature{Name: "dock"}}},
		{Action: &pb.Edit_PaintOccupancy{PaintOccupancy: &pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Rect{
			Rect: &pb.PaintRect{Rect: &pb.CellRect{Column: 3, Row: 90, Columns: 2, Rows: 2}, Occupancy: pb.Occupancy_OCCUPANCY_UNKNOWN}}}}},
		{Action: &pb.Edit_PaintOccupancy{PaintOccupancy: &pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Polygon{
			Polygon: &pb.PaintPolygon{Polygon: polygon(8, 4, 8.5, 4, 8.5, 4.5), Occupancy: pb.Occupancy_OCCUPANCY_OCCUPIED}}}}},
	}
	r.push(edits...)
	got, err := r.floors.GetVersion(r.ctx(), &pb.GetVersionRequest{Floor: "hall"})
	if err != nil {
		t.Fatal(err)
	}
	want := push(edits...).Patch
	want.BaseVersion = 2
	if !proto.Equal(got.Patch, want) {
		t.Errorf("got\n%v\nwanted\n%v", got.Patch, want)
	}
	first, err := r.floors.GetVersion(r.ctx(), &pb.GetVersionRequest{Floor: "hall", Version: pinned(1)})
	if err != nil || first.Patch != nil || first.Version.Kind != pb.VersionKind_VERSION_KIND_CREATED {
		t.Errorf("version 1: %v, %v; wanted a created version without a patch", first, err)
	}
}

// Restoring brings the digest back; comparing the two finds nothing.
func TestRestoreAndCompare(t *testing.T) {
	r := start(t)
	old := r.hall()
	r.push(put(solidPolygon("crate", polygon(8, 4, 8.5, 4, 8.5, 4.5))),
		&pb.Edit{Action: &pb.Edit_PaintOccupancy{PaintOccupancy: &pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Rect{
			Rect: &pb.PaintRect{Rect: &pb.CellRect{Column: 0, Row: 0, Columns: 10, Rows: 3}, Occupancy: pb.Occupancy_OCCUPANCY_OCCUPIED}}}}})
	diff, err := r.floors.CompareVersions(r.ctx(), &pb.CompareVersionsRequest{Floor: "hall", FromVersion: 2})
	if err != nil {
		t.Fatal(err)
	}
	if diff.ChangedCells != 30 || len(diff.Features) != 1 || diff.Features[0].Name != "crate" || diff.Features[0].Before != nil || len(diff.ChangedAreas) != 1 {
		t.Errorf("got %v, wanted 30 cells in one area and the crate added", diff)
	}
	back, err := r.floors.RestoreVersion(r.ctx(), &pb.RestoreVersionRequest{Floor: "hall", RestoredVersion: 2, BaseVersion: 3, Author: "a", Reason: "b"})
	if err != nil || back.Version.Stamp.Digest != old.Digest || back.Version.Stamp.Version != 4 {
		t.Fatalf("got %v, %v; wanted version 4 with digest %s", back, err, old.Digest)
	}
	diff, err = r.floors.CompareVersions(r.ctx(), &pb.CompareVersionsRequest{Floor: "hall", FromVersion: 2, ToVersion: 4})
	if err != nil || diff.ChangedCells != 0 || len(diff.Features) != 0 {
		t.Errorf("got %v, %v; wanted no difference", diff, err)
	}
}

// readFloor reads a stream to its end and checks its bounds.
func (r *running) readFloor(q *pb.ReadFloorRequest) (parts []*pb.ReadFloorResponse) {
	r.t.Helper()
	stream, err := r.floors.ReadFloor(r.ctx(), q)
	if err != nil {
		r.t.Fatal(err)
	}
	for {
		m, err := stream.Recv()
		if errors.Is(err, io.EOF) {
			return parts
		}
		if err != nil {
			r.t.Fatal(err)
		}
		if n := proto.Size(m); n > maxReadBytes {
			r.t.Errorf("a message of %d bytes, wanted at most %d", n, maxReadBytes)
		}
		parts = append(parts, m)
	}
}

// A floor comes back cell for cell in bounded messages, lowest rows first, and ends
// with its counts.
func TestReadFloor(t *testing.T) {
	r := start(t)
	big := create()
	big.Settings.Columns, big.Settings.Rows = 3000, 2000 // 1.5 MB of cells: two messages or more
	if _, err := r.floors.CreateFloor(r.ctx(), big); err != nil {
		t.Fatal(err)
	}
	// Cells that do not compress, from a plain generator.
	noise := make([]byte, wire.CellBytes(3000*2000))
	x := uint32(1)
	for i := range noise {
		x = x*1664525 + 1013904223
		noise[i] = byte(x>>24) & 0x55
	}
	r.push(paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 3000, Rows: 2000}, Encoding: pb.CellEncoding_CELL_ENCODING_TWO_BIT, Cells: noise}),
		put(station("dock", 1, 1)), put(solidPolygon("wall", polygon(100, 50, 101, 50, 101, 51))))

	parts := r.readFloor(&pb.ReadFloorRequest{Floor: "hall"})
	if parts[0].GetHeader().GetStamp().GetVersion() != 2 {
		t.Fatalf("first part %v, wanted the header of version 2", parts[0])
	}
	var cells []byte
	row, blocks, features := int32(0), 0, 0
	for _, p := range parts {
		if c := p.GetCells(); c != nil {
			if c.Rect.Row != row {
				t.Fatalf("rows from %d, wanted %d", c.Rect.Row, row)
			}
			row += c.Rect.Rows
			blocks++
			got, err := wire.CellsIn(c)
			if err != nil {
				t.Fatal(err)
			}
			cells = append(cells, got...)
		}
		features += len(p.GetFeatures().GetFeatures())
	}
	end := parts[len(parts)-1].GetEnd()
	if end.GetCellCount() != 3000*2000 || end.GetFeatureCount() != 2 || features != 2 || blocks < 2 {
		t.Errorf("end %v after %d blocks and %d features", end, blocks, features)
	}
	if !bytes.Equal(cells, noise) {
		t.Error("the cells are not those that were painted")
	}

	parts = r.readFloor(&pb.ReadFloorRequest{Floor: "hall", Area: &pb.Area{MinXM: 0.9, MinYM: 0.9, MaxXM: 1, MaxYM: 1}})
	end = parts[len(parts)-1].GetEnd()
	if c := parts[1].GetCells(); end.GetCellCount() != 4 || end.GetFeatureCount() != 1 || c.GetRect().GetColumn() != 18 || c.GetRect().GetRow() != 18 {
		t.Errorf("got %v, wanted the four cells from (18, 18) and the dock", parts)
	}
	if parts = r.readFloor(&pb.ReadFloorRequest{Floor: "hall", SkipOccupancy: true, SkipFeatures: true}); len(parts) != 2 {
		t.Errorf("%d parts with everything left out, wanted header and end", len(parts))
	}
}

// The selector's waiting: a pinned version that does not come is NOT_FOUND, a head
// that does not come is UNAVAILABLE, one that comes is answered.
func TestVersionSelectorWaits(t *testing.T) {
	r := start(t)
	r.hall()
	get := func(sel *pb.VersionSelector) (*pb.GetVersionResponse, error) {
		return r.floors.GetVersion(r.ctx(), &pb.GetVersionRequest{Floor: "hall", Version: sel})
	}
	atLeast := func(v int64, wait float64) *pb.VersionSelector {
		return &pb.VersionSelector{Choice: &pb.VersionSelector_AtLeast{AtLeast: v}, MaxWaitS: wait}
	}
	for _, wait := range []float64{0, 0.02} {
		_, err := get(atLeast(3, wait))
		wantStatus(t, err, codes.Unavailable, "VERSION_NOT_REACHED")
		sel := pinned(3)
		sel.MaxWaitS = wait
		_, err = get(sel)
		wantStatus(t, err, codes.NotFound, "VERSION_NOT_FOUND")
	}
	if got, err := get(atLeast(1, 0)); err != nil || got.Version.Stamp.Version != 2 {
		t.Errorf("at least 1: %v, %v; wanted the head, 2", got, err)
	}
	type answer struct {
		got *pb.GetVersionResponse
		err error
	}
	waiting := make(chan answer, 2)
	for _, sel := range []*pb.VersionSelector{atLeast(3, 10), {Choice: pinned(3).Choice, MaxWaitS: 10}} {
		go func() {
			got, err := get(sel)
			waiting <- answer{got, err}
		}()
	}
	r.push(put(station("s", 2, 2)))
	for range 2 {
		if a := <-waiting; a.err != nil || a.got.Version.Stamp.Version != 3 {
			t.Errorf("%v, %v; wanted version 3", a.got, a.err)
		}
	}
}

// A watch starts where it is told to, and names the head when all is quiet.
func TestWatchResumesAndBeats(t *testing.T) {
	r := start(t, func(c *Config) { c.Heartbeat = 50 * time.Millisecond })
	r.hall()
	r.push(put(station("s", 2, 2)))
	watch := func(after int64) (next func() *pb.WatchVersionsResponse) {
		stream, err := r.floors.WatchVersions(r.ctx(), &pb.WatchVersionsRequest{Floor: "hall", AfterVersion: after})
		if err != nil {
			t.Fatal(err)
		}
		return func() *pb.WatchVersionsResponse {
			m, err := stream.Recv()
			if err != nil {
				t.Fatal(err)
			}
			return m
		}
	}
	fromHead, resumed := watch(0), watch(1)
	if v := fromHead().GetVersion(); v.GetVersion().GetStamp().GetVersion() != 3 {
		t.Errorf("first event %v, wanted the head, 3", v)
	}
	for want := int64(2); want <= 3; want++ {
		if v := resumed().GetVersion(); v.GetVersion().GetStamp().GetVersion() != want || v.Skipped != 0 {
			t.Errorf("got %v, wanted version %d", v, want)
		}
	}
	for range 2 {
		if h := fromHead().GetHeartbeat(); !proto.Equal(h.GetHead(), r.head()) {
			t.Errorf("got %v, wanted a heartbeat that names the head", h)
		}
	}
	r.push(put(station("s", 3, 3)))
	for {
		m := fromHead()
		if v := m.GetVersion(); v != nil {
			if v.Version.Stamp.Version != 4 {
				t.Errorf("got %v, wanted version 4", v)
			}
			break
		}
	}
	stream, err := r.floors.WatchVersions(r.ctx(), &pb.WatchVersionsRequest{Floor: "hall", AfterVersion: 99})
	if err == nil {
		_, err = stream.Recv()
	}
	wantStatus(t, err, codes.NotFound, "VERSION_NOT_FOUND")
}

// A watcher that does not read costs nothing, holds nobody up, and gets the newest
// version with a count of those it missed.
func TestSlowWatcherSkips(t *testing.T) {
	r := start(t)
	r.hall()
	slow, err := r.floors.WatchVersions(r.ctx(), &pb.WatchVersionsRequest{Floor: "hall", AfterVersion: 2})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := slow.Header(); err != nil { // it is being served
		t.Fatal(err)
	}
	const pushes = 300
	q := push(put(station("s", 2, 2)))
	q.Patch.Reason = strings.Repeat("ö", maxReasonLength) // 1 kB an event, so that the stream's window fills
	for i := range int64(pushes) {
		q.Patch.BaseVersion = i + 2
		if _, err := r.floors.PushPatch(r.ctx(), q); err != nil {
			t.Fatal(err)
		}
	}
	got, last := int64(0), int64(2)
	for last < pushes+2 {
		m, err := slow.Recv()
		if err != nil {
			t.Fatal(err)
		}
		v := m.GetVersion()
		if v == nil {
			continue
		}
		now := v.Version.Stamp.Version
		if now != last+v.Skipped+1 {
			t.Fatalf("version %d after %d with %d skipped", now, last, v.Skipped)
		}
		got, last = got+1, now
	}
	if got == pushes {
		t.Errorf("all %d events were queued, wanted the slow reader to skip", got)
	}
	t.Logf("%d of %d versions were sent", got, pushes)
}

// A caller that gives up ends the work.
func TestCancelledWatch(t *testing.T) {
	r := start(t)
	r.hall()
	ctx, cancel := context.WithCancel(r.ctx())
	stream, err := r.floors.WatchVersions(ctx, &pb.WatchVersionsRequest{Floor: "hall"})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := stream.Recv(); err != nil {
		t.Fatal(err)
	}
	cancel()
	for !strings.Contains(r.log.String(), `"grpc.code":"Canceled"`) {
		time.Sleep(time.Millisecond)
	}
}
