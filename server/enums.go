package server

import (
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// twins are values of ours, each with the contract's value of the same meaning.
// What is not in the list is the zero value on the other side.
type twins[O, W comparable] []struct {
	ours O
	wire W
}

func (t twins[O, W]) out(v O) (w W) {
	for _, p := range t {
		if p.ours == v {
			return p.wire
		}
	}
	return w
}

func (t twins[O, W]) in(v W) (o O) {
	for _, p := range t {
		if p.wire == v {
			return p.ours
		}
	}
	return o
}

var (
	versionKinds = twins[journal.Kind, pb.VersionKind]{
		{journal.Created, pb.VersionKind_VERSION_KIND_CREATED},
		{journal.Patched, pb.VersionKind_VERSION_KIND_PATCHED},
		{journal.Restored, pb.VersionKind_VERSION_KIND_RESTORED},
	}
	preferences = twins[planner.Preference, pb.Preference]{
		{planner.Balanced, pb.Preference_PREFERENCE_BALANCED},
		{planner.Shortest, pb.Preference_PREFERENCE_SHORTEST},
		{planner.Clearest, pb.Preference_PREFERENCE_CLEAREST},
	}
	roadmaps = twins[planner.Roadmap, pb.Roadmap]{
		{planner.Auto, pb.Roadmap_ROADMAP_UNSPECIFIED},
		{planner.Grid4, pb.Roadmap_ROADMAP_GRID4},
		{planner.Grid8, pb.Roadmap_ROADMAP_GRID8},
		{planner.Quadtree, pb.Roadmap_ROADMAP_QUADTREE},
		{planner.ConvexCells, pb.Roadmap_ROADMAP_CONVEX_CELLS},
		{planner.VisibilityGraph, pb.Roadmap_ROADMAP_VISIBILITY_GRAPH},
		{planner.MeadowMap, pb.Roadmap_ROADMAP_MEADOW_MAP},
		{planner.VoronoiGraph, pb.Roadmap_ROADMAP_VORONOI_GRAPH},
		{planner.ExactCells, pb.Roadmap_ROADMAP_EXACT_CELLS},
	}
	speedCauses = twins[planner.SpeedCause, pb.SpeedCause]{
		{planner.CauseBody, pb.SpeedCause_SPEED_CAUSE_BODY},
		{planner.CauseZone, pb.SpeedCause_SPEED_CAUSE_ZONE},
		{planner.CauseRoom, pb.SpeedCause_SPEED_CAUSE_ROOM},
	}
	boundKinds = twins[planner.BoundKind, pb.BoundKind]{
		{planner.RoadmapOptimum, pb.BoundKind_BOUND_KIND_ROADMAP_OPTIMUM},
		{planner.AtMostRoadmapOptimum, pb.BoundKind_BOUND_KIND_AT_MOST_ROADMAP_OPTIMUM},
		{planner.Straight, pb.BoundKind_BOUND_KIND_STRAIGHT},
		{planner.AnyAngleOptimum, pb.BoundKind_BOUND_KIND_ANY_ANGLE_OPTIMUM},
	}
	refusalReasons = twins[planner.RefusalReason, pb.RefusalReason]{
		{planner.StartBlocked, pb.RefusalReason_REFUSAL_REASON_START_BLOCKED},
		{planner.GoalBlocked, pb.RefusalReason_REFUSAL_REASON_GOAL_BLOCKED},
		{planner.NoPassage, pb.RefusalReason_REFUSAL_REASON_NO_PASSAGE},
		{planner.OutOfTime, pb.RefusalReason_REFUSAL_REASON_OUT_OF_TIME},
	}
	replanCauses = twins[planner.ReplanCause, pb.ReplanCause]{
		{planner.Cut, pb.ReplanCause_REPLAN_CAUSE_CUT},
		{planner.Cheaper, pb.ReplanCause_REPLAN_CAUSE_CHEAPER},
		{planner.QuestionChanged, pb.ReplanCause_REPLAN_CAUSE_QUESTION_CHANGED},
		{planner.OffRoute, pb.ReplanCause_REPLAN_CAUSE_OFF_ROUTE},
		{planner.VersionGone, pb.ReplanCause_REPLAN_CAUSE_VERSION_GONE},
	}
	guideStates = twins[planner.GuideState, pb.GuideState]{
		{planner.Hold, pb.GuideState_GUIDE_STATE_HOLD},
		{planner.Clear, pb.GuideState_GUIDE_STATE_CLEAR},
		{planner.Hinting, pb.GuideState_GUIDE_STATE_HINTING},
		{planner.ReplanAdvised, pb.GuideState_GUIDE_STATE_REPLAN_ADVISED},
	}
)
