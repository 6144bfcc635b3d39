package server

import (
	"context"
	"time"

	"google.golang.org/grpc"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

const (
	// defaultManyBudget is PlanManyRequest.time_budget_s where it is 0.
	defaultManyBudget = time.Minute
	// sendPatience is how long a client of PlanMany or RoadmapService may leave a message unread before the
	// call is ended, so that one that stopped reading keeps nobody else out.
	sendPatience = 30 * time.Second
)

// manyBudget is how long a checked request lets all its pairs take.
func manyBudget(r *pb.PlanManyRequest) time.Duration {
	if r.TimeBudgetS > 0 {
		return seconds(r.TimeBudgetS)
	}
	return defaultManyBudget
}

func (v routeService) PlanMany(r *pb.PlanManyRequest, stream grpc.ServerStreamingServer[pb.PlanManyResponse]) error {
	ctx := stream.Context()
	about := subject{floor: r.Floor}
	leave, err := v.s.lanes.enterMany()
	if err != nil {
		return statusOf(ctx, err, about)
	}
	defer leave()
	snap, about, err := v.s.resolve(ctx, r.Floor, r.Version)
	if err != nil {
		return statusOf(ctx, err, about)
	}
	note(ctx, r.Floor, snap.Info.Version)
	c := manyCall{routeService: v, snap: snap, detail: r.Detail, stream: stream, patience: sendPatience}
	if err := c.ask(r); err != nil {
		return statusOf(ctx, err, about)
	}
	world, err := v.s.world(ctx, snap)
	if err != nil {
		return statusOf(ctx, err, about)
	}
	if err := c.run(ctx, world, manyBudget(r)); err != nil {
		return statusOf(ctx, err, about)
	}
	return nil
}

// manyCall is one PlanMany call being answered.
type manyCall struct {
	routeService
	snap     *mapstore.Snapshot
	one      asked // of every pair, but for its ends
	many     planner.ManyRequest
	detail   pb.PairDetail
	stream   grpc.ServerStreamingServer[pb.PlanManyResponse]
	patience time.Duration
	end      pb.PlanManyEnd
}

// ask turns the request into the planner's, checked against the floor.
func (c *manyCall) ask(r *pb.PlanManyRequest) error {
	set := c.snap.Map.Settings()
	var f faults
	c.one.Body = bodyIn(r.Body, set)
	f.bodyOnFloor(root.at("body"), c.one.Body, set)
	c.one.setOptions(c.s, r.Options, set, root.at("options"), &f)
	c.many.Body, c.many.Options = c.one.Body, c.one.Options
	var missing error // the first station that there is not
	places := func(list []*pb.Place, p *field) []planner.Pose {
		poses := make([]planner.Pose, len(list))
		for i, pl := range list {
			var err error
			if poses[i], err = placeOn(pl, c.snap, p.item(i), &f); err != nil && missing == nil {
				missing = err
			}
		}
		return poses
	}
	c.many.Starts = places(r.Starts, root.at("starts"))
	c.many.Goals = places(r.Goals, root.at("goals"))
	if f.any() {
		return f.err()
	}
	return missing
}

// run answers every pair, between header and end mark.
func (c *manyCall) run(ctx context.Context, world *planner.World, budget time.Duration) error {
	if err := c.send(ctx, &pb.PlanManyResponse{Part: &pb.PlanManyResponse_Header{Header: &pb.PlanManyHeader{
		Stamp: stampOut(c.snap.Info), PairCount: int64(len(c.many.Starts) * len(c.many.Goals)),
		Body: bodyOut(c.one.Body), Options: c.one.options,
	}}}); err != nil {
		return err
	}
	inTime, cancel := timed(ctx, budget, planner.ErrTimeBudget)
	defer cancel()
	err := world.PlanMany(inTime, c.many, planner.ManyRun{
		Workers: cap(c.s.lanes.turns),
		Enter:   c.enter,
		Emit:    func(a planner.PairAnswer) error { return c.emit(ctx, a) },
	})
	if err != nil {
		return err
	}
	return c.send(ctx, &pb.PlanManyResponse{Part: &pb.PlanManyResponse_End{End: &c.end}})
}

// enter takes a lane for a pair, which starts the pair's own time budget.
func (c *manyCall) enter(ctx context.Context) (context.Context, func(), error) {
	leave, err := c.s.lanes.enterPair(ctx)
	if err != nil {
		return nil, nil, err
	}
	ctx, cancel := context.WithTimeoutCause(ctx, c.one.budget.Duration, planner.ErrTimeBudget)
	return ctx, func() { cancel(); leave() }, nil
}

// emit sends a pair's answer and counts it.
func (c *manyCall) emit(ctx context.Context, a planner.PairAnswer) error {
	out := &pb.PairAnswer{StartIndex: int32(a.Start), GoalIndex: int32(a.Goal), Counters: countersOut(a.Counters)}
	if a.Route == nil {
		c.end.RefusalCount++
		if a.Refusal.Reason == planner.OutOfTime {
			c.end.OutOfTimeCount++
		}
		out.Outcome = &pb.PairAnswer_Refusal{Refusal: refusalOut(a.Refusal, retryOutOfTime.Seconds())}
	} else {
		c.end.RouteCount++
		q := c.one
		q.Start, q.Goal = c.many.Starts[a.Start], c.many.Goals[a.Goal]
		route := c.route(c.snap, q, a.Route)
		if c.detail == pb.PairDetail_PAIR_DETAIL_ROUTE {
			out.Outcome = &pb.PairAnswer_Route{Route: route}
		} else {
			out.Outcome = &pb.PairAnswer_Summary{Summary: summaryOut(route)}
		}
	}
	return c.send(ctx, &pb.PlanManyResponse{Part: &pb.PlanManyResponse_Answer{Answer: out}})
}

// summaryOut is what a route comes to.
func summaryOut(r *pb.Route) *pb.RouteSummary {
	return &pb.RouteSummary{
		RouteId: r.RouteId, LengthM: r.LengthM, DurationS: r.DurationS, CostM: r.CostM,
		SmallestClearanceM: r.SmallestClearanceM, SmallestAt: r.SmallestAt, Bound: r.Bound,
	}
}

func (c *manyCall) send(ctx context.Context, m *pb.PlanManyResponse) error {
	return patiently(ctx, c.patience, func() error { return c.stream.Send(m) })
}

// patiently sends a message unless the client lets it lie too long: then nothing may be sent
// any more, and the stream's end lets go of the message.
func patiently(ctx context.Context, patience time.Duration, send func() error) error {
	sent := make(chan error, 1)
	go func() { sent <- send() }()
	timer := time.NewTimer(patience)
	defer timer.Stop()
	select {
	case err := <-sent:
		return err
	case <-timer.C:
		return context.DeadlineExceeded
	case <-ctx.Done():
		return ctx.Err()
	}
}
