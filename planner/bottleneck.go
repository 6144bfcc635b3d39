package planner

import (
	"context"
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/roadmap"
	"example.com/wideberth/planner/internal/rules"
)

// noPassage finds out why no path over the roadmap was found. When the widest way
// turns out to be wide enough after all, between cells that are not free as a whole,
// it becomes the course, unless the request names its roadmap.
func (t *task) noPassage(ctx context.Context) (*course, *Refusal, error) {
	if t.barred != nil {
		return nil, &Refusal{Reason: NoPassage, Bottleneck: t.barred}, nil
	}
	if t.q.Options.unnamed() {
		if c, r, err := t.exactly(ctx); c != nil || r != nil || err != nil {
			return c, r, err
		}
	}
	g, err := t.widest(ctx, t.w.rules)
	if err != nil {
		return nil, nil, err
	}
	o := t.q.Options
	if g != nil && g.least >= float64(t.j.NeedUm) && o.unnamed() {
		c := &course{kind: AtMostRoadmapOptimum, roadmap: math.Inf(1)}
		c.pts, err = t.straighten(ctx, g.way)
		return c, nil, err
	}
	refusal := func(b *Bottleneck) *Refusal { return &Refusal{Reason: NoPassage, Bottleneck: b} }
	if !t.w.rules.HasClosed() && !t.w.rules.HasOneWay() || g != nil && g.least >= float64(t.j.NeedUm) {
		return nil, refusal(t.bottleneck(g)), nil
	}
	free, err := t.widest(ctx, nil)
	if err != nil {
		return nil, nil, err
	}
	if free == nil || g != nil && free.found <= g.found {
		return nil, refusal(t.bottleneck(g)), nil
	}
	b := t.bottleneck(free)
	if free.least >= float64(t.j.NeedUm) {
		if f, at := t.forbidden(free.way); f != nil {
			b.Zone, b.At, b.Features = f.Name, at, nil
		}
	}
	return nil, refusal(b), nil
}

// forbidden is the first zone that keeps the body off a way, and where.
func (t *task) forbidden(way []geom.Point) (*floor.Feature, geom.Point) {
	for i := 1; i < len(way); i++ {
		a, b := way[i-1], way[i]
		f := t.w.rules.Entered(a, b, float64(t.q.Body.RadiusUm))
		if f == nil {
			f = t.w.rules.Against(a, b, rules.BackwardSlackUm)
		}
		if f != nil {
			_, at := f.Shape.SegmentDist(a, b)
			return f, at
		}
	}
	return nil, geom.Point{}
}

// gate is a way and its narrowest place.
type gate struct {
	way   []geom.Point
	found float64 // smallest clearance along the way as the search found it, at most NeedUm
	least float64 // along the way as it was improved
}

// widest finds the widest way and widens it; nil when there is none.
func (t *task) widest(ctx context.Context, r *rules.Rules) (*gate, error) {
	q := &roadmap.WideQuery{
		Frame: t.w.frame, Field: t.w.field, Rules: r, RadiusUm: t.q.Body.RadiusUm, NeedUm: max(1, t.j.NeedUm),
		From: t.q.Start.At, To: t.q.Goal.At, Count: &t.search, Exact: &t.j.Exacts,
	}
	if t.j.NeedUm == 0 { // for a point nothing is narrow
		j := *t.j
		if r == nil {
			j.Rules = new(rules.Rules)
		}
		q.Passes = j.Sight
	}
	if t.shut == roadmap.ToShut { // from the end that has less about it
		q.From, q.To, q.Backward = q.To, q.From, true
	}
	way, ok, err := roadmap.Widest(ctx, q)
	if err != nil || !ok {
		return nil, err
	}
	g := &gate{way: way}
	_, n := t.narrowest(way)
	g.found = min(n, float64(t.j.NeedUm))
	g.way = t.widen(way, r)
	_, g.least = t.narrowest(g.way)
	return g, nil
}

// narrowest is the piece of least clearance, and that clearance.
func (t *task) narrowest(way []geom.Point) (int, float64) {
	at, least := 1, math.Inf(1)
	for i := 1; i < len(way); i++ {
		// Most pieces are known not to be narrower without being measured.
		if least <= float64(t.w.field.Cap()) && t.w.field.SegmentClear(way[i-1], way[i], int64(math.Ceil(least))) {
			continue
		}
		if d := t.j.Segment(way[i-1], way[i]).Um; d < least {
			at, least = i, d
		}
	}
	return at, least
}

// widenPasses is how often the narrowest place of a way is widened.
const widenPasses = 24

// widen moves the narrow places of a way to the middle between what is on their two
// sides. r are the zones to obey, nil for none.
func (t *task) widen(way []geom.Point, r *rules.Rules) []geom.Point {
	allowed := func(a, b geom.Point) bool {
		return r == nil || t.j.Allowed(a, b)
	}
	fits := func(a, b geom.Point, least float64) bool {
		return t.w.field.Bounds().Contains(a) && t.w.field.Bounds().Contains(b) && t.j.Segment(a, b).Um >= least && allowed(a, b)
	}
	// First every bend for itself, keeping what it had.
	way = slices.Clone(way)
	for i := 1; i+1 < len(way); i++ {
		if t.w.field.SegmentClear(way[i], way[i], t.j.NeedUm) {
			continue
		}
		p := t.middle(way[i])
		least := min(t.j.Segment(way[i-1], way[i]).Um, t.j.Segment(way[i], way[i+1]).Um)
		if fits(way[i-1], p, least) && fits(p, way[i+1], least) {
			way[i] = p
		}
	}
	// Then the narrowest place, again and again.
	for range widenPasses {
		i, least := t.narrowest(way)
		if least >= float64(t.j.NeedUm) {
			break
		}
		a, b := way[i-1], way[i]
		p := t.middle(t.j.Segment(a, b).On)
		if p == a || p == b || !fits(a, p, least) || !fits(p, b, least) || min(t.j.Segment(a, p).Um, t.j.Segment(p, b).Um) <= least {
			break
		}
		way = slices.Insert(way, i, p)
	}
	return way
}

// middle goes from p straight away from the nearest solid, at most two cells, to where
// something else is as near, and rounds to whole micrometres.
func (t *task) middle(p geom.Point) geom.Point {
	n := t.j.At(p)
	q, _ := t.across(p, n.At, n.Um, 2*t.w.frame.Res)
	return geom.Point{X: math.Round(q.X), Y: math.Round(q.Y)}
}

// across goes from p, d away from a solid's place at, straight on for at most reach.
// It gives where clearance stops growing as fast as one goes, and the first place
// known to be nearer to something else; both are reach away when there is none.
func (t *task) across(p, at geom.Point, d, reach float64) (mid, beyond geom.Point) {
	if d == 0 {
		return p, p
	}
	ux, uy := (p.X-at.X)/d, (p.Y-at.Y)/d
	step := func(s float64) geom.Point {
		return geom.Point{X: p.X + float64(s*ux), Y: p.Y + float64(s*uy)}
	}
	lo, hi := 0.0, reach
	for hi-lo > 0.25 {
		m := (lo + hi) / 2
		if t.j.At(step(m)).Um >= d+m-0.5 {
			lo = m
		} else {
			hi = m
		}
	}
	return step(lo), step(hi + 1)
}

// bottleneck describes a gate; nil stands for no way at all.
func (t *task) bottleneck(g *gate) *Bottleneck {
	b := &Bottleneck{NeededUm: 2 * t.q.Body.Required()}
	found := 0.0
	if g != nil {
		i, least := t.narrowest(g.way)
		n := t.j.Segment(g.way[i-1], g.way[i])
		_, beyond := t.across(n.On, n.At, n.Um, max(4*t.w.frame.Res, float64(t.j.NeedUm)))
		other := t.j.At(beyond)
		b.Exists, b.At, b.WidthUm = true, n.On, int64(math.Floor(2*least+roundingUm))
		for _, f := range []*floor.Feature{n.Feature, other.Feature} {
			if f != nil && !slices.Contains(b.Features, f.Name) {
				b.Features = append(b.Features, f.Name)
			}
		}
		found = g.found
	}
	// No way keeps more than what the search found plus its shortness.
	most := 2 * (found + float64(roadmap.WidestShort*t.w.frame.Res) + 1)
	b.WidthShortUm = max(0, int64(math.Ceil(most))-b.WidthUm)
	return b
}
