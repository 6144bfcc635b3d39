package planner

import (
	"fmt"
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// RequestError says which part of a request cannot be planned with. Field is its
// path in the contract's words, e.g. "body.radius_m".
type RequestError struct{ Field, Problem string }

func (e *RequestError) Error() string { return e.Field + ": " + e.Problem }

// The limits of a request.
const (
	MaxRadiusUm     = 10 * geom.UmPerMetre
	MaxMarginUm     = 5 * geom.UmPerMetre
	MaxSensingUm    = 1000 * geom.UmPerMetre
	MaxSpeed        = 20   // m/s
	MaxBraking      = 10   // m/s²
	MinReaction     = 0.01 // s
	MaxReaction     = 10   // s
	MaxTightWeight  = 100
	MinSpacingUm    = 50_000
	MaxRoutePoints  = 100_000 // in one route; a finer spacing is refused
	maxCoordinateUm = 1 << 52 // keeps differences of coordinates exact
)

type fault struct{ err *RequestError }

func (f *fault) check(ok bool, field, format string, args ...any) {
	if f.err == nil && !ok {
		f.err = &RequestError{field, fmt.Sprintf(format, args...)}
	}
}

// error is nil, or the first fault.
func (f *fault) error() error {
	if f.err == nil {
		return nil
	}
	return f.err
}

func (f *fault) body(b Body, s floor.Settings) {
	f.check(b.RadiusUm >= 0 && b.RadiusUm <= MaxRadiusUm, "body.radius_m", "%g: want 0 to %g", geom.Metres(float64(b.RadiusUm)), geom.Metres(MaxRadiusUm))
	f.check(b.MarginUm >= 0 && b.MarginUm <= MaxMarginUm, "body.margin_m", "%g: want 0 to %g", geom.Metres(float64(b.MarginUm)), geom.Metres(MaxMarginUm))
	f.check(b.Required() <= s.CapUm, "body.margin_m", "radius plus margin is %g: want at most the floor's clearance cap, %g", geom.Metres(float64(b.Required())), geom.Metres(float64(s.CapUm)))
	f.check(b.PreferredUm >= b.Required() && b.PreferredUm <= s.CapUm, "body.preferred_clearance_m", "%g: want the required clearance, %g, up to the floor's cap, %g", geom.Metres(float64(b.PreferredUm)), geom.Metres(float64(b.Required())), geom.Metres(float64(s.CapUm)))
	f.check(b.MaxSpeed > 0 && b.MaxSpeed <= MaxSpeed, "body.max_speed_mps", "%g: want above 0, at most %d", b.MaxSpeed, MaxSpeed)
	f.check(b.Braking > 0 && b.Braking <= MaxBraking, "body.braking_mps2", "%g: want above 0, at most %d", b.Braking, MaxBraking)
	f.check(b.Reaction >= MinReaction && b.Reaction <= MaxReaction, "body.reaction_s", "%g: want %g to %d", b.Reaction, MinReaction, MaxReaction)
	f.check(b.SensingUm >= 0 && b.SensingUm <= MaxSensingUm, "body.sensing_range_m", "%g: want 0 to %g", geom.Metres(float64(b.SensingUm)), geom.Metres(MaxSensingUm))
}

func (f *fault) pose(field string, p Pose) {
	f.check(math.Abs(p.At.X) <= maxCoordinateUm, field+".x_m", "%g: want a finite number of less than 4.5e9", geom.Metres(p.At.X))
	f.check(math.Abs(p.At.Y) <= maxCoordinateUm, field+".y_m", "%g: want a finite number of less than 4.5e9", geom.Metres(p.At.Y))
	f.check(math.Abs(p.Heading) <= math.Pi, field+".heading_rad", "%g: want -pi to pi", p.Heading)
}

func (f *fault) options(o Options, s floor.Settings) {
	f.check(o.Preference <= Clearest, "options.preference", "%d: want balanced, shortest or clearest", o.Preference)
	f.check(o.Roadmap <= ExactCells, "options.roadmap", "%d: want a roadmap that there is", o.Roadmap)
	f.check(o.Roadmap < ConvexCells || o.Preference == Shortest, "options.roadmap", "convex cells, visibility graph, meadow map, Voronoi graph and exact cells: want preference shortest")
	f.check(o.Roadmap == Auto || o.Preference != Clearest, "options.roadmap", "%d: want auto for preference clearest", o.Roadmap)
	f.check(!o.KeepRoadmapPath || o.Preference != Clearest, "options.keep_roadmap_path", "true: want false for preference clearest")
	f.check(o.TightWeight >= 0 && o.TightWeight <= MaxTightWeight, "options.tight_weight", "%g: want 0 to %d", o.TightWeight, MaxTightWeight)
	f.check(o.TightBelowUm >= 0 && o.TightBelowUm <= s.CapUm, "options.tight_below_m", "%g: want 0 up to the floor's clearance cap, %g", geom.Metres(float64(o.TightBelowUm)), geom.Metres(float64(s.CapUm)))
	f.check(o.MaxSpacingUm == 0 || o.MaxSpacingUm >= MinSpacingUm, "options.max_spacing_m", "%g: want 0, or %g or more", geom.Metres(float64(o.MaxSpacingUm)), geom.Metres(MinSpacingUm))
}

func (q *Request) validate(s floor.Settings) error {
	var f fault
	f.body(q.Body, s)
	f.pose("start.pose", q.Start)
	f.pose("goal.pose", q.Goal)
	f.options(q.Options, s)
	return f.error()
}
