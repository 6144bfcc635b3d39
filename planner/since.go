package planner

import (
	"sync/atomic"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// since is what differs between an older version and a world's: found once for all robots
// whose routes were checked on that version.
type since struct {
	old *floor.Map
	floor.Change
	boxes []geom.Rect // hold all that differs and that plans regard, features before and after
}

func sinceOf(old, now *floor.Map, c floor.Change) *since {
	d := &since{old: old, Change: c}
	s := now.Settings()
	for _, r := range c.Cells {
		d.boxes = append(d.boxes, s.CellBounds(r))
	}
	for _, f := range c.Features {
		for _, f := range [2]*floor.Feature{f.Before, f.After} {
			if f != nil && f.Kind != floor.Station {
				d.boxes = append(d.boxes, f.Shape.Bounds())
			}
		}
	}
	return d
}

// sinceKept is how many older versions a World keeps the difference from. The one found
// first goes first, which costs the time to find it again and changes no answer. Each
// keeps its version's map, which shares with this one all but what differs.
const sinceKept = 8

// changes are the differences that a World keeps, newest last.
type changes struct{ kept atomic.Pointer[[]*since] }

// from is what differs between an older version of the same settings and this one.
func (c *changes) from(old, now *floor.Map) *since {
	for {
		kept := c.kept.Load()
		var all []*since
		if kept != nil {
			all = *kept
		}
		for _, d := range all {
			if d.old == old {
				return d
			}
		}
		d := sinceOf(old, now, floor.Diff(old, now))
		if c.put(kept, d) {
			return d
		}
	}
}

// put adds d, unless another did meanwhile.
func (c *changes) put(kept *[]*since, d *since) bool {
	var all []*since
	if kept != nil {
		all = (*kept)[max(0, len(*kept)-sinceKept+1):]
	}
	next := append(make([]*since, 0, len(all)+1), all...)
	next = append(next, d)
	return c.kept.CompareAndSwap(kept, &next)
}

// since is what differs between an older version of the same settings and w's.
func (w *World) since(old *floor.Map) *since { return w.changes.from(old, w.m) }
