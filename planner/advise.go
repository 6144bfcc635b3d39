package planner

import (
	"fmt"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/judge"
)

// The look ahead of Advise.
const (
	// rejoinAhead is how far ahead on the route, at most, a robot is sent to rejoin it,
	// in micrometres: farther when it is off the route by more than half of that, or
	// when it covers more in rejoinSeconds.
	rejoinAhead   = 1 * geom.UmPerMetre
	rejoinSeconds = 2
	// rejoinTries is how many places up to there are looked at, farthest first.
	rejoinTries = 8
)

// Advise gives the hint for one report. It is fast enough for 20 Hz: a few distances
// and a dozen lines of sight.
//
// Every clearance has the position's spread taken off. Hold comes before
// ReplanAdvised, that before Hinting. The body does not fit when its clearance is
// below its radius: the margin is there for what the position does not know. A
// route or setup that cannot be judged (fewer than two points, numbers that are not
// finite, radii out of range) means hold.
func (w *World) Advise(s GuideSetup, r GuideReport) Hint {
	if why := s.unfit(w, &r); why != "" {
		return Hint{Explanation: why, SpeedCause: CauseRoom}
	}
	g := guide{w: w, s: &s, r: &r, j: judge.New(w.field, w.rules, s.Body.Required(), s.Body.RadiusUm)}
	defer g.j.Release()
	g.j.Ends = [2]geom.Point{r.Pose.At, s.Route[len(s.Route)-1]}
	return g.hint()
}

func (s *GuideSetup) unfit(w *World, r *GuideReport) string {
	var f fault
	b := s.Body
	b.PreferredUm = max(b.PreferredUm, b.Required()) // guiding does not need it
	f.body(b, w.m.Settings())
	f.check(len(s.Route) >= 2, "setup.route", "%d points: want 2 or more", len(s.Route))
	for _, p := range s.Route {
		f.pose("setup.route.legs.points", Pose{At: p})
	}
	f.check(s.OffRouteUm >= 0, "setup.off_route_m", "below 0")
	f.pose("report.pose", r.Pose)
	f.check(r.SpreadUm >= 0, "report.position_spread_m", "below 0")
	f.check(math.Abs(r.Speed) <= MaxSpeed, "report.speed_mps", "%g: want -%d to %d", r.Speed, MaxSpeed, MaxSpeed)
	if f.err != nil {
		return f.err.Error()
	}
	return ""
}

type guide struct {
	w *World
	s *GuideSetup
	r *GuideReport
	j *judge.Judge
}

func (g *guide) hint() Hint {
	p, b := g.r.Pose.At, g.s.Body
	n := g.j.At(p)
	if !g.w.field.Bounds().Contains(p) {
		n.Um = 0
	}
	less := func(um float64) int64 {
		return roundDown(um+roundingUm-float64(g.r.SpreadUm), g.w.field.Cap())
	}
	h := Hint{ClearanceUm: less(n.Um), Bearing: bearing(p, n.At)}
	if n.Feature != nil {
		h.Nearest = n.Feature.Name
	}
	h.FreeTravelUm = less(g.w.travel(g.j, p, g.r.Pose.Heading, b.RadiusUm, g.w.field.Cap()))
	far := g.w.travel(g.j, p, g.r.Pose.Heading, b.RadiusUm, g.w.stopping(b, math.Inf(1))) - float64(g.r.SpreadUm)
	h.SpeedCeiling, h.SpeedCause = advised(b, g.w.rules.SpeedLimit(p, p), max(0, far))

	on := project(g.s.Route, p)
	off := on.off > float64(g.s.OffRouteUm)
	h.Rejoin = g.rejoin(on, off)
	g.judge(&h, on, off)
	return h
}

// judge decides the state.
func (g *guide) judge(h *Hint, on spot, off bool) {
	b := g.s.Body
	below := g.s.HintBelowUm
	if g.r.Hinting {
		below = max(below, g.s.QuietAboveUm)
	}
	h.Hinting = off || h.ClearanceUm < below
	zone := g.w.rules.Entered(g.r.Pose.At, g.r.Pose.At, float64(b.RadiusUm))
	shut, shutAt := g.shutAhead(on)
	switch {
	case !g.w.field.Bounds().Contains(g.r.Pose.At):
		h.State, h.Explanation = Hold, "the pose is off the floor"
	case h.ClearanceUm < b.RadiusUm:
		h.State, h.Explanation = Hold, fmt.Sprintf("clearance %.3f m less than the body's radius %.3f m", metres(h.ClearanceUm), metres(b.RadiusUm))
	case zone != nil:
		h.State, h.Explanation = Hold, fmt.Sprintf("the body reaches into the closed zone %s", zone.Name)
	case shut:
		h.State, h.Explanation = Hold, fmt.Sprintf("the route ahead is shut at %.3f m along it", geom.Metres(shutAt))
	case g.r.Stale:
		h.State, h.Explanation = ReplanAdvised, "a newer version touches the rest of the route"
	case off && h.Rejoin != nil && !h.Rejoin.Clear:
		h.State, h.Explanation = ReplanAdvised, fmt.Sprintf("%.3f m off the route with no clear way back to it", geom.Metres(on.off))
	case off:
		h.State, h.Explanation = Hinting, fmt.Sprintf("%.3f m off the route", geom.Metres(on.off))
	case h.Hinting:
		h.State, h.Explanation = Hinting, fmt.Sprintf("clearance %.3f m below %.3f m", metres(h.ClearanceUm), metres(below))
	default:
		h.State, h.Explanation = Clear, "on the route, with room"
	}
	if h.State == Hold {
		h.SpeedCeiling, h.SpeedCause = 0, CauseRoom
	}
}

func metres(um int64) float64 { return geom.Metres(float64(um)) }

// shutAhead says whether the body could not drive on along the route for as long as it
// takes to stop, plus its radius, from its speed, and where along the route that
// shows. The body's radius alone counts here, as for whether it fits.
func (g *guide) shutAhead(on spot) (bool, float64) {
	b := g.s.Body
	v := math.Abs(g.r.Speed)
	reach := float64(b.RadiusUm) + geom.UmPerMetre*(float64(v*b.Reaction)+float64(v*v)/(2*b.Braking))
	end, last := ahead(g.s.Route, on.s+reach)
	j := *g.j
	j.NeedUm = b.RadiusUm
	r := g.s.Route
	j.Ends = [2]geom.Point{r[0], r[len(r)-1]}
	at, s := on.at, on.s
	for i := on.piece; i <= last; i++ {
		to := r[i+1]
		if i == last {
			to = end
		}
		if !j.Sight(r[i], r[i+1]) { // else any part of it is clear, too
			if n, all := clearFor(&j, []geom.Point{at, to}); !all {
				return true, s + n
			}
		}
		s += geom.Dist(at, to)
		at = to
	}
	return false, s
}

// rejoin is where to go back to the route: the farthest place ahead within reach that a
// clear straight piece leads to, else the nearest place of the route. It is nil
// when the robot is at the route's end.
func (g *guide) rejoin(on spot, off bool) *Rejoin {
	p := g.r.Pose.At
	rest := lengthOf(g.s.Route) - on.s
	if rest <= 0 && !off {
		return nil
	}
	reach := min(rest, max(rejoinAhead, 2*on.off, rejoinSeconds*geom.UmPerMetre*math.Abs(g.r.Speed)))
	to := func(at geom.Point, s float64, clear bool) *Rejoin {
		return &Rejoin{At: at, S: s, OffRoute: on.off, Bearing: bearing(p, at), Clear: clear}
	}
	for k := rejoinTries; k >= 0; k-- {
		s := on.s + float64(reach*float64(k))/rejoinTries
		at, _ := ahead(g.s.Route, s)
		if g.j.Sight(p, at) {
			return to(at, s, true)
		}
	}
	return to(on.at, on.s, false)
}
