package anyangle

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/internal/plainfloor"
)

// TestLaw6NoPassageIsLost makes passages of known width of every family and asks for ways at
// clearances a little below and a little above half of it, from nothing to millimetres: a
// way is found, and is right, wherever there must be one, and none where there is none. Between sides
// along the axes that is exact; elsewhere DeltaUm may lie in between.
func TestLaw6NoPassageIsLost(t *testing.T) {
	const seed = 6
	t.Logf("seed %d", seed)
	cases := 100 // of each family
	if slow() {
		cases = 1700 // 10,200 in all
	}
	ctx := context.Background()
	for n, family := range plainfloor.PassageFamilies {
		found, refused, exact := 0, 0, 0
		for k := range cases {
			rng := rand.New(rand.NewPCG(seed, uint64(n*1_000_000+k)))
			p, err := plainfloor.NewPassage(rng, family)
			if err != nil {
				t.Fatalf("%s %d: %v", family, k, err)
			}
			// As often nothing as something, of any size up to 3 mm.
			little := func() float64 {
				if rng.IntN(2) == 0 {
					return 0
				}
				return math.Floor(math.Exp(rng.Float64() * math.Log(3000)))
			}
			delta := float64(DeltaUm)
			if p.Aligned {
				delta = 0
				exact++
			}
			// 1e-6 µm: the rounding of a distance of metres.
			below := int64(math.Floor(p.BetaUm-delta+1e-6) - little())
			above := int64(math.Floor(p.BetaUm+1e-6) + 1 + little())
			for _, end := range []geom.Point{p.Start, p.Goal} {
				if f := check.Way(p.Map, []geom.Point{end, end}, above+DeltaUm, 0); f.Problem != "" {
					t.Fatalf("%s %d: an end has no room: %s", family, k, f.Problem)
				}
			}
			if below > 0 {
				found++
				way, ok, err := build(t, p.Map, below).Shortest(ctx, p.Start, p.Goal)
				if !ok || err != nil {
					t.Errorf("%s %d: no way at %d µm through %v µm (%v)", family, k, below, 2*p.BetaUm, err)
				} else if f := check.Way(p.Map, way.Points, below, 0); f.Problem != "" {
					t.Errorf("%s %d: at %d µm through %v µm: %s", family, k, below, 2*p.BetaUm, f.Problem)
				}
			}
			refused++
			if _, ok, err := build(t, p.Map, above).Shortest(ctx, p.Start, p.Goal); ok || err != nil {
				t.Errorf("%s %d: a way at %d µm through %v µm (%v)", family, k, above, 2*p.BetaUm, err)
			}
		}
		t.Logf("%s: %d to be found, %d to be refused, %d along the axes", family, found, refused, exact)
		if found < cases/2 {
			t.Errorf("%s: only %d to be found", family, found)
		}
	}
}
