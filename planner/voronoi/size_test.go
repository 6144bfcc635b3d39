package voronoi

import (
	"context"
	"errors"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
)

// TestClutterIsRefusedBeforeItFillsTheMemory: a graph beyond either limit is refused by Build and
// by Advance alike, and one within both is made as ever.
func TestClutterIsRefusedBeforeItFillsTheMemory(t *testing.T) {
	ctx := context.Background()
	defer func(s, b int64) { maxSites, maxBytes = s, b }(maxSites, maxBytes)
	rng := rand.New(rand.NewPCG(1, 1))
	const n = 160
	packed := make([]byte, n*n/4)
	for i := range n * n {
		if rng.IntN(20) == 0 {
			packed[i/4] |= byte(floor.Occupied) << (2 * (i % 4))
		}
	}
	m := newFloor(t, n, n, 1_000_000, false, put("a", rectUm(1_000_000, 1_000_000, 1_500_000, 1_600_001)),
		floor.Edit{Kind: floor.PaintCells, Rect: floor.CellRect{X1: n, Y1: n}, Cells: packed})
	need := Need{LeastUm: 1, MostUm: 1_000_000}
	g := graphOf(t, m, need)
	var edits []floor.Edit
	for x := 5; x < 100; x += 5 { // more clutter
		edits = append(edits, paint(x, 50, x+1, 51, floor.Occupied))
	}
	after, err := m.Apply(append(edits, put("b", rectUm(4_000_000, 1_000_000, 4_500_000, 1_600_001))))
	if err != nil {
		t.Fatal(err)
	}
	fresh, f := graphOf(t, after, need), fieldOf(t, after)
	bytes := func(g *Graph) (n int64) {
		for _, b := range g.blocks {
			n += b.bytes()
		}
		return n
	}
	if fresh.sites() <= g.sites() || bytes(fresh) <= bytes(g) {
		t.Fatal("the change does not add to the clutter")
	}
	for _, c := range []struct {
		sites, bytes int64
		ok           bool
	}{
		{fresh.sites(), bytes(fresh), true}, {fresh.sites() - 1, bytes(fresh), false},
		{fresh.sites(), bytes(fresh) - 1, false}, {0, 0, false},
	} {
		maxSites, maxBytes = c.sites, c.bytes
		_, built := Build(ctx, f, need)
		_, advanced := g.Advance(ctx, f, floor.Diff(m, after))
		for name, err := range map[string]error{"Build": built, "Advance": advanced} {
			if c.ok && err != nil || !c.ok && !errors.Is(err, ErrTooLarge) {
				t.Errorf("%s of %d sites and %d bytes, at most %d and %d: %v", name, fresh.sites(), bytes(fresh), c.sites, c.bytes, err)
			}
		}
	}
}

// TestNetsAreFewWhereTheyAreLarge: nets of few nodes are all kept, of many fewer, and of any
// number one, which the next takes the place of.
func TestNetsAreFewWhereTheyAreLarge(t *testing.T) {
	for _, nodes := range []int{0, 1, 1000, maxNetNodes / maxNets, 300_000, maxNetNodes, 10 * maxNetNodes} {
		k := netsKept(nodes)
		if k < 1 || k > maxNets || k > 1 && k*nodes > maxNetNodes || k < maxNets && (k+1)*nodes <= maxNetNodes {
			t.Errorf("%d nets of %d nodes", k, nodes)
		}
	}
}
