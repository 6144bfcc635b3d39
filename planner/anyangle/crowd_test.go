package anyangle

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"
	"time"
)

// TestThinnedOutIsTheSame compares meshes with and without tiles in the place of pieces, on
// clutter and stairs: the same places (or such as a mesh need not have), connected alike, and
// ways of one length, but for snapUm along x and y by which the sides of cells move
// where they cross.
func TestThinnedOutIsTheSame(t *testing.T) {
	const seed = 55
	t.Logf("seed %d", seed)
	cases := 10
	if slow() {
		cases = 400
	}
	ctx := context.Background()
	ways := 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		w, h := 40+rng.IntN(120), 40+rng.IntN(120)
		f := randomMask(rng, w, h, []float64{0.002, 0.005, 0.01, 0.02, 0.05}[rng.IntN(5)]).floor(t, rng.IntN(2) == 0)
		if k%3 == 0 {
			f = stairFloor(t, rng, w, h)
		}
		r := []int64{1, 50_000, 100_000, 217_345, 450_000}[rng.IntN(5)]
		plain, thinned := newMesh(f, Need{ClearanceUm: r}), newMesh(f, Need{ClearanceUm: r})
		plain.crowd, thinned.crowd = math.MaxInt, 0
		for _, g := range []*Mesh{plain, thinned} {
			if err := g.buildAll(ctx); err != nil {
				t.Fatal(err)
			}
		}
		cores := coresOf(f)
		for p := range plain.corners {
			if _, ok := thinned.Nearest(p, 2*snapUm); !ok && trueClearance(f, cores, p) >= float64(r)+DeltaUm {
				t.Fatalf("case %d: %v is in the plain mesh alone", k, p)
			}
		}
		for p := range thinned.corners {
			if _, ok := plain.Nearest(p, 2*snapUm); !ok && trueClearance(f, cores, p) >= float64(r)+DeltaUm {
				t.Fatalf("case %d: %v is in the thinned mesh alone", k, p)
			}
		}
		for range 20 {
			a, b := randomPoint(rng, f.Bounds()), randomPoint(rng, f.Bounds())
			p, okP, _ := plain.Shortest(ctx, a, b)
			q, okQ, _ := thinned.Shortest(ctx, a, b)
			if okP != okQ || math.Abs(p.LengthUm-q.LengthUm) > 2*snapUm*float64(len(p.Points)) {
				t.Fatalf("case %d: %v to %v at %d µm: %v (%v), thinned %v (%v)", k, a, b, r, p.LengthUm, okP, q.LengthUm, okQ)
			}
			if okP {
				ways++
			}
		}
	}
	t.Logf("%d ways", ways)
	if ways < cases {
		t.Errorf("only %d ways", ways)
	}
}

// BenchmarkClutter reports the time to make a mesh of clutter without tiles over that with
// them (plain/tiles).
func BenchmarkClutter(b *testing.B) {
	f := randomMask(rand.New(rand.NewPCG(1, 2)), 128, 128, 0.2).floor(b, false)
	var took [2]time.Duration
	for b.Loop() {
		for i, n := range []int{math.MaxInt, crowd} {
			g := newMesh(f, Need{ClearanceUm: 450_000})
			g.crowd = n
			t0 := time.Now()
			if err := g.buildAll(context.Background()); err != nil {
				b.Fatal(err)
			}
			took[i] += time.Since(t0)
		}
	}
	b.ReportMetric(float64(took[0])/float64(took[1]), "plain/tiles")
	b.ReportMetric(float64(took[1].Microseconds())/float64(b.N), "µs")
}
