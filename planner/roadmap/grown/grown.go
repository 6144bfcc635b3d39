// Package grown is the outline of a floor's solids grown by a body's clearance: the
// border of the places where the body's middle may be. It is exact, of straight pieces
// and arcs (a Minkowski sum with a disc), and has area and perimeter.
//
// A solid grown by r is bounded by its sides moved out by r and by arcs of radius r
// about its convex corners. The outline of the union is what of these pieces lies in
// no other grown solid: pieces are cut where they cross, each part is kept or not by the
// distance of its middle from the solids near it, and what is kept is joined to loops.
//
// So that no two pieces touch without crossing, coincide, or cross a third in one place, the
// cuts are found with radii that are smaller (larger, at radius 0) by up to
// SlackUm, each solid by another amount; then each is moved to where it is at the true
// radius. What has no width at the true radius, such as a passage of exactly 2 r,
// stays as two borders that coincide.
//
// curves.go has the pieces, cut.go their crossings, link.go the loops.
package grown

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/solids"
)

// MaxPieces is how many sides and corners the solids may have together, after those are
// left out that lie wholly in one other grown solid.
const MaxPieces = 1_000_000

// SlackUm is by how much, in micrometres, radii differ from the true ones while crossings
// are looked for, on floors up to 134 m; beyond it grows with the floor's extent. A
// passage that much wider or narrower than twice the radius may be taken for the other.
const SlackUm = 1.0 / 16

func slackOf(b geom.Rect) float64 { return max(SlackUm, max(b.Width(), b.Height())*0x1p-31) }

// Piece is a straight piece or an arc of an outline, the grown solids on its left. An arc
// runs counter-clockwise about Center, from From to To; RadiusUm is 0 for a straight
// piece.
type Piece struct {
	From, To, Center geom.Point
	RadiusUm         float64
	Zone             bool // of a closed zone
}

// Turn is the angle of an arc in radians, 0 < Turn <= 2 pi; 0 for a straight piece.
func (p Piece) Turn() float64 {
	if p.RadiusUm == 0 {
		return 0
	}
	if p.From == p.To {
		return 2 * math.Pi
	}
	x, y := p.From.X-p.Center.X, p.From.Y-p.Center.Y
	u, v := p.To.X-p.Center.X, p.To.Y-p.Center.Y
	t := math.Atan2(float64(x*v)-float64(y*u), float64(x*u)+float64(y*v))
	if t < 0 {
		t += 2 * math.Pi
	}
	return t
}

// LengthUm is the piece's length.
func (p Piece) LengthUm() float64 {
	if p.RadiusUm == 0 {
		return geom.Dist(p.From, p.To)
	}
	return p.RadiusUm * p.Turn()
}

// Loop is one closed border, the grown solids on its left: counter-clockwise around a
// solid (AreaUm2 > 0), clockwise around a free region (AreaUm2 < 0).
type Loop struct {
	Pieces               []Piece
	AreaUm2, PerimeterUm float64
}

// Outline is the border of the grown solids of one version of a floor. With a closed border
// all beyond the floor is solid, and no loop goes about the floor.
type Outline struct {
	Need  roadmap.Need
	Loops []Loop // by where they begin, lowest first, then leftmost
	// AreaUm2 is the area grown over: on a floor with a closed border that of the floor
	// which is not free, otherwise of all grown solids, also beyond the floor.
	AreaUm2     float64
	PerimeterUm float64
	// FreeUm2 is what is left of the floor; with an open border it is not told.
	FreeUm2 float64
	// SlackUm is the package's, for this floor. Area and perimeter are exact but for
	// rounding, and for what the slack takes for the other.
	SlackUm float64
}

// Of is the outline of m's solids for a need. The error is ctx's, or wraps
// roadmap.ErrTooLarge beyond MaxPieces. Time is about linear in the pieces and in the
// pairs of them nearer than the radius.
func Of(ctx context.Context, m *floor.Map, need roadmap.Need) (*Outline, error) {
	return Simplified(ctx, m, need, 0)
}

// Simplified is Of with the raster simplified on the outside: nothing is taken away, and
// what is added is at most what growing by errUm more would add. Of that, two thirds are for
// the depth of notches that are filled (the teeth of walls that slant across the cells; less
// than the clearance), and a sixth each for gaps in rows and in columns of cells: a gap of
// g adds no more to solids grown by r than growing them by sqrt(r² + g²/4) does.
func Simplified(ctx context.Context, m *floor.Map, need roadmap.Need, errUm float64) (*Outline, error) {
	s := &set{m: m, origin: m.Bounds().Min, h: float64(m.Settings().ResolutionUm), slack: slackOf(m.Bounds())}
	r := float64(need.ClearanceUm)
	all, ok := solids.Of(m, need.Zones, solids.Simplification{
		GapCells: int(2 * math.Sqrt(errUm/6*(2*r+errUm/6)) / s.h),
		// What is filled must be within the radius of the chord over it.
		NotchUm: min(errUm*2/3, r-1-s.slack),
	})
	if n := sides(all); !ok || n > MaxPieces {
		return nil, fmt.Errorf("more than %d sides and corners: %w", MaxPieces, roadmap.ErrTooLarge)
	}
	s.add(need, all)
	if err := s.drop(ctx); err != nil {
		return nil, err
	}
	if len(s.curves) > MaxPieces {
		return nil, fmt.Errorf("%d sides and corners, at most %d: %w", len(s.curves), MaxPieces, roadmap.ErrTooLarge)
	}
	if err := s.cut(ctx); err != nil {
		return nil, err
	}
	loops, err := s.link()
	if err != nil {
		return nil, err
	}
	o := &Outline{Need: need, Loops: loops, SlackUm: s.slack}
	for i := range o.Loops {
		l := &o.Loops[i]
		l.measure()
		o.AreaUm2 += l.AreaUm2
		o.PerimeterUm += l.PerimeterUm
	}
	if !m.Settings().OpenBorder {
		b := m.Bounds()
		o.FreeUm2 = -o.AreaUm2
		o.AreaUm2 += b.Width() * b.Height()
	}
	return o, nil
}

// measure sets area and perimeter: the polygon of the pieces' ends by the shoelace
// formula, and a segment of a circle for each arc.
func (l *Loop) measure() {
	o := l.Pieces[0].From
	for _, p := range l.Pieces {
		x, y := p.From.X-o.X, p.From.Y-o.Y
		u, v := p.To.X-o.X, p.To.Y-o.Y
		l.AreaUm2 += (float64(x*v) - float64(y*u)) / 2
		if p.RadiusUm > 0 {
			t := p.Turn()
			l.AreaUm2 += p.RadiusUm * p.RadiusUm * (t - math.Sin(t)) / 2
		}
		l.PerimeterUm += p.LengthUm()
	}
}

// Outside is the loop as a closed polyline on the free side, its first point not repeated:
// arcs as tangents, no place of which stands off by more than errUm.
func (l Loop) Outside(errUm float64) []geom.Point {
	var out []geom.Point
	for _, p := range l.Pieces {
		out = append(out, p.From)
		out = AppendTangents(out, p, errUm)
	}
	return slices.Compact(out)
}

// AppendTangents adds the corners of the fewest tangents of an arc, evenly spaced, that
// stand off from it by at most errUm; nothing for a straight piece.
func AppendTangents(dst []geom.Point, p Piece, errUm float64) []geom.Point {
	if p.RadiusUm == 0 {
		return dst
	}
	turn := p.Turn()
	step := 2 * math.Acos(p.RadiusUm/(p.RadiusUm+errUm))
	n := max(1, math.Ceil(turn/min(step, math.Pi/2)))
	at := math.Atan2(p.From.Y-p.Center.Y, p.From.X-p.Center.X)
	half := turn / n / 2
	far := p.RadiusUm / math.Cos(half)
	for k := range int(n) {
		s, c := math.Sincos(at + (2*float64(k)+1)*half)
		dst = append(dst, geom.Point{X: p.Center.X + float64(far*c), Y: p.Center.Y + float64(far*s)})
	}
	return dst
}

// before orders points from the lowest, then leftmost.
func before(a, b geom.Point) int { return cmp.Or(cmp.Compare(a.Y, b.Y), cmp.Compare(a.X, b.X)) }
