package server

import (
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// Bounds on a PlanMany, from the contract's comments.
const (
	maxPairs       = planner.MaxPairs
	minManyBudgetS = 0.001
	maxManyBudgetS = 600.0
)

func checkPlanMany(r *pb.PlanManyRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.selector(root.at("version"), r.Version)
	checkGivenBody(r.Body, root.at("body"), f)
	starts, goals := checkPlaces(r.Starts, root.at("starts"), f), checkPlaces(r.Goals, root.at("goals"), f)
	if n := len(r.Starts) * len(r.Goals); starts && goals && n > maxPairs {
		f.add(root.at("goals"), "%d goals for %d starts are %d pairs, wanted at most %d", len(r.Goals), len(r.Starts), n, maxPairs)
	}
	checkOptions(r.Options, root.at("options"), f)
	enum(f, root.at("detail"), r.Detail, pb.PairDetail_name, true)
	if r.TimeBudgetS != 0 {
		f.number(root.at("time_budget_s"), r.TimeBudgetS, minManyBudgetS, maxManyBudgetS)
	}
}

// checkPlaces checks a list of ends. It says whether their number is fine.
func checkPlaces(places []*pb.Place, p *field, f *faults) bool {
	if n := len(places); n < 1 || n > maxPairs {
		f.add(p, "%d places, wanted 1 to %d", n, maxPairs)
		return false
	}
	for i, pl := range places {
		checkPlace(pl, p.item(i), f)
	}
	return true
}
