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
	// beside what the search itself may take.
	prepareGrace = 5 * time.Second
	// answerShare is the share of the caller's remaining time that is kept back for
	// the answer, so that "out of time" arrives before the caller's own deadline.
	answerShare = 10
	// retryOutOfTime is a refusal's retry_after_s when the time budget ran out: the
	// search itself would do the same again, the machine may be less busy.
	retryOutOfTime = time.Second
)

// budget is how long a request lets the search take.
func (s *Server) budget(o *pb.PlanOptions) time.Duration {
	if b := o.GetTimeBudgetS(); b > 0 {
		return seconds(b)
	}
	return s.cfg.PlanTimeout
}

// search makes a version ready, takes a lane and runs one search in it within its
// budget.
func (s *Server) search(ctx context.Context, snap *mapstore.Snapshot, budget time.Duration, run func(context.Context, *planner.World) error) error {
	world, err := s.world(ctx, snap)
	if err != nil {
		return err
	}
	leave, err := s.lanes.enter(ctx)
	if err != nil {
		return err
	}
	defer leave()
	if end, ok := ctx.Deadline(); ok {
		left := time.Until(end)
		budget = min(budget, left-left/answerShare)
	}
	ctx, cancel := context.WithTimeoutCause(ctx, budget, planner.ErrTimeBudget)
	defer cancel()
	return run(ctx, world)
}

// world is a version's world. The error is errPreparing when it takes too long.
func (s *Server) world(ctx context.Context, snap *mapstore.Snapshot) (*planner.World, error) {
	s.worlds.follow(snap.Info.Floor)
	wait, cancel := context.WithTimeoutCause(ctx, prepareGrace, errPreparing)
	defer cancel()
	world, err := s.worlds.get(wait, snap)
	if err != nil && errors.Is(context.Cause(wait), errPreparing) {
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
