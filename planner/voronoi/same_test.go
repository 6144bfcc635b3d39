package voronoi

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// lacks is a place of g's edges with clearance um or more that is not one of o's, by
// looking at places along all of them.
func (g *Graph) lacks(o *Graph, um float64) (at geom.Point, lacking bool) {
	g.every(12, func(a *arc, p geom.Point, c float64) {
		// Short of um by nothing but rounding: what is at um itself may go either way.
		if lacking || c < um+1e-3 {
			return
		}
		if d, c2 := o.edgeNear(p); d > 1 || math.Abs(c-c2) > 2 {
			at, lacking = p, true
		}
	})
	return at, lacking
}

// TestSameFromIsWhatLookingAtAllPlacesSays compares versions whose edges from some clearance on
// are the same, or not, with what places along all edges say.
func TestSameFromIsWhatLookingAtAllPlacesSays(t *testing.T) {
	const seed = 81
	t.Logf("seed %d", seed)
	cases, same, other, careful := 50, 0, 0, 0
	if slow() {
		cases = 3000
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := randomFloor(t, rng, 40+rng.IntN(120), 40+rng.IntN(120))
		g := graphOf(t, f, Need{MostUm: 2_000_000})
		next, err := f.Apply(randomEdits(rng, f))
		if err != nil {
			t.Fatal(err)
		}
		change := floor.Diff(f, next)
		field := fieldOf(t, next)
		n, err := g.Advance(context.Background(), field, change)
		if err != nil {
			t.Fatal(err)
		}
		built, err := Build(context.Background(), field, g.need)
		if err != nil {
			t.Fatal(err)
		}
		for range 6 {
			um := math.Floor(rng.Float64() * 2_000_000)
			got := n.SameFrom(g, um)
			if got != g.SameFrom(n, um) || got != built.SameFrom(g, um) {
				t.Fatalf("case %d: the same from %v: %v, the other way round or rebuilt not", k, um, got)
			}
			p, more := n.lacks(g, um)
			if !more {
				p, more = g.lacks(n, um)
			}
			switch {
			case got && more:
				t.Fatalf("case %d: said to be the same from %v, but not at %v", k, um, p)
			case got:
				same++
			case more:
				other++
			default:
				careful++
			}
		}
	}
	t.Logf("%d the same, %d not, %d the same though not said to be", same, other, careful)
	// Where solids are cut otherwise it may be careful, but of little use if often.
	if same < cases || other < cases || careful > same/5 {
		t.Error("too few of a kind")
	}
	if g := graphOf(t, newFloor(t, 64, 64, 2_000_000, false), Need{MostUm: 1_000_000}); g.SameFrom(graphOf(t, newFloor(t, 64, 64, 2_000_000, false), Need{MostUm: 900_000}), 0) {
		t.Error("graphs for different needs are the same")
	}
}
