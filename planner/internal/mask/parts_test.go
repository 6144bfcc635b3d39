package mask

import (
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
)

// Regions against a flood cell by cell: same region and size, at random and in mazes of
// thin walls.
func TestRegionsAgainstFlood(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		set := floor.Settings{ResolutionUm: 50_000, Columns: rapid.IntRange(1, 150).Draw(t, "columns"), Rows: rapid.IntRange(1, 150).Draw(t, "rows"), CapUm: 1_000_000, OpenBorder: true}
		m := newSet(t, set).Mask(Key{})
		dense := rapid.Uint64Range(0, 99).Draw(t, "percent free")
		x := rapid.Uint64().Draw(t, "seed") | 1
		for i := range m.blocks {
			b := *m.Block(i%m.nx, i/m.nx)
			for y := range b {
				for k := range floor.BlockSize {
					x ^= x << 13 // Marsaglia, "Xorshift RNGs", J. Statistical Software 8(14), 2003
					x ^= x >> 7
					x ^= x << 17
					if x>>33%100 >= dense {
						b[y] &^= 1 << k
					}
				}
			}
			m.blocks[i].Store(share(&b))
		}
		seen := map[[2]int]bool{}
		regions := map[int]bool{}
		for row := range set.Rows {
			for col := range set.Columns {
				if !m.Free(col, row) || seen[[2]int{col, row}] {
					continue
				}
				todo := [][2]int{{col, row}}
				seen[todo[0]] = true
				for i := 0; i < len(todo); i++ {
					c := todo[i]
					for _, n := range [4][2]int{{c[0] + 1, c[1]}, {c[0] - 1, c[1]}, {c[0], c[1] + 1}, {c[0], c[1] - 1}} {
						if m.Free(n[0], n[1]) && !seen[n] {
							seen[n] = true
							todo = append(todo, n)
						}
					}
				}
				want, _, _ := m.Region(col, row)
				if regions[want] {
					t.Fatalf("two floods from region %d", want)
				}
				regions[want] = true
				for _, c := range todo {
					if got, size, ok := m.Region(c[0], c[1]); !ok || got != want || size != int64(len(todo)) {
						t.Fatalf("cell %v: region %d of %d cells, want %d of %d", c, got, size, want, len(todo))
					}
				}
			}
		}
	})
}
