package cells

import (
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Slit says whether the cell has no width.
func (c *Cell) Slit() bool { return c.X0 == c.X1 }

// Flat says whether the cell has no area.
func (c *Cell) Flat() bool { return c.Area() == 0 }

// Area is the cell's area in square micrometres.
func (c *Cell) Area() float64 {
	return float64(c.X1-c.X0) * (float64(c.Hi0-c.Lo0) + float64(c.Hi1-c.Lo1)) / 2
}

// Above and Below are the solids whose grown outlines the cell lies between; false for a slit.
func (c *Cell) Above() (Source, bool) {
	if c.top == nil {
		return Source{}, false
	}
	return c.top.src, true
}

// Below is the solid below, see Above.
func (c *Cell) Below() (Source, bool) {
	if c.bottom == nil {
		return Source{}, false
	}
	return c.bottom.src, true
}

// Bends says how the lower and the upper side of the free space bend from c to n, which
// begins where c ends: each 1 when what is free stays convex or goes straight on, else -1.
func (c *Cell) Bends(n *Cell) (lower, upper int) {
	lower, upper = 1, 1
	if slopeSign(c.bottom, n.bottom) > 0 {
		lower = -1
	}
	if slopeSign(c.top, n.top) < 0 {
		upper = -1
	}
	return lower, upper
}

// Point is a place given in micrometres from the floor's lower left corner.
func (s *Space) Point(x, y float64) geom.Point {
	return geom.Point{X: s.origin.X + x, Y: s.origin.Y + y}
}

// Ring is cell i's outline, counter-clockwise without repeated points.
func (s *Space) Ring(i int32) []geom.Point {
	c := &s.Cells[i]
	var out []geom.Point
	for _, p := range [4]pt{{c.X0, c.Lo0}, {c.X1, c.Lo1}, {c.X1, c.Hi1}, {c.X0, c.Hi0}} {
		q := s.Point(float64(p.x), float64(p.y))
		if len(out) == 0 || out[len(out)-1] != q && out[0] != q {
			out = append(out, q)
		}
	}
	return out
}

// Centroid is the middle of cell i's area, or of what length it has.
func (s *Space) Centroid(i int32) geom.Point {
	c := &s.Cells[i]
	a, b := float64(c.Hi0-c.Lo0), float64(c.Hi1-c.Lo1)
	m0, m1 := float64(c.Lo0)+a/2, float64(c.Lo1)+b/2
	t := 0.5
	if a+b > 0 {
		t = (a + 2*b) / (3 * (a + b))
	}
	// The middles of upright sections lie in line, m0 to m1.
	return s.Point(float64(c.X0)+float64(t*float64(c.X1-c.X0)), m0+float64(t*(m1-m0)))
}

// Mid is the middle of a wall.
func (s *Space) Mid(w int32) geom.Point {
	k := &s.Walls[w]
	return s.Point(float64(k.X), float64(k.Lo)+float64(k.Hi-k.Lo)/2)
}

// holds says, exactly, whether (x, y) lies in the cell, its sides included. The first
// micrometre of a bevelled cell counts at its wall alone.
func (c *Cell) holds(x, y float64) bool {
	if x < float64(c.X0) || x > float64(c.X1) {
		return false
	}
	if x == float64(c.X0) && y >= float64(c.Lo0) && y <= float64(c.Hi0) ||
		x == float64(c.X1) && y >= float64(c.Lo1) && y <= float64(c.Hi1) {
		return true
	}
	if c.Slit() || c.bevel && x < float64(c.X0+1) {
		return false
	}
	at := func(p pt) geom.Point { return geom.Point{X: float64(p.x), Y: float64(p.y)} }
	p := geom.Point{X: x, Y: y}
	return geom.Orient(at(c.bottom.a), at(c.bottom.b), p) >= 0 && geom.Orient(at(c.top.a), at(c.top.b), p) <= 0
}

// Locate is the cells that hold p, by number.
func (s *Space) Locate(p geom.Point) []int32 {
	var out []int32
	x, y := p.X-s.origin.X, p.Y-s.origin.Y
	s.near(x, 0, func(i int32) {
		if s.Cells[i].holds(x, y) && !slices.Contains(out, i) {
			out = append(out, i)
		}
	})
	slices.Sort(out)
	return out
}

// near calls do for all cells that come within d of x, some more than once.
func (s *Space) near(x, d float64, do func(i int32)) {
	side, n := float64(s.side()), float64(len(s.strips)-1)
	a, b := math.Ceil((x-d)/side)-1, math.Floor((x+d)/side)
	for i := int(max(a, 0)); i <= int(min(b, n)); i++ {
		for k := range s.strips[i].traps {
			if t := &s.strips[i].traps[k]; float64(t.x0) <= x+d && float64(t.x1) >= x-d {
				do(s.ids[i][k])
			}
		}
	}
}

// Entry is how an end of a way comes into the space: at At, in the cells In.
type Entry struct {
	At geom.Point
	In []int32
}

// reachChords is how far, in chords, an end may be from the space and still be joined to it
// by a straight piece: one between two walls lies several times a chord from it.
const reachChords = 8

// Enter joins an end to the space: where it is, or at the nearest place within eight
// chords to which a straight piece keeps the clearance.
func (s *Space) Enter(p geom.Point) (Entry, bool) {
	if in := s.Locate(p); len(in) > 0 {
		return Entry{p, in}, true
	}
	if math.IsNaN(p.X) || math.IsNaN(p.Y) {
		return Entry{}, false
	}
	reach := reachChords * s.chord
	best, at := math.Inf(1), geom.Point{}
	x, y := p.X-s.origin.X, p.Y-s.origin.Y
	q := geom.Point{X: x, Y: y}
	s.near(x, reach, func(i int32) {
		c := &s.Cells[i]
		ring := [4]geom.Point{{X: float64(c.X0), Y: float64(c.Lo0)}, {X: float64(c.X1), Y: float64(c.Lo1)},
			{X: float64(c.X1), Y: float64(c.Hi1)}, {X: float64(c.X0), Y: float64(c.Hi0)}}
		if y < min(ring[0].Y, ring[1].Y)-reach || y > max(ring[2].Y, ring[3].Y)+reach {
			return
		}
		for k := range ring {
			d, on := geom.SegmentDist(q, ring[k], ring[(k+1)%4])
			if d >= best || d > reach {
				continue
			}
			// On a whole micrometre inside, the place is the cell's beyond doubt.
			if to, ok := s.inside(i, on); ok && s.Clear(p, to) {
				best, at = d, to
			}
		}
	})
	if in := s.Locate(at); best < math.Inf(1) && len(in) > 0 {
		return Entry{at, in}, true
	}
	return Entry{}, false
}

// inside is a place of cell i at most a few micrometres from on, which is on its border.
func (s *Space) inside(i int32, on geom.Point) (geom.Point, bool) {
	for d := 0.0; d <= 2; d++ {
		for _, k := range [9][2]float64{{0, 0}, {0, 1}, {0, -1}, {1, 0}, {-1, 0}, {1, 1}, {-1, 1}, {1, -1}, {-1, -1}} {
			x, y := math.Round(on.X+d*k[0]), math.Round(on.Y+d*k[1])
			if s.Cells[i].holds(x, y) {
				return s.Point(x, y), true
			}
		}
	}
	return geom.Point{}, false
}

// Clear says whether the straight piece keeps what the space is for.
func (s *Space) Clear(a, b geom.Point) bool {
	if !s.m.Bounds().Contains(a) || !s.f.SegmentClear(a, b, s.need.ClearanceUm) {
		return false
	}
	if s.need.Zones {
		for f := range s.m.Features() {
			if f.Kind == floor.ClosedZone && (!f.Shape.SegmentDistAtLeast(a, b, float64(max(s.need.ZoneUm, 1)))) {
				return false
			}
		}
	}
	return true
}

// Bytes is about how much memory the space takes, without the field.
func (s *Space) Bytes() int64 {
	n := 80*int64(cap(s.Cells)) + 32*int64(cap(s.Walls)) + 4*int64(cap(s.of)+cap(s.at))
	for i, t := range s.strips {
		n += t.bytes() + 4*int64(len(s.ids[i]))
	}
	return n
}

// Strips is how many strips the floor is swept in, Shared how many of them two spaces share.
func (s *Space) Strips() int { return len(s.strips) }

// Shared is how many strips two spaces share, see Strips.
func (s *Space) Shared(o *Space) int {
	n := 0
	for i, t := range s.strips {
		if i < len(o.strips) && o.strips[i] == t {
			n++
		}
	}
	return n
}

// Smallest is the smallest clearance in a convex region without a solid in it, given by its
// outline: what is nearest to a place inside is nearer to one on the outline.
func Smallest(segment func(a, b geom.Point) float64, ring []geom.Point) int64 {
	best := math.Inf(1)
	for i, p := range ring {
		best = min(best, segment(p, ring[(i+1)%len(ring)]))
	}
	return int64(math.Floor(best))
}

// OnSide is the place above (or below) p, which is in cell i, on its upper (lower) side,
// rounded to the inside.
func (s *Space) OnSide(i int32, p geom.Point, upper bool) geom.Point {
	c := &s.Cells[i]
	x, y := p.X-s.origin.X, p.Y-s.origin.Y
	e, y0, y1 := c.bottom, c.Lo0, c.Lo1
	if upper {
		e, y0, y1 = c.top, c.Hi0, c.Hi1
	}
	switch {
	case x == float64(c.X0):
		return s.Point(x, float64(y0))
	case x == float64(c.X1):
		return s.Point(x, float64(y1))
	case e.a.y == e.b.y:
		return s.Point(x, float64(e.a.y))
	}
	at := float64(e.a.y) + float64(float64(e.b.y-e.a.y)*((x-float64(e.a.x))/float64(e.b.x-e.a.x)))
	if upper {
		return s.Point(x, max(y, math.Floor(at)))
	}
	return s.Point(x, min(y, math.Ceil(at)))
}
