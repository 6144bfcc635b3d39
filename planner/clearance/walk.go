package clearance

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// stretch is a part of a segment, as shares of its length.
type stretch struct{ from, to float64 }

// doubtful appends the stretches of ab where the clearance may be below need. It goes from
// cell to cell: where the vertices give the whole cell need or more, it is clear, and
// since clearance is 1-Lipschitz, for as far beyond it as the surplus (sphere
// tracing; Hart, "Sphere tracing", The Visual Computer 12, 1996). A segment along a
// lattice line needs only the vertices on it. Upper bounds found on the way lower need;
// with stop set they end the walk instead, and the answer is false.
func (f *Field) doubtful(a, b geom.Point, need *float64, stop bool, dst []stretch) ([]stretch, bool) {
	if !f.bounds.Contains(a) || !f.bounds.Contains(b) || geom.Dist(a, b) == 0 {
		return append(dst, stretch{0, 1}), true
	}
	w := f.walkOf(a, b)
	for s, at := 0.0, 0.0; at < w.length && s <= w.length; {
		// A little ahead, so that the walk goes on from a cell's side into the next one.
		at = min(s+roundSlack, w.length)
		least, lowest, exit := w.cell(at)
		if least-w.slack >= *need {
			s = at + exit
			if more := least - *need - roundSlack; more > f.h/4 {
				s += more
			}
			continue
		}
		if most := w.most(lowest); most < *need {
			if stop {
				return dst, false
			}
			*need = most
		}
		from, to := max(0, (s-roundSlack)/w.length), min(1, (at+exit+roundSlack)/w.length)
		if k := len(dst) - 1; k >= 0 && dst[k].to >= from {
			dst[k].to = to
		} else {
			dst = append(dst, stretch{from, to})
		}
		s = at + exit
	}
	return dst, true
}

// walk goes along a segment on the floor. Its coordinates are from the floor's corner.
type walk struct {
	f          *Field
	x, y       float64 // start
	ux, uy     float64 // direction
	ix, iy     float64 // 1/ux, 1/uy
	length     float64
	onX, onY   bool // it runs along a lattice line, upright or level: i or j holds always
	i, j       int  // the column or row of cells, or the line, of an upright or level one
	slack      float64
	bx, by     int // block looked at last
	near       bool
	square     float64 // h²/4
	cols, rows int
}

// lowest is the lowest vertex of a cell and its value.
type lowest struct {
	i, j int
	um   int32
}

func (f *Field) walkOf(a, b geom.Point) walk {
	w := walk{f: f, x: a.X - f.ox, y: a.Y - f.oy, length: geom.Dist(a, b), bx: -1, square: f.h * f.h / 4, cols: f.cols, rows: f.rows}
	w.ux, w.uy = (b.X-a.X)/w.length, (b.Y-a.Y)/w.length
	w.ix, w.iy = 1/w.ux, 1/w.uy
	// An oblique segment's places are rounded, and may be a little beside the cells gone
	// through; an upright or level one's are in its column or row exactly.
	w.slack = 2 * roundSlack
	if a.X == b.X {
		w.i, w.onX = f.strip(w.x, f.cols)
		w.slack = 0
	}
	if a.Y == b.Y {
		w.j, w.onY = f.strip(w.y, f.rows)
		w.slack = 0
	}
	return w
}

// strip is the column or row of n that holds the offset d, or the lattice line.
func (f *Field) strip(d float64, n int) (k int, on bool) {
	k = int(math.Round(d / f.h))
	switch line := float64(k) * f.h; {
	case line == d:
		return k, true
	case line > d:
		k--
	}
	return max(0, min(k, n-1)), false
}

// cell is a lower bound of the clearance over the cell, or the piece of a lattice line, that
// holds the place s along, its lowest vertex, and how far on from there the segment
// leaves it.
func (w *walk) cell(s float64) (least float64, low lowest, exit float64) {
	f := w.f
	x, y := w.x+float64(s*w.ux), w.y+float64(s*w.uy)
	i0, j0 := w.i, w.j
	exit = math.Inf(1)
	if w.ux != 0 {
		i0, exit = f.step(x, w.ux, w.ix, w.cols)
	}
	if w.uy != 0 {
		var e float64
		j0, e = f.step(y, w.uy, w.iy, w.rows)
		exit = min(exit, e)
	}
	i1, j1 := i0+1, j0+1
	if w.onX {
		i1 = i0
	}
	if w.onY {
		j1 = j0
	}
	low = lowest{i0, j0, f.vertex(i0, j0)}
	if i1 != i0 {
		low.add(i1, j0, f.vertex(i1, j0))
	}
	if j1 != j0 {
		low.add(i0, j1, f.vertex(i0, j1))
		if i1 != i0 {
			low.add(i1, j1, f.vertex(i1, j1))
		}
	}
	// A block's own entry serves the lines on its far sides, too.
	if bx, by := min(i0, w.cols-1)>>blockShift, min(j0, w.rows-1)>>blockShift; bx != w.bx || by != w.by {
		w.bx, w.by, w.near = bx, by, f.pyramid[0].at(bx, by).near
		if w.onX && bx > 0 || w.onY && by > 0 {
			w.near = w.near || f.pyramid[0].at(max(0, bx-1), by).near || f.pyramid[0].at(bx, max(0, by-1)).near
		}
	}
	least = float64(low.um)
	if w.near {
		// As Field.lower, for a square and for its side alike.
		if least = float64(least*least) - w.square; least <= w.square {
			least = 0
		} else {
			least = math.Sqrt(least) - roundSlack
		}
	}
	return least, low, max(0, exit)
}

// step is which of n columns or rows holds the offset d, of two the one ahead, and how far
// on a walk leaves it that gains u there each micrometre; inv is 1/u.
func (f *Field) step(d, u, inv float64, n int) (k int, exit float64) {
	k = int(d / f.h)
	if u > 0 {
		if float64(k+1)*f.h <= d {
			k++
		}
		if k >= n {
			return n - 1, math.Inf(1)
		}
		return k, (float64(k+1)*f.h - d) * inv
	}
	if float64(k)*f.h >= d {
		k--
	}
	if k < 0 {
		return 0, math.Inf(1)
	}
	k = min(k, n-1)
	return k, (float64(k)*f.h - d) * inv
}

func (l *lowest) add(i, j int, um int32) {
	if um < l.um {
		*l = lowest{i, j, um}
	}
}

// most is an upper bound of the smallest clearance along the segment, by a vertex.
func (w *walk) most(l lowest) float64 {
	x, y := float64(l.i)*w.f.h-w.x, float64(l.j)*w.f.h-w.y
	s := max(0, min(float64(x*w.ux)+float64(y*w.uy), w.length))
	return float64(l.um) + 1 + geom.Dist(geom.Point{X: x, Y: y}, geom.Point{X: float64(s * w.ux), Y: float64(s * w.uy)}) + roundSlack
}

// vertex is Vertex for what is on the lattice.
func (f *Field) vertex(i, j int) int32 {
	return f.values.rows[j>>blockShift][i>>blockShift][(j&blockMask)<<blockShift|i&blockMask]
}
