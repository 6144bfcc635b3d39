package planner_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner"
)

// looks is a context whose time budget is spent once it was looked at a number of times.
type looks struct {
	context.Context
	left int
}

func (c *looks) Err() error {
	if c.left--; c.left < 0 {
		return planner.ErrTimeBudget
	}
	return nil
}

// Every search looks at its context within 1,024 expansions (the bound that the
// contract of a prompt answer rests on): however many looks are granted, one more lets
// it expand at most so many more.
func TestSearchesStopWithin1024Expansions(t *testing.T) {
	const seed, most = 5, 1024
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 0))
	var clutter []floor.Edit // any search has many ways to look into
	for k := range 260 {
		x, y := 1+20*rng.Float64(), 1+20*rng.Float64()
		if (x > 3 || y > 3) && (x < 19 || y < 19) {
			clutter = append(clutter, solidBox(fmt.Sprintf("crate-%d", k), x, y, x+0.2, y+0.2))
		}
	}
	b := body(0.2)
	b.PreferredUm = 500_000
	w := newWorld(t, newMap(t, settings(0, 0, 22, 22, 0.1), clutter...))
	for name, o := range map[string]planner.Options{
		"shortest": {Preference: planner.Shortest},
		"balanced": {TightWeight: 1},
		"clearest": {Preference: planner.Clearest},
		"grid4":    {Preference: planner.Shortest, Roadmap: planner.Grid4},
		"grid8":    {TightWeight: 1, Roadmap: planner.Grid8},
		"quadtree": {Preference: planner.Shortest, Roadmap: planner.Quadtree},
	} {
		q := planner.Request{Body: b, Start: pose(2, 2), Goal: pose(20, 20), Options: o}
		all := plan(t, w, q) // makes what is kept for the body
		last, ended := int64(0), false
		for n := 0; n < 400 && !ended; n++ {
			a, err := w.Plan(&looks{context.Background(), n}, q)
			if err != nil {
				t.Fatal(err)
			}
			if a.Counters.Expanded > last+most {
				t.Fatalf("%s: %d expansions after %d looks and %d after one less, wanted at most %d more", name, a.Counters.Expanded, n, last, most)
			}
			last = a.Counters.Expanded
			ended = a.Route != nil && !a.Route.Bound.CutShort
		}
		t.Logf("%s: %d expansions in all", name, last)
		if !ended || last != all.Counters.Expanded {
			t.Errorf("%s: never came to the end, at %d of %d expansions", name, last, all.Counters.Expanded)
		}
	}
}
