package cells

import (
	"cmp"
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// slackUm is by how much, in micrometres, oblique sides of grown outlines are moved out
// so that their ends may be rounded, by 0.71 at most.
const slackUm = 2.0

// minExactTurn is the smallest turn, in radians, from a side along an axis to the
// next tangent at which their crossing is well placed; below it the axis side's end
// is moved out like an oblique one's.
const minExactTurn = 0.01

// tangent is a line that a grown solid touches from inside: its normal, and
// whether that is an axis and the line therefore kept exactly.
type tangent struct {
	angle, nx, ny float64
	exact         bool
}

// axisTangent is the tangent whose normal points a quarter turns from +x.
func axisTangent(quarter int) tangent {
	n := [4][2]float64{{1, 0}, {0, 1}, {-1, 0}, {0, -1}}[((quarter%4)+4)%4]
	return tangent{float64(quarter) * (math.Pi / 2), n[0], n[1], true}
}

func angleTangent(a float64) tangent {
	s, c := math.Sincos(a)
	return tangent{angle: a, nx: c, ny: s}
}

// sideTangent is the tangent along a side from p to q.
func sideTangent(p, q pt) tangent {
	switch {
	case q.x == p.x && q.y < p.y:
		return axisTangent(2)
	case q.x == p.x:
		return axisTangent(0)
	case q.y == p.y && q.x > p.x:
		return axisTangent(3)
	case q.y == p.y:
		return axisTangent(1)
	}
	dx, dy := float64(q.x-p.x), float64(q.y-p.y)
	l := math.Sqrt(float64(dx*dx) + float64(dy*dy))
	return tangent{angle: math.Atan2(-dx, dy), nx: dy / l, ny: -dx / l}
}

// touch is where the tangent touches a disc of radius r about v, but further by along on its
// way, on whole micrometres and not inside the tangent's line.
func (t tangent) touch(v pt, r, along float64) pt {
	if !t.exact {
		r += slackUm
	}
	x, y := float64(t.nx*r)-float64(t.ny*along), float64(t.ny*r)+float64(t.nx*along)
	p := pt{v.x + int64(math.Round(x)), v.y + int64(math.Round(y))}
	if t.exact {
		t.keep(v, r, &p)
	}
	return p
}

// keep puts p on the exact tangent, rounded away from v.
func (t tangent) keep(v pt, r float64, p *pt) {
	out := int64(math.Ceil(r))
	switch {
	case t.nx > 0:
		p.x = v.x + out
	case t.nx < 0:
		p.x = v.x - out
	case t.ny > 0:
		p.y = v.y + out
	default:
		p.y = v.y - out
	}
}

// corner is where tangents a and b about v cross, on whole micrometres. It lies on
// an exact tangent, and within 0.71 µm of one moved out by slackUm.
func corner(v pt, r float64, a, b tangent) pt {
	half := (b.angle - a.angle) / 2
	if a.exact == b.exact && !a.exact || 2*half < minExactTurn {
		s, c := math.Sincos(a.angle + half)
		l := (r + slackUm) / math.Cos(half)
		return pt{v.x + int64(math.Round(float64(l*c))), v.y + int64(math.Round(float64(l*s)))}
	}
	oa, ob := r+slackUm, r+slackUm
	if a.exact {
		oa = r
	}
	if b.exact {
		ob = r
	}
	det := float64(a.nx*b.ny) - float64(a.ny*b.nx)
	x := (float64(oa*b.ny) - float64(ob*a.ny)) / det
	y := (float64(ob*a.nx) - float64(oa*b.nx)) / det
	p := pt{v.x + int64(math.Round(x)), v.y + int64(math.Round(y))}
	for _, t := range [2]tangent{a, b} {
		if t.exact {
			t.keep(v, r, &p)
		}
	}
	return p
}

// appendArc adds the corners of the chords outside the arc about v from tangent in
// to tangent to, which is split at the axes so that extents stay exact. No corner
// stands off from the arc by more than chord.
func appendArc(out []pt, v pt, r, chord float64, in, to tangent) []pt {
	part := func(a, b tangent) {
		angle := b.angle - a.angle
		most := 2 * math.Acos((r+slackUm)/(r+max(chord, 2*slackUm)))
		m := max(1, int(math.Ceil(angle/min(most, math.Pi/2)-1e-9)))
		from := a
		for k := 1; k <= m; k++ {
			t := b
			if k < m {
				t = angleTangent(a.angle + angle*float64(k)/float64(m))
			}
			out = append(out, corner(v, r, from, t))
			from = t
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
	return out
}

// growRing adds the outline of what a ring has on its left, grown by r. At inner
// corners it goes by the corner itself: what it then runs round twice
// is inside, so a place is free where no outline covers it.
func (o *outline) growRing(ring []pt, r, chord float64, src Source) {
	ring = withoutFlat(ring)
	n := len(ring)
	var out []pt
	sound := true
	switch {
	case r == 0:
		out = ring
	case n == 1:
		out = appendArc(nil, ring[0], r, chord, axisTangent(0), axisTangent(4))
	default:
		for i, v := range ring {
			p, q := ring[(i+n-1)%n], ring[(i+1)%n]
			from := len(out)
			in, to := sideTangent(p, v), sideTangent(v, q)
			side := turn(p, v, q)
			if side < 0 {
				// A little too far, so that the two sides cross in spite of rounding.
				out = append(out, in.touch(v, r, slackUm), v, to.touch(v, r, -slackUm))
				sound = sound && (from == 0 || along(p, v, out[from-1], out[from]))
				continue
			}
			angle := to.angle - in.angle
			for angle < 0 {
				angle += 2 * math.Pi
			}
			if side == 0 {
				angle = math.Pi // the end of a line
			}
			to.angle = in.angle + angle
			out = appendArc(out, v, r, chord, in, to)
			sound = sound && (from == 0 || along(p, v, out[from-1], out[from]))
			for k := from + 1; k < len(out); k++ {
				sound = sound && turn(v, out[k-1], out[k]) > 0
			}
		}
		sound = sound && along(ring[n-1], ring[0], out[len(out)-1], out[0])
	}
	if !sound {
		o.growSides(ring, r, chord, src)
		return
	}
	for i, p := range out {
		o.put(p, out[(i+1)%len(out)], src)
	}
}

// along says whether the side from a to b of a grown outline goes the way of the side from p to q.
func along(p, q, a, b pt) bool {
	dx, dy := sign(q.x-p.x), sign(q.y-p.y)
	ex, ey := b.x-a.x, b.y-a.y
	if dx != 0 && (q.x-p.x)*dx >= (q.y-p.y)*dy { // mostly along x
		return ex*dx > 0
	}
	return ey*dy > 0
}

// growSides does growRing's work where sides are too short for the slack at their
// ends: it covers the ring and, one by one, its sides grown.
func (o *outline) growSides(ring []pt, r, chord float64, src Source) {
	for i, p := range ring {
		q := ring[(i+1)%len(ring)]
		o.put(p, q, src)
		v := appendArc(nil, p, r, chord, axisTangent(0), axisTangent(4))
		v = hull(appendArc(v, q, r, chord, axisTangent(0), axisTangent(4)))
		for k, a := range v {
			o.put(a, v[(k+1)%len(v)], src)
		}
	}
}

// hull is the convex hull counter-clockwise without points in line (monotone
// chain, Andrew 1979). It sorts v.
func hull(v []pt) []pt {
	slices.SortFunc(v, func(a, b pt) int { return cmp.Or(cmp.Compare(a.x, b.x), cmp.Compare(a.y, b.y)) })
	v = slices.Compact(v)
	h := make([]pt, 0, len(v)+1)
	add := func(p pt, least int) {
		for len(h) >= least && turn(h[len(h)-2], h[len(h)-1], p) <= 0 {
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

// withoutFlat leaves out points that are repeated or lie on a straight side.
func withoutFlat(ring []pt) []pt {
	var out []pt
	for _, p := range ring {
		if len(out) == 0 || out[len(out)-1] != p {
			out = append(out, p)
		}
	}
	for len(out) > 1 && out[len(out)-1] == out[0] {
		out = out[:len(out)-1]
	}
	n := len(out)
	if n < 3 {
		return out
	}
	keep := make([]pt, 0, n)
	for i, v := range out {
		p, q := out[(i+n-1)%n], out[(i+1)%n]
		if turn(p, v, q) != 0 || (v.x-p.x)*sign(q.x-v.x) < 0 || (v.y-p.y)*sign(q.y-v.y) < 0 {
			keep = append(keep, v)
		}
	}
	return keep
}

func sign(a int64) int64 {
	switch {
	case a > 0:
		return 1
	case a < 0:
		return -1
	}
	return 0
}

// growShape adds a feature's outline grown by r, seen from the floor's origin o.
func (o *outline) growShape(f *floor.Feature, r, chord float64, origin geom.Point) {
	s := f.Shape
	r += s.Grow
	src := Source{Named, f.Name}
	for i, c := range s.Chains {
		ring := make([]pt, len(c))
		for k, p := range c {
			ring[k] = pt{int64(math.Round(p.X - origin.X)), int64(math.Round(p.Y - origin.Y))}
		}
		switch s.Kind {
		case floor.Polyline: // there and back
			for k := len(ring) - 2; k > 0; k-- {
				ring = append(ring, ring[k])
			}
		case floor.Polygon:
			if (geom.Ring(c).SignedArea() < 0) == (i == 0) {
				for a, b := 0, len(ring)-1; a < b; a, b = a+1, b-1 {
					ring[a], ring[b] = ring[b], ring[a]
				}
			}
		}
		o.growRing(ring, r, chord, src)
	}
}
