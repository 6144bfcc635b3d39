package planner

import (
	"context"
	"errors"
	"fmt"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/mask"
	"example.com/wideberth/planner/internal/pull"
	"example.com/wideberth/planner/internal/roadmap"
)

// CheckError says that the search and the independent check disagree about a route:
// a fault of this program. No route is given then.
type CheckError struct{ Problem string }

func (e *CheckError) Error() string { return "planner: route failed its check: " + e.Problem }

// Plan answers a request. The error is ctx's, a *RequestError or a *CheckError, or wraps
// roadmap.ErrTooLarge when a roadmap that the options name is; "no way" is a Refusal. When the deadline is ctx's own cause ErrTimeBudget and passes
// during the search, the best checked route known by then is given (Bound.CutShort), else
// a Refusal with OutOfTime. What is done after that deadline: when no way is known
// but the mesh for the shortest is there, 20 ms go to looking for it, and what was found is
// described and checked, which takes as long as for any route of as many points. For
// other deadlines the error is ctx's.
func (w *World) Plan(ctx context.Context, q Request) (Answer, error) {
	return w.PlanIn(ctx, nil, q)
}

// task is one request being worked on.
type task struct {
	w      *World
	q      Request
	j      *judge.Judge
	free   *mask.Mask
	levels []*mask.Mask // none where every metre costs the same
	search roadmap.Counters
	shut   roadmap.Outcome // which end is shut in, once no path was found

	session *Session // nil without
	mended  bool     // whether a path was found by repairing the session's search
	offUm   float64  // how far a replan's pose is from the old route
	past    *past    // what the session knows of the old route; nil for nothing
	notes   *notes   // of the route described last, for the session
	retold  *retold  // the route made of past last
	spare   []piece  // scratch memory of split

	stopgap *stopgap // what to answer when time runs out; nil for none
	hasty   bool     // looks for a stopgap

	over   classical   // the roadmap to search; nil for what the options say
	barred *Bottleneck // the zone that a named roadmap's way goes against
}

func (w *World) task(q Request) (*task, error) {
	if err := q.validate(w.m.Settings()); err != nil {
		return nil, err
	}
	return w.taskOf(q), nil
}

// taskOf is task for a request that is known to be valid.
func (w *World) taskOf(q Request) *task {
	b := q.Body
	t := &task{w: w, q: q, j: judge.New(w.field, w.rules, b.Required(), b.RadiusUm)}
	t.j.Ends = [2]geom.Point{q.Start.At, q.Goal.At}
	t.free = w.masks.Mask(mask.Key{Um: b.Required(), RadiusUm: b.RadiusUm, Zones: true})
	switch q.Options.Preference {
	case Balanced:
		t.j.WideUm, t.j.Weight = b.PreferredUm, q.Options.TightWeight
		if t.j.Weight > 0 {
			t.levels = []*mask.Mask{w.masks.Mask(mask.Key{Um: b.PreferredUm})}
		}
	case Clearest:
		t.j.WideUm = w.field.Cap()
	}
	return t
}

// finish fills in the counters and turns a spent time budget into a refusal.
func (t *task) finish(ctx context.Context, a Answer, err error) (Answer, error) {
	defer t.j.Release()
	var fault *CheckError // is told of even when time is up
	if err != nil && ctx.Err() != nil && !errors.As(err, &fault) {
		if !errors.Is(context.Cause(ctx), ErrTimeBudget) {
			return Answer{}, ctx.Err()
		}
		a, err = Answer{Refusal: &Refusal{Reason: OutOfTime}}, nil
	}
	if err != nil {
		return Answer{}, err
	}
	a.Counters = Counters{t.search.Expanded, t.search.Queued, t.j.Sights, t.j.Exacts}
	return a, nil
}

// refused is the refusal for an end that cannot be stood on, nil when both can.
func (t *task) refused(ctx context.Context) (*Refusal, error) {
	for _, end := range []struct {
		at     geom.Point
		reason RefusalReason
	}{{t.q.Start.At, StartBlocked}, {t.q.Goal.At, GoalBlocked}} {
		if ok, zone := t.j.Stands(end.at); !ok {
			b, err := t.blockedEnd(ctx, end.at, zone)
			return &Refusal{Reason: end.reason, Blocked: b}, err
		}
	}
	return nil, nil
}

func (t *task) plan(ctx context.Context) (Answer, error) {
	c, a, err := t.find(ctx)
	if c == nil || err != nil {
		return a, err
	}
	return t.tell(ctx, c)
}

// find looks for a way; nil when there is none, or when time ran out, for which it gives the
// answer.
func (t *task) find(ctx context.Context) (*course, Answer, error) {
	if ctx.Err() != nil {
		return nil, Answer{}, context.Cause(ctx)
	}
	if r, err := t.refused(ctx); r != nil || err != nil {
		return nil, Answer{Refusal: r}, err
	}
	return t.between(ctx)
}

// between is find between ends that can both be stood on.
func (t *task) between(ctx context.Context) (*course, Answer, error) {
	c, err := t.course(ctx)
	if err == nil && c == nil {
		var r *Refusal
		if c, r, err = t.noPassage(ctx); err == nil && r != nil {
			return nil, Answer{Refusal: r}, nil
		}
	}
	if err != nil {
		if !spent(ctx) {
			return nil, Answer{}, err
		}
		r, late := t.late(ctx)
		if r == nil && late == nil {
			late = err
		}
		return nil, Answer{Route: r}, late
	}
	return c, Answer{}, nil
}

// tell describes a way that was found, whether or not time runs out meanwhile.
func (t *task) tell(ctx context.Context, c *course) (Answer, error) {
	long, stop := lasting(ctx)
	defer stop()
	r, err := t.route(long, c)
	if err != nil {
		return Answer{}, err
	}
	return Answer{Route: r}, nil
}

// course is a way from start to goal, found but not described yet.
type course struct {
	pts  []geom.Point
	kind BoundKind
	// roadmap is the cost of the best path over the roadmap, each cell judged as a
	// whole; +Inf when none was found, 0 when the course itself is the best path.
	roadmap float64
	bias    int64 // by how much wider than needed a passage may be that was missed; 0: as on grids
}

// direct is the straight way, when it can be driven and nothing can be cheaper. Where room
// counts it must have all that is asked for.
func (t *task) direct() *course {
	s, g := t.q.Start.At, t.q.Goal.At
	if t.q.Options.KeepRoadmapPath || !t.j.Keeps(s, g, t.j.Open()) {
		return nil
	}
	return &course{pts: []geom.Point{s, g}, kind: Straight, roadmap: math.Inf(1)}
}

// course finds a way; nil when there is none, or none that what is searched can see.
func (t *task) course(ctx context.Context) (*course, error) {
	if c := t.direct(); c != nil {
		return c, nil
	}
	o := &t.q.Options
	if t.over != nil || o.classic() {
		return t.classic(ctx)
	}
	apart := false
	if t.anyAngle() {
		c, no, err := t.optimum(ctx)
		if c != nil || err != nil {
			return c, err
		}
		apart = no
	}
	if o.roomy() {
		if c, none, err := t.roomy(ctx); c != nil || none || err != nil {
			return c, err
		}
		apart = true
	}
	if apart {
		if t.shut = roadmap.Connected(t.query()); t.shut != roadmap.Found {
			return nil, nil
		}
	}
	return t.overCells(ctx)
}

// query is the search of a roadmap of cells.
func (t *task) query() *roadmap.Query {
	return &roadmap.Query{
		Frame: t.w.frame, Free: t.free, Levels: t.levels, Weight: t.j.Weight, Rules: t.w.rules,
		From: t.connect(t.q.Start.At, false), To: t.connect(t.q.Goal.At, true), Count: &t.search,
	}
}

// overCells searches a roadmap of cells; nil when there is no path over it.
func (t *task) overCells(ctx context.Context) (*course, error) {
	o := &t.q.Options
	if o.Preference == Clearest {
		return t.clearCells(ctx)
	}
	var p roadmap.Path
	var out roadmap.Outcome
	var err error
	q := t.query()
	switch o.Roadmap {
	case Quadtree:
		p, out, err = roadmap.Quadtree(ctx, q)
	case Grid4, Grid8:
		p, out, err = t.grid(ctx, q)
	default:
		p, out, err = roadmap.Grid(ctx, q, true)
	}
	if err == nil && out != roadmap.Found {
		if t.shut = out; o.Roadmap == Quadtree {
			t.shut = roadmap.Connected(q)
		}
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	pts := joined(t.q.Start.At, p.Points, t.q.Goal.At)
	c := &course{pts: pts, kind: RoadmapOptimum, roadmap: p.CostUm}
	if !o.KeepRoadmapPath {
		c.pts, err = t.straighten(ctx, pts)
		c.kind = AtMostRoadmapOptimum
	}
	return c, err
}

// clearSteps is how many clearances above the required one clearCells tries.
const clearSteps = 4

// clearCells is the shortest way over the 8-connected grid of cells that keep as much of
// what both ends have as joins them, tried in equal steps down to the required
// clearance; nil when there is none.
func (t *task) clearCells(ctx context.Context) (*course, error) {
	most := min(t.j.At(t.q.Start.At).Um, t.j.At(t.q.Goal.At).Um, t.j.Open())
	for k := clearSteps; k >= 0; k-- {
		n, j := *t, t.j.Again()
		n.j, n.q.Options.Preference = j, Shortest
		j.NeedUm += (int64(most) - t.j.NeedUm) * int64(k) / clearSteps
		j.RadiusUm, j.WideUm = max(0, j.NeedUm-t.q.Body.MarginUm), 0
		if k == 0 {
			j.NeedUm, j.RadiusUm = t.j.NeedUm, t.j.RadiusUm
		}
		n.free = t.w.masks.Mask(mask.Key{Um: j.NeedUm, RadiusUm: j.RadiusUm, Zones: true})
		c, err := n.overCells(ctx)
		j.Release()
		t.search, t.shut = n.search, n.shut
		if c != nil || err != nil {
			return c, err
		}
	}
	return nil, nil
}

// joined puts the ends to a path, dropping points that repeat.
func joined(start geom.Point, path []geom.Point, goal geom.Point) []geom.Point {
	pts := make([]geom.Point, 1, len(path)+2)
	pts[0] = start
	for _, p := range path {
		if p != pts[len(pts)-1] {
			pts = append(pts, p)
		}
	}
	if goal != pts[len(pts)-1] || len(pts) == 1 {
		pts = append(pts, goal)
	}
	return pts
}

// leastGain is what a change of the straightened path must save, in cells.
const leastGain = 1.0 / 50

// straighten makes a driven path of a roadmap's.
func (t *task) straighten(ctx context.Context, pts []geom.Point) ([]geom.Point, error) {
	return pull.Straighten(ctx, t.j, pts, float64(leastGain*t.w.frame.Res))
}

// route describes a course and has it checked.
func (t *task) route(ctx context.Context, c *course) (*Route, error) {
	if r, err := t.retell(ctx, c); r != nil || err != nil {
		return r, err
	}
	r, err := t.describe(ctx, c)
	if err != nil {
		return nil, err
	}
	return r, t.check(pointsOf(r), r.SmallestUm)
}

// check compares a way, and the smallest clearance it is said to have, with what code apart
// from search and field makes of it.
func (t *task) check(pts []geom.Point, smallestUm int64) error {
	f := t.w.check.Way(pts, t.j.NeedUm, t.q.Body.RadiusUm)
	switch {
	case f.Problem != "":
		return &CheckError{f.Problem}
	case float64(smallestUm) > f.SmallestUm+check.SlackUm:
		return &CheckError{fmt.Sprintf("smallest clearance said to be %d µm, found to be %.3f µm", smallestUm, f.SmallestUm)}
	}
	return nil
}

// pointsOf is where a route's pieces meet.
func pointsOf(r *Route) []geom.Point {
	n := 0
	for i := range r.Legs {
		n += len(r.Legs[i].Points)
	}
	pts := make([]geom.Point, 0, n)
	for i := range r.Legs {
		for k := range r.Legs[i].Points {
			if p := r.Legs[i].Points[k].At; len(pts) == 0 || p != pts[len(pts)-1] {
				pts = append(pts, p)
			}
		}
	}
	return pts
}
