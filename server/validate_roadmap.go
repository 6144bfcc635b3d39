package server

import (
	"slices"

	pb "example.com/wideberth/proto/wideberth/v1"
)

func checkShowRoadmap(r *pb.ShowRoadmapRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.selector(root.at("version"), r.Version)
	checkGivenBody(r.Body, root.at("body"), f)
	checkShown(r.Roadmap, root.at("roadmap"), f)
	if r.Area != nil {
		f.area(root.at("area"), r.Area)
	}
}

// checkShown checks that it is a roadmap that can be shown and compared.
func checkShown(k pb.Roadmap, p *field, f *faults) {
	if !slices.Contains(shownRoadmaps, k) {
		f.add(p, "%s, wanted ROADMAP_GRID4, ROADMAP_GRID8, ROADMAP_QUADTREE, ROADMAP_VISIBILITY_GRAPH, ROADMAP_MEADOW_MAP, ROADMAP_VORONOI_GRAPH or ROADMAP_EXACT_CELLS", k)
	}
}

func checkCompareRoadmaps(r *pb.CompareRoadmapsRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.selector(root.at("version"), r.Version)
	checkGivenBody(r.Body, root.at("body"), f)
	checkPlace(r.Start, root.at("start"), f)
	checkPlace(r.Goal, root.at("goal"), f)
	list := root.at("roadmaps")
	if n := len(r.Roadmaps); n > len(shownRoadmaps) {
		f.add(list, "%d, wanted at most %d", n, len(shownRoadmaps))
		return
	}
	for i, k := range r.Roadmaps {
		checkShown(k, list.item(i), f)
		if slices.Contains(r.Roadmaps[:i], k) {
			f.add(list.item(i), "%s, wanted each once", k)
		}
	}
	if r.TimeBudgetS != 0 {
		f.number(root.at("time_budget_s"), r.TimeBudgetS, 0.001, 600)
	}
}

func checkShowGrownSolids(r *pb.ShowGrownSolidsRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.selector(root.at("version"), r.Version)
	checkGivenBody(r.Body, root.at("body"), f)
}
