package planner_test

import (
	"context"
	"errors"
	"math"
	"reflect"
	"strings"
	"sync"
	"sync/atomic"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// pairOf names a pair of a ManyRequest.
type pairOf struct{ start, goal int }

// planMany gathers the answers of a run, in order.
func planMany(t testingT, ctx context.Context, w *planner.World, q planner.ManyRequest, run planner.ManyRun) []planner.PairAnswer {
	t.Helper()
	var got []planner.PairAnswer
	run.Emit = func(a planner.PairAnswer) error { got = append(got, a); return nil }
	if err := w.PlanMany(ctx, q, run); err != nil {
		t.Fatal(err)
	}
	seen := map[pairOf]bool{}
	for _, a := range got {
		if seen[pairOf{a.Start, a.Goal}] {
			t.Fatalf("pair %d, %d twice", a.Start, a.Goal)
		}
		seen[pairOf{a.Start, a.Goal}] = true
	}
	if len(got) != len(q.Starts)*len(q.Goals) {
		t.Fatalf("%d answers for %d starts and %d goals", len(got), len(q.Starts), len(q.Goals))
	}
	return got
}

// Every pair is answered as Plan answers it, bit for bit, however many work on it.
func TestManyIsPlanForEachPair(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		q := planner.ManyRequest{Body: sc.q.Body, Options: sc.q.Options, Starts: []planner.Pose{sc.q.Start}, Goals: []planner.Pose{sc.q.Goal}}
		// Others anywhere, so that some are blocked.
		for range rapid.IntRange(0, 2).Draw(t, "more starts") {
			q.Starts = append(q.Starts, planner.Pose{At: drawPoint(t, sc.m.Bounds(), "start")})
		}
		for range rapid.IntRange(0, 2).Draw(t, "more goals") {
			q.Goals = append(q.Goals, planner.Pose{At: drawPoint(t, sc.m.Bounds(), "goal"), Heading: 2})
		}
		for _, a := range planMany(t, t.Context(), sc.w, q, planner.ManyRun{Workers: rapid.IntRange(0, 3).Draw(t, "workers")}) {
			one := plan(t, sc.w, planner.Request{Body: q.Body, Start: q.Starts[a.Start], Goal: q.Goals[a.Goal], Options: q.Options})
			if !reflect.DeepEqual(a.Route, one.Route) || !reflect.DeepEqual(a.Refusal, one.Refusal) {
				t.Fatalf("pair %d, %d:\n%+v %+v\nwant as Plan has it\n%+v %+v", a.Start, a.Goal, a.Route, a.Refusal, one.Route, one.Refusal)
			}
			if a.Counters.Expanded != one.Counters.Expanded || a.Counters.Queued != one.Counters.Queued {
				t.Fatalf("pair %d, %d: counters %+v, Plan's are %+v", a.Start, a.Goal, a.Counters, one.Counters)
			}
		}
	})
}

// room is 10 by 10 m with a pillar about (5, 5).
func room(t testing.TB) *planner.World {
	return newWorld(t, newMap(t, settings(0, 0, 10, 10, 0.05), solidBox("pillar", 4, 4, 6, 6)))
}

// oneToMany asks from the lower left corner to goals farther and farther away, the
// farthest first; the last is in the pillar.
func oneToMany() planner.ManyRequest {
	return planner.ManyRequest{Body: body(0.3), Starts: []planner.Pose{pose(1, 1)},
		Goals: []planner.Pose{pose(9, 9), pose(1, 8), pose(3, 1), pose(5, 5)}}
}

func TestManyNearestFirst(t *testing.T) {
	w := room(t)
	var got []int
	for _, a := range planMany(t, t.Context(), w, oneToMany(), planner.ManyRun{Workers: 1}) {
		got = append(got, a.Goal)
	}
	// 2, sqrt 32, 7 and sqrt 128 m away.
	if want := []int{2, 3, 1, 0}; !reflect.DeepEqual(got, want) {
		t.Errorf("goals in order %v, want %v", got, want)
	}
}

// A blocked end is looked into once; its pairs come together.
func TestManyExplainsABlockedEndOnce(t *testing.T) {
	w := room(t)
	q := oneToMany()
	q.Starts = []planner.Pose{pose(1, 1), pose(1, 9), pose(9, 1), pose(9, 9)}
	q.Goals = []planner.Pose{pose(5, 5)}
	got := planMany(t, t.Context(), w, q, planner.ManyRun{Workers: 1})
	for i, a := range got {
		if a.Refusal == nil || a.Refusal.Reason != planner.GoalBlocked || a.Refusal.Blocked != got[0].Refusal.Blocked {
			t.Errorf("start %d: %+v, want the one explanation", a.Start, a.Refusal)
		}
		if looked := a.Counters.ExactChecks > 0; looked != (i == 0) {
			t.Errorf("answer %d took %d exact checks, want some for the first alone", i, a.Counters.ExactChecks)
		}
	}
	q.Starts[0] = pose(5, 4.5) // a blocked start goes before a blocked goal, as in Plan
	for _, a := range planMany(t, t.Context(), w, q, planner.ManyRun{}) {
		want := planner.GoalBlocked
		if a.Start == 0 {
			want = planner.StartBlocked
		}
		if a.Refusal == nil || a.Refusal.Reason != want {
			t.Errorf("start %d: %+v, want reason %v", a.Start, a.Refusal, want)
		}
	}
}

// What the time budget leaves no time for is refused as such, and nothing is left out.
func TestManyOutOfTime(t *testing.T) {
	w := room(t)
	ctx, spend := context.WithCancelCause(t.Context())
	defer spend(nil)
	entered := 0
	enter := func(ctx context.Context) (context.Context, func(), error) {
		if entered++; entered == 3 {
			spend(planner.ErrTimeBudget)
			return nil, nil, ctx.Err()
		}
		return ctx, func() {}, nil
	}
	got := planMany(t, ctx, w, oneToMany(), planner.ManyRun{Workers: 1, Enter: enter})
	for i, a := range got {
		if late := a.Refusal != nil && a.Refusal.Reason == planner.OutOfTime; late != (i >= 2) {
			t.Errorf("answer %d: %+v, want the last two out of time", i, a.Refusal)
		}
	}
	if entered != 3 {
		t.Errorf("%d pairs were let in, want none after the budget was spent", entered)
	}
	// One pair's own budget is that pair's alone.
	enter = func(ctx context.Context) (context.Context, func(), error) {
		entered++
		inner, cancel := context.WithCancelCause(ctx)
		if entered == 1 {
			cancel(planner.ErrTimeBudget)
		}
		return inner, func() { cancel(nil) }, nil
	}
	entered = 0
	for i, a := range planMany(t, t.Context(), w, oneToMany(), planner.ManyRun{Workers: 1, Enter: enter}) {
		if late := a.Refusal != nil && a.Refusal.Reason == planner.OutOfTime; late != (i == 0) {
			t.Errorf("answer %d: %+v, want the first alone out of time", i, a.Refusal)
		}
	}
}

// A run that is called off, or whose answers nobody takes, ends with that error and
// emits nothing more.
func TestManyEndsEarly(t *testing.T) {
	w := room(t)
	ctx, cancel := context.WithCancel(t.Context())
	full := errors.New("nobody listens")
	for _, c := range []struct {
		name string
		emit func() error
		want error
	}{
		{"cancelled", func() error { cancel(); return nil }, context.Canceled},
		{"not taken", func() error { return full }, full},
	} {
		n := 0
		err := w.PlanMany(ctx, oneToMany(), planner.ManyRun{Workers: 3, Emit: func(planner.PairAnswer) error { n++; return c.emit() }})
		if !errors.Is(err, c.want) {
			t.Errorf("%s: %v, want %v", c.name, err, c.want)
		}
		if c.want == full && n != 1 {
			t.Errorf("%s: %d answers emitted, want no more after the first", c.name, n)
		}
		ctx, cancel = context.WithCancel(t.Context())
	}
	cancel()
}

// As many pairs at once as there are workers; every lane is given back before its
// answer is emitted.
func TestManyWorkersAreBounded(t *testing.T) {
	w := room(t)
	q := oneToMany()
	for i := range 20 {
		q.Goals = append(q.Goals, pose(1+float64(i)*0.4, 9))
	}
	var in, most atomic.Int64
	var both sync.WaitGroup
	both.Add(2)
	var once [2]sync.Once
	enter := func(ctx context.Context) (context.Context, func(), error) {
		n := in.Add(1)
		most.Store(max(most.Load(), n))
		if n <= 2 { // wait until there are two
			once[n-1].Do(both.Done)
			both.Wait()
		}
		return ctx, func() { in.Add(-1) }, nil
	}
	planMany(t, t.Context(), w, q, planner.ManyRun{Workers: 2, Enter: enter})
	if most.Load() != 2 || in.Load() != 0 {
		t.Errorf("%d at once, %d still in; want 2 and 0", most.Load(), in.Load())
	}
	planMany(t, t.Context(), w, q, planner.ManyRun{Workers: 1, Enter: func(ctx context.Context) (context.Context, func(), error) {
		if in.Add(1) != 1 {
			t.Error("a lane is held while an answer is emitted")
		}
		return ctx, func() { in.Add(-1) }, nil
	}})
}

// A fault of the program in a worker comes out where the caller can recover from it.
func TestManyPanicsInItsCaller(t *testing.T) {
	w := room(t)
	defer func() {
		if p, _ := recover().(string); !strings.Contains(p, "a fault") {
			t.Errorf("recovered %v, want the worker's panic", p)
		}
	}()
	err := w.PlanMany(t.Context(), oneToMany(), planner.ManyRun{Workers: 2, Emit: func(planner.PairAnswer) error { panic("a fault") }})
	t.Errorf("returned %v, want a panic", err)
}

func TestManyNamesItsFaults(t *testing.T) {
	w := room(t)
	for field, edit := range map[string]func(*planner.ManyRequest){
		"starts":             func(q *planner.ManyRequest) { q.Starts = nil },
		"goals":              func(q *planner.ManyRequest) { q.Goals = make([]planner.Pose, planner.MaxPairs+1) },
		"goals[2].pose.x_m":  func(q *planner.ManyRequest) { q.Goals[2].At = geom.Point{X: math.NaN()} },
		"body.max_speed_mps": func(q *planner.ManyRequest) { q.Body.MaxSpeed = 0 },
	} {
		q := oneToMany()
		edit(&q)
		err := w.PlanMany(t.Context(), q, planner.ManyRun{Emit: func(planner.PairAnswer) error { t.Error("an answer to a bad request"); return nil }})
		var bad *planner.RequestError
		if !errors.As(err, &bad) || bad.Field != field {
			t.Errorf("%v, want a fault of %s", err, field)
		}
	}
}

// One start and 40 goals over a hall of 1024 by 1024 cells, and with 40 starts one goal
// that is blocked, as times single plans take one after the other. Two processors give
// half at best where nothing is shared.
func BenchmarkPlanMany(b *testing.B) {
	const n, count = 1024, 40
	w := newWorld(b, rackHall(b, n))
	one := hallRequest(n, planner.Auto, planner.Balanced)
	short := hallRequest(n, planner.Auto, planner.Shortest)
	var spread []planner.Pose
	for i := range count {
		spread = append(spread, pose(1+float64(i%8)*6, 1+float64(i/8)*4.2))
	}
	for _, c := range []struct {
		name    string
		q       planner.ManyRequest
		like    planner.Request
		workers int
	}{
		{"balanced, 1 worker", planner.ManyRequest{Starts: []planner.Pose{one.Start}, Goals: spread}, one, 1},
		{"balanced, 2 workers", planner.ManyRequest{Starts: []planner.Pose{one.Start}, Goals: spread}, one, 2},
		{"shortest, 2 workers", planner.ManyRequest{Starts: []planner.Pose{one.Start}, Goals: spread}, short, 2},
		{"blocked goal, 1 worker", planner.ManyRequest{Starts: spread, Goals: []planner.Pose{pose(20, 3.5)}}, one, 1},
	} {
		b.Run(c.name, func(b *testing.B) {
			c.q.Body, c.q.Options = c.like.Body, c.like.Options
			single := func() {
				for _, s := range c.q.Starts {
					for _, g := range c.q.Goals {
						if _, err := w.Plan(b.Context(), planner.Request{Body: c.q.Body, Start: s, Goal: g, Options: c.q.Options}); err != nil {
							b.Fatal(err)
						}
					}
				}
			}
			single() // the free cells are known
			begin := b.Elapsed()
			single()
			twin := b.Elapsed() - begin
			b.ResetTimer()
			for b.Loop() {
				if err := w.PlanMany(b.Context(), c.q, planner.ManyRun{Workers: c.workers, Emit: func(planner.PairAnswer) error { return nil }}); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.Elapsed())/float64(b.N)/float64(twin), "of-single-plans")
		})
	}
}
