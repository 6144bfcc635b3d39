package server

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// checkGivenBody checks a body that must be there.
func checkGivenBody(b *pb.Body, p *field, f *faults) {
	if b == nil {
		f.missing(p)
		return
	}
	checkBody(b, p, f)
}

func checkPlan(r *pb.PlanRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.selector(root.at("version"), r.Version)
	checkGivenBody(r.Body, root.at("body"), f)
	checkPlace(r.Start, root.at("start"), f)
	checkPlace(r.Goal, root.at("goal"), f)
	checkOptions(r.Options, root.at("options"), f)
}

func checkReplan(r *pb.ReplanRequest, f *faults) {
	f.selector(root.at("version"), r.Version)
	checkRoute(r.Previous, root.at("previous"), f)
	f.pose(root.at("pose"), r.Pose)
	if r.Goal != nil {
		checkPlace(r.Goal, root.at("goal"), f)
	}
	if r.Body != nil {
		checkBody(r.Body, root.at("body"), f)
	}
	checkOptions(r.Options, root.at("options"), f)
	f.number(root.at("switch_share"), r.SwitchShare, 0, 1)
}

func checkBody(b *pb.Body, p *field, f *faults) {
	f.text(p.at("name"), b.Name, 0, maxNameLength)
	ok := f.number(p.at("radius_m"), b.RadiusM, 0, 10)
	ok = f.number(p.at("margin_m"), b.MarginM, 0, 5) && ok
	if f.number(p.at("preferred_clearance_m"), b.PreferredClearanceM, 0, maxCapM) && ok && b.PreferredClearanceM > 0 {
		if r := requiredUm(b); geom.RadiusFromMetres(b.PreferredClearanceM) < r {
			f.add(p.at("preferred_clearance_m"), "%v, wanted the required clearance %v or more", b.PreferredClearanceM, geom.Metres(float64(r)))
		}
	}
	if b.MaxSpeedMps != 0 {
		f.number(p.at("max_speed_mps"), b.MaxSpeedMps, floor.MinSpeedMps, floor.MaxSpeedMps)
	}
	if b.BrakingMps2 != 0 {
		// Below it the advised speed ceiling would be lost in rounding.
		f.number(p.at("braking_mps2"), b.BrakingMps2, 0.001, 10)
	}
	if b.ReactionS != 0 {
		f.number(p.at("reaction_s"), b.ReactionS, 0.01, 10)
	}
	f.number(p.at("sensing_range_m"), b.SensingRangeM, 0, 1000)
}

func checkPlace(pl *pb.Place, p *field, f *faults) {
	switch w := pl.GetWhere().(type) {
	case *pb.Place_Pose:
		f.pose(p.at("pose"), w.Pose)
	case *pb.Place_Station:
		f.featureName(p.at("station"), w.Station)
	default:
		f.add(p, "not set, wanted a pose or a station")
	}
}

func checkOptions(o *pb.PlanOptions, p *field, f *faults) {
	if o == nil {
		return
	}
	enum(f, p.at("preference"), o.Preference, pb.Preference_name, true)
	enum(f, p.at("roadmap"), o.Roadmap, pb.Roadmap_name, true)
	checkMeeting(o, p, f)
	f.number(p.at("tight_weight"), o.TightWeight, 0, 100)
	f.number(p.at("tight_below_m"), o.TightBelowM, 0, maxCapM)
	if o.TimeBudgetS != 0 {
		f.number(p.at("time_budget_s"), o.TimeBudgetS, 0.001, 30)
	}
	if o.MaxSpacingM != 0 {
		f.number(p.at("max_spacing_m"), o.MaxSpacingM, 0.05, maxCoordinateM)
	}
}

// checkMeeting checks that the options go together.
func checkMeeting(o *pb.PlanOptions, p *field, f *faults) {
	clearest := o.Preference == pb.Preference_PREFERENCE_CLEAREST
	switch {
	case clearest && o.Roadmap != pb.Roadmap_ROADMAP_UNSPECIFIED:
		f.add(p.at("roadmap"), "%s, wanted none with PREFERENCE_CLEAREST", o.Roadmap)
	case o.Roadmap >= pb.Roadmap_ROADMAP_CONVEX_CELLS && o.Preference != pb.Preference_PREFERENCE_SHORTEST:
		f.add(p.at("roadmap"), "%s, wanted another or none unless with PREFERENCE_SHORTEST", o.Roadmap)
	}
	if clearest && o.KeepRoadmapPath {
		f.add(p.at("keep_roadmap_path"), "true, wanted false with PREFERENCE_CLEAREST")
	}
}

// checkRoute checks a route that is handed back as it was received: what it was
// checked against, its body, options and goal, and that its legs join.
func checkRoute(r *pb.Route, p *field, f *faults) {
	if r == nil {
		f.missing(p)
		return
	}
	checkStamp(r.CheckedAgainst, p.at("checked_against"), f)
	checkGivenBody(r.Body, p.at("body"), f)
	checkOptions(r.Options, p.at("options"), f)
	f.pose(p.at("goal"), r.Goal)
	legs := p.at("legs")
	if n := len(r.Legs); n < 1 || n > maxRouteLegs {
		f.add(legs, "%d legs, wanted 1 to %d", n, maxRouteLegs)
		return
	}
	var last *pb.RoutePoint
	total := 1 // the joints of legs count once
	for i, leg := range r.Legs {
		at := legs.item(i).at("points")
		points := leg.GetPoints()
		if len(points) < 2 {
			f.add(at, "%d points, wanted 2 or more", len(points))
			return
		}
		if total += len(points) - 1; total > maxRoutePoints {
			f.add(at, "brings the route to %d points, wanted at most %d", total, maxRoutePoints)
			return
		}
		for j, q := range points {
			if !(math.Abs(q.GetXM()) <= maxCoordinateM) {
				f.coordinate(at.item(j).at("x_m"), q.GetXM())
			}
			if !(math.Abs(q.GetYM()) <= maxCoordinateM) {
				f.coordinate(at.item(j).at("y_m"), q.GetYM())
			}
		}
		if last != nil && wire.PointIn(points[0]) != wire.PointIn(last) {
			f.add(at.item(0), "(%v, %v), wanted the last point of the leg before, (%v, %v)",
				points[0].GetXM(), points[0].GetYM(), last.GetXM(), last.GetYM())
		}
		last = points[len(points)-1]
	}
}

func checkStamp(s *pb.VersionStamp, p *field, f *faults) {
	if s == nil {
		f.missing(p)
		return
	}
	f.floorID(p.at("floor"), s.Floor)
	f.version(p.at("version"), s.Version, 1)
	ok := len(s.Digest) == digestLength
	for i := 0; ok && i < len(s.Digest); i++ {
		c := s.Digest[i]
		ok = c >= '0' && c <= '9' || c >= 'a' && c <= 'f'
	}
	if !ok {
		f.add(p.at("digest"), "%s, wanted %d lower-case hex digits", quote(s.Digest), digestLength)
	}
}

// bodyOnFloor checks what only the floor's cap can tell.
func (f *faults) bodyOnFloor(p *field, b planner.Body, set floor.Settings) {
	limit := geom.Metres(float64(set.CapUm))
	if r := b.Required(); r > set.CapUm {
		f.add(p.at("radius_m"), "radius + margin is %v, wanted at most %v (the floor's clearance_cap_m)", geom.Metres(float64(r)), limit)
		return
	}
	if b.PreferredUm > set.CapUm {
		f.add(p.at("preferred_clearance_m"), "%v, wanted at most %v (the floor's clearance_cap_m)", geom.Metres(float64(b.PreferredUm)), limit)
	}
}

// optionsOnFloor checks what only the floor's cap can tell. A threshold that came
// from a preferred clearance is that clearance's fault.
func (f *faults) optionsOnFloor(p *field, o planner.Options, set floor.Settings, asked *pb.PlanOptions) {
	if asked.GetTightBelowM() != 0 {
		f.underCap(p.at("tight_below_m"), o.TightBelowUm, set)
	}
}

// routeOnFloor faults the first point of a route that is off the floor.
func (f *faults) routeOnFloor(p *field, r *pb.Route, set floor.Settings) {
	b := set.Bounds()
	for i, leg := range r.Legs {
		for j, q := range leg.Points {
			if at := wire.PointIn(q); !b.Contains(at) {
				f.poseOnFloor(p.at("legs").item(i).at("points").item(j), at, set)
				return
			}
		}
	}
}

// underCap faults a clearance above the floor's cap.
func (f *faults) underCap(p *field, um int64, set floor.Settings) {
	if um > set.CapUm {
		f.add(p, "%v, wanted at most %v (the floor's clearance_cap_m)", geom.Metres(float64(um)), geom.Metres(float64(set.CapUm)))
	}
}

// poseOnFloor faults a pose outside the floor's bounds.
func (f *faults) poseOnFloor(p *field, at geom.Point, set floor.Settings) {
	b := set.Bounds()
	side := func(name string, v, lo, hi float64) {
		if v < lo || v > hi {
			f.add(p.at(name), "%v, wanted %v to %v (the floor's bounds)", geom.Metres(v), geom.Metres(lo), geom.Metres(hi))
		}
	}
	side("x_m", at.X, b.Min.X, b.Max.X)
	side("y_m", at.Y, b.Min.Y, b.Max.Y)
}
