package touch

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// sector is the directions counter-clockwise from one vector to another, ends included,
// more than none and fewer than all.
type sector struct{ from, to geom.Point }

type sectors []sector

// ahead says whether u and v point the same way.
func ahead(u, v geom.Point) bool {
	return geom.Orient(geom.Point{}, u, v) == 0 && (u.X*v.X > 0 || u.X == 0 && v.X == 0) && (u.Y*v.Y > 0 || u.Y == 0 && v.Y == 0)
}

// within says whether, from f counter-clockwise, x comes before t; x may be f.
func within(f, t, x geom.Point) bool {
	turn := geom.Orient(geom.Point{}, f, t)
	switch {
	case turn > 0:
		return ahead(f, x) || geom.Orient(geom.Point{}, f, x) > 0 && geom.Orient(geom.Point{}, x, t) > 0
	case turn < 0:
		return !within(t, f, x)
	}
	return ahead(f, x) || geom.Orient(geom.Point{}, f, x) > 0
}

// after says whether the directions just counter-clockwise of x are taken.
func (s sectors) after(x geom.Point) bool {
	for _, c := range s {
		if within(c.from, c.to, x) {
			return true
		}
	}
	return false
}

// before says whether the directions just clockwise of x are taken.
func (s sectors) before(x geom.Point) bool {
	flip := func(p geom.Point) geom.Point { return geom.Point{X: p.X, Y: -p.Y} }
	for _, c := range s {
		if within(flip(c.to), flip(c.from), flip(x)) {
			return true
		}
	}
	return false
}

// holds says whether direction x is outside the closure of every free sector.
func (s sectors) holds(x geom.Point) bool { return s.after(x) && s.before(x) }

// free counts the free sectors: each begins where a taken one ends.
func (s sectors) free() int {
	if len(s) == 0 {
		return 1
	}
	var ends []geom.Point
	for _, c := range s {
		known := s.after(c.to)
		for _, e := range ends {
			known = known || ahead(e, c.to)
		}
		if !known {
			ends = append(ends, c.to)
		}
	}
	return len(ends)
}

// sectors are what the solids take up about p; full when p is inside one.
func (s *Solids) sectors(p geom.Point) (out sectors, full bool) {
	half := func(x, y float64) { // the half plane that (x, y) points into
		out = append(out, sector{geom.Point{X: y, Y: -x}, geom.Point{X: -y, Y: x}})
	}
	if s.Shut {
		if p.X == s.Bounds.Min.X {
			half(-1, 0)
		}
		if p.X == s.Bounds.Max.X {
			half(1, 0)
		}
		if p.Y == s.Bounds.Min.Y {
			half(0, -1)
		}
		if p.Y == s.Bounds.Max.Y {
			half(0, 1)
		}
	}
	for _, c := range s.Cells {
		if !c.Contains(p) {
			continue
		}
		x, y := rim(p.X, c.Min.X, c.Max.X), rim(p.Y, c.Min.Y, c.Max.Y)
		switch {
		case x == 0 && y == 0:
			return nil, true
		case x != 0 && y != 0:
			f, t := geom.Point{X: x}, geom.Point{Y: y}
			if x*y < 0 {
				f, t = t, f
			}
			out = append(out, sector{f, t})
		default:
			half(x, y)
		}
	}
	for _, f := range s.Shapes {
		if f.Grow > 0 {
			if f.CoreBounds().Dist(p) > f.Grow+RoundSlackUm {
				continue
			}
			if f.Kind == floor.Polygon && geom.InPolygon(f.Chains, p) {
				return nil, true
			}
			for c, d := range f.Edges {
				if !geom.SegmentDistAtLeast(p, c, d, f.Grow) {
					return nil, true
				}
				if v, q := geom.SegmentDist(p, c, d); v <= f.Grow+RoundSlackUm {
					out = append(out, tangent(minus(q, p)))
				}
			}
			continue
		}
		touched := false
		for ring, chain := range f.Chains {
			left := (geom.Ring(chain).SignedArea() > 0) == (ring == 0)
			n := len(chain)
			for i, c := range chain {
				d := chain[(i+1)%n]
				switch {
				case p == c:
					in, on := minus(chain[(i+n-1)%n], p), minus(d, p)
					if left {
						out = append(out, sector{on, in})
					} else {
						out = append(out, sector{in, on})
					}
					touched = true
				case p != d && geom.OnSegment(p, c, d):
					u, v := minus(d, p), minus(c, p)
					if !left {
						u, v = v, u
					}
					out = append(out, sector{u, v})
					touched = true
				}
			}
		}
		if !touched && geom.InPolygon(f.Chains, p) {
			return nil, true
		}
	}
	return out, false
}

// rim is which way the inside of [lo, hi] lies from v: 0 when v is inside.
func rim(v, lo, hi float64) float64 {
	switch v {
	case lo:
		return 1
	case hi:
		return -1
	}
	return 0
}

// tangent is the half plane that n points into, narrower by what rounding may put a
// tangent off.
func tangent(n geom.Point) sector {
	const narrow = 1e-7
	scale := 1 / math.Hypot(n.X, n.Y)
	n = geom.Point{X: n.X * scale, Y: n.Y * scale}
	return sector{
		geom.Point{X: n.Y + float64(narrow*n.X), Y: -n.X + float64(narrow*n.Y)},
		geom.Point{X: -n.Y + float64(narrow*n.X), Y: n.X + float64(narrow*n.Y)},
	}
}
