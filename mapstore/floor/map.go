package floor

import (
	"errors"
	"iter"

	"example.com/wideberth/mapstore/geom"
)

// Map is the content of one version of a floor.
type Map struct{ settings Settings }

var errTodo = errors.New("floor: not built yet")

// New makes the content of version 1.
func New(s Settings) (*Map, error) { return nil, errTodo }

// Settings are the floor's.
func (m *Map) Settings() Settings { return m.settings }

// Bounds is the floor's rectangle.
func (m *Map) Bounds() geom.Rect { return geom.Rect{} }

// At is what a cell holds.
func (m *Map) At(col, row int) Occupancy { return Unknown }

// Solid says whether a cell blocks, under the floor's policy for unknown cells.
func (m *Map) Solid(col, row int) bool { return true }

// BlockSize is the side of a block in cells.
const BlockSize = 64

// SolidBits writes which cells of block (bx, by) block, bit x of word y, zero
// beyond the floor's edge, and says whether any and whether all cells of the floor in
// the block do.
func (m *Map) SolidBits(bx, by int, words *[BlockSize]uint64) (anySolid, allSolid bool) {
	return false, false
}

// ReadCells appends the two-bit cells of r to dst.
func (m *Map) ReadCells(dst []byte, r CellRect) []byte { return dst }

// Feature is the feature of that name.
func (m *Map) Feature(name string) (*Feature, bool) { return nil, false }

// Features yields all features by name.
func (m *Map) Features() iter.Seq[*Feature] { return func(func(*Feature) bool) {} }

// FeatureCount is how many there are.
func (m *Map) FeatureCount() int { return 0 }

// Digest is SHA-256 over the content.
func (m *Map) Digest() [32]byte { return [32]byte{} }

// Apply carries out edits in order, all or none. The error is an *EditError.
func (m *Map) Apply(edits []Edit) (*Map, error) { return nil, errTodo }

// EditError says which edit cannot be carried out and why.
type EditError struct {
	Index   int    // of the edit
	Path    string // of the field inside the edit, in the contract's words, e.g. "put_feature.feature.solid.polygon.outer.points[2]"
	Problem string // value and wanted range
}

func (e *EditError) Error() string { return e.Path + ": " + e.Problem }

// FeatureChange is a feature that differs. Before is nil when it was added, After
// when it was removed.
type FeatureChange struct{ Before, After *Feature }

// Change is what differs between two maps of one floor.
type Change struct {
	Cells     []CellRect // hold every changed cell; at most one rectangle a block
	CellCount int64
	Features  []FeatureChange // by name
}

// Diff compares two maps of one floor, with work proportional to what differs
// plus the number of features.
func Diff(a, b *Map) Change { return Change{} }
