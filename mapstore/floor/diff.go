package floor

import (
	"cmp"
	"math/bits"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// FeatureChange is a feature that differs. Before is nil when it was added, After
// when it was removed.
type FeatureChange struct{ Before, After *Feature }

// Change is what differs between two maps of one floor.
type Change struct {
	Cells     []CellRect // hold every changed cell; at most one rectangle a block, from the lowest blocks up, left to right
	CellCount int64
	Features  []FeatureChange // by name
}

// IsEmpty says whether nothing differs.
func (c Change) IsEmpty() bool { return len(c.Cells) == 0 && len(c.Features) == 0 }

// Bounds is a rectangle that holds all that differs, features before and after
// included, on a floor of these settings.
func (c Change) Bounds(s Settings) geom.Rect {
	r := geom.EmptyRect()
	for _, cells := range c.Cells {
		r = r.Union(s.CellBounds(cells))
	}
	for _, f := range c.Features {
		if f.Before != nil {
			r = r.Union(f.Before.Bounds())
		}
		if f.After != nil {
			r = r.Union(f.After.Bounds())
		}
	}
	return r
}

// Diff compares two maps of one floor, with work proportional to what differs:
// what the maps share, and what has equal hashes, is skipped. Maps of floors
// with other columns or rows are not comparable; all cells of b then differ.
func Diff(a, b *Map) Change {
	var c Change
	if a.tree.cols != b.tree.cols || a.tree.rows != b.tree.rows {
		all := b.settings.AllCells()
		c.Cells, c.CellCount = []CellRect{all}, all.Count()
	} else {
		diffNodes(&b.tree, a.tree.root, b.tree.root, b.tree.level, 0, 0, &c)
		slices.SortFunc(c.Cells, func(p, q CellRect) int {
			return cmp.Or(cmp.Compare(p.Y0/BlockSize, q.Y0/BlockSize), cmp.Compare(p.X0, q.X0))
		})
	}
	diffNames(a.names, 0, b.names, 0, func(before, after *entry) {
		var f FeatureChange
		if before != nil {
			f.Before = before.feature
		}
		if after != nil {
			f.After = after.feature
		}
		c.Features = append(c.Features, f)
	})
	slices.SortFunc(c.Features, func(p, q FeatureChange) int { return cmp.Compare(p.name(), q.name()) })
	return c
}

func (f FeatureChange) name() string {
	if f.Before != nil {
		return f.Before.Name
	}
	return f.After.Name
}

func diffNodes(t *tree, a, b *node, level, bx, by int, c *Change) {
	if a == b || a.hash == b.hash {
		return
	}
	if level > 0 {
		for i := range 4 {
			kx, ky := kid(i, level, bx, by)
			if t.area(level-1, kx, ky).IsEmpty() {
				continue
			}
			ka, kb := a, b
			if a.kids != nil {
				ka = a.kids[i]
			}
			if b.kids != nil {
				kb = b.kids[i]
			}
			diffNodes(t, ka, kb, level-1, kx, ky, c)
		}
		return
	}
	var ca, cb blockCells
	t.spell(a, bx, by, &ca)
	t.spell(b, bx, by, &cb)
	r := CellRect{X0: BlockSize, Y0: BlockSize}
	for y := range BlockSize {
		d := (ca.occupied[y] ^ cb.occupied[y]) | (ca.unknown[y] ^ cb.unknown[y])
		if d == 0 {
			continue
		}
		c.CellCount += int64(bits.OnesCount64(d))
		r.X0, r.X1 = min(r.X0, bits.TrailingZeros64(d)), max(r.X1, 64-bits.LeadingZeros64(d))
		r.Y0, r.Y1 = min(r.Y0, y), y+1
	}
	x, y := bx*BlockSize, by*BlockSize
	c.Cells = append(c.Cells, CellRect{x + r.X0, y + r.Y0, x + r.X1, y + r.Y1})
}

// spell writes a leaf's cells out.
func (t *tree) spell(n *node, bx, by int, c *blockCells) {
	if n.cells != nil {
		*c = *n.cells
		return
	}
	columns := t.columnMask(bx)
	for y := range t.blockRows(by) {
		c.set(y, columns, n.fill)
	}
}
