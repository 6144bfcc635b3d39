package planner

import (
	"context"
	"errors"
	"time"

	"example.com/wideberth/planner/anyangle"
)

// lateSearch bounds what a plan whose time budget is spent, with nothing found, still looks
// for: a shortest way on a mesh that is there.
const lateSearch = 20 * time.Millisecond

// await is get, for a task: where the structure is in the making and time is bounded, the
// task looks for a way that can be given when it runs out.
func await[K comparable, V any](ctx context.Context, t *task, s *shelf[K, V], k K) (v V, err error) {
	if ctx.Err() != nil {
		return v, context.Cause(ctx)
	}
	e := s.find(k)
	if _, bounded := ctx.Deadline(); bounded && t.stopgap == nil && !t.hasty && !e.ready() {
		t.hurry(ctx)
	}
	return s.wait(ctx, e)
}

// stopgap is a way that is given when there is no time for a better one, and a lower
// bound of what any way costs.
type stopgap struct {
	c       *course
	lowerUm float64
}

// twin is a task for the same question, with counters of its own, that waits for nothing.
func (t *task) twin() *task {
	n := *t
	n.j, n.hasty, n.session, n.stopgap = t.j.Again(), true, nil, nil
	n.search.Expanded, n.search.Queued = 0, 0
	return &n
}

// hurry looks for a stopgap: the shortest way, when its mesh is there, else a way over
// the 8-connected grid, straightened.
func (t *task) hurry(ctx context.Context) {
	if t.quick(ctx) {
		return
	}
	if t.q.Options.Roadmap == Auto {
		n := t.twin()
		defer n.j.Release()
		if c, err := n.overCells(ctx); err == nil && c != nil {
			c.kind = AtMostRoadmapOptimum
			t.stopgap = &stopgap{c: c}
		}
	}
}

// quick is hurry for what a mesh that is there knows.
func (t *task) quick(ctx context.Context) bool {
	if _, ok := t.w.ways.meshes.peek(t.needed()); !ok || t.q.Options.KeepRoadmapPath || t.q.Options.Roadmap != Auto && t.q.Options.Roadmap != ConvexCells {
		return false
	}
	n := t.twin()
	defer n.j.Release()
	c, _, err := n.optimum(ctx)
	if err != nil || c == nil {
		return false
	}
	t.stopgap = &stopgap{c: c}
	if c.kind == AnyAngleOptimum {
		t.stopgap.lowerUm = lengthOf(c.pts)
		if t.q.Options.Preference != Shortest {
			c.kind = 0
		}
	}
	return true
}

// late is the answer when the time budget ran out, nil when no way is known.
func (t *task) late(ctx context.Context) (*Route, error) {
	ctx = context.WithoutCancel(ctx)
	if t.stopgap == nil && !t.hasty {
		ctx, cancel := context.WithTimeout(ctx, lateSearch)
		t.quick(ctx)
		cancel()
	}
	if t.stopgap == nil {
		return nil, nil
	}
	r, err := t.route(ctx, t.stopgap.c)
	if err != nil {
		return nil, err
	}
	r.cutShort(t.stopgap.lowerUm)
	if t.stopgap.lowerUm > 0 {
		r.Bound.OptimumWithinUm = anyangle.DeltaUm
	}
	return r, nil
}

// cutShort says that the route was not searched for to the end. lowerUm is a lower bound of
// the cost beside the straight distance.
func (r *Route) cutShort(lowerUm float64) {
	b := &r.Bound
	b.CutShort = true
	if lower := max(b.LowerUm, lowerUm); lower > 0 {
		b.GapShare = max(0, r.CostUm/lower-1)
	}
}

// spent says whether ctx ended because the time budget did.
func spent(ctx context.Context) bool {
	return ctx.Err() != nil && errors.Is(context.Cause(ctx), ErrTimeBudget)
}

// lasting is ctx for what is done with a way that was found: it does not end with the
// time budget.
func lasting(ctx context.Context) (context.Context, func()) {
	if ctx.Done() == nil {
		return ctx, func() {}
	}
	long, cancel := context.WithCancelCause(context.WithoutCancel(ctx))
	stop := context.AfterFunc(ctx, func() {
		if cause := context.Cause(ctx); !errors.Is(cause, ErrTimeBudget) {
			cancel(cause)
		}
	})
	return long, func() { stop(); cancel(nil) }
}
