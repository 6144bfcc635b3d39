package planner

import (
	"context"
	"math"
	"slices"

	"example.com/wideberth/planner/voronoi"
)

// gateUm is how far rounding may put a bottleneck's clearance off, in micrometres.
const gateUm = 2e-5

// exactly finds out why there is no way, from the Voronoi edges: the largest clearance
// that any way has, where it is reached, and which zone is in the way when solids are not.
// When the edges know of a way that is clear, it becomes the course. Both are nil where
// the edges cannot tell: an end touches a solid, or the body is a point.
func (t *task) exactly(ctx context.Context) (*course, *Refusal, error) {
	if t.j.NeedUm == 0 {
		return nil, nil, nil
	}
	// Closed zones count on the first roads; edges narrower than the margin are on the second
	// alone, and what only zones close is open there.
	for _, key := range [2]roadKey{{t.q.Body.PreferredUm, graphKey{t.q.Body.MarginUm, true}}, {um: t.q.Body.PreferredUm}} {
		w, err := await(ctx, t, t.w.ways.roads, key)
		if err != nil {
			return nil, nil, unlessUnfit(err)
		}
		b, ok, err := w.Widest(ctx, t.q.Start.At, t.q.Goal.At)
		if err != nil {
			return nil, nil, err
		}
		last := !key.zones || !t.w.rules.HasClosed() && (ok || t.q.Body.MarginUm <= leastGapUm)
		switch {
		case ok && b.ClearanceUm >= float64(t.j.NeedUm)-gateUm:
			return t.through(ctx, w, &b)
		case last && ok:
			return nil, &Refusal{Reason: NoPassage, Bottleneck: t.narrow(&b)}, nil
		case last:
			return nil, &Refusal{Reason: NoPassage, Bottleneck: &Bottleneck{NeededUm: 2 * t.q.Body.Required(), WidthShortUm: 2 * leastGapUm}}, nil
		}
	}
	return nil, nil, nil
}

// leastGapUm is the clearance below which gaps count as closed.
const leastGapUm = 1

// narrow describes a gate that is too narrow.
func (t *task) narrow(b *voronoi.Bottleneck) *Bottleneck {
	g := &Bottleneck{
		Exists: true, At: b.At, NeededUm: 2 * t.q.Body.Required(), WidthShortUm: 1,
		WidthUm: int64(math.Floor(2*b.ClearanceUm + gateUm)),
	}
	for _, name := range b.Gate.Features {
		if name != "" && !slices.Contains(g.Features, name) {
			g.Features = append(g.Features, name)
		}
	}
	return g
}

// through goes where there is room: it is the course if zones allow it, else the first
// zone that does not is to blame.
func (t *task) through(ctx context.Context, w *voronoi.Roads, wide *voronoi.Bottleneck) (*course, *Refusal, error) {
	p, ok, err := w.Balanced(ctx, t.q.Start.At, t.q.Goal.At, t.j.NeedUm, 0)
	t.search.Expanded += p.Expanded
	t.search.Queued += p.Queued
	if err != nil || !ok {
		return nil, nil, unlessUnfit(err)
	}
	if pts := t.settle(&p); pts != nil {
		c := &course{kind: AtMostRoadmapOptimum, roadmap: math.Inf(1), bias: meshBias}
		if c.pts = pts; t.q.Options.Preference == Shortest {
			c.pts, err = t.straighten(ctx, pts)
		}
		return c, nil, err
	}
	for _, l := range p.Legs {
		if f, at := t.forbidden(l.Points); f != nil {
			b := t.narrow(wide)
			b.At, b.Zone, b.Features = at, f.Name, nil
			return nil, &Refusal{Reason: NoPassage, Bottleneck: b}, nil
		}
	}
	return nil, nil, nil
}
