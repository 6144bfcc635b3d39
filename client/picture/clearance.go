package picture

import (
	"math"

	"example.com/wideberth/client"
	"example.com/wideberth/mapstore/geom"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// room tells how far the nearest solid of a floor is, for drawing bands. It looks
// at every solid near a place, without an index: a sheet asks a few hundred
// times. Inside, lengths are micrometres, as package geom has them.
type room struct {
	cells  []geom.Rect
	solids []outline
	border *geom.Rect // nil when the floor's border is open
}

// outline is a solid: chains of points grown by a length.
type outline struct {
	box    geom.Rect // holds all of it
	chains [][]geom.Point
	filled bool
	grow   float64
}

// newRoom gathers what lies within reach of an area.
func newRoom(c *client.FloorContent, area box, reach float64) room {
	near := area.grow(reach)
	var r room
	// A frame of one unit a cell: the cells are not coarsened for the eye's sake.
	for _, b := range cellRects(c, frame{area: near, k: 1 / resolution(c.Settings)}, blocks(c)).rects {
		r.cells = append(r.cells, um(b))
	}
	for _, f := range c.Features {
		if f.GetSolid() != nil && featureBox(f).meets(near) {
			r.solids = append(r.solids, outlineOf(f.GetSolid()))
		}
	}
	if !c.Settings.GetOpenBorder() {
		b := um(floorBox(c.Settings))
		r.border = &b
	}
	return r
}

func umPoint(p xy) geom.Point { return geom.Point{X: geom.FromMetres(p.x), Y: geom.FromMetres(p.y)} }

func um(b box) geom.Rect {
	return geom.Rect{Min: umPoint(xy{b.minX, b.minY}), Max: umPoint(xy{b.maxX, b.maxY})}
}

func outlineOf(s *wideberthv1.Solid) outline {
	o := outline{grow: geom.FromMetres(s.GetSurveyToleranceM())}
	switch {
	case s.GetPolygon() != nil:
		o.filled = true
		o.chains = wire.RingsIn(s.GetPolygon())
	case s.GetPolyline() != nil:
		o.chains = [][]geom.Point{wire.PointsIn(s.GetPolyline().GetPoints())}
		o.grow += geom.FromMetres(s.GetPolyline().GetWidthM()) / 2
	default:
		o.chains = [][]geom.Point{{wire.PointIn(s.GetDisc().GetCenter())}}
		o.grow += geom.FromMetres(s.GetDisc().GetRadiusM())
	}
	o.box = geom.BoundsOf(o.chains[0]...).Grow(o.grow)
	return o
}

// dist is the distance from p to the outline, 0 inside.
func (o outline) dist(p geom.Point) float64 {
	if o.filled {
		if geom.InPolygon(o.chains, p) {
			return 0
		}
		d, _ := geom.BorderDist(o.chains, p)
		return max(0, d-o.grow)
	}
	chain := o.chains[0]
	d := geom.Dist(p, chain[0])
	for i := 1; i < len(chain); i++ {
		s, _ := geom.SegmentDist(p, chain[i-1], chain[i])
		d = min(d, s)
	}
	return max(0, d-o.grow)
}

// clearance is the metres from p to the nearest solid, or most if that is less.
func (r room) clearance(at xy, most float64) float64 {
	p, best := umPoint(at), geom.FromMetres(most)
	if b := r.border; b != nil {
		best = min(best, p.X-b.Min.X, b.Max.X-p.X, p.Y-b.Min.Y, b.Max.Y-p.Y)
	}
	for _, c := range r.cells {
		// Most cells are far off in one direction alone.
		if math.Max(c.Min.X-p.X, p.X-c.Max.X) < best && math.Max(c.Min.Y-p.Y, p.Y-c.Max.Y) < best {
			best = min(best, c.Dist(p))
		}
	}
	for _, s := range r.solids {
		if s.box.Dist(p) < best {
			best = min(best, s.dist(p))
		}
	}
	return geom.Metres(max(0, best))
}
