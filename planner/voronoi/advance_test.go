package voronoi

import (
	"context"
	"math/rand/v2"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
)

func randomEdits(rng *rand.Rand, f *floor.Map) []floor.Edit {
	s := f.Settings()
	var out []floor.Edit
	for range 1 + rng.IntN(3) {
		switch rng.IntN(4) {
		case 0, 1:
			x, y := rng.IntN(s.Columns), rng.IntN(s.Rows)
			out = append(out, paint(x, y, min(s.Columns, x+1+rng.IntN(8)), min(s.Rows, y+1+rng.IntN(8)), floor.Occupancy(rng.IntN(3))))
		default:
			ft := randomSolid(rng, string(rune('a'+rng.IntN(5))), f.Bounds())
			if rng.IntN(3) == 0 && ft.Shape.Kind == floor.Polygon {
				ft.Kind, ft.ToleranceUm, ft.Shape.Grow = floor.ClosedZone, 0, 0
			}
			out = append(out, floor.Edit{Kind: floor.PutFeature, Feature: ft})
		}
	}
	for ft := range f.Features() {
		if rng.IntN(12) == 0 {
			return []floor.Edit{{Kind: floor.RemoveFeature, Name: ft.Name}}
		}
	}
	return out
}

// TestLaw4PatchedEqualsRebuilt applies random patches one after another.
func TestLaw4PatchedEqualsRebuilt(t *testing.T) {
	const seed = 44
	t.Logf("seed %d", seed)
	sequences, kept, fresh := 6, 0, 0
	if slow() {
		sequences = 300
	}
	for k := range sequences {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := randomFloor(t, rng, 100+rng.IntN(200), 100+rng.IntN(200))
		need := Need{MostUm: []int64{2_000_000, 700_000, 1}[k%3], Zones: k%2 == 0}
		if need.Zones && k%4 == 0 && need.MostUm > 100_000 {
			need.LeastUm, need.MarginUm = 100_000, 50_000
		}
		field := fieldOf(t, f)
		g, err := Build(context.Background(), field, need)
		if err != nil {
			t.Fatal(err)
		}
		for step := range 12 {
			next, err := f.Apply(randomEdits(rng, f))
			if err != nil {
				t.Fatal(err)
			}
			change := floor.Diff(f, next)
			if field, err = field.Advance(context.Background(), next, change); err != nil {
				t.Fatal(err)
			}
			a, err := g.Advance(context.Background(), field, change)
			if err != nil {
				t.Fatal(err)
			}
			b, err := Build(context.Background(), field, need)
			if err != nil {
				t.Fatal(err)
			}
			for i := range b.blocks {
				if !reflect.DeepEqual(a.blocks[i], b.blocks[i]) {
					t.Fatalf("sequence %d, step %d: block %d differs", k, step, i)
				}
				if a.blocks[i] == g.blocks[i] {
					kept++
				} else {
					fresh++
				}
			}
			if !reflect.DeepEqual(a.links, b.links) || !reflect.DeepEqual(a.base, b.base) || !reflect.DeepEqual(a.lead, b.lead) {
				t.Fatalf("sequence %d, step %d: nodes differ", k, step)
			}
			a.checkEnds(t, k)
			f, g = next, a
		}
	}
	if kept == 0 || fresh == 0 {
		t.Errorf("%d blocks kept, %d traced anew", kept, fresh)
	}
}
