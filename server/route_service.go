package server

import (
	"context"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// routeService carries out RouteService. Requests reach it checked.
type routeService struct {
	pb.UnimplementedRouteServiceServer
	s *Server
}

// asked is a plan request as the planner takes it, with what the answer needs
// beside it.
type asked struct {
	planner.Request
	budget  budget
	options *pb.PlanOptions // with defaults filled in
}

// setOptions fills in the options' defaults and checks them against the floor; p is
// where they came from. The body is set before.
func (q *asked) setOptions(s *Server, o *pb.PlanOptions, set floor.Settings, p *field, f *faults) {
	q.Options = optionsIn(o, q.Body)
	f.optionsOnFloor(p, q.Options, set, o)
	q.budget = s.budget(o)
	q.options = optionsOut(q.Options, q.budget.Seconds())
}

func (v routeService) Plan(ctx context.Context, r *pb.PlanRequest) (*pb.PlanResponse, error) {
	snap, about, err := v.s.resolve(ctx, r.Floor, r.Version)
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	note(ctx, r.Floor, snap.Info.Version)
	set := snap.Map.Settings()
	var f faults
	var q asked
	q.Body = bodyIn(r.Body, set)
	f.bodyOnFloor(root.at("body"), q.Body, set)
	q.setOptions(v.s, r.Options, set, root.at("options"), &f)
	if q.Start, err = placeOn(r.Start, snap, root.at("start"), &f); err == nil {
		q.Goal, err = placeOn(r.Goal, snap, root.at("goal"), &f)
	}
	if f.any() {
		err = f.err()
	}
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	var answer planner.Answer
	session := new(planner.Session)
	err = v.s.search(ctx, snap, q.budget, &answer, func(ctx context.Context, w *planner.World) (err error) {
		answer, err = w.PlanIn(ctx, session, q.Request)
		return err
	})
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	out := &pb.PlanResponse{Stamp: stampOut(snap.Info), Counters: countersOut(answer.Counters)}
	if answer.Route != nil {
		route := v.route(snap, q, answer.Route)
		v.s.kept.keep(route.RouteId, session)
		out.Outcome = &pb.PlanResponse_Route{Route: route}
	} else {
		out.Outcome = &pb.PlanResponse_Refusal{Refusal: refusalOut(answer.Refusal, retryOutOfTime.Seconds())}
	}
	return out, nil
}

// route puts a route on the wire and holds its version.
func (v routeService) route(snap *mapstore.Snapshot, q asked, r *planner.Route) *pb.Route {
	v.s.holds.keep(snap, v.s.holdFor())
	return routeOut(r, snap.Info, q.Body, q.options, routeID(snap.Info, q.Request, r), v.s.cfg.RouteValidFor.Seconds())
}

func (v routeService) Replan(ctx context.Context, r *pb.ReplanRequest) (*pb.ReplanResponse, error) {
	id := r.Previous.CheckedAgainst.Floor
	snap, about, err := v.s.resolve(ctx, id, r.Version)
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	note(ctx, id, snap.Info.Version)
	old, err := v.s.old(ctx, r.Previous.CheckedAgainst)
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	q, request, err := v.replanRequest(r, snap)
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	if old != nil {
		request.Old = old.Map
	}
	var answer planner.ReplanAnswer
	driven := r.Previous.RouteId
	session := v.s.kept.take(driven)
	err = v.s.search(ctx, snap, q.budget, &answer.Answer, func(ctx context.Context, w *planner.World) (err error) {
		answer, err = w.ReplanIn(ctx, session, request)
		return err
	})
	if err != nil {
		v.s.kept.keep(driven, session)
		return nil, statusOf(ctx, err, about)
	}
	out := &pb.ReplanResponse{
		Stamp: stampOut(snap.Info), Cause: replanCauses.out(answer.Cause), Counters: countersOut(answer.Counters),
	}
	if answer.Cause == planner.Cut {
		out.CutSM = geom.Metres(answer.CutS)
	}
	switch {
	case answer.Route == nil:
		v.s.kept.keep(driven, session)
		out.Result = pb.ReplanResult_REPLAN_RESULT_REFUSED
		out.Outcome = &pb.ReplanResponse_Refusal{Refusal: refusalOut(answer.Refusal, retryOutOfTime.Seconds())}
		return out, nil
	case answer.Kept:
		out.Result = pb.ReplanResult_REPLAN_RESULT_KEPT
	case answer.Mended:
		out.Result = pb.ReplanResult_REPLAN_RESULT_MENDED
	default:
		out.Result = pb.ReplanResult_REPLAN_RESULT_NEW
	}
	route := v.route(snap, q, answer.Route)
	v.s.kept.keep(route.RouteId, session)
	out.Outcome = &pb.ReplanResponse_Route{Route: route}
	return out, nil
}

// replanRequest fills in from the old route what the request leaves out, and
// checks it all against the floor.
func (v routeService) replanRequest(r *pb.ReplanRequest, snap *mapstore.Snapshot) (q asked, out planner.ReplanRequest, err error) {
	set := snap.Map.Settings()
	var f faults
	out = planner.ReplanRequest{
		Previous:    routePointsIn(r.Previous),
		OldBody:     bodyIn(r.Previous.Body, set),
		OldGoal:     poseIn(r.Previous.Goal),
		OldBound:    boundKinds.in(r.Previous.GetBound().GetKind()),
		SwitchShare: r.SwitchShare,
	}
	f.bodyOnFloor(root.at("previous").at("body"), out.OldBody, set)
	out.OldOptions = optionsIn(r.Previous.Options, out.OldBody)
	f.routeOnFloor(root.at("previous"), r.Previous, set)

	q.Body = out.OldBody
	if r.Body != nil {
		q.Body = bodyIn(r.Body, set)
		f.bodyOnFloor(root.at("body"), q.Body, set)
	}
	if r.Options != nil {
		q.setOptions(v.s, r.Options, set, root.at("options"), &f)
	} else {
		q.setOptions(v.s, r.Previous.Options, set, root.at("previous").at("options"), &f)
	}
	q.Start = poseIn(r.Pose)
	f.poseOnFloor(root.at("pose"), q.Start.At, set)
	if r.Goal == nil {
		q.Goal = out.OldGoal
		f.poseOnFloor(root.at("previous").at("goal"), q.Goal.At, set)
	} else if q.Goal, err = placeOn(r.Goal, snap, root.at("goal"), &f); err != nil && !f.any() {
		return q, out, err
	}
	out.Request = q.Request
	return q, out, f.err()
}

func isStation(t *floor.Feature) bool { return t.Kind == floor.Station }
