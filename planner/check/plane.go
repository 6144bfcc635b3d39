package check

import (
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// pointDistance is the distance from p to the segment ab.
func pointDistance(p, a, b geom.Point) float64 {
	dx, dy := b.X-a.X, b.Y-a.Y
	px, py := p.X-a.X, p.Y-a.Y
	along, length2 := px*dx+py*dy, dx*dx+dy*dy
	switch {
	case along <= 0:
		return math.Hypot(px, py)
	case along >= length2:
		return math.Hypot(p.X-b.X, p.Y-b.Y)
	}
	return math.Abs(px*dy-py*dx) / math.Sqrt(length2)
}

// turn is positive when a, b, c turn left.
func turn(a, b, c geom.Point) float64 {
	return (b.X-a.X)*(c.Y-a.Y) - (b.Y-a.Y)*(c.X-a.X)
}

// segmentDistance is the distance between two segments.
func segmentDistance(a, b, c, d geom.Point) float64 {
	if turn(a, b, c)*turn(a, b, d) < 0 && turn(c, d, a)*turn(c, d, b) < 0 {
		return 0
	}
	return min(pointDistance(a, c, d), pointDistance(b, c, d), pointDistance(c, a, b), pointDistance(d, a, b))
}

// boxDistance is the distance between the segment ab and a filled box.
func boxDistance(x0, y0, x1, y1 float64, a, b geom.Point) float64 {
	// The part of ab within the box (Liang & Barsky 1984).
	t0, t1 := 0.0, 1.0
	clip := func(v, dv, lo, hi float64) {
		if dv == 0 {
			if v < lo || v > hi {
				t1 = -1
			}
			return
		}
		u, w := (lo-v)/dv, (hi-v)/dv
		t0, t1 = max(t0, min(u, w)), min(t1, max(u, w))
	}
	clip(a.X, b.X-a.X, x0, x1)
	clip(a.Y, b.Y-a.Y, y0, y1)
	if t0 <= t1 {
		return 0
	}
	toBox := func(p geom.Point) float64 {
		return math.Hypot(max(x0-p.X, 0, p.X-x1), max(y0-p.Y, 0, p.Y-y1))
	}
	d := min(toBox(a), toBox(b))
	for _, c := range [4]geom.Point{{X: x0, Y: y0}, {X: x1, Y: y0}, {X: x1, Y: y1}, {X: x0, Y: y1}} {
		d = min(d, pointDistance(c, a, b))
	}
	return d
}

// inside says by even-odd counting whether p is in a polygon.
func inside(chains [][]geom.Point, p geom.Point) bool {
	in := false
	for _, c := range chains {
		for i, b := range c {
			a := c[(i+len(c)-1)%len(c)]
			if (a.Y > p.Y) != (b.Y > p.Y) && p.X < a.X+(p.Y-a.Y)/(b.Y-a.Y)*(b.X-a.X) {
				in = !in
			}
		}
	}
	return in
}

// shapeDistance is the distance from the segment ab to a shape, 0 when they meet.
func shapeDistance(s floor.Shape, a, b geom.Point) float64 {
	if s.Kind == floor.Polygon && inside(s.Chains, a) {
		return 0
	}
	d := math.Inf(1)
	for _, c := range s.Chains {
		if len(c) == 1 {
			d = min(d, pointDistance(c[0], a, b))
		}
		for i := range c {
			if i > 0 {
				d = min(d, segmentDistance(a, b, c[i-1], c[i]))
			} else if s.Kind == floor.Polygon {
				d = min(d, segmentDistance(a, b, c[len(c)-1], c[0]))
			}
		}
	}
	return max(0, d-s.Grow)
}

// cutsOf are the shares of ab, in order, where it crosses a polygon's edges, with 0 and 1.
func cutsOf(s floor.Shape, a, b geom.Point) []float64 {
	cuts := []float64{0, 1}
	for _, c := range s.Chains {
		for i, q := range c {
			p := c[(i+len(c)-1)%len(c)]
			u, v := turn(p, q, a), turn(p, q, b)
			if (u > 0) != (v > 0) {
				if t := u / (u - v); t > 0 && t < 1 {
					cuts = append(cuts, t)
				}
			}
		}
	}
	slices.Sort(cuts)
	return cuts
}

// insideShares gives the shares of ab that lie in a polygon, one for each stretch.
func insideShares(s floor.Shape, a, b geom.Point) []float64 {
	cuts := cutsOf(s, a, b)
	var shares []float64
	run := 0.0
	for i := 1; i < len(cuts); i++ {
		t := (cuts[i-1] + cuts[i]) / 2
		if inside(s.Chains, geom.Point{X: a.X + t*(b.X-a.X), Y: a.Y + t*(b.Y-a.Y)}) {
			run += cuts[i] - cuts[i-1]
		} else if run > 0 {
			shares = append(shares, run)
			run = 0
		}
	}
	if run > 0 {
		shares = append(shares, run)
	}
	return shares
}
