package visibility

import (
	"context"

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
	touched := newRegion(change, f.Map().Settings(), g.need)
	err = parallel.Each(ctx, 0, len(n.links), func() func(int) {
		j := n.judge()
		scratch := make([]int32, len(g.links))
		return func(k int) { n.carry(g, int32(k), was, touched, j, scratch) }
	})
	return n, err
}

// carry makes a node's tangents from those the old graph has found for it, if any. scratch
// is zero for all old nodes, before and after.
func (g *Graph) carry(from *Graph, node int32, was []int32, touched *region, j *judge.Judge, scratch []int32) {
	w := was[node>>1]
	if w < 0 {
		return
	}
	old := from.links[w<<1|node&1].Load()
	if old == nil {
		return
	}
	for i, l := range *old {
		scratch[l.to] = int32(i) + 1
	}
	out := make([]link, 0, len(*old))
	for to := range int32(len(g.links)) {
		if to>>1 == node>>1 {
			continue
		}
		t, ok := g.between(node, to)
		if !ok {
			continue
		}
		if k := was[to>>1]; k >= 0 && !touched.near(t.p, t.q) {
			if i := scratch[k<<1|to&1]; i > 0 {
				l := (*old)[i-1]
				l.to = to
				out = append(out, l)
			}
			continue
		}
		if j.Sight(t.p, t.q) {
			out = append(out, g.link(node, to, t))
		}
	}
	for _, l := range *old {
		scratch[l.to] = 0
	}
	g.links[node].Store(&out)
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

// near says whether the segment ab comes into the region.
func (r *region) near(a, b geom.Point) bool {
	if !r.all.Intersects(geom.BoundsOf(a, b)) || !geom.RectTouchesSegment(r.all, a, b) {
		return false
	}
	for _, k := range r.rects {
		if k.Intersects(geom.BoundsOf(a, b)) && geom.RectTouchesSegment(k, a, b) {
			return true
		}
	}
	return false
}
