package server

import (
	"context"
	"errors"
	"io"
	"math"
	"sync"
	"time"

	"google.golang.org/grpc"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

const (
	// hintValidFor is every hint's valid_for_s: two reports at the slowest rate of
	// the contract, 2 Hz.
	hintValidFor = time.Second
	// guideFreshWait is how long a hint waits for a head that is just being made
	// ready; after it the hint speaks of the version before, and says so.
	guideFreshWait = 100 * time.Millisecond
)

// guideService carries out GuideService. Requests reach it checked.
type guideService struct {
	pb.UnimplementedGuideServiceServer
	s *Server
}

// guided is one robot on its route.
type guided struct {
	setup   *pb.GuideSetup
	plan    planner.GuideSetup
	stamp   *pb.VersionStamp // what the route was checked against
	hinting bool

	// How far along the route changes since its version reach, for one head.
	touchedBy string
	touchedTo float64
}

// begin checks a setup against its floor.
func (v guideService) begin(ctx context.Context, setup *pb.GuideSetup, p *field) (*guided, error) {
	stamp := setup.Route.CheckedAgainst
	_, snap, err := v.fresh(ctx, stamp.Floor)
	if err != nil {
		return nil, err
	}
	set := snap.Map.Settings()
	g := &guided{setup: setup, plan: guideSetupIn(setup, set), stamp: stamp}
	var f faults
	f.bodyOnFloor(p.at("route").at("body"), g.plan.Body, set)
	f.routeOnFloor(p.at("route"), setup.Route, set)
	if setup.HintBelowM != 0 {
		f.underCap(p.at("hint_below_m"), g.plan.HintBelowUm, set)
	}
	if setup.QuietAboveM != 0 {
		f.underCap(p.at("quiet_above_m"), g.plan.QuietAboveUm, set)
	}
	if g.plan.QuietAboveUm < g.plan.HintBelowUm {
		f.add(p.at("quiet_above_m"), "%v, wanted hint_below_m (%v) or more", setup.QuietAboveM, wire.Metres(g.plan.HintBelowUm))
	}
	return g, f.err()
}

// fresh is the newest world of a floor: the head's, or the one before when the
// head's takes longer than guideFreshWait.
func (v guideService) fresh(ctx context.Context, floor string) (*planner.World, *mapstore.Snapshot, error) {
	head, err := v.s.store.Head(floor)
	if err != nil {
		return nil, nil, err
	}
	world, snap := v.s.worlds.newest(floor)
	if snap != nil && snap.Info.Version >= head.Info.Version {
		return world, snap, nil
	}
	if snap == nil {
		world, err = v.s.world(ctx, head)
		return world, head, err
	}
	wait, cancel := context.WithTimeout(ctx, guideFreshWait)
	defer cancel()
	switch newer, err := v.s.worlds.get(wait, head); {
	case err == nil:
		return newer, head, nil
	case ctx.Err() != nil:
		return nil, nil, ctx.Err()
	}
	return world, snap, nil
}

// advise answers one report.
func (v guideService) advise(ctx context.Context, g *guided, r *pb.GuideReport) (*pb.Hint, error) {
	world, snap, err := v.fresh(ctx, g.stamp.Floor)
	if err != nil {
		return nil, err
	}
	note(ctx, g.stamp.Floor, snap.Info.Version)
	report := planner.GuideReport{
		Pose: poseIn(r.Pose), SpreadUm: wire.Um(r.PositionSpreadM), Speed: r.SpeedMps, Hinting: g.hinting,
	}
	if report.Stale, err = v.stale(ctx, g, snap, report.Pose); err != nil {
		return nil, err
	}
	hint := world.Advise(g.plan, report)
	g.hinting = hint.Hinting
	return hintOut(hint, r, snap.Info, hintValidFor.Seconds()), nil
}

// stale says whether a change since the route was checked reaches what is left of
// it. When the route's version is not held any more, every change does.
func (v guideService) stale(ctx context.Context, g *guided, snap *mapstore.Snapshot, at planner.Pose) (bool, error) {
	digest := digestOut(snap.Info.Digest)
	if digest == g.stamp.Digest {
		return false, nil
	}
	if g.touchedBy != digest {
		old, err := v.s.old(ctx, g.stamp)
		if err != nil {
			return false, err
		}
		touchedTo := math.Inf(1)
		if old != nil {
			if touchedTo, err = lastTouched(ctx, old.Map, snap.Map, g.plan.Route, float64(g.plan.Body.Required())); err != nil {
				return false, err
			}
		}
		g.touchedBy, g.touchedTo = digest, touchedTo
	}
	return g.touchedTo >= 0 && along(g.plan.Route, at.At) <= g.touchedTo, nil
}

func (v guideService) GuideOnce(ctx context.Context, r *pb.GuideOnceRequest) (*pb.GuideOnceResponse, error) {
	about := subject{floor: r.Setup.Route.CheckedAgainst.Floor}
	g, err := v.begin(ctx, r.Setup, root.at("setup"))
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	g.hinting = r.Hinting
	hint, err := v.advise(ctx, g, r.Report)
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	return &pb.GuideOnceResponse{Hint: hint}, nil
}

// inbox keeps the newest setup and the newest report of a stream; what they
// replace is dropped. A report keeps the setup it was sent under.
type inbox struct {
	mu     sync.Mutex
	setup  *pb.GuideSetup
	report *pb.GuideReport
	under  *pb.GuideSetup
	err    error         // the stream's end
	bell   chan struct{} // holds one token when there is something new
}

func newInbox() *inbox { return &inbox{bell: make(chan struct{}, 1)} }

// put takes a message or the stream's end.
func (b *inbox) put(m *pb.GuideRequest, err error) {
	b.mu.Lock()
	switch t := m.GetMessage().(type) {
	case *pb.GuideRequest_Setup:
		b.setup = t.Setup
	case *pb.GuideRequest_Report:
		b.report, b.under = t.Report, b.setup
	}
	if err != nil {
		b.err = err
	}
	b.mu.Unlock()
	select {
	case b.bell <- struct{}{}:
	default:
	}
}

// take gives what is there and empties the report.
func (b *inbox) take() (setup, under *pb.GuideSetup, report *pb.GuideReport, err error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	setup, under, report, err = b.setup, b.under, b.report, b.err
	b.report, b.under = nil, nil
	return setup, under, report, err
}

func (v guideService) Guide(stream grpc.BidiStreamingServer[pb.GuideRequest, pb.GuideResponse]) error {
	ctx := stream.Context()
	box := newInbox()
	// The reader ends when the stream does, at the latest when this handler has
	// returned, since gRPC then ends the stream's context.
	go func() {
		for {
			m, err := stream.Recv()
			box.put(m, err)
			if err != nil {
				return
			}
		}
	}()
	var g *guided
	var about subject
	for {
		select {
		case <-ctx.Done():
			return statusOf(ctx, ctx.Err(), about)
		case <-box.bell:
		}
		setup, under, report, end := box.take()
		if report != nil {
			if under == nil {
				var f faults
				f.add(root.at("message"), "a report, wanted a setup first")
				return statusOf(ctx, f.err(), about)
			}
			if g == nil || g.setup != under {
				about.floor = under.Route.CheckedAgainst.Floor
				var err error
				if g, err = v.begin(ctx, under, root.at("setup")); err != nil {
					return statusOf(ctx, err, about)
				}
			}
			hint, err := v.advise(ctx, g, report)
			if err != nil {
				return statusOf(ctx, err, about)
			}
			if err := stream.Send(&pb.GuideResponse{Hint: hint}); err != nil {
				return err
			}
		}
		if setup != nil && (g == nil || g.setup != setup) {
			about.floor = setup.Route.CheckedAgainst.Floor
			var err error
			if g, err = v.begin(ctx, setup, root.at("setup")); err != nil {
				return statusOf(ctx, err, about)
			}
		}
		switch {
		case errors.Is(end, io.EOF):
			return nil
		case end != nil:
			return statusOf(ctx, end, about)
		}
	}
}
