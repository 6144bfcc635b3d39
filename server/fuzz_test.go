package server

import (
	"errors"
	"runtime"
	"testing"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore/floor"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// requests has one fresh message of every kind that a client may send.
func requests() []proto.Message {
	return []proto.Message{
		&pb.CreateFloorRequest{}, &pb.GetFloorRequest{}, &pb.ListFloorsRequest{}, &pb.PushPatchRequest{},
		&pb.ListVersionsRequest{}, &pb.GetVersionRequest{}, &pb.CompareVersionsRequest{}, &pb.RestoreVersionRequest{},
		&pb.ReadFloorRequest{}, &pb.WatchVersionsRequest{}, &pb.PlanRequest{}, &pb.ReplanRequest{},
		&pb.GuideRequest{}, &pb.GuideOnceRequest{}, &pb.PlanManyRequest{},
		&pb.ShowRoadmapRequest{}, &pb.CompareRoadmapsRequest{}, &pb.ShowGrownSolidsRequest{},
	}
}

// A message may make its validator allocate so many bytes for each of its own, and
// so many beside: paths and words of 20 faults, the state of one DEFLATE stream, the sweep
// over a polygon's edges.
const (
	fuzzBytesPerByte = 4096
	fuzzBytesBeside  = 1 << 20
)

// FuzzValidate checks that no message makes its validator panic or allocate without
// bound, and that what passes can be converted. which picks the message.
func FuzzValidate(f *testing.F) {
	if len(requests()) != len(validators) {
		f.Fatalf("%d messages, %d validators", len(requests()), len(validators))
	}
	add := func(which byte, m proto.Message) {
		b, err := proto.Marshal(m)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(which, b)
	}
	add(0, create())
	add(3, push(put(solidPolygon("x", &pb.Polygon{Outer: ring(0, 0, 4, 0, 4, 4, 0, 4), Holes: []*pb.Ring{ring(1, 1, 2, 1, 2, 2)}}))))
	add(3, push(put(station("x", 1, 1)), &pb.Edit{}, paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 65536, Rows: 4096}, Encoding: 2, Cells: deflated(make([]byte, 1<<20))})))
	add(5, &pb.GetVersionRequest{Floor: "hall", Version: pinned(3)})
	add(8, &pb.ReadFloorRequest{Floor: "hall", Area: &pb.Area{MaxXM: 1, MaxYM: nan}})
	add(10, plan())
	add(10, toBench())
	add(11, replan())
	add(13, guideOnce())
	add(14, planMany())
	set := wire.SettingsIn(&pb.FloorSettings{Columns: 200, Rows: 100})
	f.Fuzz(func(t *testing.T, which byte, data []byte) {
		m := requests()[int(which)%len(validators)]
		if proto.Unmarshal(data, m) != nil {
			return
		}
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		err := validate(m)
		runtime.ReadMemStats(&after)
		if n := after.TotalAlloc - before.TotalAlloc; n > uint64(fuzzBytesPerByte*len(data)+fuzzBytesBeside) {
			t.Errorf("%T of %d bytes: %d bytes allocated", m, len(data), n)
		}
		if err != nil {
			var in *inputError
			if !errors.As(err, &in) {
				t.Errorf("%T: %v", m, err)
			}
			return
		}
		convertAny(m, set)
	})
}

// convertAny turns a checked message into what the store and the planner take.
func convertAny(m proto.Message, set floor.Settings) {
	var f faults
	switch q := m.(type) {
	case *pb.CreateFloorRequest:
		wire.SettingsIn(q.Settings)
	case *pb.PushPatchRequest:
		for _, e := range editsIn(q.Patch.Edits, set, root, &f) {
			if !f.any() {
				if _, err := editOut(e, set); err != nil {
					panic(err)
				}
			}
		}
	case *pb.PlanRequest:
		f.bodyOnFloor(root, bodyIn(q.Body, set), set)
		optionsIn(q.Options, bodyIn(q.Body, set))
	case *pb.PlanManyRequest:
		manyBudget(q)
		for _, places := range [][]*pb.Place{q.Starts, q.Goals} {
			for _, pl := range places {
				poseIn(pl.GetPose())
			}
		}
	case *pb.ReplanRequest:
		routePointsIn(q.Previous)
		poseIn(q.Pose)
	case *pb.GuideOnceRequest:
		guideSetupIn(q.Setup, set)
	}
}
