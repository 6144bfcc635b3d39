package planner_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"os"
	"testing"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner"
)

// differs says how an answer in a session is not the one without.
func differs(got, want planner.ReplanAnswer) string {
	d := cmp.Diff(want.Route, got.Route) + cmp.Diff(want.Refusal, got.Refusal)
	if got.Kept != want.Kept || got.Cause != want.Cause || got.CutS != want.CutS {
		d += fmt.Sprintf("kept %t, cause %d at %v; without a session %t, %d at %v", got.Kept, got.Cause, got.CutS, want.Kept, want.Cause, want.CutS)
	}
	return d
}

// Law 8 for sessions that recall what they answered: whatever the floor, the change, the pose,
// the preference and the roadmap, the same route to the last digit, with all that is said of it.
func TestLaw8SessionRecallsWhatStillHolds(t *testing.T) {
	asked, less := 0, 0
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		var s planner.Session
		ctx := context.Background()
		first, err := sc.w.PlanIn(ctx, &s, sc.q)
		if err != nil {
			t.Fatal(err)
		}
		r, now, w := first.Route, sc.m, sc.w
		for i := 0; r != nil && i < 4; i++ {
			from := along(r, rapid.Float64Range(0, 0.6).Draw(t, "driven"))
			if rapid.IntRange(0, 3).Draw(t, "off") == 0 {
				from.X += float64(rapid.IntRange(-2000, 2000).Draw(t, "dx"))
				from.Y += float64(rapid.IntRange(-2000, 2000).Draw(t, "dy"))
			}
			after := newMapFrom(t, now, drawChange(t, now.Settings(), now))
			if w, err = w.Advance(ctx, after); err != nil {
				t.Fatal(err)
			}
			q := again(r, now, sc.q, from)
			q.SwitchShare = rapid.SampledFrom([]float64{0, 0, 0.1}).Draw(t, "share")
			got, err := w.ReplanIn(ctx, &s, q)
			if err != nil {
				t.Fatal(err)
			}
			want := replan(t, w, q)
			if d := differs(got, want); d != "" {
				t.Fatal(d)
			}
			if asked++; got.Counters.ExactChecks < want.Counters.ExactChecks {
				less++
			}
			r, now, sc.q = got.Route, after, q.Request
		}
	})
	t.Logf("%d replans, %d asked less of the floor", asked, less)
	if less == 0 {
		t.Fatal("nothing was recalled")
	}
}

// The same over many small changes, most of which leave most of the route as it was.
// WIDEBERTH_SLOW=1 tries ten times as many.
func TestLaw8SessionRecallsAmongClutter(t *testing.T) {
	const seed = 79
	t.Logf("seed %d", seed)
	floors := 150
	if os.Getenv("WIDEBERTH_SLOW") != "" {
		floors *= 10
	}
	asked, less, kept := 0, 0, 0
	for k := range floors {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := cluttered(t, rng)
		w := newWorld(t, m)
		bd := body(0.05 + float64(rng.IntN(3))*0.1)
		bd.MarginUm = int64(rng.IntN(2) * 30_000)
		bd.PreferredUm = bd.Required() + int64(rng.IntN(2)*rng.IntN(200_000))
		bd.SensingUm = int64(rng.IntN(3)) * 1_500_000
		spot := func() planner.Pose { return pose(0.2+7.6*rng.Float64(), 0.2+7.6*rng.Float64()) }
		q := shortest(bd, spot(), spot())
		q.Options.TightBelowUm = []int64{0, bd.PreferredUm, 600_000}[rng.IntN(3)]
		q.Options.MaxSpacingUm = []int64{0, 0, 700_000}[rng.IntN(3)]
		if k%2 == 0 {
			q.Options.Preference, q.Options.TightWeight = planner.Preference(rng.IntN(3)), float64(rng.IntN(2))
		}
		var s planner.Session
		a, err := w.PlanIn(context.Background(), &s, q)
		if err != nil {
			t.Fatal(err)
		}
		for range 10 {
			if a.Route == nil {
				break
			}
			old, from := m, along(a.Route, rng.Float64()*rng.Float64()*rng.Float64())
			m = newMapFrom(t, m, clutterChange(rng, m))
			if w, err = w.Advance(context.Background(), m); err != nil {
				t.Fatal(err)
			}
			r := again(a.Route, old, q, from)
			q = r.Request
			got, err := w.ReplanIn(context.Background(), &s, r)
			if err != nil {
				t.Fatal(err)
			}
			want := replan(t, w, r)
			if d := differs(got, want); d != "" {
				t.Fatalf("floor %d: %s", k, d)
			}
			a = got.Answer
			asked++
			if got.Counters.ExactChecks < want.Counters.ExactChecks {
				less++
			}
			if got.Kept {
				kept++
			}
		}
	}
	t.Logf("%d replans, %d kept, %d asked less of the floor", asked, kept, less)
	if less < asked/4 {
		t.Errorf("%d replans, %d asked less of the floor: want a quarter", asked, less)
	}
}

// The same in halls and offices, where a route is long and most changes are far from it, for
// robots that drive on between changes. WIDEBERTH_SLOW=1 tries ten times as many.
func TestLaw8SessionRecallsInHalls(t *testing.T) {
	const seed = 80
	t.Logf("seed %d", seed)
	routes := 40
	if os.Getenv("WIDEBERTH_SLOW") != "" {
		routes *= 10
	}
	for _, i := range []int{0, 1, 5} {
		hall := benchFloors[i]
		first, err := hall.make()
		if err != nil {
			t.Fatal(err)
		}
		rng := rand.New(rand.NewPCG(seed, uint64(i)))
		whole := newWorld(t, first)
		s := first.Settings()
		asked, less := 0, 0
		for range routes {
			bd := body(hall.radius)
			bd.PreferredUm, bd.SensingUm = 600_000, int64(rng.IntN(3))*4_000_000
			spot := func() planner.Pose {
				return planner.Pose{At: s.Vertex(10+rng.IntN(s.Columns-20), 10+rng.IntN(s.Rows-20))}
			}
			q := shortest(bd, spot(), spot())
			q.Options.TightBelowUm, q.Options.MaxSpacingUm = int64(rng.IntN(3))*600_000, int64(rng.IntN(2))*700_000
			if i != 1 && rng.IntN(3) == 0 { // Voronoi edges of a turned hall take long
				q.Options.Preference, q.Options.TightWeight = planner.Balanced, 1
			}
			var session planner.Session
			m, w := first, whole
			a, err := w.PlanIn(context.Background(), &session, q)
			if err != nil {
				t.Fatal(err)
			}
			for range 6 {
				if a.Route == nil {
					break
				}
				old, from := m, along(a.Route, 0.3*rng.Float64())
				x, y := rng.IntN(s.Columns), rng.IntN(s.Rows)
				if rng.IntN(3) == 0 { // near the route
					x, y, _ = s.CellAt(along(a.Route, rng.Float64()))
					x, y = x+rng.IntN(80)-40, y+rng.IntN(80)-40
				}
				r := floor.CellRect{X0: x, Y0: y, X1: x + 1 + rng.IntN(20), Y1: y + 1 + rng.IntN(20)}.Intersect(s.AllCells())
				if r.IsEmpty() {
					continue
				}
				m = newMapFrom(t, m, []floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupancy(rng.IntN(2)), Rect: r}})
				if w, err = w.Advance(context.Background(), m); err != nil {
					t.Fatal(err)
				}
				ask := again(a.Route, old, q, from)
				q = ask.Request
				got, err := w.ReplanIn(context.Background(), &session, ask)
				if err != nil {
					t.Fatal(err)
				}
				want := replan(t, w, ask)
				if d := differs(got, want); d != "" {
					t.Fatalf("%s: %s", hall.name, d)
				}
				a = got.Answer
				if asked++; got.Counters.ExactChecks < want.Counters.ExactChecks {
					less++
				}
			}
		}
		t.Logf("%s: %d replans, %d asked less of the floor", hall.name, asked, less)
		if less < asked/2 {
			t.Errorf("%s: %d replans, %d asked less of the floor: want half", hall.name, asked, less)
		}
	}
}
