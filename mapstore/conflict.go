package mapstore

import (
	"bytes"
	"context"
	"fmt"
	"sort"

	"example.com/wideberth/mapstore/floor"
)

// judgeBase says whether p, whose base is not the head, may be carried out on the
// head.
func (s *Store) judgeBase(ctx context.Context, f *floorState, p *Patch, head *Snapshot) error {
	if p.Base > head.Info.Version {
		return futureBase(f.id, p.Base, head)
	}
	stale := &StaleBaseError{Base: p.Base, Head: head.Info}
	base := f.get(p.Base)
	if base == nil && p.AllowRebase {
		var err error
		if base, err = s.at(ctx, f, p.Base); err != nil {
			if ctx.Err() != nil {
				return err
			}
			stale.Conflicts = []string{fmt.Sprintf("version %d cannot be compared with any more: %v", p.Base, err)}
			return stale
		}
	}
	if base == nil {
		stale.Conflicts = []string{fmt.Sprintf("version %d is %d versions back and was not compared with", p.Base, head.Info.Version-p.Base)}
		return stale
	}
	stale.Conflicts = conflicts(p.Edits, base, head)
	if p.AllowRebase && len(stale.Conflicts) == 0 {
		return nil
	}
	return stale
}

func futureBase(id string, base int64, head *Snapshot) error {
	return fmt.Errorf("%w: base version %d of floor %q, the head is %d", ErrFutureVersion, base, id, head.Info.Version)
}

// staleRestore is the refusal of a restore: it touches the whole floor, so
// everything that differs is in conflict with it.
func (s *Store) staleRestore(f *floorState, base int64, head *Snapshot) error {
	stale := &StaleBaseError{Base: base, Head: head.Info}
	if old := f.get(base); old != nil {
		c := floor.Diff(old.Map, head.Map)
		for i := range c.Features {
			stale.addFeature(&c.Features[i])
		}
		for _, r := range c.Cells {
			stale.addCells(r)
		}
	}
	if len(stale.Conflicts) == 0 {
		stale.Conflicts = []string{"a restore is for the head alone"}
	}
	return stale
}

func (e *StaleBaseError) addFeature(c *floor.FeatureChange) {
	if len(e.Conflicts) >= MaxConflicts {
		return
	}
	what, name := "changed", ""
	switch {
	case c.Before == nil:
		what, name = "added", c.After.Name
	case c.After == nil:
		what, name = "removed", c.Before.Name
	default:
		name = c.After.Name
	}
	e.Conflicts = append(e.Conflicts, fmt.Sprintf("feature %q was %s after version %d", name, what, e.Base))
}

func (e *StaleBaseError) addCells(r floor.CellRect) {
	if len(e.Conflicts) >= MaxConflicts {
		return
	}
	e.Conflicts = append(e.Conflicts, fmt.Sprintf("cells in columns %d to %d, rows %d to %d were changed after version %d",
		r.X0, r.X1-1, r.Y0, r.Y1-1, e.Base))
}

// maxExactCells bounds how many cells one push compares one by one. Beyond it a
// changed block's rectangle counts as changed throughout, so that a patch made to
// keep the store busy is refused instead.
const maxExactCells = 1 << 24

// conflicts are the features and cells that edits touch and that differ between
// base and head. The work is edits times changed blocks in the edits' rows at worst.
func conflicts(edits []floor.Edit, base, head *Snapshot) []string {
	change := floor.Diff(base.Map, head.Map)
	e := StaleBaseError{Base: base.Info.Version}
	features := make(map[string]*floor.FeatureChange, len(change.Features))
	for i := range change.Features {
		if c := &change.Features[i]; c.After != nil {
			features[c.After.Name] = c
		} else {
			features[c.Before.Name] = c
		}
	}
	var all floor.CellRect
	for _, r := range change.Cells {
		all = all.Union(r)
	}
	said := make([]bool, len(change.Cells))
	var before, after []byte
	exact := int64(maxExactCells)
	for i := range edits {
		if len(e.Conflicts) >= MaxConflicts {
			break
		}
		name, r := touched(&edits[i], head.Map.Settings())
		if c := features[name]; c != nil {
			e.addFeature(c)
			delete(features, name)
		}
		if r.Intersect(all).IsEmpty() {
			continue
		}
		// change.Cells go up by rows of blocks.
		first := sort.Search(len(change.Cells), func(k int) bool {
			return change.Cells[k].Y0/floor.BlockSize >= r.Y0/floor.BlockSize
		})
		for k := first; k < len(change.Cells) && change.Cells[k].Y0/floor.BlockSize*floor.BlockSize < r.Y1; k++ {
			both := change.Cells[k].Intersect(r)
			if said[k] || both.IsEmpty() {
				continue
			}
			if exact -= both.Count(); exact >= 0 {
				before, after = base.Map.ReadCells(before[:0], both), head.Map.ReadCells(after[:0], both)
				if bytes.Equal(before, after) {
					continue
				}
			}
			said[k] = true
			e.addCells(change.Cells[k])
		}
	}
	return e.Conflicts
}

// touched is the feature that an edit names, or the cells that it may paint.
func touched(e *floor.Edit, set floor.Settings) (name string, cells floor.CellRect) {
	switch e.Kind {
	case floor.PutFeature:
		if e.Feature != nil {
			name = e.Feature.Name
		}
	case floor.RemoveFeature:
		name = e.Name
	case floor.PaintPolygon:
		cells = set.TouchedCells(e.Shape.Bounds())
	default:
		cells = e.Rect
	}
	return name, cells
}
