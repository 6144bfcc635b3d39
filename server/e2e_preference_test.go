package server

import (
	"math"
	"testing"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// twoGaps is a hall with two gaps in its wall: one of 1.2 m near the stations' height,
// and one of 2 m above it; at version 2.
func (r *running) twoGaps() {
	r.t.Helper()
	req := create()
	req.Settings.InitialOccupancy = pb.Occupancy_OCCUPANCY_FREE
	if _, err := r.floors.CreateFloor(r.ctx(), req); err != nil {
		r.t.Fatal(err)
	}
	r.push(
		put(solidPolygon("sill", polygon(4.9, 0, 5.1, 0, 5.1, 0.4, 4.9, 0.4))),
		put(solidPolygon("pier", polygon(4.9, 1.6, 5.1, 1.6, 5.1, 3, 4.9, 3))),
		put(station("dock", 1, 1)), put(station("bench", 9, 1)),
	)
}

// crossing is how high a route passes the middle of the wall.
func crossing(r *pb.Route) float64 {
	for _, leg := range r.Legs {
		for i := 1; i < len(leg.Points); i++ {
			a, b := leg.Points[i-1], leg.Points[i]
			if a.XM <= 5 && b.XM > 5 {
				return a.YM + (b.YM-a.YM)*(5-a.XM)/(b.XM-a.XM)
			}
		}
	}
	return math.NaN()
}

// The three preferences over the wire, by figures from the drawing: shortest is the
// straight line through the lower gap; balanced goes there too while its metres below
// the preferred clearance cost little, along the middle; clearest takes the upper one
// though it is longer, along its middle at 4 m, with the 1 m beside it that the ends
// have too.
func TestPreferencesOverTheWire(t *testing.T) {
	r := start(t)
	r.twoGaps()
	ask := func(o *pb.PlanOptions) *pb.Route {
		t.Helper()
		q := toBench()
		q.Body.PreferredClearanceM = 0.7
		q.Options = o
		got := r.route(q)
		if got.Options.Preference != o.Preference || got.Bound.CutShort || got.Bound.GapShare != 0 {
			t.Errorf("%v: options %v, bound %v", o.Preference, got.Options, got.Bound)
		}
		return got
	}
	if got := ask(&pb.PlanOptions{Preference: pb.Preference_PREFERENCE_SHORTEST}); math.Abs(got.LengthM-8) > 1e-6 || math.Abs(got.CostM-8) > 1e-6 {
		t.Errorf("shortest: %v m at a cost of %v, wanted the straight 8 m", got.LengthM, got.CostM)
	}
	clearest := ask(&pb.PlanOptions{Preference: pb.Preference_PREFERENCE_CLEAREST})
	// Within what a clearance may be short by, and 1 mm, the contract's finest figure.
	if s, short := clearest.SmallestClearanceM, clearest.Bound.ClearanceShortM; s < 1-short-0.001 || s > 1 {
		t.Errorf("clearest: smallest clearance %v m (up to %v short), wanted 1 m", s, short)
	}
	if y := crossing(clearest); math.Abs(y-4) > 0.002 {
		t.Errorf("clearest passes the wall at %v m, wanted the upper gap's middle at 4 m", y)
	}
	if clearest.CostM != clearest.LengthM {
		t.Errorf("clearest costs %v, wanted its length %v", clearest.CostM, clearest.LengthM)
	}
	for _, w := range []float64{0.25, 1} {
		got := ask(&pb.PlanOptions{Preference: pb.Preference_PREFERENCE_BALANCED, TightWeight: w})
		cost := 0.0
		for _, leg := range got.Legs {
			if cost += leg.LengthM; leg.Kind == pb.LegKind_LEG_KIND_TIGHT {
				cost += w * leg.LengthM
			}
		}
		// Each end of a leg is a whole micrometre at best; there are a dozen.
		if math.Abs(got.CostM-cost) > 1e-3 {
			t.Errorf("balanced at %v: cost %v, its legs come to %v", w, got.CostM, cost)
		}
		if y := crossing(got); math.Abs(y-1) > 0.002 {
			t.Errorf("balanced at %v passes the wall at %v m, wanted the lower gap's middle at 1 m", w, y)
		}
	}
	// 100 times dearer, the few tight metres are worth the way round: by the upper gap,
	// which has the preferred clearance, it is some 3 m more.
	if y := crossing(ask(&pb.PlanOptions{Preference: pb.Preference_PREFERENCE_BALANCED, TightWeight: 100})); y < 3.7-0.002 {
		t.Errorf("balanced at 100 passes the wall at %v m, wanted the upper gap above 3.7 m", y)
	}
}

// A clearest route is kept where nothing changed, and PlanMany gives what Plan does.
func TestClearestInTheOtherCalls(t *testing.T) {
	r := start(t)
	r.twoGaps()
	q := toBench()
	q.Options = &pb.PlanOptions{Preference: pb.Preference_PREFERENCE_CLEAREST}
	route := r.route(q)
	again, err := r.routes.Replan(r.ctx(), &pb.ReplanRequest{Previous: route, Pose: route.Start})
	if err != nil {
		t.Fatal(err)
	}
	if again.Result != pb.ReplanResult_REPLAN_RESULT_KEPT || again.GetRoute().GetLengthM() > route.LengthM+1e-6 {
		t.Errorf("nothing changed: %v, %v", again.Result, again.Cause)
	}
	many := toMany()
	many.Options, many.Detail = q.Options, pb.PairDetail_PAIR_DETAIL_ROUTE
	_, answers, _ := r.many(many)
	for _, a := range answers {
		if a.StartIndex == 0 && a.GoalIndex == 0 && !proto.Equal(a.GetRoute(), route) {
			t.Errorf("PlanMany gives %v", a.GetRoute())
		}
	}
	r.push(put(solidPolygon("plug", polygon(4.9, 3, 5.1, 3, 5.1, 5, 4.9, 5))))
	again, err = r.routes.Replan(r.ctx(), &pb.ReplanRequest{Previous: route, Pose: route.Start})
	if err != nil {
		t.Fatal(err)
	}
	if again.Cause != pb.ReplanCause_REPLAN_CAUSE_CUT || math.Abs(crossing(again.GetRoute())-1) > 0.002 {
		t.Errorf("the upper gap is closed: %v %v at %v m, wanted the lower gap's middle", again.Result, again.Cause, crossing(again.GetRoute()))
	}
}

// What a spent budget leaves goes over the wire, in a route and summed up.
func TestCutShortOverTheWire(t *testing.T) {
	r := &planner.Route{Bound: planner.Bound{Kind: planner.AtMostRoadmapOptimum, CutShort: true, GapShare: 0.25}}
	out := routeOut(r, mapstore.VersionInfo{}, planner.Body{}, &pb.PlanOptions{}, "id", 1)
	for _, b := range []*pb.Bound{out.Bound, summaryOut(out).Bound} {
		if !b.CutShort || b.GapShare != 0.25 {
			t.Errorf("bound %v, wanted cut short with a gap of a quarter", b)
		}
	}
}
