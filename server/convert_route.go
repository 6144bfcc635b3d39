package server

import (
	"fmt"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// Defaults of a body, its options and a guide's setup, from the contract.
const (
	defaultBerthUm     = 500_000 // preferred clearance beyond the required one
	defaultMaxSpeed    = 1.0     // m/s
	defaultBraking     = 0.5     // m/s²
	defaultReaction    = 0.5     // s
	defaultTightWeight = 1.0
	defaultQuietUm     = 100_000 // quiet_above_m beyond hint_below_m
	defaultOffRouteUm  = 300_000
)

func poseIn(p *pb.Pose) planner.Pose {
	return planner.Pose{
		At:      geom.Point{X: geom.FromMetres(p.GetXM()), Y: geom.FromMetres(p.GetYM())},
		Heading: heading(p.GetHeadingRad()),
	}
}

func poseOut(p planner.Pose) *pb.Pose {
	return &pb.Pose{XM: geom.Metres(p.At.X), YM: geom.Metres(p.At.Y), HeadingRad: p.Heading}
}

// requiredUm is radius plus margin.
func requiredUm(b *pb.Body) int64 {
	return geom.RadiusFromMetres(b.RadiusM) + geom.RadiusFromMetres(b.MarginM)
}

// bodyIn fills in the defaults; the preferred clearance's needs the floor's cap.
func bodyIn(b *pb.Body, set floor.Settings) planner.Body {
	out := planner.Body{
		Name:        b.Name,
		RadiusUm:    geom.RadiusFromMetres(b.RadiusM),
		MarginUm:    geom.RadiusFromMetres(b.MarginM),
		PreferredUm: geom.RadiusFromMetres(b.PreferredClearanceM),
		MaxSpeed:    b.MaxSpeedMps,
		Braking:     b.BrakingMps2,
		Reaction:    b.ReactionS,
		SensingUm:   um(b.SensingRangeM),
	}
	if out.PreferredUm == 0 {
		out.PreferredUm = max(out.Required(), min(out.Required()+defaultBerthUm, set.CapUm))
	}
	if out.MaxSpeed == 0 {
		out.MaxSpeed = defaultMaxSpeed
	}
	if out.Braking == 0 {
		out.Braking = defaultBraking
	}
	if out.Reaction == 0 {
		out.Reaction = defaultReaction
	}
	return out
}

func bodyOut(b planner.Body) *pb.Body {
	return &pb.Body{
		Name:                b.Name,
		RadiusM:             metres(b.RadiusUm),
		MarginM:             metres(b.MarginUm),
		PreferredClearanceM: metres(b.PreferredUm),
		MaxSpeedMps:         b.MaxSpeed,
		BrakingMps2:         b.Braking,
		ReactionS:           b.Reaction,
		SensingRangeM:       metres(b.SensingUm),
	}
}

// optionsIn fills in the defaults; the tight threshold's is the body's preferred
// clearance. The time budget is the caller's business.
func optionsIn(o *pb.PlanOptions, b planner.Body) planner.Options {
	out := planner.Options{
		KeepRoadmapPath: o.GetKeepRoadmapPath(),
		TightWeight:     o.GetTightWeight(),
		TightBelowUm:    geom.RadiusFromMetres(o.GetTightBelowM()),
		MaxSpacingUm:    um(o.GetMaxSpacingM()),
	}
	if o.GetPreference() == pb.Preference_PREFERENCE_SHORTEST {
		out.Preference = planner.Shortest
	}
	switch o.GetRoadmap() {
	case pb.Roadmap_ROADMAP_GRID4:
		out.Roadmap = planner.Grid4
	case pb.Roadmap_ROADMAP_GRID8:
		out.Roadmap = planner.Grid8
	case pb.Roadmap_ROADMAP_QUADTREE:
		out.Roadmap = planner.Quadtree
	}
	if out.TightWeight == 0 {
		out.TightWeight = defaultTightWeight
	}
	if out.TightBelowUm == 0 {
		out.TightBelowUm = b.PreferredUm
	}
	return out
}

// optionsOut gives the options with defaults filled in, but for the roadmap,
// which stays the server's choice when it was, and budgetS, which is the
// request's own.
func optionsOut(o planner.Options, budgetS float64) *pb.PlanOptions {
	out := &pb.PlanOptions{
		Preference:      pb.Preference_PREFERENCE_BALANCED,
		KeepRoadmapPath: o.KeepRoadmapPath,
		TightWeight:     o.TightWeight,
		TightBelowM:     metres(o.TightBelowUm),
		TimeBudgetS:     budgetS,
		MaxSpacingM:     metres(o.MaxSpacingUm),
	}
	if o.Preference == planner.Shortest {
		out.Preference = pb.Preference_PREFERENCE_SHORTEST
	}
	switch o.Roadmap {
	case planner.Grid4:
		out.Roadmap = pb.Roadmap_ROADMAP_GRID4
	case planner.Grid8:
		out.Roadmap = pb.Roadmap_ROADMAP_GRID8
	case planner.Quadtree:
		out.Roadmap = pb.Roadmap_ROADMAP_QUADTREE
	}
	return out
}

func routePointIn(p *pb.RoutePoint) geom.Point {
	return geom.Point{X: geom.FromMetres(p.GetXM()), Y: geom.FromMetres(p.GetYM())}
}

// routePointsIn are a checked route's points in order, the joints of its legs
// once. A route that stays where it is has its point twice.
func routePointsIn(r *pb.Route) []geom.Point {
	var out []geom.Point
	for _, leg := range r.Legs {
		for _, p := range leg.Points {
			q := routePointIn(p)
			if n := len(out); n == 0 || out[n-1] != q {
				out = append(out, q)
			}
		}
	}
	if len(out) == 1 {
		out = append(out, out[0])
	}
	return out
}

func causeOut(c planner.SpeedCause) pb.SpeedCause {
	switch c {
	case planner.CauseBody:
		return pb.SpeedCause_SPEED_CAUSE_BODY
	case planner.CauseZone:
		return pb.SpeedCause_SPEED_CAUSE_ZONE
	case planner.CauseRoom:
		return pb.SpeedCause_SPEED_CAUSE_ROOM
	}
	return pb.SpeedCause_SPEED_CAUSE_UNSPECIFIED
}

func legOut(l planner.Leg) *pb.Leg {
	out := &pb.Leg{
		Kind:               pb.LegKind_LEG_KIND_OPEN,
		Points:             make([]*pb.RoutePoint, len(l.Points)),
		LengthM:            geom.Metres(l.LengthUm),
		DurationS:          l.DurationS,
		SmallestClearanceM: metres(l.SmallestUm),
		SmallestAt:         pointOut(l.SmallestAt),
		SmallestSM:         geom.Metres(l.SmallestS),
		LeftRoomM:          metres(l.LeftUm),
		RightRoomM:         metres(l.RightUm),
		NearestFeature:     l.Nearest,
		SpeedCeilingMps:    l.SpeedCeiling,
		SpeedCause:         causeOut(l.SpeedCause),
		BeyondSensing:      l.BeyondSensing,
	}
	if l.Tight {
		out.Kind = pb.LegKind_LEG_KIND_TIGHT
	}
	for i, p := range l.Points {
		out.Points[i] = &pb.RoutePoint{
			XM: geom.Metres(p.At.X), YM: geom.Metres(p.At.Y), HeadingRad: p.Heading, SM: geom.Metres(p.S),
			ClearanceM: metres(p.ClearanceUm), SpeedCeilingMps: p.SpeedCeiling, SpeedCause: causeOut(p.SpeedCause),
		}
	}
	return out
}

// routeOut puts a route on the wire; id and validForS are the caller's.
func routeOut(r *planner.Route, v mapstore.VersionInfo, b planner.Body, o *pb.PlanOptions, id string, validForS float64) *pb.Route {
	out := &pb.Route{
		RouteId:            id,
		CheckedAgainst:     stampOut(v),
		Body:               bodyOut(b),
		Options:            o,
		Start:              poseOut(r.Start),
		Goal:               poseOut(r.Goal),
		Legs:               make([]*pb.Leg, len(r.Legs)),
		LengthM:            geom.Metres(r.LengthUm),
		DurationS:          r.DurationS,
		CostM:              geom.Metres(r.CostUm),
		SmallestClearanceM: metres(r.SmallestUm),
		SmallestAt:         pointOut(r.SmallestAt),
		Bound: &pb.Bound{
			LowerBoundM:     geom.Metres(r.Bound.LowerUm),
			WidthBiasM:      metres(r.Bound.WidthBiasUm),
			ClearanceShortM: metres(r.Bound.ClearanceShortUm),
		},
		ValidForS: validForS,
	}
	switch r.Bound.Kind {
	case planner.RoadmapOptimum:
		out.Bound.Kind = pb.BoundKind_BOUND_KIND_ROADMAP_OPTIMUM
	case planner.AtMostRoadmapOptimum:
		out.Bound.Kind = pb.BoundKind_BOUND_KIND_AT_MOST_ROADMAP_OPTIMUM
	case planner.Straight:
		out.Bound.Kind = pb.BoundKind_BOUND_KIND_STRAIGHT
	}
	for i, l := range r.Legs {
		out.Legs[i] = legOut(l)
	}
	return out
}

func countersOut(c planner.Counters) *pb.SearchCounters {
	return &pb.SearchCounters{Expanded: c.Expanded, Queued: c.Queued, SightChecks: c.SightChecks, ExactChecks: c.ExactChecks}
}

// refusalOut puts a refusal on the wire and into words. retryS is when asking
// again may help.
func refusalOut(r *planner.Refusal, retryS float64) *pb.Refusal {
	out := &pb.Refusal{}
	switch r.Reason {
	case planner.StartBlocked:
		out.Reason = pb.RefusalReason_REFUSAL_REASON_START_BLOCKED
		out.Explanation = "start: " + blockedText(r.Blocked)
	case planner.GoalBlocked:
		out.Reason = pb.RefusalReason_REFUSAL_REASON_GOAL_BLOCKED
		out.Explanation = "goal: " + blockedText(r.Blocked)
	case planner.NoPassage:
		out.Reason = pb.RefusalReason_REFUSAL_REASON_NO_PASSAGE
		out.Explanation = bottleneckText(r.Bottleneck)
	case planner.OutOfTime:
		out.Reason = pb.RefusalReason_REFUSAL_REASON_OUT_OF_TIME
		out.Explanation = "the time budget ran out before the search ended"
		out.RetryAfterS = retryS
	}
	if b := r.Blocked; b != nil {
		out.BlockedEnd = &pb.BlockedEnd{
			At: pointOut(b.At), ClearanceM: metres(b.ClearanceUm), RequiredClearanceM: metres(b.RequiredUm),
			ClosedZone: b.ClosedZone, NearestFeature: b.Nearest,
		}
		if b.HasFree {
			out.BlockedEnd.NearestFree = pointOut(b.NearestFree)
			out.BlockedEnd.DistanceM = geom.Metres(b.DistanceUm)
			out.BlockedEnd.BearingRad = b.Bearing
		}
	}
	if n := r.Bottleneck; n != nil {
		out.Bottleneck = &pb.Bottleneck{Exists: n.Exists, WidthNeededM: metres(n.NeededUm), Features: n.Features, Zone: n.Zone}
		if n.Exists {
			out.Bottleneck.At = pointOut(n.At)
			out.Bottleneck.WidthM = metres(n.WidthUm)
			out.Bottleneck.WidthShortM = metres(n.WidthShortUm)
		}
	}
	return out
}

func blockedText(b *planner.BlockedEnd) string {
	switch {
	case b == nil:
		return "no place for the body"
	case b.ClosedZone != "":
		return fmt.Sprintf("in or too near closed zone %q", b.ClosedZone)
	case b.Nearest != "":
		return fmt.Sprintf("clearance %v m from %q, needed %v m", metres(b.ClearanceUm), b.Nearest, metres(b.RequiredUm))
	}
	return fmt.Sprintf("clearance %v m, needed %v m", metres(b.ClearanceUm), metres(b.RequiredUm))
}

func bottleneckText(n *planner.Bottleneck) string {
	switch {
	case n == nil:
		return "every way is too narrow or closed"
	case n.Zone != "":
		return fmt.Sprintf("zone %q closes the way", n.Zone)
	case !n.Exists:
		return "there is no way, however narrow"
	}
	return fmt.Sprintf("the widest way narrows to %v m, needed %v m", metres(n.WidthUm), metres(n.NeededUm))
}

// hintBelowUm is a checked setup's threshold with its default filled in.
func hintBelowUm(s *pb.GuideSetup) int64 {
	if s.HintBelowM != 0 {
		return geom.RadiusFromMetres(s.HintBelowM)
	}
	return geom.RadiusFromMetres(s.GetRoute().GetOptions().GetTightBelowM())
}

func guideSetupIn(s *pb.GuideSetup, set floor.Settings) planner.GuideSetup {
	out := planner.GuideSetup{
		Body:         bodyIn(s.Route.Body, set),
		Route:        routePointsIn(s.Route),
		HintBelowUm:  hintBelowUm(s),
		QuietAboveUm: geom.RadiusFromMetres(s.QuietAboveM),
		OffRouteUm:   um(s.OffRouteM),
	}
	if out.HintBelowUm == 0 {
		out.HintBelowUm = out.Body.PreferredUm
	}
	if out.QuietAboveUm == 0 {
		out.QuietAboveUm = out.HintBelowUm + defaultQuietUm
	}
	if out.OffRouteUm == 0 {
		out.OffRouteUm = defaultOffRouteUm
	}
	return out
}

// hintOut puts a hint on the wire, echoing the report it answers.
func hintOut(h planner.Hint, r *pb.GuideReport, v mapstore.VersionInfo, validForS float64) *pb.Hint {
	out := &pb.Hint{
		Sequence: r.Sequence, StampS: r.StampS, Stamp: stampOut(v),
		State:       pb.GuideState_GUIDE_STATE_HOLD,
		Explanation: h.Explanation, ClearanceM: metres(h.ClearanceUm),
		NearestBearingRad: h.Bearing, NearestFeature: h.Nearest,
		FreeTravelM: metres(h.FreeTravelUm), SpeedCeilingMps: h.SpeedCeiling, SpeedCause: causeOut(h.SpeedCause),
		ValidForS: validForS,
	}
	switch h.State {
	case planner.Clear:
		out.State = pb.GuideState_GUIDE_STATE_CLEAR
	case planner.Hinting:
		out.State = pb.GuideState_GUIDE_STATE_HINTING
	case planner.ReplanAdvised:
		out.State = pb.GuideState_GUIDE_STATE_REPLAN_ADVISED
	}
	if j := h.Rejoin; j != nil {
		out.Rejoin = &pb.Rejoin{
			At: pointOut(j.At), SM: geom.Metres(j.S), OffRouteM: geom.Metres(j.OffRoute), BearingRad: j.Bearing, Clear: j.Clear,
		}
	}
	return out
}
