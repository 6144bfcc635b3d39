package anyangle

import (
	"cmp"
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
)

// DeltaUm is how far the free space of a mesh may fall short of the true one, in
// micrometres: a place whose clearance is below the required one is never in the
// mesh, one whose clearance is DeltaUm more always is. It is the sum of the parts
// below, rounded up. Sides along an axis fall short by nothing.
const DeltaUm = 1000

const (
	chordUm = 990.0 // most that a corner of the chords outside an arc stands off from it, slackUm included
	slackUm = 2.0   // oblique sides are moved out by this, so that their ends may be rounded (by 0.71 at most)
	snapUm  = 2     // most that a cell's side is moved inward, along x or y, to end on whole micrometres
)

// A block of a mesh is blockSpan by blockSpan blocks of the floor: what is cut, cached and
// shared as one. Larger blocks make for larger cells and faster searches (twice as fast at 2
// as at 1 on a hall of 4096x4096 cells), smaller ones for faster patches.
const (
	blockSpan  = 2
	blockCells = blockSpan * floor.BlockSize
)

// pt is a whole-micrometre point, relative to the lower left corner of a block or of the floor.
type pt struct{ x, y int64 }

// piece is an open convex obstacle: its vertices counter-clockwise, no three in line.
type piece struct {
	v      []pt
	lo, hi pt // bounds
	mitres []mitre
}

// fpt is a point or a direction.
type fpt struct{ x, y float64 }

func newPiece(v []pt) piece {
	p := piece{v: v, lo: v[0], hi: v[0]}
	for _, q := range v[1:] {
		p.lo = pt{min(p.lo.x, q.x), min(p.lo.y, q.y)}
		p.hi = pt{max(p.hi.x, q.x), max(p.hi.y, q.y)}
	}
	return p
}

func rectPiece(x0, y0, x1, y1 int64) piece {
	return piece{v: []pt{{x0, y0}, {x1, y0}, {x1, y1}, {x0, y1}}, lo: pt{x0, y0}, hi: pt{x1, y1}}
}

// touches says whether the closed bounds of p meet the closed rectangle.
func (p *piece) touches(x0, y0, x1, y1 int64) bool {
	return p.lo.x <= x1 && p.hi.x >= x0 && p.lo.y <= y1 && p.hi.y >= y0
}

// moved is p seen from o.
func (p *piece) moved(o pt) piece {
	q := piece{v: make([]pt, len(p.v)), lo: pt{p.lo.x - o.x, p.lo.y - o.y}, hi: pt{p.hi.x - o.x, p.hi.y - o.y}}
	for i, v := range p.v {
		q.v[i] = pt{v.x - o.x, v.y - o.y}
	}
	for i := range p.mitres {
		q.mitres = append(q.mitres, p.mitres[i].moved(o))
	}
	return q
}

// mirror exchanges x and y, but for the mitres.
func (p *piece) mirror() {
	for i, v := range p.v {
		p.v[i] = pt{v.y, v.x}
	}
	slices.Reverse(p.v)
	p.lo, p.hi = pt{p.lo.y, p.lo.x}, pt{p.hi.y, p.hi.x}
}

// tangent is a line that a grown core touches from inside: its normal, and
// whether the normal is an axis and the line therefore kept exactly.
type tangent struct {
	angle float64
	n     fpt
	exact bool
}

// minExactTurn is the smallest turn, in radians, from a side along an axis to the
// next tangent at which their crossing is well placed; below it the axis side's end
// is moved out like an oblique one's.
const minExactTurn = 0.01

// axisTangent is the tangent whose normal points a quarter turns from +x.
func axisTangent(quarter int) tangent {
	n := [4]fpt{{1, 0}, {0, 1}, {-1, 0}, {0, -1}}[((quarter%4)+4)%4]
	return tangent{angle: float64(quarter) * (math.Pi / 2), n: n, exact: true}
}

func angleTangent(a float64) tangent {
	s, c := math.Sincos(a)
	return tangent{angle: a, n: fpt{c, s}}
}

// sideTangent is the tangent along a core's side of direction d.
func sideTangent(d fpt) tangent {
	switch {
	case d.x == 0 && d.y < 0:
		return axisTangent(2)
	case d.x == 0:
		return axisTangent(0)
	case d.y == 0 && d.x > 0:
		return axisTangent(3)
	case d.y == 0:
		return axisTangent(1)
	}
	l := math.Sqrt(float64(d.x*d.x) + float64(d.y*d.y))
	return tangent{angle: math.Atan2(-d.x, d.y), n: fpt{d.y / l, -d.x / l}}
}

// growConvex is a convex polygon around the Minkowski sum of a convex core and a
// disc of radius r: sides that lie along an axis are moved by exactly r (rounded
// up), all others stand off by at most chordUm + slackUm. core is one point, a
// segment, or a polygon counter-clockwise without repeated points.
func growConvex(core []fpt, r float64) piece {
	var out []pt
	var arcs []arc
	n := len(core)
	for i, v := range core {
		var in, to tangent
		turn := 2 * math.Pi
		if n == 1 {
			in, to = axisTangent(0), axisTangent(4)
		} else {
			p, q := core[(i+n-1)%n], core[(i+1)%n]
			in = sideTangent(fpt{v.x - p.x, v.y - p.y})
			to = sideTangent(fpt{q.x - v.x, q.y - v.y})
			turn = to.angle - in.angle
			for turn < 0 {
				turn += 2 * math.Pi
			}
			for turn >= 2*math.Pi {
				turn -= 2 * math.Pi
			}
			if n == 2 {
				turn = math.Pi
			}
			to.angle = in.angle + turn
		}
		out, arcs = appendArc(out, arcs, v, r, in, to)
	}
	chains := slices.Clone(out)
	p := newPiece(hull(out))
	for _, a := range arcs {
		chain := chains[a.from:a.to]
		first, last := chain[0], chain[len(chain)-1]
		at := pt{last.x, first.y}
		if a.upright {
			at = pt{first.x, last.y}
		}
		p.addMitre(at, chain)
	}
	return p
}

// arc is where the corners of a quarter arc between two axes begin and end, and whether the
// first lies on an upright side.
type arc struct {
	from, to int
	upright  bool
}

// appendArc adds the corners of the chords outside the arc about v from tangent in
// to tangent to, which is split at the axes so that extents stay exact, and to arcs the
// quarter arcs between two axes.
func appendArc(out []pt, arcs []arc, v fpt, r float64, in, to tangent) ([]pt, []arc) {
	part := func(in, to tangent) {
		from := len(out)
		if out = appendSubArc(out, v, r, in, to); in.exact && to.exact && math.Abs(to.angle-in.angle-math.Pi/2) < minExactTurn {
			arcs = append(arcs, arc{from, len(out), in.n.x != 0})
		}
	}
	for q := int(math.Floor(in.angle/(math.Pi/2))) + 1; ; q++ {
		t := axisTangent(q)
		if t.angle >= to.angle-minExactTurn {
			break
		}
		if t.angle > in.angle+minExactTurn {
			part(in, t)
			in = t
		}
	}
	part(in, to)
	return out, arcs
}

// chordsFor is how many chords an arc of that turn needs.
func chordsFor(r, turn float64) int {
	step := 2 * math.Acos((r+slackUm)/(r+chordUm))
	return max(1, int(math.Ceil(turn/step-1e-9)))
}

func appendSubArc(out []pt, v fpt, r float64, in, to tangent) []pt {
	turn := to.angle - in.angle
	m := chordsFor(r, turn)
	a := in
	for k := 1; k <= m; k++ {
		b := to
		if k < m {
			b = angleTangent(in.angle + turn*float64(k)/float64(m))
		}
		out = append(out, corner(v, r, a, b))
		a = b
	}
	return out
}

// corner is where tangents a and b about v cross, on whole micrometres. It lies on
// an exact tangent, and within 0.71 µm of one moved out by slackUm.
func corner(v fpt, r float64, a, b tangent) pt {
	half := (b.angle - a.angle) / 2
	if a.exact == b.exact && !a.exact || 2*half < minExactTurn {
		s, c := math.Sincos(a.angle + half)
		l := (r + slackUm) / math.Cos(half)
		return pt{int64(math.Round(v.x + float64(l*c))), int64(math.Round(v.y + float64(l*s)))}
	}
	oa, ob := r+slackUm, r+slackUm
	if a.exact {
		oa = r
	}
	if b.exact {
		ob = r
	}
	det := float64(a.n.x*b.n.y) - float64(a.n.y*b.n.x)
	x := v.x + (float64(oa*b.n.y)-float64(ob*a.n.y))/det
	y := v.y + (float64(ob*a.n.x)-float64(oa*b.n.x))/det
	p := pt{int64(math.Round(x)), int64(math.Round(y))}
	for _, t := range [2]tangent{a, b} {
		if t.exact {
			t.keep(v, r, &p)
		}
	}
	return p
}

// keep puts p on the exact tangent, rounded away from v.
func (t tangent) keep(v fpt, r float64, p *pt) {
	switch {
	case t.n.x > 0:
		p.x = int64(math.Ceil(v.x + r))
	case t.n.x < 0:
		p.x = int64(math.Floor(v.x - r))
	case t.n.y > 0:
		p.y = int64(math.Ceil(v.y + r))
	default:
		p.y = int64(math.Floor(v.y - r))
	}
}

// hull is the convex hull counter-clockwise without points in line (monotone
// chain, Andrew 1979). It sorts v.
func hull(v []pt) []pt {
	slices.SortFunc(v, func(a, b pt) int { return cmp.Or(cmp.Compare(a.x, b.x), cmp.Compare(a.y, b.y)) })
	v = slices.Compact(v)
	if len(v) < 3 {
		return v
	}
	h := make([]pt, 0, len(v)+1)
	add := func(p pt, least int) {
		for len(h) >= least && turnSign(h[len(h)-2], h[len(h)-1], p) <= 0 {
			h = h[:len(h)-1]
		}
		h = append(h, p)
	}
	for _, p := range v {
		add(p, 2)
	}
	least := len(h) + 1
	for i := len(v) - 2; i >= 0; i-- {
		add(v[i], least)
	}
	return h[:len(h)-1]
}

// turnSign is the sign of the turn a, b, c: 1 left, -1 right, 0 in line. Exact for
// pieces of any size a floor can have.
func turnSign(a, b, c pt) int {
	return cmpProducts(b.x-a.x, c.y-a.y, b.y-a.y, c.x-a.x)
}
