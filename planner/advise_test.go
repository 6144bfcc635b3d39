package planner_test

import (
	"math"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

func guideHall(t *testing.T, more ...floor.Edit) *planner.World {
	return newWorld(t, newMap(t, settings(0, 0, 20, 10, 0.05), append([]floor.Edit{solidBox("rack", 8, 0, 12, 4)}, more...)...))
}

func guideSetup() planner.GuideSetup {
	return planner.GuideSetup{
		Body:        body(0.3),
		Route:       []geom.Point{pt(2, 5), pt(18, 5)},
		HintBelowUm: 1_500_000, QuietAboveUm: 1_600_000, OffRouteUm: 300_000,
	}
}

func TestAdviseStates(t *testing.T) {
	w := guideHall(t)
	for _, c := range []struct {
		name    string
		report  planner.GuideReport
		state   planner.GuideState
		hinting bool
	}{
		{"far from all", planner.GuideReport{Pose: pose(5, 5)}, planner.Clear, false},
		{"beside the rack", planner.GuideReport{Pose: pose(10, 5)}, planner.Hinting, true},
		{"the spread counts", planner.GuideReport{Pose: pose(5, 5), SpreadUm: 1_700_000}, planner.Hinting, true},
		{"between the thresholds, quiet before", planner.GuideReport{Pose: pose(10, 5.55)}, planner.Hinting, true}, // off the route
		{"off the route with a way back", planner.GuideReport{Pose: pose(5, 8)}, planner.Hinting, true},
		{"touching the rack", planner.GuideReport{Pose: pose(10, 4.29)}, planner.Hold, true},
		{"in the rack", planner.GuideReport{Pose: pose(10, 3)}, planner.Hold, true},
		{"off the floor", planner.GuideReport{Pose: pose(-1, 5)}, planner.Hold, true},
		{"a newer version touches the rest", planner.GuideReport{Pose: pose(5, 5), Stale: true}, planner.ReplanAdvised, false},
		{"not a number", planner.GuideReport{Pose: planner.Pose{At: geom.Point{X: math.NaN()}}}, planner.Hold, false},
	} {
		h := w.Advise(guideSetup(), c.report)
		if h.State != c.state || h.Hinting != c.hinting || h.Explanation == "" {
			t.Errorf("%s: state %d hinting %t (%s), want %d, %t", c.name, h.State, h.Hinting, h.Explanation, c.state, c.hinting)
		}
		if h.State == planner.Hold && h.SpeedCeiling != 0 {
			t.Errorf("%s: held with a ceiling of %g m/s", c.name, h.SpeedCeiling)
		}
	}
}

func TestAdviseHysteresis(t *testing.T) {
	// 2 m from the rack's corner at x = 6.27, nearer as it goes on: on the line y = 5
	// clearance falls through the quiet threshold before the hint threshold.
	w, s := guideHall(t), guideSetup()
	s.Body.MaxSpeed = 0.5
	at := func(c float64) planner.Pose { return pose(8-math.Sqrt(c*c-1), 5) }
	for _, step := range []struct {
		clearance    float64
		before, want bool
	}{
		{1.55, false, false}, {1.45, false, true}, {1.55, true, true}, {1.61, true, false},
	} {
		h := w.Advise(s, planner.GuideReport{Pose: at(step.clearance), Hinting: step.before})
		if h.Hinting != step.want {
			t.Errorf("clearance %g m, hinting before %t: hinting %t", step.clearance, step.before, h.Hinting)
		}
	}
}

func TestAdviseFigures(t *testing.T) {
	w, s := guideHall(t), guideSetup()
	// Beside the rack, facing its side 1 m away.
	h := w.Advise(s, planner.GuideReport{Pose: planner.Pose{At: pt(10, 5), Heading: -math.Pi / 2}, SpreadUm: 100_000})
	if h.ClearanceUm != 900_000 || h.Nearest != "rack" || math.Abs(h.Bearing+math.Pi/2) > 1e-12 {
		t.Errorf("%+v", h)
	}
	if h.FreeTravelUm < 599_998 || h.FreeTravelUm > 600_000 {
		t.Errorf("free travel %d, want 600000: 1 m less the radius less the spread", h.FreeTravelUm)
	}
	// v = a (sqrt(t² + 2 d / a) - t) for d = 0.6 m, a = 0.5 m/s², t = 0.5 s.
	if want := 0.5 * (math.Sqrt(0.25+2*0.6/0.5) - 0.5); math.Abs(h.SpeedCeiling-want) > 1e-5 || h.SpeedCause != planner.CauseRoom {
		t.Errorf("ceiling %f by %d, want %f by room", h.SpeedCeiling, h.SpeedCause, want)
	}
}

func TestAdviseRejoin(t *testing.T) {
	s := guideSetup()
	h := guideHall(t).Advise(s, planner.GuideReport{Pose: pose(5, 6)})
	r := h.Rejoin
	if r == nil || !r.Clear || r.At.Y != 5*m || r.At.X <= 5*m || math.Abs(r.OffRoute-1*m) > 1 || r.S != r.At.X-2*m {
		t.Fatalf("rejoin %+v: want a place ahead on the route", r)
	}
	if want := math.Atan2(-1*m, r.At.X-5*m); math.Abs(r.Bearing-want) > 1e-9 {
		t.Errorf("bearing %f, want %f", r.Bearing, want)
	}
	// A wall all along between the robot and its route.
	w := guideHall(t, solidBox("wall", 0, 6, 20, 6.1))
	h = w.Advise(s, planner.GuideReport{Pose: pose(5, 8)})
	if h.State != planner.ReplanAdvised || h.Rejoin == nil || h.Rejoin.Clear || h.Rejoin.At != pt(5, 5) {
		t.Errorf("%+v %+v: want replan advised and the nearest place of the route", h, h.Rejoin)
	}
	if h := w.Advise(s, planner.GuideReport{Pose: pose(18, 5)}); h.Rejoin != nil {
		t.Errorf("rejoin %+v at the end of the route", h.Rejoin)
	}
}

func TestAdviseHoldsBeforeAShutWay(t *testing.T) {
	w := guideHall(t, solidBox("pallet", 5, 4.5, 5.5, 5.5))
	s := guideSetup()
	// 1 m/s needs 0.5 + 1 m to stop; the pallet's edge less the radius is 0.9 m ahead.
	h := w.Advise(s, planner.GuideReport{Pose: pose(3.8, 5), Speed: 1})
	if h.State != planner.Hold {
		t.Errorf("state %d (%s), want hold", h.State, h.Explanation)
	}
	if h := w.Advise(s, planner.GuideReport{Pose: pose(2.2, 5), Speed: 1}); h.State == planner.Hold {
		t.Errorf("held 2.5 m before the pallet: %s", h.Explanation)
	}
}
