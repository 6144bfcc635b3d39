package planner

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/voronoi"
)

// roomy says whether the way is looked for over Voronoi edges and the open floor.
func (o *Options) roomy() bool { return o.Preference != Shortest && o.unnamed() }

// unnamed says whether the planner is free to take whatever roadmap is best.
func (o *Options) unnamed() bool { return o.Roadmap == Auto && !o.KeepRoadmapPath }

// roadsFor is what roads a roomy way is looked for on.
func (t *task) roadsFor() roadKey {
	return roadKey{t.j.WideUm, graphKey{t.q.Body.MarginUm, true}}
}

// roomy finds the way of least cost over tight Voronoi edges and the open floor, or the
// clearest; nil when a roadmap must be searched instead: it goes against a one-way zone, an
// end touches a solid, a point body asks for an open floor of no width, or rounding puts a
// piece of it too near to something (a passage exactly as wide as the body, with a
// corner to one side). none says that there is no way whatever.
func (t *task) roomy(ctx context.Context) (c *course, none bool, err error) {
	w, err := t.roads(ctx)
	if err != nil {
		return nil, false, unlessUnfit(err)
	}
	var p voronoi.Path
	s, g := t.q.Start.At, t.q.Goal.At
	b, ok := w.Between(s, g)
	if ok && b.ClearanceUm < float64(t.j.NeedUm-leastGapUm) {
		return nil, true, nil
	}
	if t.q.Options.Preference == Clearest {
		p, _, ok, err = w.Roomiest(ctx, s, g, t.j.NeedUm)
	} else {
		p, ok, err = w.Balanced(ctx, s, g, t.j.NeedUm, t.j.Weight)
	}
	t.search.Expanded += p.Expanded
	t.search.Queued += p.Queued
	if err != nil || !ok {
		return nil, false, unlessUnfit(err)
	}
	pts := t.settle(&p)
	if pts == nil {
		return nil, false, nil
	}
	return &course{pts: pts, kind: RoadmapOptimum, bias: meshBias}, false, nil
}

// piecemeal is a polyline, with the clearance that each of its pieces is to keep.
type piecemeal struct {
	t     *task
	pts   []geom.Point
	least []float64 // of the piece from pts[i] to pts[i+1]
}

// settle makes a polyline of a path: in whole micrometres where its pieces stay as
// clear, and stay open where they are, else as it falls; nil when a piece is not clear.
func (t *task) settle(p *voronoi.Path) []geom.Point {
	c := &piecemeal{t: t}
	for _, l := range p.Legs {
		least := 0.0
		if !l.Tight {
			least = t.j.Open()
		}
		for i, q := range l.Points {
			if i == 0 && len(c.pts) > 0 {
				continue
			}
			if len(c.pts) > 0 {
				c.least = append(c.least, least)
			}
			c.pts = append(c.pts, q)
		}
	}
	if len(c.pts) < 2 {
		return nil
	}
	c.merge()
	if q := c.roundAll(); q != nil {
		return q
	}
	if !c.round() {
		return nil
	}
	return joined(c.pts[0], c.pts[1:len(c.pts)-1], c.pts[len(c.pts)-1])
}

// straightUm is how far off a straight piece, in micrometres, a point is that need not be
// one: edges are cut where blocks of the floor meet.
const straightUm = 1

// merge leaves out points that lie on a straight piece between others.
func (c *piecemeal) merge() {
	pts, least := c.pts[:1:1], c.least[:0:0]
	from := 0
	for i := 1; i < len(c.pts); i++ {
		if i+1 < len(c.pts) && c.least[i] == c.least[i-1] && c.straight(from, i+1) {
			continue
		}
		pts, least = append(pts, c.pts[i]), append(least, c.least[i-1])
		from = i
	}
	c.pts, c.least = pts, least
}

func (c *piecemeal) straight(from, to int) bool {
	for i := from + 1; i < to; i++ {
		if d, _ := geom.SegmentDist(c.pts[i], c.pts[from], c.pts[to]); d > straightUm {
			return false
		}
	}
	return c.t.j.Keeps(c.pts[from], c.pts[to], c.least[from])
}

// roundAll puts all points between the ends on the nearest whole micrometres; nil when a piece
// is not clear then, or not open any more.
func (c *piecemeal) roundAll() []geom.Point {
	last := len(c.pts) - 1
	c.t.j.Forget(len(c.pts))
	c.t.survey(c.pts)
	out := make([]geom.Point, 1, last+1)
	out[0] = c.pts[0]
	for i := 1; i <= last; i++ {
		p := c.pts[i]
		if i < last {
			p.X, p.Y = math.Round(p.X), math.Round(p.Y)
		}
		from := out[len(out)-1]
		if p == from && (i < last || len(out) > 1) {
			continue
		}
		if near, ok := c.t.j.Drive(from, p); !ok || near.Um < c.least[i-1] {
			return nil
		}
		out = append(out, p)
	}
	return out
}

// round puts the points between the ends on whole micrometres, one after another, each
// so that the pieces before and behind it are clear.
func (c *piecemeal) round() bool {
	n := len(c.pts)
	fits := func(i int, p geom.Point, open bool) bool {
		before, behind := 0.0, 0.0
		if open {
			before, behind = c.least[i-1], c.least[i]
		}
		return c.t.j.Keeps(c.pts[i-1], p, before) && c.t.j.Keeps(p, c.pts[i+1], behind)
	}
	for i := 1; i+1 < n; i++ {
		if p := c.pts[i]; !c.settled(i, p, fits) {
			return false
		}
	}
	return n > 2 || c.t.j.Sight(c.pts[0], c.pts[1])
}

func (c *piecemeal) settled(i int, p geom.Point, fits func(int, geom.Point, bool) bool) bool {
	near := geom.Point{X: math.Round(p.X), Y: math.Round(p.Y)}
	if fits(i, near, true) {
		c.pts[i] = near
		return true
	}
	for _, q := range roundings(p) {
		if fits(i, q, true) {
			c.pts[i] = q
			return true
		}
	}
	return fits(i, p, false)
}

// roads waits for the roads that a roomy way is looked for on.
func (t *task) roads(ctx context.Context) (*voronoi.Roads, error) {
	return await(ctx, t, t.w.ways.roads, t.roadsFor())
}

// dipUm is by how much, in micrometres, clearance along a drawn edge may fall where along the
// edge it rises: chords are off it by half a millimetre at most.
const dipUm = 500

// roomOf is the smallest clearance along a way but for what its ends leave: from where
// clearance first stops rising to where it last starts to fall.
func (t *task) roomOf(pts []geom.Point) float64 {
	n := len(pts) - 1
	at, piece := make([]float64, n+1), make([]float64, n)
	for i := range pts {
		at[i] = t.j.At(pts[i]).Um
		if i > 0 {
			piece[i-1] = t.j.Segment(pts[i-1], pts[i]).Um
		}
	}
	from, high := 0, at[0]
	for from < n && min(at[from+1], piece[from]) >= high-dipUm {
		from++
		high = max(high, at[from])
	}
	to, top := n, at[n]
	for to > from && min(at[to-1], piece[to-1]) >= top-dipUm {
		to--
		top = max(top, at[to])
	}
	room := min(high, top)
	for i := from; i < to; i++ {
		room = min(room, piece[i])
	}
	return room
}
