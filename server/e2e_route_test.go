package server

import (
	"context"
	"errors"
	"io"
	"math"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/protobuf/proto"

	pb "example.com/wideberth/proto/wideberth/v1"
)

// A plan names what it was checked against; the same question gets the same answer,
// another version or body another id.
func TestPlan(t *testing.T) {
	r := start(t)
	head := r.hall()
	first := r.route(toBench())
	if !proto.Equal(first.CheckedAgainst, head) || first.RouteId == "" || first.ValidForS != 30 {
		t.Errorf("checked against %v, id %q, valid for %v s; wanted %v, an id, 30 s", first.CheckedAgainst, first.RouteId, first.ValidForS, head)
	}
	// The wall's top is at 3 m and the body needs 0.4 m: round the two corners at
	// (4.9, 3) and (5.1, 3) no way is shorter than the straight pieces to them.
	if shortest := 2*math.Hypot(3.9, 2) + 0.2; first.LengthM < shortest {
		t.Errorf("length %v m, wanted more than %v m past the wall", first.LengthM, shortest)
	}
	if first.SmallestClearanceM < 0.4 {
		t.Errorf("smallest clearance %v m, wanted the required 0.4 m or more", first.SmallestClearanceM)
	}
	if again := r.route(toBench()); !proto.Equal(first, again) {
		t.Errorf("the same question got another answer:\n%v\n%v", first, again)
	}
	named := toBench()
	named.Body.Name = "tug-7"
	if got := r.route(named); got.RouteId != first.RouteId || got.Body.Name != "tug-7" {
		t.Errorf("a named body: id %s, wanted %s", got.RouteId, first.RouteId)
	}
	wider := toBench()
	wider.Body.MarginM = 0.15
	if got := r.route(wider); got.RouteId == first.RouteId {
		t.Error("a wider body's route has the same id")
	}
	r.push(put(station("s", 2, 2)))
	if got := r.route(toBench()); got.RouteId == first.RouteId || got.CheckedAgainst.Version != 3 {
		t.Errorf("on version 3: id %s, %v", got.RouteId, got.CheckedAgainst)
	}
	old := toBench()
	old.Version = pinned(2)
	if got := r.route(old); !proto.Equal(got, first) {
		t.Errorf("pinned to version 2 got another answer:\n%v\n%v", first, got)
	}
}

// No way is an answer, with its reason.
func TestRefusals(t *testing.T) {
	r := start(t)
	r.hall()
	ask := func(q *pb.PlanRequest) *pb.Refusal {
		t.Helper()
		got, err := r.routes.Plan(r.ctx(), q)
		if err != nil {
			t.Fatal(err)
		}
		if got.GetRefusal() == nil {
			t.Fatalf("got a route, wanted a refusal")
		}
		if got.GetRefusal().Explanation == "" {
			t.Error("a refusal without words")
		}
		return got.GetRefusal()
	}
	q := toBench()
	q.Start = atPose(5, 1) // inside the wall
	if got := ask(q); got.Reason != pb.RefusalReason_REFUSAL_REASON_START_BLOCKED || got.BlockedEnd == nil {
		t.Errorf("from inside the wall: %v", got)
	}
	q = toBench()
	q.Body.RadiusM, q.Body.PreferredClearanceM = 1.05, 0 // the gap is 2 m, the ends have 1 m
	if got := ask(q); got.Reason != pb.RefusalReason_REFUSAL_REASON_START_BLOCKED {
		t.Errorf("a body wider than the station's room: %v", got)
	}
	r.push(put(solidPolygon("plug", polygon(4.9, 3, 5.1, 3, 5.1, 5, 4.9, 5))))
	if got := ask(toBench()); got.Reason != pb.RefusalReason_REFUSAL_REASON_NO_PASSAGE || got.Bottleneck == nil {
		t.Errorf("past a closed gap: %v", got)
	}
}

// A route is kept where it can be, cut where it must be, and planned anew when its
// version is not known any more.
func TestReplan(t *testing.T) {
	r := start(t)
	r.hall()
	route := r.route(toBench())
	on := route.Legs[0].Points[0]
	pose := &pb.Pose{XM: on.XM, YM: on.YM}
	ask := func(q *pb.ReplanRequest) *pb.ReplanResponse {
		t.Helper()
		got, err := r.routes.Replan(r.ctx(), q)
		if err != nil {
			t.Fatal(err)
		}
		return got
	}
	r.push(put(station("s", 2, 2)))
	if got := ask(&pb.ReplanRequest{Previous: route, Pose: pose}); got.Result != pb.ReplanResult_REPLAN_RESULT_KEPT || got.GetRoute().GetCheckedAgainst().GetVersion() != 3 {
		t.Errorf("nothing in the way: %v %v on %v", got.Result, got.Cause, got.Stamp)
	}
	r.push(put(solidPolygon("plug", polygon(4.9, 3, 5.1, 3, 5.1, 5, 4.9, 5))))
	if got := ask(&pb.ReplanRequest{Previous: route, Pose: pose}); got.Result != pb.ReplanResult_REPLAN_RESULT_REFUSED || got.GetRefusal() == nil {
		t.Errorf("the gap is closed: %v", got.Result)
	}
	forgotten := proto.Clone(route).(*pb.Route)
	forgotten.CheckedAgainst.Version = 77
	got := ask(&pb.ReplanRequest{Previous: forgotten, Pose: pose, Version: pinned(2)})
	if got.Result != pb.ReplanResult_REPLAN_RESULT_NEW || got.Cause != pb.ReplanCause_REPLAN_CAUSE_VERSION_GONE {
		t.Errorf("a version that is not held: %v %v, wanted a new route", got.Result, got.Cause)
	}
	swapped := proto.Clone(route).(*pb.Route)
	swapped.CheckedAgainst.Digest = oldRoute().CheckedAgainst.Digest
	if got := ask(&pb.ReplanRequest{Previous: swapped, Pose: pose, Version: pinned(2)}); got.Cause != pb.ReplanCause_REPLAN_CAUSE_VERSION_GONE {
		t.Errorf("another content under that number: %v %v", got.Result, got.Cause)
	}
}

// When every planner is busy a plan is refused, with a time to try again, and
// nothing is queued beyond the caller's deadline.
func TestOverload(t *testing.T) {
	r := start(t, func(c *Config) { c.Planners, c.PlanWait = 1, 20*time.Millisecond })
	r.hall()
	leave, err := r.s.lanes.enter(r.ctx())
	if err != nil {
		t.Fatal(err)
	}
	_, err = r.routes.Plan(r.ctx(), toBench())
	wantStatus(t, err, codes.ResourceExhausted, "OVERLOADED")
	leave()
	r.route(toBench())
}

// The server's own bound holds where the client set none, and the caller's time
// budget turns into a refusal, not an error.
func TestDeadlines(t *testing.T) {
	r := start(t, func(c *Config) { c.CallTimeout = 100 * time.Millisecond })
	r.hall()
	call := grpc.NewContextWithServerTransportStream(context.Background(), headerSink{})
	_, err := r.s.unary(call, &pb.GetFloorRequest{Floor: "hall"}, unaryInfo("GetFloor"), func(ctx context.Context, _ any) (any, error) {
		<-ctx.Done()
		return nil, statusOf(ctx, ctx.Err(), subject{})
	})
	wantStatus(t, err, codes.DeadlineExceeded, "DEADLINE")

	ctx, cancel := context.WithTimeout(context.Background(), time.Nanosecond)
	defer cancel()
	if _, err := r.routes.Plan(ctx, toBench()); err == nil {
		t.Error("a plan after its deadline succeeded")
	}
}

// Setups and reports over one stream: the newest report wins, sequences come back
// in order, a new setup may follow, and a report without a setup is refused.
func TestGuide(t *testing.T) {
	r := start(t)
	r.hall()
	route := r.route(toBench())
	stream, err := r.guides.Guide(r.ctx())
	if err != nil {
		t.Fatal(err)
	}
	setup := &pb.GuideRequest{Message: &pb.GuideRequest_Setup{Setup: &pb.GuideSetup{Route: route}}}
	report := func(n int64) *pb.GuideRequest {
		return &pb.GuideRequest{Message: &pb.GuideRequest_Report{Report: &pb.GuideReport{Sequence: n, StampS: float64(n) / 10, Pose: &pb.Pose{XM: 1, YM: 1}}}}
	}
	send := func(m *pb.GuideRequest) {
		t.Helper()
		if err := stream.Send(m); err != nil {
			t.Fatal(err)
		}
	}
	send(setup)
	const reports = 200
	for n := int64(1); n <= reports; n++ {
		send(report(n))
		if n == reports/2 {
			send(setup)
		}
	}
	last := int64(0)
	for last < reports {
		m, err := stream.Recv()
		if err != nil {
			t.Fatal(err)
		}
		h := m.Hint
		if h.Sequence <= last {
			t.Fatalf("sequence %d after %d", h.Sequence, last)
		}
		last = h.Sequence
		if h.StampS != float64(last)/10 || h.Stamp.GetVersion() != 2 || h.ValidForS != 1 || h.State == pb.GuideState_GUIDE_STATE_UNSPECIFIED {
			t.Fatalf("hint %v, wanted stamp %v s on version 2 and a state", h, float64(last)/10)
		}
	}
	if err := stream.CloseSend(); err != nil {
		t.Fatal(err)
	}
	if _, err := stream.Recv(); !errors.Is(err, io.EOF) {
		t.Errorf("after the end: %v, wanted EOF", err)
	}

	once, err := r.guides.GuideOnce(r.ctx(), &pb.GuideOnceRequest{Setup: setup.GetSetup(), Report: report(5).GetReport()})
	if err != nil || once.Hint.Sequence != 5 {
		t.Errorf("once: %v, %v", once, err)
	}

	bare, err := r.guides.Guide(r.ctx())
	if err != nil {
		t.Fatal(err)
	}
	if err := bare.Send(report(1)); err != nil {
		t.Fatal(err)
	}
	_, err = bare.Recv()
	wantStatus(t, err, codes.InvalidArgument, "INVALID_FIELD")
}

// A robot on its route learns from the next hint that a new version touches what
// is left of it, and not when the change is behind it or far off.
func TestGuideSeesChanges(t *testing.T) {
	r := start(t)
	r.hall()
	route := r.route(toBench())
	at := func(x, y float64) *pb.Hint {
		t.Helper()
		got, err := r.guides.GuideOnce(r.ctx(), &pb.GuideOnceRequest{
			Setup: &pb.GuideSetup{Route: route}, Report: &pb.GuideReport{Pose: &pb.Pose{XM: x, YM: y}}})
		if err != nil {
			t.Fatal(err)
		}
		return got.Hint
	}
	const advised = pb.GuideState_GUIDE_STATE_REPLAN_ADVISED
	r.push(put(solidPolygon("far", polygon(1, 4.5, 1.2, 4.5, 1.2, 4.7))))
	if h := at(1, 1); h.State == advised || h.Stamp.Version != 3 {
		t.Errorf("a change far off: %v on %v", h.State, h.Stamp)
	}
	last := route.Legs[len(route.Legs)-1].Points
	near := last[len(last)-1]
	r.push(put(solidPolygon("crate", polygon(near.XM-0.7, near.YM-0.1, near.XM-0.5, near.YM-0.1, near.XM-0.5, near.YM+0.1))))
	if h := at(1, 1); h.State != advised {
		t.Errorf("a crate on the way: %v (%s), wanted a replan advised", h.State, h.Explanation)
	}
}
