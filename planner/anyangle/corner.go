package anyangle

import (
	"cmp"
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// round is a corner of a vector obstacle and the radius of the arc about it, from the floor's
// lower left corner.
type round struct{ x, y, radius float64 }

// rounds adds the corners of a feature, grown by grow, to the blocks that their arcs may touch.
func (g *Mesh) rounds(f *floor.Feature, grow float64, to map[int][]round, wanted map[int]bool) {
	for _, chain := range f.Shape.Chains {
		for _, p := range chain {
			r := round{p.X - g.o.X, p.Y - g.o.Y, grow + f.Shape.Grow}
			x0, y0, x1, y1, ok := g.blocksOf(geom.BoundsOf(p), r.radius+cornerSlack)
			if !ok {
				continue
			}
			for y := y0; y <= y1; y++ {
				for x := x0; x <= x1; x++ {
					if i := x + y*g.bx; wanted[i] {
						to[i] = append(to[i], r)
					}
				}
			}
		}
	}
}

// cornerSlack is how far, at most, a way's bend is from the arc that it stands for.
const cornerSlack = DeltaUm + snapUm

// turnsAbout adds the turns that bend i of a way may stand for, in the order in which the
// way comes by; none when there is none. before are those of the bends before.
func (g *Mesh) turnsAbout(out []turn, pts []geom.Point, i int, before []turn) []turn {
	b := pts[i]
	side, about := bendAt(pts[i-1], b, pts[i+1])
	w := wedge{b: geom.Point{X: b.X - g.o.X, Y: b.Y - g.o.Y}, side: side,
		in: unit(pts[i-1], b), out: unit(b, pts[i+1])}
	add := func(x, y, radius float64) {
		if w.holds(x, y, radius) {
			out = append(out, turn{c: geom.Point{X: x + g.o.X, Y: y + g.o.Y}, radius: radius, side: side, about: about})
		}
	}
	if k := len(before) - 1; k >= 0 && before[k].side == side && before[k].radius > 0 {
		if add(before[k].c.X-g.o.X, before[k].c.Y-g.o.Y, before[k].radius); len(out) > 0 {
			return out // round the same corner still
		}
	}
	g.rasterCorners(&w, add)
	if x0, y0, _, _, ok := g.blocksOf(geom.BoundsOf(b), 0); ok {
		for _, r := range g.blocks[x0+y0*g.bx].rounds {
			add(r.x, r.y, r.radius)
		}
	}
	if len(out) < 2 {
		return out
	}
	dx, dy := w.in.X+w.out.X, w.in.Y+w.out.Y
	along := func(t turn) float64 { return float64(dx*(t.c.X-b.X)) + float64(dy*(t.c.Y-b.Y)) }
	slices.SortStableFunc(out, func(p, q turn) int { return cmp.Compare(along(p), along(q)) })
	for k := range out { // it turns once
		out[k].about = about / float64(len(out))
	}
	return out
}

// wedge is the inner side of a bend at b.
type wedge struct {
	b, in, out geom.Point // in and out are directions
	side       float64
}

// holds says whether the bend may be about (x, y) at that radius.
func (w *wedge) holds(x, y, radius float64) bool {
	dx, dy := x-w.b.X, y-w.b.Y
	if d := math.Sqrt(float64(dx*dx) + float64(dy*dy)); d < radius-1 || d > radius+cornerSlack {
		return false
	}
	// snapUm: a corner of the mesh may be that far beside the chords.
	return float64(w.side*(float64(w.in.X*dy)-float64(w.in.Y*dx))) >= -snapUm &&
		float64(w.side*(float64(w.out.X*dy)-float64(w.out.Y*dx))) >= -snapUm
}

func unit(a, b geom.Point) geom.Point {
	d := geom.Dist(a, b)
	return geom.Point{X: (b.X - a.X) / d, Y: (b.Y - a.Y) / d}
}

// rasterCorners adds the corners of solid cells that a bend may be about.
func (g *Mesh) rasterCorners(w *wedge, add func(x, y, radius float64)) {
	b := w.b
	r := float64(g.need.ClearanceUm)
	h := float64(g.m.Settings().ResolutionUm)
	far, near := r+cornerSlack, max(0, r-1)
	for i := math.Ceil((b.X - far) / h); i <= math.Floor((b.X+far)/h); i++ {
		dx := float64(i*h) - b.X
		most := math.Sqrt(max(0, float64(far*far)-float64(dx*dx)))
		least := math.Sqrt(max(0, float64(near*near)-float64(dx*dx)))
		try := func(y0, y1 float64) {
			for j := math.Ceil(y0 / h); j <= math.Floor(y1/h); j++ {
				if w.holds(float64(i*h), float64(j*h), r) && g.cornerAt(int(i), int(j)) {
					add(float64(i*h), float64(j*h), r)
				}
			}
		}
		if least == 0 {
			try(b.Y-most, b.Y+most)
			continue
		}
		try(b.Y-most, b.Y-least)
		try(b.Y+least, b.Y+most)
	}
}

// cornerAt says whether solid cells have a corner at a lattice vertex that stands out.
func (g *Mesh) cornerAt(i, j int) bool {
	s := g.m.Settings()
	solid := func(c, r int) bool {
		if c < 0 || r < 0 || c >= s.Columns || r >= s.Rows {
			return !s.OpenBorder
		}
		return g.m.Solid(c, r)
	}
	a, b, c, d := solid(i-1, j-1), solid(i, j-1), solid(i-1, j), solid(i, j)
	n := 0
	for _, v := range [4]bool{a, b, c, d} {
		if v {
			n++
		}
	}
	return n == 1 || n == 2 && a == d
}
