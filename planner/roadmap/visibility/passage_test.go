package visibility

import (
	"context"
	"math"
	"math/rand/v2"
	"sync"
	"testing"

	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/internal/plainfloor"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/gen"
)

// TestPassagesOfKnownWidth: none is let through that is too narrow. None is lost that has the
// outline error to spare, and a micrometre (slackUm and rounding; at the exact width a
// jog of a micrometre in a corridor has room for no oblique tangent). Few are lost at the
// exact width.
func TestPassagesOfKnownWidth(t *testing.T) {
	const seed = 41
	t.Logf("seed %d", seed)
	cases := 12
	if gen.Slow() {
		cases = 300
	}
	lost := 0
	for _, family := range plainfloor.PassageFamilies {
		for k := range cases {
			rng := rand.New(rand.NewPCG(seed, uint64(k)))
			p, err := plainfloor.NewPassage(rng, family)
			if err != nil {
				t.Fatal(err)
			}
			fd := field(t, p.Map)
			through := func(r int64) bool {
				g, err := Build(context.Background(), fd, roadmap.Need{ClearanceUm: r})
				if err != nil {
					t.Fatal(err)
				}
				w, ok := find(t, g, p.Start, p.Goal)
				if ok {
					if v := check.Way(p.Map, w.Points, r, r); v.Problem != "" {
						t.Fatalf("%s, case %d: %s", family, k, v.Problem)
					}
				}
				return ok
			}
			fits := math.Floor(p.BetaUm)
			if !p.Aligned {
				fits--
			}
			if !through(int64(fits)) {
				lost++
				e := outlineError(p.Map.Settings(), roadmap.Need{ClearanceUm: int64(fits)})
				if !through(int64(max(0, fits-e-1))) {
					t.Errorf("%s, case %d: lost at %v of %v µm", family, k, fits-e-1, p.BetaUm)
				}
			}
			if through(int64(math.Floor(p.BetaUm)) + 1) {
				t.Errorf("%s, case %d: let through above %v µm", family, k, p.BetaUm)
			}
		}
	}
	t.Logf("%d lost at the exact width", lost)
	if lost > cases/4 {
		t.Errorf("%d lost", lost)
	}
}

// TestManySearchesAtOnce give what they give one after the other.
func TestManySearchesAtOnce(t *testing.T) {
	rng := rand.New(rand.NewPCG(42, 0))
	f := gen.Floor(t, rng, 90, 90)
	g, alone := build(t, f, 100_000), build(t, f, 100_000)
	pairs := hallPairs(g.field, 40, 100_000)
	got := make([]roadmap.Way, len(pairs))
	var wg sync.WaitGroup
	for i, p := range pairs {
		wg.Go(func() { got[i], _, _ = g.Search(context.Background(), p[0], p[1]) })
	}
	wg.Wait()
	for i, p := range pairs {
		if w, _ := find(t, alone, p[0], p[1]); w.LengthUm != got[i].LengthUm || len(w.Points) != len(got[i].Points) {
			t.Errorf("%v to %v: %v alone, %v with others", p[0], p[1], w.LengthUm, got[i].LengthUm)
		}
	}
}
