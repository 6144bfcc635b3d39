package check

import (
	"fmt"
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// A body that needs no clearance is a point: it may touch solids and slide along them,
// but neither enter one nor pass between two that touch. Here that is judged by
// touch alone: from every place where something is touched between the route's
// ends, the solids lie in directions, each of which is either to the left or
// to the right of the way through that place, and not on both sides.

// facing is one thing touched at a place, and a direction into it.
type facing struct {
	in   geom.Point
	name string
}

// point checks a polyline for a point body. solids and zones say whether those are to be
// touched only.
func (w *walker) point(pts []geom.Point, solids, zones bool) string {
	var outlines []outline
	if solids {
		outlines = append(outlines, w.solids...)
	}
	if zones {
		outlines = append(outlines, w.closed...)
	}
	if len(outlines) == 0 && !solids {
		return ""
	}
	var buf near
	for i := 1; i < len(pts); i++ {
		a, b := pts[i-1], pts[i]
		places, through := w.touched(&buf, a, b, outlines, solids)
		if through != "" {
			return fmt.Sprintf("piece %d goes through %s", i-1, through)
		}
		slices.Sort(places) // cells share corners
		long := math.Hypot(b.X-a.X, b.Y-a.Y)
		for _, s := range slices.Compact(places) {
			if s > 2*SlackUm && s < long-2*SlackUm {
				p := geom.Point{X: a.X + s/long*(b.X-a.X), Y: a.Y + s/long*(b.Y-a.Y)}
				if x, y := between(w.facings(&buf, p, outlines, solids), minus(a, b), minus(b, a)); x != "" {
					return fmt.Sprintf("piece %d passes between %s and %s, which touch", i-1, x, y)
				}
			}
		}
		if i+1 < len(pts) && a != b && pts[i+1] != b {
			if x, y := between(w.facings(&buf, b, outlines, solids), minus(a, b), minus(pts[i+1], b)); x != "" {
				return fmt.Sprintf("the bend after piece %d passes between %s and %s, which touch", i-1, x, y)
			}
		}
	}
	return ""
}

// near is room for what is touched.
type near struct {
	places []float64
	fs     []facing
}

func minus(p, q geom.Point) geom.Point { return geom.Point{X: p.X - q.X, Y: p.Y - q.Y} }
func cross(u, v geom.Point) float64    { return u.X*v.Y - u.Y*v.X }

// between names two things on either side of a way that comes from direction u and leaves
// in direction v; "" when there are none.
func between(fs []facing, u, v geom.Point) (left, right string) {
	angle := func(p geom.Point) float64 {
		t := math.Atan2(cross(u, p), u.X*p.X+u.Y*p.Y)
		if t < 0 {
			t += 2 * math.Pi
		}
		return t
	}
	leave := angle(v)
	for _, f := range fs {
		if angle(f.in) > leave {
			left = f.name
		} else {
			right = f.name
		}
	}
	if left == "" || right == "" {
		return "", ""
	}
	return left, right
}

// touched gives places, micrometres along ab, that between them meet everything that is
// touched, and what is entered, "" for nothing.
func (w *walker) touched(buf *near, a, b geom.Point, outlines []outline, cells bool) (places []float64, through string) {
	places = buf.places[:0]
	defer func() { buf.places = places }()
	long := math.Hypot(b.X-a.X, b.Y-a.Y)
	at := func(p geom.Point) float64 {
		if long == 0 {
			return 0
		}
		return max(0, min(long, ((p.X-a.X)*(b.X-a.X)+(p.Y-a.Y)*(b.Y-a.Y))/long))
	}
	add := func(p geom.Point) float64 {
		s := at(p)
		places = append(places, s)
		return s
	}
	if cells {
		w.cellsAbout(a, b, func(x0, y0, x1, y1 float64) {
			if boxDistance(x0+SlackUm, y0+SlackUm, x1-SlackUm, y1-SlackUm, a, b) == 0 {
				through = "a cell"
			}
			from, to := math.Inf(1), math.Inf(-1)
			for _, c := range [4]geom.Point{{X: x0, Y: y0}, {X: x1, Y: y0}, {X: x1, Y: y1}, {X: x0, Y: y1}} {
				s := add(c)
				from, to = min(from, s), max(to, s)
			}
			places = append(places, (from+to)/2) // where the way runs along a side
		})
	}
	lo, hi := extent(a, b)
	for i := range outlines {
		o := &outlines[i]
		if o.apart(lo, hi) > SlackUm {
			continue
		}
		s := o.f.Shape
		if shapeDistance(s, a, b) > SlackUm {
			continue
		}
		if depth(s, a, b) > SlackUm {
			return places, o.f.Name
		}
		for _, c := range s.Chains {
			for k, p := range c {
				from, to := add(p), at(c[(k+1)%len(c)])
				places = append(places, (from+to)/2) // where the way runs along the edge
			}
		}
	}
	return places, through
}

// cellsAbout calls do with the solid cells that the segment touches, those next to one another
// in a row as one.
func (w *walker) cellsAbout(a, b geom.Point, do func(x0, y0, x1, y1 float64)) {
	if b.Y < a.Y {
		a, b = b, a
	}
	row := func(y float64) int { return int(math.Floor((y - w.lo.Y) / w.h)) }
	column := func(x float64) int { return int(math.Floor((x - w.lo.X) / w.h)) }
	for r := max(0, row(a.Y-SlackUm)); r <= min(w.s.Rows-1, row(b.Y+SlackUm)); r++ {
		y := w.lo.Y + float64(r)*w.h
		x0, x1 := a.X, b.X
		if b.Y > a.Y {
			x0 = a.X + max(0, min(1, (y-SlackUm-a.Y)/(b.Y-a.Y)))*(b.X-a.X)
			x1 = a.X + max(0, min(1, (y+w.h+SlackUm-a.Y)/(b.Y-a.Y)))*(b.X-a.X)
		}
		first, last := max(0, column(min(x0, x1)-SlackUm)), min(w.s.Columns-1, column(max(x0, x1)+SlackUm))
		for bx := first / floor.BlockSize; bx <= last/floor.BlockSize; bx++ {
			blk := w.block(bx, r/floor.BlockSize)
			if blk == &empty {
				continue
			}
			word := blk[r%floor.BlockSize] & columns(bx, first, last)
			for word != 0 {
				var from, n int
				from, n, word = firstRun(word)
				x0 := w.lo.X + float64(bx*floor.BlockSize+from)*w.h
				x1 := x0 + float64(n)*w.h
				if boxDistance(x0, y, x1, y+w.h, a, b) <= SlackUm {
					do(x0, y, x1, y+w.h)
				}
			}
		}
	}
}

// facings are the things touched at p.
func (w *walker) facings(buf *near, p geom.Point, outlines []outline, cells bool) []facing {
	fs := buf.fs[:0]
	defer func() { buf.fs = fs }()
	if cells {
		w.cellsAbout(p, p, func(x0, y0, x1, y1 float64) {
			fs = append(fs, facing{geom.Point{X: (x0+x1)/2 - p.X, Y: (y0+y1)/2 - p.Y}, "a cell"})
		})
		if !w.s.OpenBorder {
			for _, side := range [4]struct{ d, x, y float64 }{{p.X - w.lo.X, -1, 0}, {w.hi.X - p.X, 1, 0}, {p.Y - w.lo.Y, 0, -1}, {w.hi.Y - p.Y, 0, 1}} {
				if side.d <= SlackUm {
					fs = append(fs, facing{geom.Point{X: side.x, Y: side.y}, "the border"})
				}
			}
		}
	}
	for i := range outlines {
		o := &outlines[i]
		if o.apart(p, p) > SlackUm {
			continue
		}
		for _, in := range inward(o.f.Shape, p) {
			fs = append(fs, facing{in, o.f.Name})
		}
	}
	return fs
}

// depth is how deep, about, ab goes into a shape.
func depth(s floor.Shape, a, b geom.Point) float64 {
	if s.Grow > 0 {
		core := s
		core.Grow = 0
		return s.Grow - shapeDistance(core, a, b)
	}
	deep := 0.0
	share := func(t float64) geom.Point { return geom.Point{X: a.X + t*(b.X-a.X), Y: a.Y + t*(b.Y-a.Y)} }
	cuts := cutsOf(s, a, b)
	for i := 1; i < len(cuts); i++ {
		for _, t := range [3]float64{0.25, 0.5, 0.75} {
			if p := share(cuts[i-1] + t*(cuts[i]-cuts[i-1])); inside(s.Chains, p) {
				out := math.Inf(1)
				for _, c := range s.Chains {
					for k := range c {
						out = min(out, pointDistance(p, c[k], c[(k+1)%len(c)]))
					}
				}
				deep = max(deep, out)
			}
		}
	}
	return deep
}

// inward are directions into the shape from a place where it is touched, one for
// each part of the outline that holds it.
func inward(s floor.Shape, p geom.Point) []geom.Point {
	var in []geom.Point
	for ring, c := range s.Chains {
		area := 0.0
		for k := range c {
			area += cross(minus(c[k], c[0]), minus(c[(k+1)%len(c)], c[0]))
		}
		left := 1.0 // the inside is to the left of the edges
		if (area > 0) != (ring == 0) {
			left = -1
		}
		for k, q := range c {
			next := c[(k+1)%len(c)]
			if s.Kind != floor.Polygon && k == len(c)-1 && k > 0 {
				break
			}
			if s.Grow > 0 {
				if d := pointDistance(p, q, next); d <= s.Grow+SlackUm && d > 0 {
					in = append(in, minus(nearestOn(p, q, next), p))
				}
				continue
			}
			switch before := c[(k+len(c)-1)%len(c)]; {
			case math.Hypot(p.X-q.X, p.Y-q.Y) <= SlackUm:
				// Half way round the inside of the corner.
				from := math.Atan2(next.Y-q.Y, next.X-q.X)
				to := math.Atan2(before.Y-q.Y, before.X-q.X)
				if left < 0 {
					from, to = to, from
				}
				if to < from {
					to += 2 * math.Pi
				}
				in = append(in, geom.Point{X: math.Cos((from + to) / 2), Y: math.Sin((from + to) / 2)})
			case math.Hypot(p.X-next.X, p.Y-next.Y) > SlackUm && pointDistance(p, q, next) <= SlackUm:
				in = append(in, geom.Point{X: -left * (next.Y - q.Y), Y: left * (next.X - q.X)})
			}
		}
	}
	return in
}

func nearestOn(p, a, b geom.Point) geom.Point {
	d := minus(b, a)
	if d == (geom.Point{}) {
		return a
	}
	t := max(0, min(1, ((p.X-a.X)*d.X+(p.Y-a.Y)*d.Y)/(d.X*d.X+d.Y*d.Y)))
	return geom.Point{X: a.X + t*d.X, Y: a.Y + t*d.Y}
}
