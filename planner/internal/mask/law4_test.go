package mask

import (
	"slices"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/plainfloor"
	"example.com/wideberth/planner/internal/rules"
)

// TestLaw4PatchedEqualsRebuilt: masks and regions carried over random patches, some blocks
// known before and some not, equal those made from scratch.
func TestLaw4PatchedEqualsRebuilt(t *testing.T) {
	const seed = 444
	t.Logf("seed %d", seed)
	kept := 0
	for k := range plainfloor.Sequences() {
		s := plainfloor.NewSequence(seed, uint64(k))
		f, err := clearance.Build(t.Context(), s.Map)
		if err != nil {
			t.Fatal(err)
		}
		res, most := s.Map.Settings().ResolutionUm, s.Map.Settings().CapUm
		keys := []Key{{}, {RadiusUm: res * int64(k%4), Zones: true}, {Um: 1 + s.Rng.Int64N(most), RadiusUm: s.Rng.Int64N(9 * res), Zones: k%2 == 0}, {Um: most / res * res}}
		set := NewSet(f, rules.Of(s.Map))
		for step := range 3 {
			for _, key := range keys {
				m := set.Mask(key)
				for i := range m.blocks {
					if s.Rng.IntN(4) > 0 {
						m.Block(i%m.nx, i/m.nx)
					}
				}
				if s.Rng.IntN(2) == 0 {
					m.Region(firstFree(m))
				}
			}
			ch := s.Next()
			if f, err = f.Advance(t.Context(), s.Map, ch); err != nil {
				t.Fatal(err)
			}
			set = set.Carry(f, rules.Of(s.Map), zoneBounds(ch))
			again, err := clearance.Build(t.Context(), s.Map)
			if err != nil {
				t.Fatal(err)
			}
			fresh := NewSet(again, rules.Of(s.Map))
			for _, key := range keys {
				a, b := set.Mask(key), fresh.Mask(key)
				for i := range a.blocks {
					if a.blocks[i].Load() != nil {
						kept++
					}
					if p, q := a.Block(i%a.nx, i/a.nx), b.Block(i%a.nx, i/a.nx); *p != *q {
						t.Fatalf("sequence %d, step %d, %+v: block %d differs", k, step, key, i)
					}
				}
				if !sameRegions(a, b) {
					t.Fatalf("sequence %d, step %d, %+v: regions differ", k, step, key)
				}
			}
		}
	}
	if kept == 0 {
		t.Error("no block was carried over")
	}
}

func firstFree(m *Mask) (col, row int) {
	for row := range m.set.Rows {
		for col := range m.set.Columns {
			if m.Free(col, row) {
				return col, row
			}
		}
	}
	return 0, 0
}

func sameRegions(a, b *Mask) bool {
	for _, m := range [2]*Mask{a, b} {
		if _, _, ok := m.Region(firstFree(m)); !ok { // nothing is free
			return m.regions.up == nil
		}
	}
	return slices.Equal(a.regions.first, b.regions.first) && slices.Equal(a.regions.up, b.regions.up) && slices.Equal(a.regions.size, b.regions.size)
}

// zoneBounds are the bounds of the closed zones that differ.
func zoneBounds(c floor.Change) []geom.Rect {
	var rs []geom.Rect
	for _, fc := range c.Features {
		for _, f := range []*floor.Feature{fc.Before, fc.After} {
			if f != nil && f.Kind == floor.ClosedZone {
				rs = append(rs, f.Shape.Bounds())
			}
		}
	}
	return rs
}
