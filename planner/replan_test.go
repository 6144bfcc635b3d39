package planner_test

import (
	"context"
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

func replan(t testingT, w *planner.World, q planner.ReplanRequest) planner.ReplanAnswer {
	t.Helper()
	a, err := w.Replan(context.Background(), q)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// again asks what becomes of a route on another version, from a pose.
func again(r *planner.Route, old *floor.Map, q planner.Request, from geom.Point) planner.ReplanRequest {
	now := q
	now.Start.At = from
	return planner.ReplanRequest{Previous: points(r), Old: old, OldBody: q.Body, OldGoal: q.Goal, OldOptions: q.Options, OldBound: r.Bound.Kind, Request: now}
}

// along is the place a share of the way along a route, as a robot would report it.
func along(r *planner.Route, share float64) geom.Point {
	ps := points(r)
	left := share * r.LengthUm
	for i := 1; i < len(ps); i++ {
		d := geom.Dist(ps[i-1], ps[i])
		if left <= d && d > 0 {
			return geom.Point{X: math.Round(ps[i-1].X + left/d*(ps[i].X-ps[i-1].X)), Y: math.Round(ps[i-1].Y + left/d*(ps[i].Y-ps[i-1].Y))}
		}
		left -= d
	}
	return ps[len(ps)-1]
}

func TestLaw7ReplanNeverDearer(t *testing.T) {
	kept, fresh := 0, 0
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		a := plan(t, sc.w, sc.q)
		if a.Route == nil {
			return
		}
		s := sc.m.Settings()
		after := newMapFrom(t, sc.m, drawChange(t, s, sc.m))
		w, err := sc.w.Advance(context.Background(), after)
		if err != nil {
			t.Fatal(err)
		}
		from := along(a.Route, rapid.Float64Range(0, 1).Draw(t, "driven"))
		if rapid.Bool().Draw(t, "off") {
			from.X += float64(rapid.IntRange(-100_000, 100_000).Draw(t, "dx"))
			from.Y += float64(rapid.IntRange(-100_000, 100_000).Draw(t, "dy"))
		}
		q := again(a.Route, sc.m, sc.q, from)
		got := replan(t, w, q)
		want := plan(t, newWorld(t, after), q.Request)
		switch {
		case got.Route == nil && want.Route != nil:
			t.Fatalf("refused, a fresh plan costs %f", want.Route.CostUm)
		case got.Route == nil || want.Route == nil:
			return
		}
		if q.Request.Options.Preference == planner.Clearest {
			// Room comes first. Rounding to whole micrometres may take two off it.
			room, fresh := w.RoomOf(q.Request, points(got.Route)), w.RoomOf(q.Request, points(want.Route))
			if room < fresh-2 {
				t.Fatalf("%f µm of room, a fresh plan has %f", room, fresh)
			}
			if room > fresh {
				return
			}
		}
		// A pose counts as on a route up to 1.5 µm off it. Balanced and clearest may be kept as they
		// were drawn before: half a millimetre off the edges at each end, chords 3.4e-4 shorter.
		o := &q.Request.Options
		slack := 1e-9*want.Route.CostUm + 2*1.5*(1+o.TightWeight)
		if o.Preference != planner.Shortest && o.Roadmap == planner.Auto && !o.KeepRoadmapPath {
			slack = 3.4e-4*want.Route.CostUm + 2*500*(1+o.TightWeight)
		}
		if got.Route.CostUm > want.Route.CostUm+slack {
			t.Fatalf("costs %f, a fresh plan %f", got.Route.CostUm, want.Route.CostUm)
		}
		if got.Kept {
			kept++
		} else {
			fresh++
		}
	})
	t.Logf("kept %d, new %d", kept, fresh)
}

func newMapFrom(t testingT, f *floor.Map, es []floor.Edit) *floor.Map {
	t.Helper()
	if len(es) == 0 {
		return f
	}
	n, err := f.Apply(es)
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// drawChange draws what another version may differ by: clutter added and features
// taken away.
func drawChange(t *rapid.T, s floor.Settings, f *floor.Map) []floor.Edit {
	var es []floor.Edit
	for ft := range f.Features() {
		if rapid.IntRange(0, 2).Draw(t, "remove") == 0 {
			es = append(es, floor.Edit{Kind: floor.RemoveFeature, Name: ft.Name})
		}
	}
	if rapid.Bool().Draw(t, "clear") {
		es = append(es, floor.Edit{Kind: floor.ClearRect, Rect: floor.CellRect{X1: s.Columns / 2, Y1: s.Rows}})
	}
	if rapid.Bool().Draw(t, "add") {
		es = append(es, drawEdits(t, s, f.Bounds(), true)...)
	}
	return es
}

func TestReplanCauses(t *testing.T) {
	before := newMap(t, settings(0, 0, 20, 10, 0.05), solidBox("rack", 8, 2, 9, 10))
	w := newWorld(t, before)
	q := shortest(body(0.3), pose(2, 8), pose(18, 8))
	r := mustRoute(t, w, q)
	spill := newMapFrom(t, before, []floor.Edit{solidBox("spill", 13, 4, 14, 5)})
	cut, err := w.Advance(context.Background(), spill)
	if err != nil {
		t.Fatal(err)
	}
	elsewhere := newWorld(t, newMapFrom(t, before, []floor.Edit{solidBox("pallet", 15, 0.5, 16, 1)}))

	a := replan(t, elsewhere, again(r, before, q, along(r, 0)))
	if !a.Kept || a.Cause != 0 || a.Route.CostUm > r.CostUm*(1+1e-9) {
		t.Errorf("nothing near changed: %+v", a)
	}
	a = replan(t, cut, again(r, before, q, along(r, 0.1)))
	if a.Kept || a.Cause != planner.Cut || a.Route == nil {
		t.Errorf("the spill lies on the route: %+v", a)
	}
	// The route leaves the rack's corner (9, 2), grown by 0.3 m, for the goal; the spill
	// grown by 0.3 m begins at x = 12.7.
	if at := along(r, a.CutS/r.LengthUm); at.X < 12.4*m || at.X > 13*m {
		t.Errorf("cut at %v", at)
	}
	other := again(r, before, q, along(r, 0.1))
	other.Request.Goal = pose(18, 2)
	if a := replan(t, w, other); a.Cause != planner.QuestionChanged || a.Kept {
		t.Errorf("another goal: %+v", a)
	}
	gone := again(r, nil, q, along(r, 0.1))
	if a := replan(t, w, gone); a.Cause != planner.VersionGone || a.Kept {
		t.Errorf("version gone: %+v", a)
	}
	// The rack is gone: straight on is shorter.
	empty := newWorld(t, newMap(t, settings(0, 0, 20, 10, 0.05)))
	if a := replan(t, empty, again(r, before, q, along(r, 0.1))); a.Kept || a.Cause != planner.Cheaper {
		t.Errorf("the rack is gone: %+v", a)
	}
	// On the last, straight stretch nothing can be shorter: no search at all.
	a = replan(t, elsewhere, again(r, before, q, along(r, 0.9)))
	if !a.Kept || a.Route.Bound.Kind != planner.Straight || a.Counters.Expanded != 0 {
		t.Errorf("straight to the goal: %+v", a)
	}
	// Half a route dearer is worth it to a robot that says so.
	loose := again(r, before, q, along(r, 0.1))
	loose.SwitchShare = 1
	if a := replan(t, empty, loose); !a.Kept {
		t.Errorf("switch share 1: %+v", a)
	}
}

func TestOffRouteRobotBehindAWall(t *testing.T) {
	f := newMap(t, settings(0, 0, 20, 10, 0.05), solidBox("rack", 4, 4, 16, 5))
	w := newWorld(t, f)
	q := shortest(body(0.3), pose(2, 3), pose(18, 3))
	r := mustRoute(t, w, q)
	a := replan(t, w, again(r, f, q, pt(10, 6)))
	if a.Kept || a.Cause != planner.OffRoute || a.Route == nil {
		t.Errorf("%+v", a)
	}
}
