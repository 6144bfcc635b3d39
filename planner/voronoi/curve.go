package voronoi

import "math"

// shape is the kind of a curve.
type shape uint8

const (
	line shape = iota
	parabola
	hyperbola
)

// curve is where two sites are equally far, straight ones taken without ends: a
// line, a parabola (a corner and a side) or a branch of a hyperbola (corners grown by
// different amounts). With s the coordinate along u from o, a place of it is
//
//	line       o + s u
//	parabola   o + s u + s²/(2h) w
//	hyperbola  o + s u + a sqrt(1 + s²/b²) w
//
// Clearance along it is either linear in s, rising along u (two sides), or least at s
// = 0 and rising both ways.
type curve struct {
	shape shape
	o     vec
	u, w  vec
	h     float64 // parabola: height of the focus above the directrix
	a, b  float64 // hyperbola: half axes; a is signed

	linear     bool    // clearance is base + rate·s
	base, rate float64 // linear; else base is the focus's grow
	focal      float64 // not linear: half the distance of the foci; parabola: h/2
}

// Thresholds below which two sites have no curve between them, and what is steep.
const (
	// leastFocusUm: the outline of one touches the other's from inside; their nearest
	// places agree wherever they are equally far.
	leastFocusUm = 1e-6
	// leastTurn is the least angle, in radians, between two sides that tells them from
	// one side.
	leastTurn = 1e-9
	// steep is how far a steep curve goes for a micrometre of its parameter.
	steep = 16
)

// bisector is the curve between two sites. mid is a place near what is wanted of it.
func bisector(i, j *site, mid vec) (curve, bool) {
	switch {
	case i.straight && j.straight:
		return betweenSides(i, j, mid)
	case i.straight:
		return betweenCornerAndSide(j, i)
	case j.straight:
		return betweenCornerAndSide(i, j)
	}
	return betweenCorners(i, j)
}

func betweenSides(i, j *site, mid vec) (curve, bool) {
	m := i.n.sub(j.n)
	l := m.length()
	if l < leastTurn {
		return curve{}, false
	}
	// i.n·(x-i.a) - i.grow = j.n·(x-j.a) - j.grow
	off := mid.sub(i.a).dot(i.n) - i.grow - mid.sub(j.a).dot(j.n) + j.grow
	o := mid.along(m, -off/float64(l*l))
	u := m.times(1 / l).left()
	rate := i.n.dot(u)
	if rate < 0 {
		u, rate = u.times(-1), -rate
	}
	return curve{shape: line, o: o, u: u, linear: true, base: i.dist(o), rate: rate}, true
}

func betweenCornerAndSide(f, s *site) (curve, bool) {
	h := f.a.sub(s.a).dot(s.n) + f.grow - s.grow
	if h <= leastFocusUm {
		return curve{}, false
	}
	return curve{shape: parabola, o: f.a.along(s.n, -h/2), u: s.t, w: s.n, h: h, base: f.grow, focal: h / 2}, true
}

func betweenCorners(i, j *site) (curve, bool) {
	d := j.a.sub(i.a)
	l := d.length()
	diff := i.grow - j.grow
	if l <= math.Abs(diff)+leastFocusUm {
		return curve{}, false
	}
	e := d.times(1 / l)
	c := curve{shape: line, o: i.a.along(d, 0.5), u: e.left(), w: e, base: i.grow, focal: l / 2, b: l / 2}
	if diff != 0 {
		c.shape, c.a = hyperbola, diff/2
		c.b = math.Sqrt(float64((l-diff)*(l+diff))) / 2
	}
	return c, true
}

// at is the place at s.
func (c *curve) at(s float64) vec {
	p := c.o.along(c.u, s)
	switch c.shape {
	case parabola:
		return p.along(c.w, float64(s*s)/(2*c.h))
	case hyperbola:
		return p.along(c.w, c.a*math.Sqrt(1+float64(s*s)/float64(c.b*c.b)))
	}
	return p
}

// toward is the derivative of at.
func (c *curve) toward(s float64) vec {
	switch c.shape {
	case parabola:
		return c.u.along(c.w, s/c.h)
	case hyperbola:
		return c.u.along(c.w, c.a*s/(float64(c.b*c.b)*math.Sqrt(1+float64(s*s)/float64(c.b*c.b))))
	}
	return c.u
}

// tiny says whether the curve from s0 to s1 is so short that it is nothing. Where it
// is steep its parameters tell less than its length.
func (c *curve) tiny(s0, s1 float64) bool {
	return s1-s0 < joinUm/8 && (s1-s0)*c.toward((s0+s1)/2).length() < joinUm/8
}

// param is the s of the place next to p across u.
func (c *curve) param(p vec) float64 { return p.sub(c.o).dot(c.u) }

// settle takes Newton steps along a steep curve from s, a place that sites i, one of the
// curve's own, and k are as far from: there a rounded place says little about its parameter.
func (c *curve) settle(s float64, i, k *site) float64 {
	for range 2 {
		g := c.toward(s)
		if g.dot(g) < steep*steep {
			return s
		}
		p := c.at(s)
		rate := k.away(p).sub(i.away(p)).dot(g)
		if math.Abs(rate) < leastTurn*g.length() {
			return s
		}
		s -= (k.dist(p) - i.dist(p)) / rate
	}
	return s
}

// clearance is the distance from the curve's two sites at s.
func (c *curve) clearance(s float64) float64 {
	switch {
	case c.linear:
		return c.base + float64(c.rate*s)
	case c.shape == parabola:
		return c.h/2 + float64(s*s)/(2*c.h) - c.base
	}
	return c.focal*math.Sqrt(1+float64(s*s)/float64(c.b*c.b)) + c.a - c.base
}

// levels appends the parameters at which clearance is um.
func (c *curve) levels(out []float64, um float64) []float64 {
	if c.linear {
		if c.rate > leastTurn {
			out = append(out, (um-c.base)/c.rate)
		}
		return out
	}
	var q float64
	if c.shape == parabola {
		q = 2*float64(c.h*(um+c.base)) - float64(c.h*c.h)
	} else {
		r := (um + c.base - c.a) / c.focal
		q = float64(c.b*c.b) * float64((r-1)*(r+1))
	}
	if q > 0 {
		s := math.Sqrt(q)
		out = append(out, -s, s)
	}
	return out
}

// crossings appends the parameters at which the curve crosses the line n·x = off.
func (c *curve) crossings(out []float64, n vec, off float64) []float64 {
	k0, k1 := n.dot(c.o)-off, n.dot(c.u)
	switch c.shape {
	case parabola:
		return quadratic(out, n.dot(c.w)/(2*c.h), k1, k0)
	case hyperbola:
		// (k0 + k1 s)² = m² (1 + s²/b²), m = a w·n, where k0 + k1 s = -m sqrt(...). The
		// discriminant is worked out by hand: where the line is across the hyperbola's axis, m is
		// 0 or nearly, and both roots are one.
		m := c.a * n.dot(c.w)
		bb, cc := float64(c.b*c.b), float64((k0-m)*(k0+m))
		q := float64(k1*k1) + cc/bb
		if q < 0 {
			return out
		}
		from := len(out)
		out = roots(out, float64(k1*k1)-float64(m*m)/bb, 2*float64(k0*k1), cc, 2*math.Abs(m)*math.Sqrt(q))
		kept := out[:from]
		for _, s := range out[from:] {
			if math.Abs(k0+float64(k1*s)) <= tieUm || (k0+float64(k1*s))*m <= 0 {
				kept = append(kept, s)
			}
		}
		return kept
	}
	if k1 != 0 {
		out = append(out, -k0/k1)
	}
	return out
}

// quadratic appends the real roots of a s² + b s + c, a double one twice.
func quadratic(out []float64, a, b, c float64) []float64 {
	d := float64(b*b) - 4*float64(a*c)
	if d < 0 {
		return out
	}
	return roots(out, a, b, c, math.Sqrt(d))
}

// roots is quadratic for a known root of the discriminant.
func roots(out []float64, a, b, c, root float64) []float64 {
	// The root of larger size first, the other from the product of both: no digits
	// cancel (Press et al., Numerical Recipes, §5.6).
	q := -(b + math.Copysign(root, b)) / 2
	if q != 0 {
		out = append(out, c/q)
	}
	if a != 0 {
		out = append(out, q/a)
	}
	return out
}

// length is the length of the curve from s0 to s1.
func (c *curve) length(s0, s1 float64) float64 {
	switch c.shape {
	case parabola:
		return c.parabolaLength(s1) - c.parabolaLength(s0)
	case hyperbola:
		return c.gauss(s0, s1, 0)
	}
	return s1 - s0
}

// parabolaLength is the length from the vertex, signed.
func (c *curve) parabolaLength(s float64) float64 {
	x := s / c.h
	return c.h / 2 * (float64(x*math.Sqrt(1+float64(x*x))) + math.Asinh(x))
}

// gauss integrates the hyperbola's length by halves until halving changes nothing to
// speak of (1e-12 relative).
func (c *curve) gauss(s0, s1 float64, depth int) float64 {
	m := (s0 + s1) / 2
	whole := c.gauss5(s0, s1)
	halves := c.gauss5(s0, m) + c.gauss5(m, s1)
	if depth >= 12 || math.Abs(whole-halves) <= 1e-12*math.Abs(halves) {
		return halves
	}
	return c.gauss(s0, m, depth+1) + c.gauss(m, s1, depth+1)
}

// gauss5 is Gauss-Legendre quadrature with five nodes.
func (c *curve) gauss5(s0, s1 float64) float64 {
	x := [3]float64{0, 0.5384693101056831, 0.9061798459386640}
	w := [3]float64{0.5688888888888889, 0.4786286704993665, 0.2369268850561891}
	m, h := (s0+s1)/2, (s1-s0)/2
	sum := w[0] * c.toward(m).length()
	for k := 1; k < 3; k++ {
		sum += w[k] * (c.toward(m-h*x[k]).length() + c.toward(m+h*x[k]).length())
	}
	return h * sum
}
