package server

import (
	"context"
	"errors"
	"io"
	"slices"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/protobuf/proto"

	pb "example.com/wideberth/proto/wideberth/v1"
)

// toMany asks from two starts to three goals of the hall: beside the dock, inside the
// wall, and the bench behind it.
func toMany() *pb.PlanManyRequest {
	q := toBench()
	return &pb.PlanManyRequest{
		Floor: q.Floor, Body: q.Body, Starts: []*pb.Place{q.Start, atPose(2, 2)},
		Goals: []*pb.Place{q.Goal, atPose(5, 1), atPose(1, 2)},
	}
}

// many reads a whole answer and checks its shape.
func (r *running) many(q *pb.PlanManyRequest) (*pb.PlanManyHeader, []*pb.PairAnswer, *pb.PlanManyEnd) {
	r.t.Helper()
	stream, err := r.routes.PlanMany(r.ctx(), q)
	if err != nil {
		r.t.Fatal(err)
	}
	next := func() *pb.PlanManyResponse {
		r.t.Helper()
		m, err := stream.Recv()
		if err != nil {
			r.t.Fatal(err)
		}
		return m
	}
	header := next().GetHeader()
	if header.GetPairCount() != int64(len(q.Starts)*len(q.Goals)) {
		r.t.Fatalf("the first message is %v, wanted a header with %d pairs", header, len(q.Starts)*len(q.Goals))
	}
	var answers []*pb.PairAnswer
	seen := map[[2]int32]bool{}
	for {
		m := next()
		if end := m.GetEnd(); end != nil {
			if _, err := stream.Recv(); !errors.Is(err, io.EOF) {
				r.t.Errorf("after the end mark: %v, wanted EOF", err)
			}
			if len(answers) != int(header.PairCount) || end.RouteCount+end.RefusalCount != header.PairCount {
				r.t.Errorf("%d answers, end mark %v, wanted %d", len(answers), end, header.PairCount)
			}
			return header, answers, end
		}
		a := m.GetAnswer()
		if pair := [2]int32{a.GetStartIndex(), a.GetGoalIndex()}; a == nil || seen[pair] {
			r.t.Fatalf("got %v, wanted an answer for another pair", m)
		} else {
			seen[pair] = true
		}
		answers = append(answers, a)
	}
}

// Every pair has the answer that Plan gives for it on the same version, in full or
// summed up; an older version can be asked about.
func TestPlanMany(t *testing.T) {
	r := start(t)
	head := r.hall()
	q := toMany()
	q.Version = pinned(head.Version)
	r.push(put(solidPolygon("plug", polygon(4.9, 3, 5.1, 3, 5.1, 5, 4.9, 5)))) // not on that version
	for preference, detail := range []pb.PairDetail{pb.PairDetail_PAIR_DETAIL_UNSPECIFIED, pb.PairDetail_PAIR_DETAIL_SUMMARY, pb.PairDetail_PAIR_DETAIL_SUMMARY, pb.PairDetail_PAIR_DETAIL_ROUTE} {
		q.Detail, q.Options = detail, &pb.PlanOptions{Preference: pb.Preference(preference)}
		header, answers, end := r.many(q)
		if !proto.Equal(header.Stamp, head) || header.Body.GetMaxSpeedMps() != 1 || header.Options.GetTightWeight() != 1 {
			t.Errorf("header %v, wanted version %v and the defaults", header, head)
		}
		if end.RouteCount != 4 || end.RefusalCount != 2 || end.OutOfTimeCount != 0 {
			t.Errorf("end mark %v, wanted 4 routes and 2 refusals", end)
		}
		for _, a := range answers {
			one := toBench()
			one.Version, one.Options, one.Start, one.Goal = q.Version, q.Options, q.Starts[a.StartIndex], q.Goals[a.GoalIndex]
			want, err := r.routes.Plan(r.ctx(), one)
			if err != nil {
				t.Fatal(err)
			}
			if !proto.Equal(a.GetRefusal(), want.GetRefusal()) {
				t.Errorf("refusal %v, Plan's is %v", a.GetRefusal(), want.GetRefusal())
			}
			if want.GetRoute() == nil {
				continue
			}
			if detail == pb.PairDetail_PAIR_DETAIL_ROUTE {
				if !proto.Equal(a.GetRoute(), want.GetRoute()) {
					t.Errorf("route %v, Plan's is %v", a.GetRoute(), want.GetRoute())
				}
			} else if !proto.Equal(a.GetSummary(), summaryOut(want.GetRoute())) {
				t.Errorf("summary %v of Plan's %v", a.GetSummary(), want.GetRoute())
			}
		}
	}
	if r.s.holds.get("hall", head.Version) == nil {
		t.Error("the version is not held, wanted it readable for the routes' sake")
	}
}

// With one pair at a time, the nearer is answered first.
func TestPlanManyNearestFirst(t *testing.T) {
	r := start(t, func(c *Config) { c.Planners = 1 })
	r.hall()
	q := toMany()
	q.Starts, q.Goals = q.Starts[:1], []*pb.Place{atStation("bench"), atPose(2, 2), atPose(1, 4), atPose(1, 1.5)}
	_, answers, _ := r.many(q)
	for i, want := range []int32{3, 1, 2, 0} {
		if answers[i].GoalIndex != want {
			t.Errorf("answer %d is for goal %d, wanted %d", i, answers[i].GoalIndex, want)
		}
	}
}

func TestPlanManyFailures(t *testing.T) {
	r := start(t)
	r.hall()
	for name, c := range map[string]struct {
		edit  func(*pb.PlanManyRequest)
		code  codes.Code
		why   string
		words string
	}{
		"no such floor":   {func(q *pb.PlanManyRequest) { q.Floor = "cellar" }, codes.NotFound, "FLOOR_NOT_FOUND", "cellar"},
		"no such version": {func(q *pb.PlanManyRequest) { q.Version = pinned(9) }, codes.NotFound, "VERSION_NOT_FOUND", "9"},
		"no such station": {func(q *pb.PlanManyRequest) {
			q.Goals = append(q.Goals, atStation("cold-9"), atStation("cold-10"))
		}, codes.NotFound, "STATION_NOT_FOUND", `goals[3].station: "cold-9"`},
		"no station":    {func(q *pb.PlanManyRequest) { q.Starts[1] = atStation("wall") }, codes.NotFound, "STATION_NOT_FOUND", "starts[1].station"},
		"off the floor": {func(q *pb.PlanManyRequest) { q.Goals[2] = atPose(11, 1) }, codes.InvalidArgument, "INVALID_FIELD", "goals[2].pose.x_m"},
		"too wide":      {func(q *pb.PlanManyRequest) { q.Body.RadiusM, q.Body.PreferredClearanceM = 6, 0 }, codes.InvalidArgument, "INVALID_FIELD", "body.radius_m"},
		"no goals":      {func(q *pb.PlanManyRequest) { q.Goals = nil }, codes.InvalidArgument, "INVALID_FIELD", "goals"},
		"a fault and no station": {func(q *pb.PlanManyRequest) {
			q.Goals[0], q.Starts[0] = atStation("cold-9"), atPose(-1, 1)
		}, codes.InvalidArgument, "INVALID_FIELD", "starts[0].pose.x_m"},
	} {
		q := toMany()
		c.edit(q)
		stream, err := r.routes.PlanMany(r.ctx(), q)
		if err != nil {
			t.Fatal(err)
		}
		if m, err := stream.Recv(); err == nil {
			t.Errorf("%s: got %v, wanted no message", name, m)
		} else {
			wantStatus(t, err, c.code, c.why)
			if !strings.Contains(err.Error(), c.words) {
				t.Errorf("%s: %v, wanted %q named", name, err, c.words)
			}
		}
	}
}

// When the time for all runs out, the pairs that are left are refused for that, and the
// end mark comes all the same. Busy planners are no error.
func TestPlanManyOutOfTime(t *testing.T) {
	r := start(t, func(c *Config) { c.Planners = 1 })
	r.hall()
	r.route(toBench()) // its world is there
	leave, err := r.s.lanes.enter(r.ctx())
	if err != nil {
		t.Fatal(err)
	}
	defer leave()
	q := toMany()
	q.TimeBudgetS = 0.05
	_, answers, end := r.many(q)
	if end.OutOfTimeCount != 6 || end.RefusalCount != 6 {
		t.Errorf("end mark %v, wanted all six out of time", end)
	}
	for _, a := range answers {
		if f := a.GetRefusal(); f.GetReason() != pb.RefusalReason_REFUSAL_REASON_OUT_OF_TIME || f.RetryAfterS == 0 || f.Explanation == "" {
			t.Errorf("refusal %v, wanted out of time, in words and with a time to ask again", f)
		}
	}
	// The caller's own deadline is kept to in the same way.
	ctx, cancel := context.WithTimeout(context.Background(), 500*time.Millisecond)
	defer cancel()
	stream, err := r.routes.PlanMany(ctx, toMany())
	if err != nil {
		t.Fatal(err)
	}
	var last *pb.PlanManyResponse
	for {
		m, err := stream.Recv()
		if err != nil {
			break
		}
		last = m
	}
	if last.GetEnd().GetOutOfTimeCount() != 6 {
		t.Errorf("before the caller's deadline the last message was %v, wanted the end mark", last)
	}
}

// A call that is given up in the middle lets go of its lane and its place, and so does one
// that a drain ends.
func TestPlanManyGivenUp(t *testing.T) {
	r := start(t, func(c *Config) { c.Planners = 1 })
	r.hall()
	r.route(toBench())
	leave, err := r.s.lanes.enter(r.ctx())
	if err != nil {
		t.Fatal(err)
	}
	open := func(ctx context.Context) grpc.ServerStreamingClient[pb.PlanManyResponse] {
		t.Helper()
		stream, err := r.routes.PlanMany(ctx, toMany())
		if err != nil {
			t.Fatal(err)
		}
		if m, err := stream.Recv(); err != nil || m.GetHeader() == nil {
			t.Fatalf("got %v, %v, wanted the header", m, err)
		}
		return stream
	}
	ctx, cancel := context.WithCancel(r.ctx())
	stream := open(ctx)
	cancel()
	if _, err := stream.Recv(); err == nil {
		t.Error("an answer to a call that was given up")
	}
	for r.s.lanes.calls.Load() != 0 || len(r.s.lanes.turns) != 0 {
		time.Sleep(time.Millisecond) // the test's own deadline bounds it
	}
	leave()
	r.many(toMany())

	leave, err = r.s.lanes.enter(r.ctx())
	if err != nil {
		t.Fatal(err)
	}
	defer leave()
	stream = open(r.ctx())
	go r.drain()
	_, err = stream.Recv()
	wantStatus(t, err, codes.Unavailable, "SHUTTING_DOWN")
}

// Pairs leave lanes to single plans, and there is an end to how many calls are taken.
func TestPlanManyLeavesLanes(t *testing.T) {
	l := newLanes(4, 1, time.Millisecond)
	for range 2 {
		if _, err := l.enterPair(t.Context()); err != nil {
			t.Fatal(err)
		}
	}
	soon, cancel := context.WithTimeout(t.Context(), 20*time.Millisecond)
	defer cancel()
	if _, err := l.enterPair(soon); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("a third pair in four lanes: %v, wanted it to wait", err)
	}
	for range 2 {
		if _, err := l.enter(t.Context()); err != nil {
			t.Errorf("a single plan beside two pairs: %v", err)
		}
	}

	r := start(t)
	r.hall()
	r.s.lanes.calls.Store(maxManyCalls)
	stream, err := r.routes.PlanMany(r.ctx(), toMany())
	if err != nil {
		t.Fatal(err)
	}
	_, err = stream.Recv()
	wantStatus(t, err, codes.ResourceExhausted, "OVERLOADED")
	r.s.lanes.calls.Store(maxManyCalls - 1)
	r.many(toMany())
}

// stuck is a stream whose client has stopped reading.
type stuck struct {
	grpc.ServerStreamingServer[pb.PlanManyResponse]
	read chan struct{}
}

func (s stuck) Send(*pb.PlanManyResponse) error { <-s.read; return nil }

// A client that stops reading does not keep its call's place for good.
func TestPlanManyUnread(t *testing.T) {
	s := stuck{read: make(chan struct{})}
	defer close(s.read)
	c := manyCall{stream: s, patience: time.Millisecond}
	if err := c.send(t.Context(), &pb.PlanManyResponse{}); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("got %v, wanted the wait to end", err)
	}
	gone, cancel := context.WithCancel(t.Context())
	cancel()
	c.patience = time.Hour
	if err := c.send(gone, &pb.PlanManyResponse{}); !errors.Is(err, context.Canceled) {
		t.Errorf("got %v, wanted the call's end to count", err)
	}
}

// A client that reads nothing and then goes away leaves nothing behind, though a message
// to it was stuck.
func TestPlanManyUnreadAndGone(t *testing.T) {
	r := start(t)
	r.hall()
	q := toMany()
	q.Detail, q.Options = pb.PairDetail_PAIR_DETAIL_ROUTE, &pb.PlanOptions{MaxSpacingM: 0.05}
	q.Starts = slices.Repeat(q.Starts[:1], 200) // more than fits any window
	ctx, cancel := context.WithCancel(r.ctx())
	defer cancel()
	if _, err := r.routes.PlanMany(ctx, q); err != nil {
		t.Fatal(err)
	}
	for quiet := 0; quiet < 5; quiet++ { // until no pair is worked on any more
		if time.Sleep(20 * time.Millisecond); r.s.lanes.calls.Load() == 0 || len(r.s.lanes.turns) != 0 {
			quiet = 0
		}
	}
	cancel()
	for r.s.lanes.calls.Load() != 0 {
		time.Sleep(time.Millisecond) // the test's own deadline bounds it
	}
}
