package floor

import (
	"fmt"

	"example.com/wideberth/mapstore/geom"
)

// EditError says which edit cannot be carried out and why.
type EditError struct {
	Index   int    // of the edit
	Path    string // of the field inside the edit, in the contract's words, e.g. "put_feature.feature.solid.polygon.outer.points[2]"; empty for the edit as a whole
	Problem string // value and wanted range
}

// Error names the edit, the field and the problem.
func (e *EditError) Error() string {
	if e.Path == "" {
		return fmt.Sprintf("edits[%d]: %s", e.Index, e.Problem)
	}
	return fmt.Sprintf("edits[%d].%s: %s", e.Index, e.Path, e.Problem)
}

// Apply carries out edits in order, all or none, and gives the content that
// results; m stays as it is. The error is an *EditError for the first edit that
// cannot be carried out. The edits' features and their points are kept: they must
// not be written to any more. The work and the memory taken are proportional to
// what the edits touch, not to the floor.
func (m *Map) Apply(edits []Edit) (*Map, error) {
	if len(edits) > MaxEdits {
		return nil, &EditError{Index: MaxEdits, Problem: fmt.Sprintf("%d edits, wanted at most %d", len(edits), MaxEdits)}
	}
	b := m.edit()
	for i := range edits {
		if err := b.apply(&edits[i]); err != nil {
			err.Index = i
			return nil, err
		}
	}
	return b.done(), nil
}

// builder is a Map in the making.
type builder struct {
	checker
	settings Settings
	tree     tree
	names    *nameNode
	steps    int64 // spent of MaxPaintSteps
	cellsPut int64 // spent of MaxPatchCells
}

func (m *Map) edit() *builder {
	return &builder{
		checker:  checker{m.settings.Bounds(), m.settings.AllCells()},
		settings: m.settings, tree: m.tree, names: m.names,
	}
}

func (b *builder) done() *Map {
	b.tree.seal()
	return newMap(b.settings, b.tree, b.names)
}

func (b *builder) apply(e *Edit) *EditError {
	switch e.Kind {
	case PutFeature:
		return b.putFeature("put_feature.feature", e.Feature)
	case RemoveFeature:
		if err := checkName("remove_feature.name", e.Name); err != nil {
			return err
		}
		if b.names.get(e.Name) == nil {
			return fault("remove_feature.name", "there is no feature %q", e.Name)
		}
		b.names = b.names.remove(e.Name)
		return nil
	case PaintRect:
		if err := b.rect("paint_occupancy.rect.rect", e.Rect); err != nil {
			return err
		}
		if err := checkFill("paint_occupancy.rect.occupancy", e.Fill); err != nil {
			return err
		}
		b.tree.fillRect(e.Rect, e.Fill)
		return nil
	case PaintPolygon:
		return b.paintPolygon("paint_occupancy.polygon", e)
	case PaintCells:
		return b.paintCells("paint_occupancy.cells", e)
	case ClearRect:
		if e.Rect.IsEmpty() { // an area that meets no cell
			return nil
		}
		if e.Rect != e.Rect.Intersect(b.cells) {
			return fault("clear_rect.area", "cells %v, wanted cells of the floor", e.Rect)
		}
		b.tree.fillRect(e.Rect, Free)
		return nil
	}
	return fault("", "kind %d, wanted put_feature, remove_feature, paint_occupancy or clear_rect", e.Kind)
}

func (b *builder) putFeature(path string, f *Feature) *EditError {
	f, err := b.feature(path, f)
	if err != nil {
		return err
	}
	e := newEntry(f)
	count, vertices := 1, e.vertices
	if b.names != nil {
		count, vertices = count+b.names.count, vertices+b.names.vertices
	}
	if old := b.names.get(f.Name); old != nil {
		if old.hash == e.hash {
			return nil
		}
		count, vertices = count-1, vertices-old.vertices
	}
	switch {
	case count > MaxFeatures:
		return fault(path, "the floor would have %d features, wanted at most %d", count, MaxFeatures)
	case vertices > MaxVertices:
		return fault(path, "the floor's features would have %d points, wanted at most %d", vertices, MaxVertices)
	}
	b.names = b.names.put(f.Name, e)
	return nil
}

func (b *builder) paintPolygon(path string, e *Edit) *EditError {
	if e.Shape.Kind != Polygon || e.Shape.Grow != 0 {
		return fault(path+".polygon", "wanted a polygon that is not grown")
	}
	if err := b.polygon(path+".polygon", e.Shape.Chains); err != nil {
		return err
	}
	if err := checkFill(path+".occupancy", e.Fill); err != nil {
		return err
	}
	p := newPaint(b.settings, e.Shape.Chains)
	if b.steps += p.steps(); b.steps > MaxPaintSteps {
		return fault(path+".polygon", "painting polygons takes %d steps up to here in this patch, wanted at most %d; use rectangles, or several patches", b.steps, MaxPaintSteps)
	}
	p.paint(&b.tree, e.Fill)
	return nil
}

func (b *builder) paintCells(path string, e *Edit) *EditError {
	if err := b.rect(path+".rect", e.Rect); err != nil {
		return err
	}
	n := e.Rect.Count()
	if len(e.Cells) != packedLen(e.Rect) {
		return fault(path+".cells", "%d bytes, wanted %d for %d cells", len(e.Cells), packedLen(e.Rect), n)
	}
	if b.cellsPut += n; b.cellsPut > MaxPatchCells {
		return fault(path+".cells", "%d cells up to here in this patch, wanted at most %d", b.cellsPut, MaxPatchCells)
	}
	switch at := badCells(e.Cells, n); {
	case at == n:
		return fault(path+".cells", "spare bits of the last byte are set, wanted 0")
	case at >= 0:
		w := int64(e.Rect.X1 - e.Rect.X0)
		return fault(path+".cells", "cell %d (column %d, row %d) holds 3, wanted 0, 1 or 2", at, int64(e.Rect.X0)+at%w, int64(e.Rect.Y0)+at/w)
	}
	b.tree.putCells(e.Rect, e.Cells)
	return nil
}

// Touched is a rectangle that holds all that an edit touches on a floor whose
// content is m: cells painted, a feature's outline, the outline of the feature
// replaced or removed. It is empty for an edit that touches nothing, and may be
// larger than what changes.
func (m *Map) Touched(e *Edit) geom.Rect {
	switch e.Kind {
	case PutFeature:
		if e.Feature == nil {
			return geom.EmptyRect()
		}
		return e.Feature.Bounds().Union(m.featureBounds(e.Feature.Name))
	case RemoveFeature:
		return m.featureBounds(e.Name)
	case PaintPolygon:
		return m.settings.CellBounds(m.settings.TouchedCells(e.Shape.Bounds()))
	}
	return m.settings.CellBounds(e.Rect)
}

// TouchedBy is a rectangle that holds all that edits touch on a floor whose
// content before them is before.
func TouchedBy(edits []Edit, before *Map) geom.Rect {
	r := geom.EmptyRect()
	for i := range edits {
		r = r.Union(before.Touched(&edits[i]))
	}
	return r
}

func (m *Map) featureBounds(name string) geom.Rect {
	if f, ok := m.Feature(name); ok {
		return f.Bounds()
	}
	return geom.EmptyRect()
}

// Bounds is the smallest rectangle that holds the feature's outline, or its place
// for a station.
func (f *Feature) Bounds() geom.Rect {
	if f.Kind == Station {
		return geom.BoundsOf(f.At)
	}
	return f.Shape.Bounds()
}
