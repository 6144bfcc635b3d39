package planner

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"runtime/debug"
	"slices"
	"sync"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// MaxPairs is how many pairs of a start and a goal one ManyRequest may have.
const MaxPairs = 1000

// ManyRequest asks for routes for Body from each of Starts to each of Goals.
type ManyRequest struct {
	Body          Body
	Starts, Goals []Pose
	Options       Options
}

// PairAnswer is the answer for the pair of Starts[Start] and Goals[Goal].
type PairAnswer struct {
	Start, Goal int
	// Answer has the route or refusal that Plan gives for the pair. Its refusal may be
	// shared with other pairs: do not change it. Its counters leave out the test of the
	// ends; those of a blocked end's explanation are in one of the pairs it is in.
	Answer
}

// ManyRun is how pairs are worked on.
type ManyRun struct {
	// Workers is how many pairs are worked on at once, at least one.
	Workers int
	// Enter is waited for before each pair, and leave called after it. The pair is
	// planned under the context that it gives, which must be made from the one it
	// was given. nil lets every pair in.
	Enter func(context.Context) (ctx context.Context, leave func(), err error)
	// Emit takes an answer. It is never called twice at once, and no lane is held
	// meanwhile. Its error ends the run.
	Emit func(PairAnswer) error
}

// PlanMany answers every pair of a start and a goal once, as Plan would: the same
// routes and refusals, bit for bit. Pairs are taken up nearest first, by straight
// distance, then by start and goal; with one worker they are emitted in that order,
// with several as they are found.
//
// The ends are shared: each is tested once, and a blocked one is explained once, its
// pairs answered together as the nearest of them. So is what a World keeps for a body
// (free cells, their regions and meshes). The searches are not: the one path that
// Plan takes among those that cost the same depends on its goal.
//
// When ctx ends for ErrTimeBudget, the rest of the pairs is emitted with OutOfTime and
// the error is nil; so is a single pair when its own context does. The error is ctx's
// otherwise, Enter's, Emit's, a *RequestError or a *CheckError; then no more pairs are
// emitted. Nothing of the run goes on when it returns.
func (w *World) PlanMany(ctx context.Context, q ManyRequest, run ManyRun) error {
	if err := q.validate(w.m.Settings()); err != nil {
		return err
	}
	jobs, err := w.jobs(q)
	if err != nil {
		return err
	}
	ctx, stop := context.WithCancel(ctx)
	defer stop()
	m := &many{w: w, q: q, run: run, jobs: jobs, stop: stop}
	var workers sync.WaitGroup
	for range max(1, min(run.Workers, len(jobs))) {
		workers.Go(func() { m.work(ctx) })
	}
	workers.Wait()
	if m.panicked != "" {
		panic(m.panicked) // where the caller can recover from it
	}
	return m.err
}

func (q *ManyRequest) validate(s floor.Settings) error {
	var f fault
	f.body(q.Body, s)
	f.check(len(q.Starts) > 0, "starts", "empty: want 1 or more")
	f.check(len(q.Goals) > 0, "goals", "empty: want 1 or more")
	f.check(len(q.Starts) <= MaxPairs && len(q.Goals) <= MaxPairs && len(q.Starts)*len(q.Goals) <= MaxPairs,
		"goals", "%d starts with %d goals: want at most %d pairs", len(q.Starts), len(q.Goals), MaxPairs)
	for i, p := range q.Starts {
		f.pose(fmt.Sprintf("starts[%d].pose", i), p)
	}
	for i, p := range q.Goals {
		f.pose(fmt.Sprintf("goals[%d].pose", i), p)
	}
	f.options(q.Options, s)
	return f.error()
}

// request is the question of one pair.
func (q *ManyRequest) request(p pair) Request {
	return Request{Body: q.Body, Start: q.Starts[p.start], Goal: q.Goals[p.goal], Options: q.Options}
}

// pair is a start and a goal, and how far apart they are.
type pair struct {
	start, goal int
	dist        float64
}

// end is whether an end can be stood on.
type end struct {
	stands bool
	zone   *floor.Feature // closed; nil when clearance is the cause
}

// job is one pair to plan for, or all pairs that one blocked end is the cause of.
type job struct {
	pairs   []pair
	blocked *end
	reason  RefusalReason // of blocked
}

// jobs tests the ends and puts what there is to do in order.
func (w *World) jobs(q ManyRequest) ([]*job, error) {
	t, err := w.task(q.request(pair{}))
	if err != nil {
		return nil, err
	}
	test := func(poses []Pose) []*end {
		ends := make([]*end, len(poses))
		for i, p := range poses {
			ends[i] = new(end)
			ends[i].stands, ends[i].zone = t.j.Stands(p.At)
		}
		return ends
	}
	starts, goals := test(q.Starts), test(q.Goals)
	pairs := make([]pair, 0, len(starts)*len(goals))
	for s := range starts {
		for g := range goals {
			pairs = append(pairs, pair{s, g, geom.Dist(q.Starts[s].At, q.Goals[g].At)})
		}
	}
	slices.SortFunc(pairs, func(a, b pair) int {
		return cmp.Or(cmp.Compare(a.dist, b.dist), a.start-b.start, a.goal-b.goal)
	})
	var jobs []*job
	known := map[*end]*job{}
	for _, p := range pairs {
		j := &job{}
		if s := starts[p.start]; !s.stands { // as in Plan, the start comes first
			j.blocked, j.reason = s, StartBlocked
		} else if g := goals[p.goal]; !g.stands {
			j.blocked, j.reason = g, GoalBlocked
		}
		if j.blocked != nil {
			if first, ok := known[j.blocked]; ok {
				first.pairs = append(first.pairs, p)
				continue
			}
			known[j.blocked] = j
		}
		j.pairs = []pair{p}
		jobs = append(jobs, j)
	}
	return jobs, nil
}

// many is one run.
type many struct {
	w    *World
	q    ManyRequest
	run  ManyRun
	stop context.CancelFunc

	mu       sync.Mutex
	jobs     []*job // not taken up yet
	err      error  // the first
	panicked string

	emitting sync.Mutex
}

// next takes up a job; nil when there is none, or the run has failed.
func (m *many) next() *job {
	m.mu.Lock()
	defer m.mu.Unlock()
	if len(m.jobs) == 0 || m.err != nil || m.panicked != "" {
		return nil
	}
	j := m.jobs[0]
	m.jobs = m.jobs[1:]
	return j
}

func (m *many) work(ctx context.Context) {
	defer func() {
		if p := recover(); p != nil {
			m.mu.Lock()
			defer m.mu.Unlock()
			m.panicked = fmt.Sprintf("%v\n\n%s", p, debug.Stack())
			m.stop()
		}
	}()
	for j := m.next(); j != nil; j = m.next() {
		a, err := m.answer(ctx, j)
		for _, p := range j.pairs {
			if err == nil {
				err = m.emit(PairAnswer{Start: p.start, Goal: p.goal, Answer: a})
				a.Counters = Counters{}
			}
		}
		if err != nil {
			m.fail(err)
			return
		}
	}
}

// fail ends the run with its first error.
func (m *many) fail(err error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if m.err == nil {
		m.err = err
	}
	m.stop()
}

func (m *many) emit(a PairAnswer) error {
	m.emitting.Lock()
	defer m.emitting.Unlock()
	m.mu.Lock()
	over := m.err != nil || m.panicked != ""
	m.mu.Unlock()
	if over {
		return context.Canceled // nobody asks for it: the run has its error
	}
	return m.run.Emit(a)
}

// answer does one job.
func (m *many) answer(ctx context.Context, j *job) (Answer, error) {
	outOfTime := Answer{Refusal: &Refusal{Reason: OutOfTime}}
	spent := func() bool { return ctx.Err() != nil && errors.Is(context.Cause(ctx), ErrTimeBudget) }
	if spent() {
		return outOfTime, nil
	}
	if m.run.Enter != nil {
		inner, leave, err := m.run.Enter(ctx)
		if err != nil {
			if spent() {
				return outOfTime, nil
			}
			return Answer{}, err
		}
		defer leave()
		ctx = inner
	}
	t, err := m.w.task(m.q.request(j.pairs[0]))
	if err != nil {
		return Answer{}, err
	}
	var a Answer
	switch {
	case ctx.Err() != nil:
		err = context.Cause(ctx)
	case j.blocked != nil:
		at := t.q.Start.At
		if j.reason == GoalBlocked {
			at = t.q.Goal.At
		}
		a.Refusal = &Refusal{Reason: j.reason}
		a.Refusal.Blocked, err = t.blockedEnd(ctx, at, j.blocked.zone)
	default:
		var c *course
		if c, a, err = t.between(ctx); c != nil && err == nil {
			a, err = t.tell(ctx, c)
		}
	}
	return t.finish(ctx, a, err)
}
