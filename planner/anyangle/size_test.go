package anyangle

import (
	"context"
	"errors"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
)

// TestClutterIsRefusedBeforeItFillsTheMemory: a mesh beyond the limit is refused by Build and by
// Advance alike, and one within it is made as ever. The limits are lowered to those of the mesh
// before a change and after it.
func TestClutterIsRefusedBeforeItFillsTheMemory(t *testing.T) {
	ctx := context.Background()
	defer func(old int64) { maxBytes = old }(maxBytes)
	m := randomMask(rand.New(rand.NewPCG(1, 1)), 200, 150, 0.05).floor(t, false)
	need := Need{ClearanceUm: 60_000}
	g, err := Build(ctx, m, need)
	if err != nil {
		t.Fatal(err)
	}
	size := func(g *Mesh) (n int64) {
		for i, b := range g.blocks {
			n += bytesOf(b.cut, g.lean.blocks[i].cut)
		}
		return n
	}
	var edits []floor.Edit
	for x := 5; x < 100; x += 5 { // more clutter
		edits = append(edits, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: x, Y0: 50, X1: x + 1, Y1: 51}})
	}
	after, err := m.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	fresh, err := Build(ctx, after, need)
	if err != nil {
		t.Fatal(err)
	}
	if size(fresh) == size(g) {
		t.Fatal("the change makes no difference to the size")
	}
	for _, c := range []struct {
		most int64
		ok   bool
	}{{size(fresh), true}, {size(fresh) - 1, false}, {0, false}} {
		maxBytes = c.most
		_, built := Build(ctx, after, need)
		_, advanced := g.Advance(ctx, after, floor.Diff(m, after))
		for name, err := range map[string]error{"Build": built, "Advance": advanced} {
			if c.ok && err != nil || !c.ok && !errors.Is(err, ErrTooLarge) {
				t.Errorf("%s of %d bytes, at most %d: %v", name, size(fresh), c.most, err)
			}
		}
	}
}
