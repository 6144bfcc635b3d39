package server

import (
	"fmt"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
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
	return planner.Pose{At: wire.PointIn(p), Heading: wire.Heading(p.GetHeadingRad())}
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
		SensingUm:   wire.Um(b.SensingRangeM),
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
		RadiusM:             wire.Metres(b.RadiusUm),
		MarginM:             wire.Metres(b.MarginUm),
		PreferredClearanceM: wire.Metres(b.PreferredUm),
		MaxSpeedMps:         b.MaxSpeed,
		BrakingMps2:         b.Braking,
		ReactionS:           b.Reaction,
		SensingRangeM:       wire.Metres(b.SensingUm),
	}
}

// optionsIn fills in the defaults; the tight threshold's is the body's preferred
// clearance. The time budget is the caller's business.
func optionsIn(o *pb.PlanOptions, b planner.Body) planner.Options {
	out := planner.Options{
		Preference:      preferences.in(o.GetPreference()),
		Roadmap:         roadmaps.in(o.GetRoadmap()),
		KeepRoadmapPath: o.GetKeepRoadmapPath(),
		TightWeight:     o.GetTightWeight(),
		TightBelowUm:    geom.RadiusFromMetres(o.GetTightBelowM()),
		MaxSpacingUm:    wire.Um(o.GetMaxSpacingM()),
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
	return &pb.PlanOptions{
		Preference:      preferences.out(o.Preference),
		Roadmap:         roadmaps.out(o.Roadmap),
		KeepRoadmapPath: o.KeepRoadmapPath,
		TightWeight:     o.TightWeight,
		TightBelowM:     wire.Metres(o.TightBelowUm),
		TimeBudgetS:     budgetS,
		MaxSpacingM:     wire.Metres(o.MaxSpacingUm),
	}
}

// routePointsIn are a checked route's points in order, the joints of its legs
// once. A route that stays where it is has its point twice.
func routePointsIn(r *pb.Route) []geom.Point {
	var out []geom.Point
	for _, leg := range r.Legs {
		for _, p := range leg.Points {
			q := wire.PointIn(p)
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

func legOut(l planner.Leg) *pb.Leg {
	out := &pb.Leg{
		Kind:               pb.LegKind_LEG_KIND_OPEN,
		Points:             make([]*pb.RoutePoint, len(l.Points)),
		LengthM:            geom.Metres(l.LengthUm),
		DurationS:          l.DurationS,
		SmallestClearanceM: wire.Metres(l.SmallestUm),
		SmallestAt:         wire.PointOut(l.SmallestAt),
		SmallestSM:         geom.Metres(l.SmallestS),
		LeftRoomM:          wire.Metres(l.LeftUm),
		RightRoomM:         wire.Metres(l.RightUm),
		NearestFeature:     l.Nearest,
		SpeedCeilingMps:    l.SpeedCeiling,
		SpeedCause:         speedCauses.out(l.SpeedCause),
		BeyondSensing:      l.BeyondSensing,
	}
	if l.Tight {
		out.Kind = pb.LegKind_LEG_KIND_TIGHT
	}
	points := make([]pb.RoutePoint, len(l.Points)) // in one piece of memory
	for i := range l.Points {
		p, o := &l.Points[i], &points[i]
		o.XM, o.YM, o.HeadingRad, o.SM = geom.Metres(p.At.X), geom.Metres(p.At.Y), p.Heading, geom.Metres(p.S)
		o.ClearanceM, o.SpeedCeilingMps, o.SpeedCause = wire.Metres(p.ClearanceUm), p.SpeedCeiling, speedCauses.out(p.SpeedCause)
		out.Points[i] = o
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
		SmallestClearanceM: wire.Metres(r.SmallestUm),
		SmallestAt:         wire.PointOut(r.SmallestAt),
		Bound: &pb.Bound{
			Kind:            boundKinds.out(r.Bound.Kind),
			LowerBoundM:     geom.Metres(r.Bound.LowerUm),
			WidthBiasM:      wire.Metres(r.Bound.WidthBiasUm),
			ClearanceShortM: wire.Metres(r.Bound.ClearanceShortUm),
			OptimumWithinM:  wire.Metres(r.Bound.OptimumWithinUm),
			CutShort:        r.Bound.CutShort,
			GapShare:        r.Bound.GapShare,
		},
		ValidForS: validForS,
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
	out := &pb.Refusal{Reason: refusalReasons.out(r.Reason)}
	switch r.Reason {
	case planner.StartBlocked:
		out.Explanation = "start: " + blockedText(r.Blocked)
	case planner.GoalBlocked:
		out.Explanation = "goal: " + blockedText(r.Blocked)
	case planner.NoPassage:
		out.Explanation = bottleneckText(r.Bottleneck)
	case planner.OutOfTime:
		out.Explanation = "the time budget ran out before any route was found"
		out.RetryAfterS = retryS
	}
	if b := r.Blocked; b != nil {
		out.BlockedEnd = &pb.BlockedEnd{
			At: wire.PointOut(b.At), ClearanceM: wire.Metres(b.ClearanceUm), RequiredClearanceM: wire.Metres(b.RequiredUm),
			ClosedZone: b.ClosedZone, NearestFeature: b.Nearest,
		}
		if b.HasFree {
			out.BlockedEnd.NearestFree = wire.PointOut(b.NearestFree)
			out.BlockedEnd.DistanceM = geom.Metres(b.DistanceUm)
			out.BlockedEnd.BearingRad = b.Bearing
		}
	}
	if n := r.Bottleneck; n != nil {
		out.Bottleneck = &pb.Bottleneck{Exists: n.Exists, WidthNeededM: wire.Metres(n.NeededUm), Features: n.Features, Zone: n.Zone}
		if n.Exists {
			out.Bottleneck.At = wire.PointOut(n.At)
			out.Bottleneck.WidthM = wire.Metres(n.WidthUm)
			out.Bottleneck.WidthShortM = wire.Metres(n.WidthShortUm)
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
		return fmt.Sprintf("clearance %s m from %q, needed %s m", down(b.ClearanceUm), b.Nearest, up(b.RequiredUm))
	}
	return fmt.Sprintf("clearance %s m, needed %s m", down(b.ClearanceUm), up(b.RequiredUm))
}

func bottleneckText(n *planner.Bottleneck) string {
	switch {
	case n == nil:
		return "every way is too narrow or closed"
	case n.Zone != "":
		return fmt.Sprintf("zone %q closes the way", n.Zone)
	case !n.Exists:
		return "there is no way, however narrow"
	case n.WidthUm >= n.NeededUm:
		return fmt.Sprintf("the widest way narrows to %s m, enough for the %s m needed, but the roadmap asked for misses it; ask without roadmap and keep_roadmap_path", down(n.WidthUm), up(n.NeededUm))
	}
	return fmt.Sprintf("the widest way narrows to %s m, needed %s m", down(n.WidthUm), up(n.NeededUm))
}

// centimetre is the step of lengths in words.
const centimetre = geom.UmPerMetre / 100

// down writes what is there, in metres, rounded down to the centimetre.
func down(um int64) string {
	return fmt.Sprintf("%d.%02d", um/geom.UmPerMetre, um%geom.UmPerMetre/centimetre)
}

// up writes what is needed, in metres, rounded up to the centimetre.
func up(um int64) string { return down(um + centimetre - 1) }

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
		OffRouteUm:   wire.Um(s.OffRouteM),
	}
	if out.HintBelowUm == 0 {
		out.HintBelowUm = out.Body.PreferredUm
	}
	if out.QuietAboveUm == 0 {
		out.QuietAboveUm = max(out.HintBelowUm, min(out.HintBelowUm+defaultQuietUm, set.CapUm))
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
		State:       guideStates.out(h.State),
		Explanation: h.Explanation, ClearanceM: wire.Metres(h.ClearanceUm),
		NearestBearingRad: h.Bearing, NearestFeature: h.Nearest,
		FreeTravelM: wire.Metres(h.FreeTravelUm), SpeedCeilingMps: h.SpeedCeiling, SpeedCause: speedCauses.out(h.SpeedCause),
		ValidForS: validForS,
	}
	if j := h.Rejoin; j != nil {
		out.Rejoin = &pb.Rejoin{
			At: wire.PointOut(j.At), SM: geom.Metres(j.S), OffRouteM: geom.Metres(j.OffRoute), BearingRad: j.Bearing, Clear: j.Clear,
		}
	}
	return out
}
