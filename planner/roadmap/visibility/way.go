package visibility

import (
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/judge"
)

// refinements is how often the error at arcs is divided by eight when a polyline runs
// into what is on the other side.
const refinements = 5

// points is the polyline of the way that ends with l, arcs as tangents outside of them.
// ok is false when it is not clear even at the finest error: a passage narrower
// than that, turned in.
func (g *Graph) points(l *label, s, t geom.Point, j *judge.Judge) (pts []geom.Point, ok bool) {
	var labels []*label
	for ; l != nil; l = l.from {
		labels = append(labels, l)
	}
	e := ArcErrorUm
	for range refinements {
		pts = append(pts[:0], s)
		for k := len(labels) - 2; k >= 0; k-- {
			a := labels[k+1]
			if a.node >= 0 {
				pts = g.appendArc(pts, a, labels[k].t, e)
			} else {
				pts = appendNew(pts, a.t.q)
			}
		}
		pts = appendNew(appendNew(pts, labels[0].t.q), t)
		if clear(pts, j) {
			return pts, true
		}
		e /= 8
	}
	return nil, false
}

func appendNew(pts []geom.Point, p geom.Point) []geom.Point {
	if pts[len(pts)-1] == p {
		return pts
	}
	return append(pts, p)
}

func clear(pts []geom.Point, j *judge.Judge) bool {
	for i := 1; i < len(pts); i++ {
		if !j.Sight(pts[i-1], pts[i]) {
			return false
		}
	}
	return true
}

// side is a line that touches a circle about an arc's centre in direction u.
type side struct {
	u    geom.Point
	dist float64
	on   geom.Point // where
}

// appendArc adds the corners of the tangents along the arc where in arrived and out
// leaves. Tangents along x and y between the two touch the arc itself, so that
// it leads through passages of exactly the width needed.
func (g *Graph) appendArc(pts []geom.Point, in *label, out tangent, errUm float64) []geom.Point {
	a := &g.arcs[in.node>>1]
	if a.radius == 0 {
		return appendNew(pts, a.c)
	}
	z := sense(in.node)
	first := side{in.t.w, geom.Dist(a.c, in.t.q), in.t.q}
	last := side{out.v, geom.Dist(a.c, out.p), out.p}
	turn := math.Atan2(z*cross(first.u, last.u), dot(first.u, last.u))
	if turn < -4*angleTol {
		turn += 2 * math.Pi
	}
	if turn <= 4*angleTol {
		return appendNew(appendNew(pts, first.on), last.on)
	}
	at := math.Atan2(first.u.Y, first.u.X)
	from, done := first, 0.0
	// The next axis in the sense of the way.
	step := func(to side, upTo float64) {
		pts = a.appendSides(pts, from, to, at+z*done, upTo-done, z, errUm)
		from, done = to, upTo
	}
	for q := 0; q < 4; q++ {
		k := math.Ceil(z * at / (math.Pi / 2))
		t := (k+float64(q))*(math.Pi/2) - z*at
		if t > done+1e-3 && t < turn-1e-3 {
			// +0 keeps the axis free of signed zeros.
			n := ((int(k)+q)*int(z)%4 + 4) % 4
			u := [4]geom.Point{{X: 1}, {Y: 1}, {X: -1}, {Y: -1}}[n]
			step(side{u, a.radius, geom.Point{X: a.c.X + a.radius*u.X, Y: a.c.Y + a.radius*u.Y}}, t)
		}
	}
	step(last, turn)
	return pts
}

// appendSides adds the corners from one tangent to another, turn radians further on in
// sense z, with as many between as errUm asks for.
func (a *arc) appendSides(pts []geom.Point, from, to side, at, turn, z, errUm float64) []geom.Point {
	wide := a.wide()
	n := max(1, math.Ceil(turn/(2*math.Acos(wide/(wide+errUm)))))
	for k := 1.0; k <= n; k++ {
		next := to
		if k < n {
			s, c := math.Sincos(at + z*turn*k/n)
			next = side{geom.Point{X: c, Y: s}, wide, geom.Point{X: a.c.X + float64(wide*c), Y: a.c.Y + float64(wide*s)}}
		}
		pts = a.appendCorner(pts, from, next)
		from = next
	}
	return pts
}

// appendCorner adds where two tangents of circles about a's centre, hardly different ones,
// meet. When they differ by more than their turn makes up for, the places where they
// touch are joined, which comes no nearer to the centre than the nearer of them.
func (a *arc) appendCorner(pts []geom.Point, s, t side) []geom.Point {
	det := math.Abs(cross(s.u, t.u))
	if diff := math.Abs(s.dist - t.dist); det < 1e-12 || det*det/2*a.radius <= diff {
		return appendNew(appendNew(pts, s.on), t.on)
	}
	det = cross(s.u, t.u)
	p := geom.Point{
		X: a.c.X + (float64(s.dist*t.u.Y)-float64(t.dist*s.u.Y))/det,
		Y: a.c.Y + (float64(t.dist*s.u.X)-float64(s.dist*t.u.X))/det,
	}
	for _, k := range [2]side{s, t} {
		if k.u.X == 0 {
			p.Y = k.on.Y
		}
		if k.u.Y == 0 {
			p.X = k.on.X
		}
	}
	return appendNew(pts, p)
}
