package server

import (
	"context"
	"encoding/hex"
	"errors"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

const (
	// prepareGrace is how long a plan waits for its version to be made ready,
	// beside what the search itself may take; a budget that was asked for counts instead.
	prepareGrace = 5 * time.Second
	// answerShare is the part of a time budget, and of the caller's remaining time, that
	// is kept back for describing and sending the answer, so that it arrives in time;
	// answerLeast is the least, since a planner whose time is up may still look for a
	// way for 20 ms, where that leaves half of the time.
	answerShare = 10
	answerLeast = 25 * time.Millisecond
	// retryOutOfTime is a refusal's retry_after_s when the time budget ran out: the
	// search itself would do the same again, the machine may be less busy.
	retryOutOfTime = time.Second
)

// budget is how long a plan may take.
type budget struct {
	time.Duration
	// asked is whether the request names it: it is for the whole answer then, and
	// for the search alone where it is the server's own.
	asked bool
}

// budget is how long a request lets its plan take.
func (s *Server) budget(o *pb.PlanOptions) budget {
	if b := o.GetTimeBudgetS(); b > 0 {
		return budget{seconds(b), true}
	}
	return budget{Duration: s.cfg.PlanTimeout}
}

// timed ends ctx for that cause after d, and before the caller's deadline: some of
// what is left to it is kept back for the answer.
func timed(ctx context.Context, d time.Duration, cause error) (context.Context, context.CancelFunc) {
	if end, ok := ctx.Deadline(); ok {
		d = min(d, beforeAnswer(time.Until(end)))
	}
	return context.WithTimeoutCause(ctx, d, cause)
}

// beforeAnswer is what is left of d for all but describing and sending the answer.
func beforeAnswer(d time.Duration) time.Duration {
	return d - max(d/answerShare, min(answerLeast, d/2))
}

// search makes a version ready, takes a lane and runs one search in it, within the
// budget. When a budget that was asked for runs out before the version is ready, the
// answer is the refusal that a search out of time would have given.
func (s *Server) search(ctx context.Context, snap *mapstore.Snapshot, b budget, answer *planner.Answer, run func(context.Context, *planner.World) error) error {
	if b.asked {
		var cancel context.CancelFunc
		ctx, cancel = timed(ctx, beforeAnswer(b.Duration), planner.ErrTimeBudget)
		defer cancel()
	}
	wait := prepareGrace
	if b.asked {
		wait = b.Duration
	}
	world, err := s.worldWithin(ctx, snap, wait)
	if b.asked && errors.Is(err, errPreparing) {
		*answer = planner.Answer{Refusal: &planner.Refusal{Reason: planner.OutOfTime}}
		return nil
	}
	if err != nil {
		return err
	}
	leave, err := s.lanes.enter(ctx)
	if err != nil {
		return err
	}
	defer leave()
	if !b.asked {
		var cancel context.CancelFunc
		ctx, cancel = timed(ctx, b.Duration, planner.ErrTimeBudget)
		defer cancel()
	}
	return run(ctx, world)
}

// world is a version's world. The error is errPreparing when it takes too long.
func (s *Server) world(ctx context.Context, snap *mapstore.Snapshot) (*planner.World, error) {
	return s.worldWithin(ctx, snap, prepareGrace)
}

func (s *Server) worldWithin(ctx context.Context, snap *mapstore.Snapshot, d time.Duration) (*planner.World, error) {
	s.worlds.follow(snap.Info.Floor)
	wait, cancel := timed(ctx, d, errPreparing)
	defer cancel()
	world, err := s.worlds.get(wait, snap)
	if cause := context.Cause(wait); err != nil && (errors.Is(cause, errPreparing) || errors.Is(cause, planner.ErrTimeBudget)) {
		return nil, errPreparing
	}
	return world, err
}

// holdFor is how long a version is held once a route was planned on it.
func (s *Server) holdFor() time.Duration { return max(s.cfg.HoldVersions, s.cfg.RouteValidFor) }

// placeOn finds an end of a route on a version. A pose off the floor is a fault;
// an unknown station is a *stationError.
func placeOn(pl *pb.Place, snap *mapstore.Snapshot, p *field, f *faults) (planner.Pose, error) {
	switch w := pl.Where.(type) {
	case *pb.Place_Station:
		t, ok := snap.Map.Feature(w.Station)
		if !ok || !isStation(t) {
			return planner.Pose{}, &stationError{field: p.at("station").String(), station: w.Station, at: snap.Info, other: ok}
		}
		return planner.Pose{At: t.At, Heading: t.Heading}, nil
	default:
		pose := poseIn(pl.GetPose())
		f.poseOnFloor(p.at("pose"), pose.At, snap.Map.Settings())
		return pose, nil
	}
}

// old is the version a route was checked against, nil when it is not held any
// more or when the route was checked against something else of that number.
func (s *Server) old(ctx context.Context, stamp *pb.VersionStamp) (*mapstore.Snapshot, error) {
	about := subject{}
	snap, err := s.at(ctx, stamp.Floor, stamp.Version, &about)
	switch {
	case errors.Is(err, mapstore.ErrGone), errors.Is(err, errNoVersion):
		return nil, nil
	case err != nil:
		return nil, err
	case hex.EncodeToString(snap.Info.Digest[:]) != stamp.Digest:
		return nil, nil
	}
	return snap, nil
}
