package planner

import (
	"context"
	"math"
	"math/bits"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/internal/rules"
)

// onRouteUm is how far, in micrometres, a pose may be from a route and still count as on
// it, and a point of a route from the line between its neighbours and still count as
// added by describing: two roundings to whole micrometres, at most 0.71 each.
const onRouteUm = 1.5

// kept is the rest of an old any-angle optimum from the pose on, when nothing on this
// version can be shorter; nil when that is not known without a search. pts are that
// rest, without points that describing added, clear on this version.
//
// Let F be the old version's mesh and F' this one's, T the rest of the old route, from x
// to g, R what is solid (or a closed zone) in the old version and not in this one, grown as
// the meshes grow it, and bound(R) the least |x-y| + |y-g| over y in R. T is kept when
// bound(R) >= |T|. A shortest way Q in F' meets R, then |Q| >= bound(R) >= |T|, or it
// does not, then it lies in F, and |Q| >= |T| since the rest of an optimum is one. The same
// with ways of anyangle.DeltaUm more clearance than required shows that Bound holds of T
// here too, and keeps doing so from version to version: when x moves along T by d,
// bound(R) falls by at most d and |T| by d.
//
// That meshes fall short of the true free space by up to DeltaUm does not matter, as long
// as R is grown by that much more: both do at the same places, but where a change moves
// the ends of their cells' slanting sides, each rounded to whole micrometres. A fresh
// plan may be the shorter one by that, a square micrometre over the distance between
// ends, and by twice the pose's distance from the route, at most onRouteUm. One-way
// zones need no regard: T obeys those of this version, or it would not be clear, and
// Q is no longer without them. An end outside F' is left to a search, which joins it to F'
// by exact pieces that may cut a corner short.
func (t *task) kept(ctx context.Context, q *ReplanRequest, pts []geom.Point) *course {
	before, now := q.Old, t.w.m
	if before.Settings() != now.Settings() || t.offUm > onRouteUm {
		return nil
	}
	if q.OldBound == RoadmapOptimum && t.q.Options.roomy() {
		return t.keptRoomy(ctx, before, pts)
	}
	if q.OldBound != AnyAngleOptimum || !t.anyAngle() {
		return nil
	}
	g, err := t.w.ways.meshes.get(ctx, t.needed())
	if err != nil || !g.Contains(pts[0]) || !g.Contains(pts[len(pts)-1]) {
		return nil
	}
	d := detour{from: pts[0], to: pts[len(pts)-1], long: lengthOf(pts)}
	change := t.w.since(before)
	grown := standing{float64(t.j.NeedUm) + meshStandsOff, float64(t.j.RadiusUm) + meshStandsOff}
	for _, f := range change.Features {
		if grow, ok := grown.of(f.Before); ok && rules.Differs(f) && d.overShape(f.Before.Shape, grow) {
			return nil
		}
	}
	for _, c := range change.Cells {
		if d.overCells(before, now, c, grown.solid, gone) {
			return nil
		}
	}
	return &course{pts: pts, kind: AnyAngleOptimum, roadmap: math.Inf(1)}
}

// merged is a way without the points that describing added, as far as the body may drive
// straight from one that is left to the next.
func (t *task) merged(way []geom.Point) []geom.Point {
	pts := append(make([]geom.Point, 0, len(way)), way[0])
	from := 0
	for i := 1; i < len(way); i++ {
		if i+1 < len(way) {
			if d, _ := geom.SegmentDist(way[i], way[from], way[i+1]); d <= onRouteUm {
				continue
			}
		}
		if i > from+1 && !t.drives(way[from], way[i]) {
			pts = append(pts, way[from+1:i]...)
		}
		pts, from = append(pts, way[i]), i
	}
	return pts
}

// keptRoomy is kept for the least cost, or the clearest way, over Voronoi edges and the open
// floor of clearance p (for the clearest the floor's cap).
//
// Let S be all that is solid (or a closed zone) in one of the two versions and not in the
// other, grown by p, T the rest of the old route. T is kept when bound(S) is no less than its
// cost. A way Q that meets S is as long as bound(S), and costs no less. One that does
// not has the same nearest solids all along, as far as they are nearer than p, so the
// same edges, and the same cost as it had before, when it was no cheaper than T. T
// itself does not meet S, since it is no longer than it costs. For the clearest, T must
// have the largest bottleneck of this version besides, and is as short as any that has.
//
// A fresh plan may be the cheaper one by how differently it draws what it shares with
// T: the pose may be off the edge by half a millimetre, where chords are, and these
// may be shorter than others by 3e-4. One-way zones need no regard, as for kept.
func (t *task) keptRoomy(ctx context.Context, before *floor.Map, pts []geom.Point) *course {
	now, p := t.w.m, t.j.Open()
	d := detour{from: pts[0], to: pts[len(pts)-1], long: t.costOf(pts)}
	grown := standing{p + meshStandsOff, p - float64(t.q.Body.MarginUm) + meshStandsOff}
	change := t.w.since(before)
	for _, f := range change.Features {
		if !rules.Differs(f) {
			continue
		}
		for _, f := range [2]*floor.Feature{f.Before, f.After} {
			if grow, ok := grown.of(f); ok && d.overShape(f.Shape, grow) {
				return nil
			}
		}
	}
	for _, c := range change.Cells {
		if d.overCells(before, now, c, grown.solid, either) {
			return nil
		}
	}
	if t.q.Options.Preference == Clearest {
		// A search would wait for them just the same, and the answer must not tell whether
		// they were there.
		w, err := t.roads(ctx)
		if err != nil {
			return nil
		}
		if b, ok := w.Between(d.from, d.to); !ok || b.ClearanceUm > t.roomOf(pts)+onRouteUm {
			return nil
		}
	}
	return &course{pts: pts, kind: RoadmapOptimum, bias: meshBias}
}

// meshStandsOff is how much farther than required a mesh may stand off, and a micrometre
// for rounding here.
const meshStandsOff = anyangle.DeltaUm + 1

// standing is by how much solids and closed zones are grown.
type standing struct{ solid, zone float64 }

// of says whether a feature is an obstacle, and by how much it is grown.
func (s standing) of(f *floor.Feature) (grow float64, ok bool) {
	switch {
	case f == nil:
	case f.Kind == floor.Solid:
		return s.solid, true
	case f.Kind == floor.ClosedZone:
		return s.zone, true
	}
	return 0, false
}

// gone and either pick the bits of cells that count, from those solid before and now.
func gone(was, is uint64) uint64   { return was &^ is }
func either(was, is uint64) uint64 { return was ^ is }

// detour asks whether a way over some place could be shorter than one of that length.
type detour struct {
	from, to geom.Point
	long     float64
}

// overShape is about the places within grow of a shape. Those nearest to the way lie
// about its edges, unless an end is inside.
func (d *detour) overShape(s floor.Shape, grow float64) bool {
	if s.Kind == floor.Polygon && (geom.InPolygon(s.Chains, d.from) || geom.InPolygon(s.Chains, d.to)) {
		return d.over(d.from)
	}
	grow += s.Grow
	if box := s.CoreBounds().Grow(grow); !d.overBox(&box) {
		return false
	}
	for a, b := range s.Edges {
		u := geom.Point{X: grow}
		if long := geom.Dist(a, b); long > 0 {
			u = geom.Point{X: (b.X - a.X) / long * grow, Y: (b.Y - a.Y) / long * grow}
		}
		if d.over(
			geom.Point{X: a.X - u.X + u.Y, Y: a.Y - u.Y - u.X}, geom.Point{X: b.X + u.X + u.Y, Y: b.Y + u.Y - u.X},
			geom.Point{X: b.X + u.X - u.Y, Y: b.Y + u.Y + u.X}, geom.Point{X: a.X - u.X - u.Y, Y: a.Y - u.Y + u.X},
		) {
			return true
		}
	}
	return false
}

// overCells is about the places within grow of cells of c that count, by what is solid in
// either version.
func (d *detour) overCells(before, now *floor.Map, c floor.CellRect, grow float64, count func(was, is uint64) uint64) bool {
	s := now.Settings()
	over := func(c floor.CellRect) bool {
		box := s.CellBounds(c).Grow(grow)
		return d.overBox(&box)
	}
	if !over(c) {
		return false
	}
	const side = floor.BlockSize
	var was, is [side]uint64
	for by := c.Y0 / side; by*side < c.Y1; by++ {
		for bx := c.X0 / side; bx*side < c.X1; bx++ {
			before.SolidBits(bx, by, &was)
			now.SolidBits(bx, by, &is)
			for y := range was {
				for left := count(was[y], is[y]); left != 0; {
					x := bits.TrailingZeros64(left)
					n := bits.TrailingZeros64(^(left >> x))
					if over(floor.CellRect{X0: bx*side + x, Y0: by*side + y, X1: bx*side + x + n, Y1: by*side + y + 1}) {
						return true
					}
					left &^= (math.MaxUint64 >> (side - n)) << x
				}
			}
		}
	}
	return false
}

// overBox is about the places of a rectangle.
func (d *detour) overBox(r *geom.Rect) bool {
	// No place of it is nearer to either end.
	if r.Dist(d.from)+r.Dist(d.to) > float64(d.long*(1+keepSlack)) {
		return false
	}
	ring := r.Corners()
	return d.over(ring[:]...)
}

// over is about the places of a convex polygon, counter-clockwise, or a point.
func (d *detour) over(ring ...geom.Point) bool {
	within := true
	b := ring[len(ring)-1]
	for _, c := range ring {
		if geom.SegmentsTouch(d.from, d.to, b, c) || d.overSegment(b, c) < d.long {
			return true
		}
		within = within && geom.Orient(b, c, d.from) >= 0
		b = c
	}
	return within
}

// overSegment is the length of the shortest way over a place of the segment uv: as light
// goes by a mirror along it, which is where the sum of the two distances is smallest on
// the line; along it, that sum is convex.
func (d *detour) overSegment(u, v geom.Point) float64 {
	at := u
	if long := geom.Dist(u, v); long > 0 {
		ex, ey := (v.X-u.X)/long, (v.Y-u.Y)/long
		foot := func(p geom.Point) (along, off float64) {
			x, y := p.X-u.X, p.Y-u.Y
			return float64(x*ex) + float64(y*ey), math.Abs(float64(x*ey) - float64(y*ex))
		}
		a, ha := foot(d.from)
		b, hb := foot(d.to)
		if ha+hb > 0 {
			a += float64((b - a) * (ha / (ha + hb)))
		}
		a = min(max(a, 0), long)
		at = geom.Point{X: u.X + float64(a*ex), Y: u.Y + float64(a*ey)}
	}
	return geom.Dist(d.from, at) + geom.Dist(at, d.to)
}
