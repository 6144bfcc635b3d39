package voronoi

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/testfloor"
)

func randomEdits(rng *rand.Rand, f *floor.Map) []floor.Edit {
	return testfloor.EditsOf(rng, f, randomSolid)
}

// sameRoads says what differs between two versions' roads; "" for nothing.
func sameRoads(a, b *Roads) string {
	for i := range b.paved {
		if !reflect.DeepEqual(a.paved[i], b.paved[i]) {
			return fmt.Sprintf("block %d: %+v, wanted %+v", i, a.paved[i], b.paved[i])
		}
	}
	for _, c := range []struct {
		name string
		a, b any
	}{
		{"nodes", a.nodes, b.nodes}, {"roads", a.roads, b.roads}, {"ends", a.ends, b.ends}, {"first", a.first, b.first},
		{"portals", a.portals, b.portals}, {"parts", a.parts, b.parts}, {"forests", a.forest(), b.forest()},
	} {
		if !reflect.DeepEqual(c.a, c.b) {
			return fmt.Sprintf("%s: %+v, wanted %+v", c.name, c.a, c.b)
		}
	}
	return ""
}

// TestLaw4PatchedEqualsRebuilt applies random patches one after another to small floors of several
// blocks: edges and roads equal those made from scratch, down to their numbers, and so
// do answers.
func TestLaw4PatchedEqualsRebuilt(t *testing.T) {
	const seed = 44
	sequences := 500
	if slow() {
		sequences = 10_000
	}
	t.Logf("seed %d", seed)
	ctx := context.Background()
	kept, fresh, repaved, shared, asked, done := 0, 0, 0, 0, 0, 0
	sequence := func(k int) error {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		// Most floors are of a block or a few; each 25th is of up to 16, for several patches.
		size, steps := 50, 1
		if k%25 == 0 {
			size, steps = 200, 3
		}
		f := randomFloor(t, rng, 20+rng.IntN(size), 20+rng.IntN(size))
		need := Need{MostUm: []int64{1_000_000, 400_000, 1}[k%3], Zones: k%2 == 0}
		if need.Zones && k%4 == 0 && need.MostUm > 100_000 {
			need.LeastUm, need.MarginUm = 100_000, 50_000
		}
		p := need.MostUm - need.MarginUm
		p = need.MarginUm + 1 + rng.Int64N(p)
		mesh := anyangle.Need{ClearanceUm: p, Zones: need.Zones}
		if need.Zones {
			mesh.ZoneUm = p - need.MarginUm
		}
		field, err := clearance.Build(ctx, f)
		if err != nil {
			return err
		}
		g, err := Build(ctx, field, need)
		if err != nil {
			return err
		}
		open, err := anyangle.Build(ctx, f, mesh)
		if err != nil {
			return err
		}
		w, err := NewRoads(ctx, g, open)
		if err != nil {
			return err
		}
		for step := range steps {
			next, err := f.Apply(randomEdits(rng, f))
			if err != nil {
				return err
			}
			change := floor.Diff(f, next)
			if field, err = field.Advance(ctx, next, change); err != nil {
				return err
			}
			a, err := g.Advance(ctx, field, change)
			if err != nil {
				return err
			}
			b, err := Build(ctx, field, need)
			if err != nil {
				return err
			}
			if open, err = open.Advance(ctx, next, change); err != nil {
				return err
			}
			patched, err := w.Advance(ctx, a, open)
			if err != nil {
				return err
			}
			rebuilt, err := NewRoads(ctx, b, open)
			if err != nil {
				return err
			}
			for i := range b.blocks {
				if a.blocks[i] == g.blocks[i] {
					kept++
				} else {
					fresh++
				}
				if patched.paved[i] == w.paved[i] {
					shared++
				} else {
					repaved++
				}
			}
			for i := range b.blocks {
				if !reflect.DeepEqual(a.blocks[i], b.blocks[i]) {
					return fmt.Errorf("step %d: block %d differs", step, i)
				}
			}
			if !reflect.DeepEqual(a.links, b.links) || !reflect.DeepEqual(a.base, b.base) || !reflect.DeepEqual(a.lead, b.lead) {
				return fmt.Errorf("step %d: nodes differ", step)
			}
			if text := sameRoads(patched, rebuilt); text != "" {
				return fmt.Errorf("step %d: roads differ in %s", step, text)
			}
			for range 2 {
				s, e, r := randomPoint(rng, next.Bounds()), randomPoint(rng, next.Bounds()), need.MarginUm
				p1, ok1, err1 := patched.Balanced(ctx, s, e, r, 1)
				p2, ok2, err2 := rebuilt.Balanced(ctx, s, e, r, 1)
				c1, w1, ok3, err3 := patched.Clearest(ctx, s, e, r)
				c2, w2, ok4, err4 := rebuilt.Clearest(ctx, s, e, r)
				if err := errors.Join(err1, err2, err3, err4); err != nil {
					return err
				}
				if ok1 != ok2 || ok3 != ok4 || w1 != w2 || !reflect.DeepEqual(p1, p2) || !reflect.DeepEqual(c1, c2) {
					return fmt.Errorf("step %d: %v to %v: %+v, wanted %+v; clearest %+v at %+v, wanted %+v at %+v", step, s, e, p1, p2, c1, w1, c2, w2)
				}
				if ok1 {
					asked++
				}
			}
			a.checkEnds(t, k)
			f, g, w = next, a, patched
		}
		return nil
	}
	for k := range sequences {
		if err := sequence(k); err != nil {
			t.Fatalf("sequence %d: %v", k, err)
		}
		if done++; slow() && done%1000 == 0 {
			t.Logf("%d sequences", done)
		}
	}
	t.Logf("blocks: %d kept, %d traced anew, %d paved anew, %d shared; %d ways compared", kept, fresh, repaved, shared, asked)
	if kept == 0 || fresh == 0 || repaved == 0 || shared == 0 || asked < sequences/2 {
		t.Error("too few of a kind")
	}
}
