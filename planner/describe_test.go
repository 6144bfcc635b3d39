package planner_test

import (
	"math"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// Stopping distance v·t + v²/2a: 1.5 m/s, 0.3 s, 1.0 m/s² need 1.575 m; 0.3, 0.5, 1.0
// need 0.195 m; 2.0, 0.5, 1.25 need 2.6 m (kinematics). A wall that far ahead of the body's edge
// gives back the speed.
func TestCeilingIsTheSpeedThatStops(t *testing.T) {
	for _, c := range []struct{ v, reaction, braking, d float64 }{
		{1.5, 0.3, 1.0, 1.575}, {0.3, 0.5, 1.0, 0.195}, {2.0, 0.5, 1.25, 2.6},
	} {
		w := newWorld(t, newMap(t, settings(0, 0, 20, 10, 0.05), solidBox("wall", 15, 0, 16, 9)))
		b := body(0.4)
		b.MaxSpeed, b.Reaction, b.Braking = 20, c.reaction, c.braking
		at := 15 - 0.4 - c.d
		q := shortest(b, planner.Pose{At: pt(at-3, 5)}, planner.Pose{At: pt(at, 5)})
		r := mustRoute(t, w, q)
		end := r.Legs[len(r.Legs)-1].Points
		p := end[len(end)-1] // faces the wall, heading 0
		if math.Abs(p.SpeedCeiling-c.v) > 1e-5 || p.SpeedCause != planner.CauseRoom {
			t.Errorf("%g m ahead: ceiling %.6f m/s by cause %d, want %g by room", c.d, p.SpeedCeiling, p.SpeedCause, c.v)
		}
	}
}

func TestLegsSplitWhereClearanceCrosses(t *testing.T) {
	// A gap of 2 m between two racks of 4 m length; the way runs down its middle.
	w := newWorld(t, newMap(t, settings(0, 0, 20, 10, 0.05), solidBox("low", 8, 0, 12, 4), solidBox("high", 8, 6, 12, 10)))
	q := shortest(body(0.3), planner.Pose{At: pt(2, 5)}, planner.Pose{At: pt(18, 5), Heading: 1})
	q.Options.TightBelowUm = 1_500_000
	q.Body.SensingUm = 3 * m
	r := mustRoute(t, w, q)
	if len(r.Legs) != 3 || r.Legs[0].Tight || !r.Legs[1].Tight || r.Legs[2].Tight {
		t.Fatalf("%d legs: want open, tight, open", len(r.Legs))
	}
	// 1.5 m from the racks' corners: sqrt(1.5² - 1²) before and after them.
	d := math.Sqrt(1.5*1.5 - 1)
	l := r.Legs[1]
	from, to := l.Points[0].At.X/m, l.Points[len(l.Points)-1].At.X/m
	if from > 8-d+1e-6 || from < 8-d-0.001-1e-6 || to < 12+d-1e-6 || to > 12+d+0.001+1e-6 {
		t.Errorf("tight from x = %.6f to %.6f, want %.6f to %.6f within 1 mm outward", from, to, 8-d, 12+d)
	}
	if l.SmallestUm != 1_000_000 || l.LeftUm != 1_000_000 || l.RightUm != 1_000_000 || (l.Nearest != "low" && l.Nearest != "high") {
		t.Errorf("tight leg: %+v", l)
	}
	if r.SmallestUm != 1_000_000 || r.LengthUm != 16*m || r.Bound.Kind != planner.Straight || r.Bound.LowerUm != 16*m {
		t.Errorf("route: %+v", r)
	}
	sum, s := 0.0, 0.0
	for i, l := range r.Legs {
		sum += l.DurationS
		if i > 0 && l.Points[0] != r.Legs[i-1].Points[len(r.Legs[i-1].Points)-1] {
			t.Errorf("leg %d does not begin where leg %d ends", i, i-1)
		}
		for _, p := range l.Points {
			if p.S < s {
				t.Errorf("s goes back to %f from %f", p.S, s)
			}
			s = p.S
		}
		// Sensing reaches 3 m: half way between an end of the hall and the racks, 4 m from
		// either, nothing is that near; between the racks there is.
		if l.BeyondSensing == l.Tight {
			t.Errorf("leg %d: beyond sensing is %t", i, l.BeyondSensing)
		}
	}
	if math.Abs(sum-r.DurationS) > 1e-9 || r.DurationS < 16 {
		t.Errorf("legs take %f s, the route %f s", sum, r.DurationS)
	}
	last := r.Legs[2].Points
	if p := last[len(last)-1]; p.Heading != 1 || p.At != q.Goal.At {
		t.Errorf("last point %+v", p)
	}
}

func TestBalancedKeepsAWideBerth(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 20, 10, 0.05), solidBox("rack", 8, 0, 12, 5)))
	q := shortest(body(0.3), pose(2, 2), pose(18, 2))
	q.Body.PreferredUm = 1_000_000
	q.Options.TightBelowUm = 1_000_000
	short := mustRoute(t, w, q)
	q.Options.Preference, q.Options.TightWeight = planner.Balanced, 1
	wide := mustRoute(t, w, q)
	if short.SmallestUm > 310_000 || wide.SmallestUm < 1_000_000 {
		t.Errorf("shortest keeps %d, balanced %d µm", short.SmallestUm, wide.SmallestUm)
	}
	// Taut about the rack grown by 1 m is the optimum of what is open throughout:
	// two tangents, two arcs and a side (elementary geometry), a = 8 from the corner's side.
	open := func(r float64) float64 {
		d := math.Hypot(6, 3) // start to the rack's upper corner
		return 2*(math.Sqrt(d*d-r*r)+r*(math.Atan2(3, 6)+math.Asin(r/d))) + 4
	}
	for _, c := range []struct {
		r    *planner.Route
		want float64
	}{{short, open(0.3)}, {wide, open(1)}} {
		if got := geom.Metres(c.r.LengthUm); got < c.want*(1-1e-9) || got > c.want*1.003 {
			t.Errorf("%.6f m long, the optimum is %.6f", got, c.want)
		}
	}
	if wide.CostUm != wide.LengthUm {
		t.Errorf("open throughout, yet cost %f for %f", wide.CostUm, wide.LengthUm)
	}
	// In the middle of an aisle with 0.8 m of clearance and 1 m preferred every metre counts twice.
	w = newWorld(t, newMap(t, settings(0, 0, 20, 1.6, 0.05)))
	q.Start, q.Goal = pose(2, 0.8), pose(18, 0.8)
	r := mustRoute(t, w, q)
	if math.Abs(r.CostUm-2*r.LengthUm) > 1e-9*r.LengthUm {
		t.Errorf("cost %f for %f all tight", r.CostUm, r.LengthUm)
	}
}

func TestSpeedZonesChangeTimesOnly(t *testing.T) {
	q := shortest(body(0.3), pose(2, 5), pose(18, 5))
	plain := mustRoute(t, newWorld(t, newMap(t, settings(0, 0, 20, 10, 0.05))), q)
	slow := zone("crossing", floor.SpeedLimitZone, 9, 0, 11, 10)
	slow.SpeedMps = 0.25
	r := mustRoute(t, newWorld(t, newMap(t, settings(0, 0, 20, 10, 0.05), put(&slow))), q)
	if r.LengthUm != plain.LengthUm {
		t.Errorf("length %f, without the zone %f", r.LengthUm, plain.LengthUm)
	}
	if math.Abs(r.DurationS-plain.DurationS-(2/0.25-2)) > 1e-3 {
		t.Errorf("%f s, without the zone %f s: want 6 s more", r.DurationS, plain.DurationS)
	}
	if l := r.Legs[0]; l.SpeedCeiling != 0.25 || l.SpeedCause != planner.CauseZone {
		t.Errorf("leg ceiling %f by %d", l.SpeedCeiling, l.SpeedCause)
	}
	in := 0
	for _, p := range r.Legs[0].Points {
		if p.SpeedCause == planner.CauseZone {
			in++
			if p.At.X < 9*m-1 || p.At.X > 11*m {
				t.Errorf("zone's ceiling at %v", p.At)
			}
		}
	}
	if in == 0 {
		t.Error("no point carries the zone's ceiling")
	}
}

func TestSpacing(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 20, 10, 0.05), solidBox("rack", 8, 0, 12, 5)))
	q := shortest(body(0.3), pose(2, 2), pose(18, 2))
	few := mustRoute(t, w, q)
	q.Options.MaxSpacingUm = 250_000
	r := mustRoute(t, w, q)
	ps := points(r)
	for i := 1; i < len(ps); i++ {
		if d := geom.Dist(ps[i-1], ps[i]); d > 250_000+2 {
			t.Errorf("points %d and %d are %f µm apart", i-1, i, d)
		}
	}
	if math.Abs(r.LengthUm-few.LengthUm) > 1 {
		t.Errorf("%f long, %f with few points", r.LengthUm, few.LengthUm)
	}
}

func TestStandingStill(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 10, 10, 0.05)))
	r := mustRoute(t, w, shortest(body(0.3), planner.Pose{At: pt(5, 5), Heading: 1}, planner.Pose{At: pt(5, 5), Heading: -1}))
	if r.LengthUm != 0 || r.DurationS != 0 || len(r.Legs) != 1 || len(r.Legs[0].Points) != 2 {
		t.Fatalf("%+v", r)
	}
	if p := r.Legs[0].Points; p[0].Heading != 1 || p[1].Heading != -1 {
		t.Errorf("headings %f, %f", p[0].Heading, p[1].Heading)
	}
}

func TestRequestErrorsNameTheField(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 10, 10, 0.05)))
	for field, spoil := range map[string]func(*planner.Request){
		"body.radius_m":              func(q *planner.Request) { q.Body.RadiusUm = -1 },
		"body.margin_m":              func(q *planner.Request) { q.Body.MarginUm = 5 * m },
		"body.preferred_clearance_m": func(q *planner.Request) { q.Body.PreferredUm = 6 * m },
		"body.max_speed_mps":         func(q *planner.Request) { q.Body.MaxSpeed = math.NaN() },
		"body.braking_mps2":          func(q *planner.Request) { q.Body.Braking = 0 },
		"body.reaction_s":            func(q *planner.Request) { q.Body.Reaction = 11 },
		"body.sensing_range_m":       func(q *planner.Request) { q.Body.SensingUm = -1 },
		"start.pose.x_m":             func(q *planner.Request) { q.Start.At.X = math.Inf(1) },
		"goal.pose.heading_rad":      func(q *planner.Request) { q.Goal.Heading = math.NaN() },
		"options.tight_weight":       func(q *planner.Request) { q.Options.TightWeight = 101 },
		"options.tight_below_m":      func(q *planner.Request) { q.Options.TightBelowUm = 6 * m },
		"options.max_spacing_m":      func(q *planner.Request) { q.Options.MaxSpacingUm = 1 },
	} {
		q := shortest(body(0.3), pose(2, 2), pose(8, 8))
		spoil(&q)
		_, err := w.Plan(t.Context(), q)
		e, ok := err.(*planner.RequestError)
		if !ok || e.Field != field {
			t.Errorf("%s: got %v", field, err)
		}
	}
}
