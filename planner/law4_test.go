package planner_test

import (
	"context"
	"math"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	"example.com/wideberth/planner/internal/plainfloor"
)

// TestLaw4PatchedEqualsRebuilt: a world advanced through random patches, with all that earlier
// plans left in it, gives the answers of one made from scratch, to the last bit. What each
// structure holds is compared in the package that makes it.
func TestLaw4PatchedEqualsRebuilt(t *testing.T) {
	const seed = 4444
	t.Logf("seed %d", seed)
	routes, refusals := map[planner.Preference]int{}, 0
	for k := range plainfloor.Sequences() / 10 {
		s := plainfloor.NewSequence(seed, uint64(k))
		set, b := s.Map.Settings(), s.Map.Bounds()
		at := func() planner.Pose {
			return planner.Pose{At: geom.Point{
				X: math.Floor(b.Min.X + b.Width()*s.Rng.Float64()),
				Y: math.Floor(b.Min.Y + b.Height()*s.Rng.Float64())}}
		}
		body := planner.Body{RadiusUm: s.Rng.Int64N(min(4*set.ResolutionUm, set.CapUm)), MaxSpeed: 1, Braking: 0.5, Reaction: 0.3}
		body.PreferredUm = body.RadiusUm + s.Rng.Int64N(set.CapUm-body.RadiusUm+1)
		ask := func() planner.Request {
			q := shortest(body, at(), at())
			q.Options.Preference = []planner.Preference{planner.Shortest, planner.Balanced, planner.Clearest}[s.Rng.IntN(3)]
			return q
		}
		w := newWorld(t, s.Map)
		for step := range 3 {
			for range 2 { // leaves masks, meshes and roads behind
				plan(t, w, ask())
			}
			s.Next()
			var err error
			if w, err = w.Advance(context.Background(), s.Map); err != nil {
				t.Fatal(err)
			}
			fresh := newWorld(t, s.Map)
			for range 2 {
				q := ask()
				got, want := plan(t, w, q), plan(t, fresh, q)
				if !reflect.DeepEqual(got, want) {
					t.Fatalf("sequence %d, step %d, %+v:\nadvanced %+v %+v\nrebuilt  %+v %+v", k, step, q, got.Route, got.Refusal, want.Route, want.Refusal)
				}
				if got.Route != nil {
					routes[q.Options.Preference]++
				} else {
					refusals++
				}
			}
		}
	}
	if t.Logf("routes by preference %v, %d refusals", routes, refusals); len(routes) < 3 || refusals == 0 {
		t.Error("the sequences do not try both answers")
	}
}
