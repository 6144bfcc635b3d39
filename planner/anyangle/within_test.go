package anyangle

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// TestWithinIsShortestCutShort checks that a bound changes nothing but that longer ways
// are not found, and that it saves work.
func TestWithinIsShortestCutShort(t *testing.T) {
	const seed = 71
	t.Logf("seed %d", seed)
	ctx := context.Background()
	found, refused := 0, 0
	var whole, cut int64
	for k := range 60 {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := randomFloor(t, rng, 60+rng.IntN(200), 60+rng.IntN(200))
		g := build(t, f, int64(rng.IntN(500_000)))
		for range 10 {
			p, q := randomPoint(rng, f.Bounds()), randomPoint(rng, f.Bounds())
			way, ok, err := g.Shortest(ctx, p, q)
			if err != nil {
				t.Fatal(err)
			}
			if !ok {
				if _, ok, _ := g.ShortestWithin(ctx, p, q, math.Inf(1)); ok {
					t.Fatalf("case %d: a way from %v to %v within a bound only", k, p, q)
				}
				continue
			}
			found++
			same, ok, err := g.ShortestWithin(ctx, p, q, way.LengthUm)
			if !ok || err != nil || !slices.Equal(same.Points, way.Points) {
				t.Fatalf("case %d: %v (%v, %v) within its own length, wanted %v", k, same, ok, err, way)
			}
			if straight := geom.Dist(p, q); way.LengthUm > straight+1 {
				most := straight + rng.Float64()*(way.LengthUm-1-straight)
				none, ok, err := g.ShortestWithin(ctx, p, q, most)
				if ok || err != nil {
					t.Fatalf("case %d: %v (%v) within %v", k, none, err, most)
				}
				refused++
				whole += way.Expanded
				cut += none.Expanded
			}
		}
	}
	t.Logf("%d found; %d refused with %d of %d expansions", found, refused, cut, whole)
	if found == 0 || refused == 0 || cut >= whole {
		t.Error("too few of a kind, or nothing saved")
	}
}

// TestPlacesOfOnePartAreConnected checks parts against Connected, and that meshes say
// the same about places whose surroundings they share.
func TestPlacesOfOnePartAreConnected(t *testing.T) {
	const seed = 72
	t.Logf("seed %d", seed)
	joined, apart, shared := 0, 0, 0
	for k := range 20 {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := randomFloor(t, rng, 150+rng.IntN(200), 150+rng.IntN(200))
		// A wall from side to side.
		rows := f.Settings().Rows
		f, err := f.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: 70, X1: 72, Y1: rows}}})
		if err != nil {
			t.Fatal(err)
		}
		g := build(t, f, int64(rng.IntN(900_000)))
		m, err := f.Apply(randomEdits(rng, f))
		if err != nil {
			t.Fatal(err)
		}
		other := build(t, m, g.need.ClearanceUm)
		next, err := g.Advance(context.Background(), m, floor.Diff(f, m))
		if err != nil {
			t.Fatal(err)
		}
		for range 100 {
			p, q := randomPoint(rng, f.Bounds()), randomPoint(rng, f.Bounds())
			a, b := g.Spots(nil, p), g.Spots(nil, q)
			if g.Contains(p) != (len(a) > 0) {
				t.Fatalf("case %d: %v in the mesh: %v, spots %v", k, p, g.Contains(p), a)
			}
			// Places about p, one of them p, by a probe.
			r := geom.Rect{Min: p, Max: p}.Grow(rng.Float64() * 200_000)
			var probe Probe
			probe.Aim(g, r)
			for n := range 6 {
				v := p
				if n > 0 {
					v = randomPoint(rng, r)
				}
				if probe.Holds(v) != g.Contains(v) {
					t.Fatalf("case %d: %v in the mesh: %v, not by a probe of %v", k, v, g.Contains(v), r)
				}
			}
			one := false
			for _, i := range a {
				for _, j := range b {
					one = one || g.Part(i) == g.Part(j)
				}
			}
			if one != g.Connected(p, q) {
				t.Fatalf("case %d: %v and %v of one part: %v", k, p, q, one)
			}
			if one {
				joined++
			} else if len(a) > 0 && len(b) > 0 {
				apart++
			}
			if next.SharesAround(g, geom.BoundsOf(p)) {
				shared++
				if !slices.Equal(other.Spots(nil, p), a) {
					t.Fatalf("case %d: spots of %v are %v, were %v", k, p, other.Spots(nil, p), a)
				}
			}
		}
	}
	t.Logf("%d joined, %d apart, %d shared", joined, apart, shared)
	if joined == 0 || apart == 0 || shared == 0 {
		t.Error("too few of a kind")
	}
}
