package planner_test

import (
	"context"
	"testing"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// Law 8 for sessions: a session answers as its absence does, whatever it answered before; and
// never dearer than a fresh plan.
func TestLaw8SessionAnswersAsAnyOther(t *testing.T) {
	mended := 0
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		sc.q.Options.Roadmap = rapid.SampledFrom([]planner.Roadmap{planner.Grid4, planner.Grid8}).Draw(t, "grid")
		sc.q.Options.Preference %= planner.Clearest // which goes by no grid
		var s planner.Session
		ctx := context.Background()
		first, err := sc.w.PlanIn(ctx, &s, sc.q)
		if err != nil {
			t.Fatal(err)
		}
		r, now, w := first.Route, sc.m, sc.w
		for i := 0; r != nil && i < 4; i++ {
			from := along(r, rapid.Float64Range(0, 0.6).Draw(t, "driven"))
			change := drawChange(t, now.Settings(), now)
			if rapid.Bool().Draw(t, "blocked") { // a disc ahead, and nothing else
				on := along(r, rapid.Float64Range(0.6, 1).Draw(t, "at"))
				change = []floor.Edit{disc("d", geom.Metres(on.X), geom.Metres(on.Y), geom.Metres(float64(now.Settings().ResolutionUm)))}
			}
			after := newMapFrom(t, now, change)
			if w, err = w.Advance(ctx, after); err != nil {
				t.Fatal(err)
			}
			q := again(r, now, sc.q, from)
			got, err := w.ReplanIn(ctx, &s, q)
			if err != nil {
				t.Fatal(err)
			}
			want := replan(t, newWorld(t, after), q)
			if d := cmp.Diff(want.Route, got.Route); d != "" || got.Kept != want.Kept || got.Cause != want.Cause || got.CutS != want.CutS {
				t.Fatalf("without a session kept %t, cause %d; with it kept %t, cause %d:\n%s", want.Kept, want.Cause, got.Kept, got.Cause, d)
			}
			if d := cmp.Diff(want.Refusal, got.Refusal); d != "" {
				t.Fatal(d)
			}
			if fresh := plan(t, w, q.Request); fresh.Route != nil && got.Route.CostUm > fresh.Route.CostUm*(1+1e-9) {
				t.Fatalf("costs %f, a fresh plan %f", got.Route.CostUm, fresh.Route.CostUm)
			}
			if got.Mended {
				if mended++; got.Kept || want.Mended {
					t.Fatalf("mended, and kept %t, mended without a session %t", got.Kept, want.Mended)
				}
			}
			r, now, sc.q = got.Route, after, q.Request
		}
	})
	if mended == 0 {
		t.Fatal("nothing was mended")
	}
}

// A pallet is put down ahead of a robot half across a hall: mending takes a small part
// of the work of planning.
func TestMendingIsLessWork(t *testing.T) {
	before := newMap(t, settings(0, 0, 30, 20, 0.05), solidBox("rack", 4, 5, 28, 6), solidBox("shelf", 2, 12, 26, 13))
	w := newWorld(t, before)
	q := shortest(body(0.3), pose(2, 2), pose(28, 18))
	q.Options.Roadmap = planner.Grid8
	var s planner.Session
	a, err := w.PlanIn(context.Background(), &s, q)
	if err != nil || a.Route == nil {
		t.Fatal(a, err)
	}
	if s.Bytes() == 0 {
		t.Fatal("an empty session after a search")
	}
	at := along(a.Route, 0.3)
	after := newMapFrom(t, before, []floor.Edit{solidBox("pallet", at.X/m-0.4, at.Y/m-0.6, at.X/m+0.4, at.Y/m+0.6)})
	next, err := w.Advance(context.Background(), after)
	if err != nil {
		t.Fatal(err)
	}
	r := again(a.Route, before, q, along(a.Route, 0.2))
	got, err := next.ReplanIn(context.Background(), &s, r)
	if err != nil || !got.Mended || got.Kept || got.Cause != planner.Cut {
		t.Fatalf("%+v, %v", got, err)
	}
	fresh := replan(t, next, r)
	if 4*got.Counters.Expanded > fresh.Counters.Expanded {
		t.Errorf("%d nodes opened, %d without a session", got.Counters.Expanded, fresh.Counters.Expanded)
	}
}
