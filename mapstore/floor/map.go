package floor

import (
	"crypto/sha256"
	"iter"

	"example.com/wideberth/mapstore/geom"
)

// Map is the content of one version of a floor. It never changes and is safe for
// any number of readers. Maps that come from one another by Apply share what
// they have in common.
type Map struct {
	settings Settings
	tree     tree
	names    *nameNode // nil when there are no features
	digest   [sha256.Size]byte
}

// New makes the content of version 1: every cell holds s.Initial, and there are no
// features. The error is a SettingsError.
func New(s Settings) (*Map, error) {
	if err := s.Validate(); err != nil {
		return nil, err
	}
	return newMap(s, newTree(s.Columns, s.Rows, s.Initial), nil), nil
}

func newMap(s Settings, t tree, names *nameNode) *Map {
	m := &Map{settings: s, tree: t, names: names}
	h := sha256.New()
	h.Write([]byte("wideberth floor content 1\n"))
	h.Write(appendSettings(nil, s))
	h.Write(t.root.hash[:])
	if names != nil {
		h.Write(names.hash[:])
	}
	h.Sum(m.digest[:0])
	return m
}

// Settings are the floor's.
func (m *Map) Settings() Settings { return m.settings }

// Bounds is the floor's rectangle.
func (m *Map) Bounds() geom.Rect { return m.settings.Bounds() }

// At is what a cell holds; Unknown beyond the floor's edge.
func (m *Map) At(col, row int) Occupancy {
	if !m.onFloor(col, row) {
		return Unknown
	}
	return m.tree.at(col, row)
}

func (m *Map) onFloor(col, row int) bool {
	return col >= 0 && row >= 0 && col < m.settings.Columns && row < m.settings.Rows
}

// Solid says whether a cell blocks, under the floor's policy for unknown cells.
// Beyond the floor's edge everything does.
func (m *Map) Solid(col, row int) bool {
	if !m.onFloor(col, row) {
		return true
	}
	v := m.tree.at(col, row)
	return v == Occupied || v == Unknown && !m.settings.UnknownIsFree
}

// SolidBits writes which cells of block (bx, by) block, bit x of word y, zero
// beyond the floor's edge, and says whether any and whether all cells of the floor in
// the block do. A block wholly beyond the floor has none: false, true.
func (m *Map) SolidBits(bx, by int, words *[BlockSize]uint64) (anySolid, allSolid bool) {
	*words = [BlockSize]uint64{}
	if bx < 0 || by < 0 || m.tree.area(0, bx, by).IsEmpty() {
		return false, true
	}
	n := m.tree.leaf(bx, by)
	columns, rows := m.tree.columnMask(bx), m.tree.blockRows(by)
	if n.uniform() {
		if n.fill == Free || n.fill == Unknown && m.settings.UnknownIsFree {
			return false, false
		}
		for y := range rows {
			words[y] = columns
		}
		return true, true
	}
	allSolid = true
	for y := range rows {
		w := n.cells.occupied[y]
		if !m.settings.UnknownIsFree {
			w |= n.cells.unknown[y]
		}
		words[y] = w
		anySolid = anySolid || w != 0
		allSolid = allSolid && w == columns
	}
	return anySolid, allSolid
}

// ReadCells appends the two-bit cells of r to dst, as PaintCells takes them. r is
// first cut to the floor.
func (m *Map) ReadCells(dst []byte, r CellRect) []byte {
	r = r.Intersect(m.settings.AllCells())
	if r.IsEmpty() {
		return dst
	}
	return m.tree.appendCells(dst, r)
}

// Feature is the feature of that name.
func (m *Map) Feature(name string) (*Feature, bool) {
	if e := m.names.get(name); e != nil {
		return e.feature, true
	}
	return nil, false
}

// Features yields all features by name.
func (m *Map) Features() iter.Seq[*Feature] {
	return func(yield func(*Feature) bool) {
		m.names.walk(func(e *entry) bool { return yield(e.feature) })
	}
}

// FeatureCount is how many there are.
func (m *Map) FeatureCount() int {
	if m.names == nil {
		return 0
	}
	return m.names.count
}

// Digest is SHA-256 over the content: settings, cells and features. Equal content
// has equal digests, whatever the edits it came from and on any machine.
func (m *Map) Digest() [32]byte { return m.digest }
