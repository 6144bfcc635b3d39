package planner

import (
	"context"
	"fmt"
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// keepSlack is the relative cost by which a kept route may exceed a fresh one when no
// share is given: float64's rounding of sums, no more.
const keepSlack = 1e-9

// Replan answers a replan request. An old route that still answers the question is
// trimmed to the pose and checked on this version; it is kept, without a search, when
// nothing can be cheaper (it runs straight to the goal in the open, or it is the optimum of
// its preference and no change undercuts it), or when a fresh plan is not cheaper by more
// than SwitchShare. It is kept too when a fresh plan finds no way,
// or runs out of time, while the old route is still clear.
//
// Counters are those of everything done. CutS is given for Cut only. A refusal
// has the cause why the old route would not do.
func (w *World) Replan(ctx context.Context, q ReplanRequest) (ReplanAnswer, error) {
	return w.ReplanIn(ctx, nil, q)
}

// ReplanIn is Replan in a session, best the one that the old route was planned in.
func (w *World) ReplanIn(ctx context.Context, s *Session, q ReplanRequest) (ReplanAnswer, error) {
	past := w.recall(s, &q)
	if err := q.validate(w.m.Settings(), past != nil); err != nil {
		return ReplanAnswer{}, err
	}
	t := w.taskOf(q.Request)
	t.session, t.past = s, past
	r, err := t.replan(ctx, &q)
	if err == nil {
		t.remember(r.Route)
	}
	r.Answer, err = t.finish(ctx, r.Answer, err)
	r.Mended = t.mended && !r.Kept && r.Route != nil
	if r.Refusal != nil {
		r.Kept = false
	}
	return r, err
}

// validate checks the request, but for what a session answered before.
func (q *ReplanRequest) validate(s floor.Settings, answered bool) error {
	var f fault
	if answered {
		f.pose("start.pose", q.Request.Start)
	} else {
		if err := q.Request.validate(s); err != nil {
			return err
		}
		f.check(len(q.Previous) >= 2, "previous.legs", "%d points: want 2 or more", len(q.Previous))
		for i, p := range q.Previous {
			var one fault
			if one.pose("", Pose{At: p}); one.err != nil {
				f.pose(fmt.Sprintf("previous.legs.points[%d]", i), Pose{At: p})
			}
		}
	}
	f.check(q.SwitchShare >= 0 && q.SwitchShare <= 1, "switch_share", "%g: want 0 to 1", q.SwitchShare)
	return f.error()
}

// changed says whether the old route answered another question than where it starts.
func (q *ReplanRequest) changed() bool {
	old, now := q.OldBody, q.Request.Body
	old.Name, now.Name = "", ""
	end := q.Previous[len(q.Previous)-1]
	return old != now || q.OldGoal != q.Request.Goal || q.OldOptions != q.Request.Options ||
		geom.Dist(end, q.Request.Goal.At) > 1
}

func (t *task) replan(ctx context.Context, q *ReplanRequest) (ReplanAnswer, error) {
	var r ReplanAnswer
	var old []geom.Point
	switch {
	case q.changed():
		r.Cause = QuestionChanged
	case q.Old == nil:
		r.Cause = VersionGone
	default:
		if old, r.Cause, r.CutS = t.trim(q); old != nil && !q.Request.Options.KeepRoadmapPath {
			old = t.merged(old)
		}
	}
	if old != nil {
		c := t.direct()
		if c == nil {
			c = t.kept(ctx, q, old)
		}
		if c != nil && (c.kind != Straight || len(old) == 2) {
			route, err := t.route(ctx, c)
			r.Answer.Route, r.Kept = route, err == nil
			return r, err
		}
	}
	c, fresh, err := t.find(ctx)
	// What costs its length need not be described to be compared.
	if plain := t.j.Weight == 0 && t.q.Options.Preference != Clearest; c != nil && err == nil && (old == nil || !plain) {
		fresh, err = t.tell(ctx, c)
		c = nil
	}
	if old == nil || ctx.Err() != nil && context.Cause(ctx) != ErrTimeBudget || err != nil && ctx.Err() == nil {
		if c != nil && err == nil {
			err = context.Cause(ctx)
		}
		r.Answer = fresh
		return r, err
	}
	if kept, err := t.stays(ctx, q, old, c, fresh.Route); kept != nil || err != nil {
		r.Answer.Route, r.Kept = kept, err == nil
		return r, err
	}
	if c != nil {
		if fresh, err = t.tell(ctx, c); err != nil {
			return r, err
		}
		// The points that describing adds are rounded, which may have tipped the balance.
		if kept, err := t.stays(ctx, q, old, nil, fresh.Route); kept != nil || err != nil {
			r.Answer.Route, r.Kept = kept, err == nil
			return r, err
		}
	}
	r.Answer = fresh
	if r.Cause = Cheaper; t.offUm > t.w.frame.Res {
		r.Cause = OffRoute
	}
	return r, nil
}

// stays is the rest of the old route, described, unless what was found is better by more than
// the switching share: c when it is not described yet, else fresh, nil when there is no way
// or it is not known.
func (t *task) stays(ctx context.Context, q *ReplanRequest, old []geom.Point, c *course, fresh *Route) (*Route, error) {
	most := math.Inf(1)
	switch {
	case c != nil:
		most = lengthOf(c.pts)
	case fresh != nil:
		most = fresh.CostUm
	}
	var room, had float64 // of the fresh route and the old one, where room comes first
	if t.q.Options.Preference == Clearest && fresh != nil {
		room, had = t.roomOf(pointsOf(fresh)), t.roomOf(old)
	}
	dearer := func(cost, share float64) bool {
		share = max(share, keepSlack)
		if math.Abs(room-had) > alikeUm {
			return room > float64(had*(1+share))
		}
		return cost > float64(most*(1+share))
	}
	cost := t.costOf(old)
	if dearer(cost, q.SwitchShare) {
		return nil, nil
	}
	short := c == nil && spent(ctx) && (fresh == nil || fresh.Bound.CutShort)
	k := &course{pts: old, roadmap: math.Inf(1)}
	if !dearer(cost, 0) && !short {
		k.kind = AtMostRoadmapOptimum
	}
	route, err := t.route(context.WithoutCancel(ctx), k)
	if err != nil {
		return nil, err
	}
	if short {
		route.cutShort(0)
	}
	// The points that describing adds are rounded, which may tip the balance.
	if dearer(route.CostUm, q.SwitchShare) {
		return nil, nil
	}
	return route, nil
}

// alikeUm is how far two smallest clearances may be apart, in micrometres, and still count as
// one: points are rounded to whole micrometres.
const alikeUm = 2

func (t *task) costOf(pts []geom.Point) float64 {
	sum := 0.0
	for i := 1; i < len(pts); i++ {
		cost, _ := t.j.Weigh(pts[i-1], pts[i])
		sum += cost
	}
	return sum
}

// trim is the rest of the old route from the pose on, nil with the cause when it
// cannot be driven any more. The pose is joined to the next bend, or else to the
// nearest place of the route, by a straight piece.
func (t *task) trim(q *ReplanRequest) (pts []geom.Point, cause ReplanCause, cutS float64) {
	pose, goal := t.q.Start.At, t.q.Goal.At
	on := project(q.Previous, pose)
	t.offUm = on.off
	rest := slices.Clone(q.Previous[on.piece+1:])
	rest[len(rest)-1] = goal
	for len(rest) > 1 && rest[0] == pose {
		rest = rest[1:]
	}
	if cut, clear := t.clearOn(q.Previous, on, rest); !clear {
		return nil, Cut, cut
	}
	if pose == goal {
		return []geom.Point{pose, goal}, 0, 0
	}
	if n := t.past.place(len(q.Previous) - len(rest)); n != nil {
		t.j.Tell(*n)
	}
	if _, ok := t.j.Drive(pose, rest[0]); ok {
		return append([]geom.Point{pose}, rest...), 0, 0
	}
	for near := range rounded(on.at) {
		if near != pose && near != rest[0] && t.j.Sight(pose, near) && t.j.Sight(near, rest[0]) {
			return append([]geom.Point{pose, near}, rest...), 0, 0
		}
	}
	return nil, OffRoute, 0
}

// clearOn says whether the old route is clear from a place on it, and, when not, how
// far along it that ends.
func (t *task) clearOn(old []geom.Point, on spot, rest []geom.Point) (cutS float64, all bool) {
	a, b := old[on.piece], old[on.piece+1]
	if !t.past.holds(on.piece) && !t.j.Sight(a, b) { // else any part of it is clear, too
		if s, all := clearFor(t.j, []geom.Point{on.at, b}); !all {
			return on.s + s, false
		}
	}
	s, first := 0.0, len(old)-len(rest)
	all = true
	for i := 1; i < len(rest) && all; i++ {
		if t.past.holds(first + i - 1) {
			s += geom.Dist(rest[i-1], rest[i])
			continue
		}
		var part float64
		part, all = clearFor(t.j, rest[i-1:i+1])
		s += part
	}
	return on.s + geom.Dist(on.at, rest[0]) + s, all
}
