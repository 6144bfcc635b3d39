package server

import (
	"context"
	"math"
	"runtime"
	"runtime/debug"
	"sync"
	"testing"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"

	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// A robot learns within its time budget, and before its deadline, though the version
// takes longer to make ready.
func TestLaw9RobotLearnsInTime(t *testing.T) {
	r := start(t, func(c *Config) { c.Worlds = 1 })
	r.hall()
	route := r.route(toBench())
	r.push(put(station("s", 2, 2)))
	r.push(put(station("s", 2, 3)))
	for v := int64(4); v >= 2; v-- { // the head, and then others, so that 1 is let go
		if _, err := r.s.worlds.get(r.ctx(), r.snap(v)); err != nil {
			t.Fatal(err)
		}
	}
	for range cap(r.s.worlds.turns) {
		r.s.worlds.turns <- struct{}{} // none can be made ready but heads
	}
	q := plan()
	q.Version, q.Options = pinned(1), &pb.PlanOptions{TimeBudgetS: 0.05}
	got, err := r.routes.Plan(r.ctx(), q)
	if err != nil {
		t.Fatal(err)
	}
	if f := got.GetRefusal(); f.GetReason() != pb.RefusalReason_REFUSAL_REASON_OUT_OF_TIME || f.RetryAfterS <= 0 || got.Stamp.GetVersion() != 1 {
		t.Errorf("got %v, wanted out of time on version 1 and when to ask again", got)
	}
	again, err := r.routes.Replan(r.ctx(), &pb.ReplanRequest{Previous: route, Pose: &pb.Pose{XM: 1, YM: 1}, Version: pinned(1), Options: q.Options})
	if err != nil {
		t.Fatal(err)
	}
	if f := again.GetRefusal(); f.GetReason() != pb.RefusalReason_REFUSAL_REASON_OUT_OF_TIME || f.RetryAfterS <= 0 {
		t.Errorf("replan: got %v, wanted out of time and when to ask again", again)
	}
	q.Options = nil
	soon, cancel := context.WithTimeout(context.Background(), time.Second)
	defer cancel()
	_, err = r.routes.Plan(soon, q)
	wantStatus(t, err, codes.Unavailable, "VERSION_PREPARING") // not the client's own DEADLINE_EXCEEDED
	for range cap(r.s.worlds.turns) {
		<-r.s.worlds.turns
	}
}

// A burst beyond what the planners can take is shed with a time to ask again, before
// any deadline has passed; none waits past its own.
func TestBurstIsShed(t *testing.T) {
	const calls = 100
	r := start(t, func(c *Config) { c.Planners, c.PlanWait, c.PlanQueue = 1, 30*time.Second, calls/2 })
	r.hall()
	r.route(toBench())
	leave, err := r.s.lanes.enter(r.ctx()) // one plan that does not end
	if err != nil {
		t.Fatal(err)
	}
	var burst sync.WaitGroup
	for i := range calls {
		burst.Go(func() {
			q, ctx := toBench(), r.ctx()
			if i%2 == 0 {
				q.Options = &pb.PlanOptions{TimeBudgetS: 0.2}
			} else {
				short, cancel := context.WithTimeout(context.Background(), time.Second)
				defer cancel()
				ctx = short
			}
			_, err := r.routes.Plan(ctx, q)
			wantStatus(t, err, codes.ResourceExhausted, "OVERLOADED")
			if d := detail[*errdetails.RetryInfo](err).GetRetryDelay().AsDuration(); d <= 0 {
				t.Errorf("retry delay %v, wanted a time to ask again", d)
			}
		})
	}
	burst.Wait()
	if n := r.s.lanes.waiting.Load(); n != 0 {
		t.Errorf("%d still wait for a planner", n)
	}
	leave()
	r.route(toBench())
}

// bytesOf is how much memory a function takes in all, whatever it gives back.
func bytesOf(f func()) float64 {
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	f()
	runtime.ReadMemStats(&after)
	return float64(after.TotalAlloc - before.TotalAlloc)
}

// What plans for a body need of a version is made with it, in the background: the
// first plan on a new version makes no more than a later one, where on a version made
// ready from scratch it makes everything. Making something shows in the memory that it
// takes, which no clock disturbs.
func TestFirstPlanOnANewVersionMakesNothing(t *testing.T) {
	defer debug.SetGCPercent(debug.SetGCPercent(-1)) // pools keep what they have
	for _, preference := range []pb.Preference{pb.Preference_PREFERENCE_SHORTEST, pb.Preference_PREFERENCE_BALANCED, pb.Preference_PREFERENCE_CLEAREST} {
		name := preference.String()
		r := start(t)
		req := create()
		req.Settings.Columns, req.Settings.Rows, req.Settings.InitialOccupancy = 1000, 1000, pb.Occupancy_OCCUPANCY_FREE
		if _, err := r.floors.CreateFloor(r.ctx(), req); err != nil {
			t.Fatal(err)
		}
		var racks []*pb.Edit
		for i := range 10 {
			for k := range 4 {
				x, y := 3+4.5*float64(i), 3+11.5*float64(k)
				rack := "rack-" + string(rune('a'+i)) + string(rune('a'+k))
				racks = append(racks, put(solidPolygon(rack, polygon(x, y, x+1.4, y, x+1.4, y+9, x, y+9))))
			}
		}
		r.push(racks...)
		q := plan()
		q.Goal = atPose(48, 47)
		q.Options = &pb.PlanOptions{Preference: preference}
		r.route(q) // the body is in use

		least := func(f func(*planner.World) float64) float64 {
			out := math.Inf(1)
			for i := range 4 { // pools may be empty once in a while
				x := 12 + float64(i)
				head := r.push(put(solidPolygon("crate", polygon(x, 12.2, x+1, 12.2, x+1, 13, x, 13))))
				out = min(out, f(r.made(head)))
			}
			return out
		}
		ask := func(w *planner.World) float64 {
			b := bodyIn(q.Body, w.Map().Settings())
			request := planner.Request{Body: b, Options: optionsIn(q.Options, b), Start: poseIn(q.Start.GetPose()), Goal: poseIn(q.Goal.GetPose())}
			return bytesOf(func() {
				if a, err := w.Plan(r.ctx(), request); err != nil || a.Route == nil {
					t.Errorf("%v, %v: wanted a route", a, err)
				}
			})
		}
		first := least(ask)
		later := least(func(w *planner.World) float64 { ask(w); return ask(w) })
		scratch := least(func(w *planner.World) float64 {
			fresh, err := planner.NewWorld(r.ctx(), w.Map())
			if err != nil {
				t.Fatal(err)
			}
			return ask(fresh)
		})
		t.Logf("%s: first plan %.0f KiB, later %.0f KiB, from scratch %.0f KiB", name, first/1024, later/1024, scratch/1024)
		// Searches differ a little from version to version, and by far less than a making.
		if first > later+(scratch-later)/10 {
			t.Errorf("%s: the first plan took %.0f bytes, a later one %.0f, from scratch %.0f", name, first, later, scratch)
		}
	}
}

// made waits until a head is ready to plan on.
func (r *running) made(head *pb.VersionStamp) *planner.World {
	for {
		if w, s := r.s.worlds.newest("hall"); s != nil && s.Info.Version == head.Version {
			return w
		}
		time.Sleep(time.Millisecond)
	}
}
