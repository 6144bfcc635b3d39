package planner

import (
	"context"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
)

// joinReach is how far, in micrometres, an end may be from a mesh and still be joined to
// it by a straight piece: ends with less than anyangle.DeltaUm to spare may lie outside,
// in a wedge between two walls several times as far.
const joinReach = 8 * anyangle.DeltaUm

// meshBias is by how much, in micrometres, a passage may be wider than a body needs and
// still be missed by a mesh.
const meshBias = 2 * anyangle.DeltaUm

// anyAngle says whether the shortest way over all directions is what is asked for: by
// name, or since every metre of what the body needs is as good as another.
func (t *task) anyAngle() bool {
	o := &t.q.Options
	return o.Roadmap == ConvexCells ||
		o.unnamed() && (o.Preference == Shortest || o.Preference == Balanced && t.j.WideUm == t.j.NeedUm)
}

// optimum finds the any-angle optimum; nil when a roadmap must be searched instead: the
// optimum goes against a one-way zone, an end cannot be joined to the mesh exactly,
// the mesh is too large to search, or there is no way in it. A way that no rule
// forbids is a shortest one among those that obey the rules. apart says that the ends
// are in different parts of the mesh, so that only passages within anyangle.DeltaUm of
// too narrow may be left.
func (t *task) optimum(ctx context.Context) (c *course, apart bool, err error) {
	g, err := await(ctx, t, t.w.ways.meshes, t.needed())
	if err != nil {
		return nil, false, unlessUnfit(err)
	}
	start, goal := t.q.Start.At, t.q.Goal.At
	from, okFrom := t.joint(g, start, false)
	to, okTo := t.joint(g, goal, true)
	if !okFrom || !okTo {
		return nil, false, nil
	}
	if !g.Connected(from, to) {
		return nil, true, nil
	}
	way, ok, err := g.Shortest(ctx, from, to)
	t.search.Expanded += way.Expanded
	t.search.Queued += way.Queued
	if err != nil || !ok {
		return nil, false, unlessUnfit(err)
	}
	c = &course{pts: joined(start, way.Points, goal), kind: AnyAngleOptimum, roadmap: math.Inf(1)}
	if from != start || to != goal {
		c.kind, c.bias = AtMostRoadmapOptimum, meshBias
	}
	pts := c.pts
	if n := len(pts); n > 2 && to != goal && t.j.Sight(pts[n-3], goal) {
		pts = slices.Delete(pts, n-2, n-1)
	}
	if len(pts) > 2 && from != start && t.j.Sight(start, pts[2]) {
		pts = slices.Delete(pts, 1, 2)
	}
	t.j.Forget(len(pts))
	t.survey(pts)
	for i := 1; i < len(pts); i++ {
		if _, ok := t.j.Drive(pts[i-1], pts[i]); !ok {
			return nil, false, nil
		}
	}
	c.pts = pts
	return c, false, nil
}

// joint is the place where an end joins the mesh: the end itself when the mesh holds it, or
// a place at most joinReach away, in whole micrometres where that can be, to which the
// body may drive straight, or from which for a goal.
func (t *task) joint(g *anyangle.Mesh, p geom.Point, goal bool) (geom.Point, bool) {
	near, ok := g.Nearest(p, joinReach)
	if !ok || near == p {
		return near, ok
	}
	for q := range rounded(near) {
		a, b := p, q
		if goal {
			a, b = q, p
		}
		if g.Contains(q) && t.j.Sight(a, b) {
			return q, true
		}
	}
	return geom.Point{}, false
}
