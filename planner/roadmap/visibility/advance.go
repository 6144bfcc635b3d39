package visibility

import (
	"cmp"
	"context"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/parallel"
	"example.com/wideberth/planner/roadmap"
)

// Advance makes the graph of another version. The outline is found anew. Of the tangents that
// have been found, those between arcs that are still there are kept as they are, clear or
// not, unless they come within the clearance of what changed; only those that do, and
// those of new arcs, are looked at again. The error is ctx's or wraps roadmap.ErrTooLarge.
func (g *Graph) Advance(ctx context.Context, f *clearance.Field, change floor.Change) (roadmap.Roadmap, error) {
	n, err := Build(ctx, f, g.need)
	if err != nil {
		return nil, err
	}
	if n.errUm != g.errUm {
		return n, nil
	}
	old := make(map[arc]int32, len(g.arcs))
	for i, a := range g.arcs {
		old[a] = int32(i)
	}
	was := make([]int32, len(n.arcs)) // the old arc of each new one; -1 for none
	for i, a := range n.arcs {
		was[i] = -1
		if k, ok := old[a]; ok {
			was[i] = k
		}
	}
	now := make([]int32, len(g.arcs)) // the new arc of each old one; -1 for none
	for i := range now {
		now[i] = -1
	}
	var fresh []int32
	for i, k := range was {
		if k >= 0 {
			now[k] = int32(i)
		} else {
			fresh = append(fresh, int32(i))
		}
	}
	touched := newRegion(change, f.Map().Settings(), g.need)
	err = parallel.Each(ctx, 0, len(n.arcs), func() func(int) {
		j := n.judge()
		var again []int32
		return func(i int) {
			if k := was[i]; k >= 0 {
				again = n.carry(g, int32(i), k, was, now, fresh, touched, j, again[:0])
			}
		}
	})
	return n, err
}

// carry makes the tangents of an arc, which was arc k of the old graph, from those the old
// graph has found for it, if any.
func (g *Graph) carry(from *Graph, i, k int32, was, now, fresh []int32, touched *region, j *judge.Judge, again []int32) []int32 {
	old := [2]*[]link{from.links[2*k].Load(), from.links[2*k+1].Load()}
	if old[0] == nil && old[1] == nil {
		return again
	}
	again = append(again, fresh...)
	a := &g.arcs[i]
	for to := range g.arcs {
		if was[to] >= 0 && int32(to) != i && touched.between(a, &g.arcs[to]) {
			again = append(again, int32(to))
		}
	}
	slices.Sort(again)
	for s, l := range old {
		if l == nil {
			continue
		}
		node := 2*i + int32(s)
		out := make([]link, 0, len(*l))
		for _, k := range *l {
			to := now[k.to>>1]
			if to < 0 {
				continue
			}
			if _, found := slices.BinarySearch(again, to); !found {
				k.to = to<<1 | k.to&1
				out = append(out, k)
			}
		}
		for _, to := range again {
			for z := range int32(2) {
				if t, ok := g.between(node, 2*to+z); ok && sight(j, t) {
					out = append(out, g.link(node, 2*to+z, t))
				}
			}
		}
		slices.SortFunc(out, func(a, b link) int { return cmp.Compare(a.to, b.to) })
		g.keep(node, out)
	}
	return again
}

// region is what a change may have an effect on: rectangles around all that differs, grown
// by the clearance.
type region struct {
	all   geom.Rect
	rects []geom.Rect
}

func newRegion(c floor.Change, s floor.Settings, need roadmap.Need) *region {
	// A micrometre more for rounding, and where solids are only touched.
	reach := float64(max(need.ClearanceUm, need.ZoneUm)) + 1
	r := &region{all: geom.EmptyRect()}
	add := func(b geom.Rect) {
		b = b.Grow(reach)
		r.rects = append(r.rects, b)
		r.all = r.all.Union(b)
	}
	for _, cells := range c.Cells {
		add(s.CellBounds(cells))
	}
	for _, f := range c.Features {
		for _, v := range [2]*floor.Feature{f.Before, f.After} {
			if v != nil && (v.Kind == floor.Solid || v.Kind == floor.ClosedZone && need.Zones) {
				add(v.Bounds())
			}
		}
	}
	return r
}

// between says whether a tangent of two arcs may come into the region: all of them lie
// within the larger radius of the segment between the centres.
func (r *region) between(a, b *arc) bool {
	wide := max(a.wide(), b.wide())
	box := geom.BoundsOf(a.c, b.c).Grow(wide)
	if !r.all.Intersects(box) || !geom.RectTouchesSegment(r.all.Grow(wide), a.c, b.c) {
		return false
	}
	for _, k := range r.rects {
		if k.Intersects(box) && geom.RectTouchesSegment(k.Grow(wide), a.c, b.c) {
			return true
		}
	}
	return false
}
