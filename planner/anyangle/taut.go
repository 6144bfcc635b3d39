package anyangle

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// Arc is a bend of a taut way: a part of the circle of RadiusUm about a solid's corner or a
// disc's middle, which the way goes round. With RadiusUm 0 it is the corner itself.
type Arc struct {
	Centre   geom.Point
	RadiusUm float64
	From, To geom.Point // where the straight part before it ends, and the one after it begins
	Turn     float64    // radians, positive to the left
}

// Taut is a way whose bends are solved again: the shortest way about the same corners,
// straight along the common tangents of the arcs about them, where a mesh has chords up
// to DeltaUm outside the arcs.
type Taut struct {
	Arcs     []Arc   // between straight parts
	LengthUm float64 // of tangents and arcs together, to 1e-9 relative
	// Whole says that every bend is about a corner of a solid or zone. One for which none was
	// found stays where it is, as an arc of radius 0.
	Whole bool

	way   Way
	turns []turn
}

// turn is a circle that a way goes round, on its left (side 1) or on its right (-1).
type turn struct {
	c      geom.Point
	radius float64
	side   float64
	about  float64 // radians, roughly how far the way turns there
	pinned bool    // c is one of the way's own points
}

// kink is how far, in radians, a way may turn because the mesh's sides end on whole
// micrometres where they cross. Such a turn stands for no corner and is left out.
const kink = 1e-3

// knot is a turn that a taut string touches.
type knot struct {
	turn
	index   int // among the turns
	in, out geom.Point
	ux, uy  float64 // direction of the straight part before it
	angle   float64 // by which it turns, at least 0
}

// Taut solves the bends of a way that Shortest of this mesh found. The result is never
// longer than the way. It is not clear for certain: a corner that the mesh's chords
// keep out of sight may stand out by less than DeltaUm; see Points. ok is false when the
// way is straight, or leaves no room for tangents. Time is proportional to the bends,
// times the clearance in cells: about a microsecond each for a dozen cells.
func (g *Mesh) Taut(w Way) (t Taut, ok bool) {
	n := len(w.Points)
	if n < 3 {
		return Taut{}, false
	}
	t = Taut{way: w, Whole: true}
	var found []turn
	for i := 1; i < n-1; i++ {
		found = g.turnsAbout(found[:0], w.Points, i, t.turns)
		if len(found) == 0 {
			side, about := bendAt(w.Points[i-1], w.Points[i], w.Points[i+1])
			if about < kink {
				continue
			}
			found = append(found, turn{c: w.Points[i], side: side, about: about, pinned: true})
		}
		for _, f := range found {
			if k := len(t.turns) - 1; k >= 0 && t.turns[k].c == f.c && t.turns[k].radius == f.radius && t.turns[k].side == f.side {
				t.turns[k].about += f.about
				continue
			}
			t.turns = append(t.turns, f)
		}
	}
	knots, long, ok := pull(w.Points[0], w.Points[n-1], t.turns, 0)
	if !ok || long > w.LengthUm {
		return Taut{}, false
	}
	t.LengthUm = long
	for _, k := range knots {
		t.Whole = t.Whole && !k.pinned
		t.Arcs = append(t.Arcs, Arc{Centre: k.c, RadiusUm: k.radius, From: k.in, To: k.out, Turn: k.side * k.angle})
	}
	return t, true
}

// pull draws a string taut between two points and about turns in their order, their radii
// grown by more where there are any. Turns that it does not touch are left out. ok is false
// when two leave no room between them.
func pull(from, to geom.Point, turns []turn, more float64) (knots []knot, length float64, ok bool) {
	knots = make([]knot, 1, len(turns)+2)
	knots[0] = knot{turn: turn{c: from, side: 1}, index: -1, out: from}
	for i := 0; i <= len(turns); i++ {
		q := knot{turn: turn{c: to, side: 1}, index: i}
		if i < len(turns) {
			q.turn = turns[i]
			if q.radius > 0 {
				q.radius += more
			}
		}
		for {
			p := &knots[len(knots)-1]
			dx, dy := q.c.X-p.c.X, q.c.Y-p.c.Y
			d := math.Sqrt(float64(dx*dx) + float64(dy*dy))
			k := float64(q.side*q.radius) - float64(p.side*p.radius)
			apart := p.side != q.side && p.radius > 0 && q.radius > 0
			if d < math.Abs(k) || d == math.Abs(k) && !apart {
				if !apart && i < len(turns) && q.radius <= p.radius { // within p
					break
				}
				if !apart && p.index >= 0 { // p is within q
					knots = knots[:len(knots)-1]
					continue
				}
				return nil, 0, false
			}
			// The normal has the centres at their radii to the left or right.
			c, s := k/d, math.Sqrt(float64((d-k)*(d+k)))/d
			nx, ny := (float64(c*dx)-float64(s*dy))/d, (float64(c*dy)+float64(s*dx))/d
			q.ux, q.uy = ny, -nx
			if p.index >= 0 {
				cross := float64(p.ux*q.uy) - float64(p.uy*q.ux)
				dot := float64(p.ux*q.ux) + float64(p.uy*q.uy)
				angle := math.Atan2(float64(p.side*cross), dot)
				angle += 2 * math.Pi * math.Round((p.about-angle)/(2*math.Pi))
				if angle < 0 {
					knots = knots[:len(knots)-1]
					continue
				}
				p.angle = angle
			}
			p.out = geom.Point{X: p.c.X - float64(p.side*p.radius*nx), Y: p.c.Y - float64(p.side*p.radius*ny)}
			q.in = geom.Point{X: q.c.X - float64(q.side*q.radius*nx), Y: q.c.Y - float64(q.side*q.radius*ny)}
			knots = append(knots, q)
			break
		}
	}
	last := len(knots) - 1
	for i := 1; i <= last; i++ {
		length += geom.Dist(knots[i-1].out, knots[i].in) + float64(knots[i].radius*knots[i].angle)
	}
	return knots[1:last], length, true
}

// roomUm is by how much, in micrometres, the arcs of a polyline are larger: its points are
// put on whole micrometres, 0.71 µm off at most.
const roomUm = 0.75

// leastOffUm is the nearest, in micrometres, that Points takes corners to arcs.
const leastOffUm = 10

// Points are a polyline on the safe side of a taut way: its pieces touch the arcs from
// outside, and its corners, on whole micrometres, are within offUm of them (10 at least;
// nearer where it would else be no shorter than the way was). It is nil when it is no
// shorter than the way even so, as for radii of a few micrometres and through passages
// with no room to spare, or when a piece is not clear, as clear says; the
// way is then the better one. An arc of radius r that turns by a takes
// ceil(a / 2acos(r/(r+offUm))) points, and the pieces are longer than it by at most
// 2/3·offUm·a, and 1.5 µm a radian for rounding.
func (t *Taut) Points(offUm float64, clear func(a, b geom.Point) bool) []geom.Point {
	from, to := t.way.Points[0], t.way.Points[len(t.way.Points)-1]
	knots, long, ok := pull(from, to, t.turns, roomUm)
	if !ok || long >= t.way.LengthUm {
		return nil
	}
	offUm = max(offUm, leastOffUm)
	pts := layOut(from, to, knots, offUm)
	for lengthOf(pts) >= t.way.LengthUm {
		if offUm == leastOffUm {
			return nil
		}
		offUm = max(offUm/2, leastOffUm)
		pts = layOut(from, to, knots, offUm)
	}
	for i := 1; i < len(pts); i++ {
		if !clear(pts[i-1], pts[i]) {
			return nil
		}
	}
	return pts
}

func lengthOf(pts []geom.Point) (length float64) {
	for i := 1; i < len(pts); i++ {
		length += geom.Dist(pts[i-1], pts[i])
	}
	return length
}

// bendAt is how a way bends at b, coming from a and going to c.
func bendAt(a, b, c geom.Point) (side, about float64) {
	ux, uy, vx, vy := b.X-a.X, b.Y-a.Y, c.X-b.X, c.Y-b.Y
	about = math.Atan2(float64(ux*vy)-float64(uy*vx), float64(ux*vx)+float64(uy*vy))
	if about < 0 {
		return -1, -about
	}
	return 1, about
}

// layOut is the polyline about knots.
func layOut(from, to geom.Point, knots []knot, off float64) []geom.Point {
	pts := append(make([]geom.Point, 0, 4*len(knots)+2), from)
	put := func(p geom.Point) {
		if p != pts[len(pts)-1] {
			pts = append(pts, p)
		}
	}
	for i := range knots {
		k := &knots[i]
		if k.radius == 0 {
			put(k.c)
			continue
		}
		n := max(1, math.Ceil(k.angle/(2*math.Acos(k.radius/(k.radius+off-1.5)))))
		half := k.angle / n / 2
		l := k.radius / math.Cos(half)
		// The normal at the arc's begin, turned by half a chord, and then by one after the other.
		nx, ny := (k.in.X-k.c.X)/k.radius, (k.in.Y-k.c.Y)/k.radius
		for j := 0.0; j < n; j++ {
			s, c := math.Sincos(float64(k.side*half) * (2*j + 1))
			put(geom.Point{
				X: math.Round(k.c.X + float64(l*(float64(nx*c)-float64(ny*s)))),
				Y: math.Round(k.c.Y + float64(l*(float64(nx*s)+float64(ny*c)))),
			})
		}
	}
	put(to)
	return pts
}
