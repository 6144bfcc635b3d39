package visibility

import (
	"math"
	"slices"
	"unsafe"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/roadmap/grown"
)

// arc is a part of a circle that borders free space, counter-clockwise from angle from by
// long radians; a corner when radius is 0. u0 and u1 are the directions of its ends.
type arc struct {
	c          geom.Point
	radius     float64
	from, long float64
	u0, u1     geom.Point
}

const (
	arcBytes  = int64(unsafe.Sizeof(arc{}))
	linkBytes = int64(unsafe.Sizeof(link{}))
)

// angleTol is how far, in radians, tangents may miss an arc's ends.
const angleTol = 1e-9

// whole says whether a is a full circle.
func (a *arc) whole() bool { return a.long >= 2*math.Pi-angleTol }

// wide is the radius that oblique tangents take.
func (a *arc) wide() float64 {
	if a.radius == 0 {
		return 0
	}
	return a.radius + slackUm
}

// place is the place at an angle along the arc, on its wider circle.
func (a *arc) place(t float64) geom.Point {
	s, c := math.Sincos(a.from + t)
	return geom.Point{X: a.c.X + float64(a.wide()*c), Y: a.c.Y + float64(a.wide()*s)}
}

// holds says whether the unit vector v points to the arc.
func (a *arc) holds(v geom.Point) bool {
	if a.whole() {
		return true
	}
	after, ahead := cross(a.u0, v) >= -angleTol, cross(v, a.u1) >= -angleTol
	if a.long <= math.Pi-angleTol {
		return after && ahead && (a.long > angleTol || dot(a.u0, v) > 0)
	}
	return after || ahead
}

// along is the angle from the arc's beginning to v, which it holds.
func (a *arc) along(v geom.Point) float64 {
	t := math.Atan2(cross(a.u0, v), dot(a.u0, v))
	if t < 0 && (t < -2*angleTol || a.whole()) {
		t += 2 * math.Pi
	}
	return max(0, min(t, a.long))
}

func cross(u, v geom.Point) float64 { return float64(u.X*v.Y) - float64(u.Y*v.X) }
func dot(u, v geom.Point) float64   { return float64(u.X*v.X) + float64(u.Y*v.Y) }

// newArc makes an arc from the directions of its ends.
func newArc(c geom.Point, radius float64, u0, u1 geom.Point, long float64) arc {
	return arc{c: c, radius: radius, from: math.Atan2(u0.Y, u0.X), long: long, u0: u0, u1: u1}
}

// arcsOf collects an outline's arcs, and as arcs of no radius its convex corners, on the floor.
func arcsOf(o *grown.Outline, f *clearance.Field) []arc {
	var out []arc
	for _, l := range o.Loops {
		for i, p := range l.Pieces {
			if p.RadiusUm > 0 {
				out = append(out, newArc(p.Center, p.RadiusUm, unit(p.Center, p.From), unit(p.Center, p.To), p.Turn()))
			}
			q := l.Pieces[(i+1)%len(l.Pieces)]
			in, to := ending(p), beginning(q)
			// Arcs run on straight from what is before; only true corners turn.
			if turn := math.Atan2(cross(in, to), dot(in, to)); turn > 1e-6 && p.To == q.From {
				u0, u1 := geom.Point{X: in.Y, Y: -in.X}, geom.Point{X: to.Y, Y: -to.X}
				out = append(out, newArc(p.To, 0, u0, u1, turn))
			}
		}
	}
	if f.Map().Settings().OpenBorder {
		out = onFloor(out, f.Bounds())
	}
	return out
}

// unit is the direction from a to b.
func unit(a, b geom.Point) geom.Point {
	d := geom.Dist(a, b)
	return geom.Point{X: (b.X - a.X) / d, Y: (b.Y - a.Y) / d}
}

// beginning and ending are a piece's directions at its ends.
func beginning(p grown.Piece) geom.Point {
	if p.RadiusUm == 0 {
		return unit(p.From, p.To)
	}
	u := unit(p.Center, p.From)
	return geom.Point{X: -u.Y, Y: u.X}
}

func ending(p grown.Piece) geom.Point {
	if p.RadiusUm == 0 {
		return unit(p.From, p.To)
	}
	u := unit(p.Center, p.To)
	return geom.Point{X: -u.Y, Y: u.X}
}

// onFloor cuts arcs to the floor, where the border is open and solids may lie across it.
func onFloor(arcs []arc, b geom.Rect) []arc {
	var out []arc
	for i := range arcs {
		a := &arcs[i]
		box := geom.BoundsOf(a.c).Grow(a.radius)
		if b.Contains(box.Min) && b.Contains(box.Max) {
			out = append(out, *a)
			continue
		}
		cuts := []float64{0, a.long}
		add := func(x, y float64) {
			if v := (geom.Point{X: x / a.radius, Y: y / a.radius}); a.radius > 0 && a.holds(v) {
				cuts = append(cuts, a.along(v))
			}
		}
		for _, x := range [2]float64{b.Min.X - a.c.X, b.Max.X - a.c.X} {
			if h := (a.radius - x) * (a.radius + x); h >= 0 {
				add(x, math.Sqrt(h))
				add(x, -math.Sqrt(h))
			}
		}
		for _, y := range [2]float64{b.Min.Y - a.c.Y, b.Max.Y - a.c.Y} {
			if h := (a.radius - y) * (a.radius + y); h >= 0 {
				add(math.Sqrt(h), y)
				add(-math.Sqrt(h), y)
			}
		}
		slices.Sort(cuts)
		for k := 1; k < len(cuts); k++ {
			if t := (cuts[k-1] + cuts[k]) / 2; (cuts[k] > cuts[k-1] || a.long == 0) && b.Contains(a.place(t)) {
				s0, c0 := math.Sincos(a.from + cuts[k-1])
				s1, c1 := math.Sincos(a.from + cuts[k])
				out = append(out, newArc(a.c, a.radius, geom.Point{X: c0, Y: s0}, geom.Point{X: c1, Y: s1}, cuts[k]-cuts[k-1]))
			}
		}
	}
	return out
}
