package voronoi

import "math"

// plane is a linear equation in a place and a clearance: v·x + g·rho = c.
type plane struct {
	v    vec
	g, c float64
}

// triple appends the places that are equally far from three sites, straight ones taken
// without ends: the problem of Apollonius for points, lines and circles that are
// touched from outside. Each site is an equation in place and clearance (x, rho):
// a side a linear one, a corner a cone. Differences of cones are linear, so two linear
// equations leave a line, and one cone at most two places on it.
func triple(out []vec, i, j, k *site) []vec {
	sites := [3]*site{i, j, k}
	base := -1
	for n, s := range sites {
		if !s.straight {
			base = n
			break
		}
	}
	from := len(out)
	if base < 0 {
		out = threeSides(out, i, j, k)
	} else {
		sites[0], sites[base] = sites[base], sites[0]
		out = coneAndTwo(out, sites)
	}
	for n := from; n < len(out); n++ {
		out[n] = polish(out[n], i, j, k)
	}
	return out
}

func threeSides(out []vec, i, j, k *site) []vec {
	m1, m2 := i.n.sub(j.n), i.n.sub(k.n)
	det := m1.cross(m2)
	if math.Abs(det) < leastTurn {
		return out
	}
	// Seen from i.a: m1·x = i.grow - j.grow - j.n·(j.a - i.a), and so for k.
	c1 := i.grow - j.grow - j.n.dot(j.a.sub(i.a))
	c2 := i.grow - k.grow - k.n.dot(k.a.sub(i.a))
	x := vec{(float64(c1*m2.y) - float64(c2*m1.y)) / det, (float64(m1.x*c2) - float64(m2.x*c1)) / det}
	return append(out, i.a.add(x))
}

// coneAndTwo solves for sites[0], a corner, and two others, seen from that corner and
// with rho counted from its middle.
func coneAndTwo(out []vec, sites [3]*site) []vec {
	p := sites[0]
	var e [2]plane
	for n, s := range sites[1:] {
		if s.straight {
			e[n] = plane{s.n, -1, s.grow - p.grow - s.n.dot(p.a.sub(s.a))}
		} else {
			d, g := s.a.sub(p.a), s.grow-p.grow
			e[n] = plane{d, g, (d.dot(d) - float64(g*g)) / 2}
		}
		l := math.Sqrt(e[n].v.dot(e[n].v) + float64(e[n].g*e[n].g))
		if l == 0 {
			return out
		}
		e[n] = plane{e[n].v.times(1 / l), e[n].g / l, e[n].c / l}
	}
	a, b := e[0], e[1]
	// The line's direction is the cross product of the two normals.
	d := vec{float64(a.v.y*b.g) - float64(a.g*b.v.y), float64(a.g*b.v.x) - float64(a.v.x*b.g)}
	dg := a.v.cross(b.v)
	dd := d.dot(d) + float64(dg*dg)
	if dd < leastTurn*leastTurn {
		return out
	}
	// Its point next to the corner: (a.c (b × d) + b.c (d × a)) / |d|².
	bd, bdg := crossed(b.v, b.g, d, dg)
	da, dag := crossed(d, dg, a.v, a.g)
	z := bd.times(a.c / dd).add(da.times(b.c / dd))
	zg := (float64(a.c*bdg) + float64(b.c*dag)) / dd
	n := 1 / math.Sqrt(dd)
	d, dg = d.times(n), dg*n
	var roots [2]float64
	for _, t := range quadratic(roots[:0], d.dot(d)-float64(dg*dg), 2*(z.dot(d)-float64(zg*dg)), z.dot(z)-float64(zg*zg)) {
		if zg+float64(t*dg) >= 0 { // the cone's upper half
			out = append(out, p.a.add(z.along(d, t)))
		}
	}
	return out
}

// crossed is the cross product of (a, ag) and (b, bg).
func crossed(a vec, ag float64, b vec, bg float64) (vec, float64) {
	return vec{float64(a.y*bg) - float64(ag*b.y), float64(ag*b.x) - float64(a.x*bg)}, a.cross(b)
}

// polish takes Newton steps on the differences of the three distances.
func polish(p vec, i, j, k *site) vec {
	for range 2 {
		ui := i.away(p)
		m1, m2 := ui.sub(j.away(p)), ui.sub(k.away(p))
		det := m1.cross(m2)
		if math.Abs(det) < leastTurn {
			return p
		}
		di := i.dist(p)
		f1, f2 := di-j.dist(p), di-k.dist(p)
		p.x -= (float64(f1*m2.y) - float64(f2*m1.y)) / det
		p.y -= (float64(m1.x*f2) - float64(m2.x*f1)) / det
	}
	return p
}
