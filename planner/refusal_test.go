package planner_test

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// Two walls along an axis leave a door of exactly 0.90 m, wherever it lies against
// the grid. Common practice has no source for such a test; the figures are the
// contract's own promise for vector solids.
func TestNarrowPassageHoldsAtEveryOffset(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 1))
	others := []planner.Roadmap{planner.Grid4, planner.Grid8, planner.Quadtree}
	for k := range 20 {
		off := float64(rnd.IntN(50_000)) / m
		lower := 5 + off
		turned := rnd.IntN(2) == 1
		wall := func(name string, x0, y0, x1, y1 float64) floor.Edit {
			if turned {
				x0, y0, x1, y1 = y0, x0, y1, x1
			}
			return solidBox(name, x0, y0, x1, y1)
		}
		at := func(x, y float64) planner.Pose {
			if turned {
				x, y = y, x
			}
			return pose(x, y)
		}
		w := newWorld(t, newMap(t, settings(0, 0, 12, 12, 0.05),
			wall("south", 5.02, 0, 5.72, lower), wall("north", 5.02, lower+0.9, 5.72, 12)))
		for _, rm := range []planner.Roadmap{planner.Auto, others[k%3]} {
			q := shortest(body(0.91/2), at(2, 3), at(10, 9))
			q.Options.Roadmap = rm
			a := plan(t, w, q)
			if a.Refusal == nil || a.Refusal.Reason != planner.NoPassage {
				t.Fatalf("offset %g, roadmap %d: 0.91 m through 0.90 m: %+v", off, rm, a)
			}
			b := a.Refusal.Bottleneck
			if !b.Exists || b.WidthUm > 900_000 || b.WidthUm+b.WidthShortUm < 900_000 || b.NeededUm != 910_000 {
				t.Fatalf("offset %g: bottleneck %+v", off, b)
			}
			if b.WidthUm < 899_998 {
				t.Fatalf("offset %g: width %d, want 900000 less rounding", off, b.WidthUm)
			}
			slices.Sort(b.Features)
			if !slices.Equal(b.Features, []string{"north", "south"}) {
				t.Fatalf("offset %g: sides %q", off, b.Features)
			}
			q.Body = body(0.78 / 2)
			mustRoute(t, w, q)
		}
		// The default roadmap misses nothing here: what is a millimetre narrower than the
		// door passes.
		mustRoute(t, w, shortest(body(0.899/2), at(2, 3), at(10, 9)))
	}
}

func TestRefusalNamesTheZoneThatCloses(t *testing.T) {
	base := []floor.Edit{solidBox("south", 5, 0, 5.5, 4), solidBox("north", 5, 6, 5.5, 10)}
	oneWay := zone("exit-only", floor.OneWayZone, 4.5, 3.5, 6, 6.5)
	oneWay.Heading = math.Pi
	for _, c := range []struct {
		name string
		edit floor.Edit
	}{
		{"cleaning", closedBox("cleaning", 4.8, 3.9, 5.2, 6.1)},
		{"exit-only", put(&oneWay)},
	} {
		w := newWorld(t, newMap(t, settings(0, 0, 10, 10, 0.05), append(slices.Clone(base), c.edit)...))
		a := plan(t, w, shortest(body(0.3), pose(2, 5), pose(8, 5)))
		if a.Refusal == nil || a.Refusal.Bottleneck == nil || a.Refusal.Bottleneck.Zone != c.name {
			t.Fatalf("%s: %+v", c.name, a.Refusal)
		}
		if b := a.Refusal.Bottleneck; !b.Exists || b.WidthUm < b.NeededUm || math.Abs(b.At.Y-5*m) > 1.2*m {
			t.Fatalf("%s: %+v", c.name, b)
		}
	}
	// The other way is with the zone's heading.
	w := newWorld(t, newMap(t, settings(0, 0, 10, 10, 0.05), append(base, put(&oneWay))...))
	mustRoute(t, w, shortest(body(0.3), pose(8, 5), pose(2, 5)))
}

func TestSolidWallHasNoBottleneck(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 10, 10, 0.05), solidBox("wall", 5, 0, 5.3, 10)))
	b := plan(t, w, shortest(body(0.3), pose(2, 5), pose(8, 5))).Refusal.Bottleneck
	if b.Exists || b.WidthUm != 0 || b.Zone != "" {
		t.Fatalf("%+v", b)
	}
}

func TestBlockedEnds(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 10, 10, 0.05),
		solidBox("rack", 4, 4, 6, 6), closedBox("wet", 0, 7, 3, 10)))
	b := body(0.3)
	// In the rack's middle: the nearest place is 1 + 0.3 m away, straight out.
	e := plan(t, w, shortest(b, pose(5, 5.2), pose(8, 8))).Refusal
	if e.Reason != planner.StartBlocked || e.Blocked.Nearest != "rack" || e.Blocked.ClearanceUm != 0 || e.Blocked.ClosedZone != "" {
		t.Fatalf("%+v %+v", e, e.Blocked)
	}
	if d := geom.Metres(e.Blocked.DistanceUm); d < 1.1-1e-9 || d > 1.1+0.0015 {
		t.Fatalf("nearest free place is %g m away, want 1.1 to 1.1015", d)
	}
	if math.Abs(e.Blocked.Bearing-math.Pi/2) > 0.01 {
		t.Fatalf("bearing %g, want pi/2", e.Blocked.Bearing)
	}
	// Clear of solids but in a closed zone.
	e = plan(t, w, shortest(b, pose(8, 8), pose(1.5, 8.5))).Refusal
	if e.Reason != planner.GoalBlocked || e.Blocked.ClosedZone != "wet" || e.Blocked.ClearanceUm != 1_500_000 {
		t.Fatalf("%+v %+v", e, e.Blocked)
	}
	if d := geom.Metres(e.Blocked.DistanceUm); d < 1.8-1e-9 || d > 1.8015 {
		t.Fatalf("nearest free place is %g m away, want 1.8", d)
	}
	// Exactly the required clearance is admitted.
	mustRoute(t, w, shortest(b, pose(0.3, 0.3), pose(9.7, 0.3)))
	q := shortest(b, planner.Pose{At: geom.Point{X: 299_999, Y: 300_000}}, pose(9, 1))
	if e := plan(t, w, q).Refusal; e == nil || e.Reason != planner.StartBlocked || e.Blocked.ClearanceUm != 299_999 {
		t.Fatalf("a micrometre too near is admitted")
	}
}

func TestLaw9RobotAlwaysLearns(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		a := plan(t, sc.w, sc.q)
		if a.Route != nil {
			return
		}
		need := float64(sc.q.Body.Required())
		switch r := a.Refusal; r.Reason {
		case planner.StartBlocked, planner.GoalBlocked:
			if r.Blocked == nil {
				t.Fatal("blocked end is not described")
			}
			if r.Blocked.ClosedZone == "" && bruteDist(sc.m, r.Blocked.At) >= max(1, need) && sc.m.Bounds().Contains(r.Blocked.At) {
				t.Fatalf("%v is said to be blocked", r.Blocked.At)
			}
			if r.Blocked.HasFree && bruteDist(sc.m, r.Blocked.NearestFree) < need-slackUm {
				t.Fatalf("%v is said to be free", r.Blocked.NearestFree)
			}
		case planner.NoPassage:
			b := r.Bottleneck
			if b == nil {
				t.Fatal("bottleneck is not described")
			}
			if b.Exists && b.Zone == "" && float64(b.WidthUm) > 2*bruteDist(sc.m, b.At)+slackUm {
				t.Fatalf("width %d at a place of clearance %f", b.WidthUm, bruteDist(sc.m, b.At))
			}
			if b.Zone == "" && sc.q.Options.Roadmap == planner.Auto && !sc.q.Options.KeepRoadmapPath && b.WidthUm >= b.NeededUm && b.NeededUm > 0 {
				t.Fatalf("refused with a gate that is wide enough: %+v", b)
			}
		default:
			t.Fatalf("refused without a reason: %+v", r)
		}
	})
}

func TestTimeBudget(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 40, 40, 0.05), solidBox("wall", 20, 0, 20.5, 39)))
	q := shortest(body(0.3), pose(2, 2), pose(38, 2))
	ctx, cancel := context.WithTimeoutCause(context.Background(), time.Nanosecond, planner.ErrTimeBudget)
	defer cancel()
	<-ctx.Done()
	a, err := w.Plan(ctx, q)
	if err != nil || a.Refusal == nil || a.Refusal.Reason != planner.OutOfTime {
		t.Fatalf("%+v, %v: want out of time", a, err)
	}
	gone, stop := context.WithCancel(context.Background())
	stop()
	if _, err := w.Plan(gone, q); !errors.Is(err, context.Canceled) {
		t.Fatalf("%v: want the context's error", err)
	}
}
