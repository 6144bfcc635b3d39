package grown

import (
	"cmp"
	"context"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// cutAt is a crossing on a curve: where along it, and which joint.
type cutAt struct {
	t     float64
	joint int32
}

// joint is a place where curves cross or join, and the curves.
type joint struct {
	p    geom.Point
	a, b int32
}

// tol tells lying on a border from lying inside: far below the steps of the slack,
// far above rounding.
func (s *set) tol() float64 { return s.slack * 0x1p-18 }

// drop takes out curves that one grown element, or the inside of a solid, holds whole.
func (s *set) drop(ctx context.Context) error {
	tol := s.tol()
	for i := range s.curves {
		if i&1023 == 0 && ctx.Err() != nil {
			return ctx.Err()
		}
		v := &s.curves[i]
		for _, k := range s.grid.elems[s.grid.bucket(v.hull[0])] {
			if s.elems[k].holdsHull(v, tol) {
				v.dropped = true
				break
			}
		}
	}
	return nil
}

// inside says whether p lies in a grown solid, further from its border than tol.
func (s *set) inside(p geom.Point, tol float64) bool {
	k := s.grid.bucket(p)
	for _, i := range s.grid.elems[k] {
		e := &s.elems[i]
		if !e.box.Contains(p) {
			continue
		}
		if d, _ := geom.SegmentDist(p, e.a, e.b); d < e.rho-tol {
			return true
		}
	}
	if s.raster != nil && s.raster.Solid(int(math.Floor(p.X/s.h)), int(math.Floor(p.Y/s.h))) {
		return true
	}
	for _, i := range s.grid.areas[k] {
		if s.boxes[i].Contains(p) && geom.InPolygon(s.areas[i], p) {
			return true
		}
	}
	return false
}

// cut finds all crossings of curves, bucket by bucket.
func (s *set) cut(ctx context.Context) error {
	g := &s.grid
	in := make([][]int32, g.nx*g.ny)
	for i := range s.curves {
		v := &s.curves[i]
		if v.dropped {
			continue
		}
		oblique := !v.arc && v.p.X != v.q.X && v.p.Y != v.q.Y
		g.each(v.box, func(k int, r geom.Rect) {
			if !oblique || geom.RectSegmentDist(r, v.a, v.b) <= s.slack {
				in[k] = append(in[k], int32(i))
			}
		})
	}
	for k, list := range in {
		if k&255 == 0 && ctx.Err() != nil {
			return ctx.Err()
		}
		for x, i := range list {
			for _, j := range list[:x] {
				s.cross(j, i, k)
			}
		}
	}
	for i := range s.curves {
		slices.SortFunc(s.curves[i].cuts, func(a, b cutAt) int {
			return cmp.Or(cmp.Compare(a.t, b.t), cmp.Compare(a.joint, b.joint))
		})
	}
	return nil
}

// cross adds the crossings of curves i and j that lie in bucket k.
func (s *set) cross(i, j int32, k int) {
	v, w := &s.curves[i], &s.curves[j]
	if !v.box.Intersects(w.box) || v.next == j || w.next == i {
		return
	}
	pts, n := carriersMeet(v, w, v.rho, w.rho)
	for _, p := range pts[:n] {
		if s.grid.bucket(p) != k {
			continue
		}
		t, u := v.param(p), w.param(p)
		if t < 0 || t > v.long || u < 0 || u > w.long {
			continue
		}
		id := int32(len(s.joints))
		s.joints = append(s.joints, joint{p: p, a: i, b: j})
		v.cuts = append(v.cuts, cutAt{t, id})
		w.cuts = append(w.cuts, cutAt{u, id})
	}
}

// carriersMeet gives the places, at most two, where the line or circle of v meets that of w
// when they are moved out by rv and rw.
func carriersMeet(v, w *curve, rv, rw float64) (pts [2]geom.Point, n int) {
	if v.arc && w.arc {
		return circlesMeet(v.p, rv, w.p, rw)
	}
	if w.arc {
		return lineCircle(v, rv, w.p, rw)
	}
	if v.arc {
		return lineCircle(w, rw, v.p, rv)
	}
	nx, ny := normal(v.p, v.q)
	mx, my := normal(w.p, w.q)
	det := float64(nx*my) - float64(ny*mx)
	if math.Abs(det) < 1e-12 {
		return pts, 0
	}
	// nx·x + ny·y = c about v.p, for precision.
	d := rw + float64((w.p.X-v.p.X)*mx) + float64((w.p.Y-v.p.Y)*my)
	x := (float64(rv*my) - float64(d*ny)) / det
	y := (float64(d*nx) - float64(rv*mx)) / det
	pts[0] = geom.Point{X: v.p.X + x, Y: v.p.Y + y}
	return pts, 1
}

func lineCircle(v *curve, rv float64, c geom.Point, rc float64) (pts [2]geom.Point, n int) {
	nx, ny := normal(v.p, v.q)
	off := rv - float64((c.X-v.p.X)*nx) - float64((c.Y-v.p.Y)*ny) // of the line from c, along the normal
	h := (rc - off) * (rc + off)
	if h < 0 {
		return pts, 0
	}
	h = math.Sqrt(h)
	f := geom.Point{X: c.X + float64(off*nx), Y: c.Y + float64(off*ny)}
	pts[0] = geom.Point{X: f.X - float64(h*ny), Y: f.Y + float64(h*nx)}
	pts[1] = geom.Point{X: f.X + float64(h*ny), Y: f.Y - float64(h*nx)}
	return pts, 2
}

func circlesMeet(a geom.Point, ra float64, b geom.Point, rb float64) (pts [2]geom.Point, n int) {
	dx, dy := b.X-a.X, b.Y-a.Y
	d := math.Sqrt(float64(dx*dx) + float64(dy*dy))
	if d == 0 {
		return pts, 0
	}
	x := (d + (ra-rb)*(ra+rb)/d) / 2
	h := (ra - x) * (ra + x)
	if h < 0 {
		return pts, 0
	}
	h = math.Sqrt(h)
	ux, uy := dx/d, dy/d
	f := geom.Point{X: a.X + float64(x*ux), Y: a.Y + float64(x*uy)}
	pts[0] = geom.Point{X: f.X - float64(h*uy), Y: f.Y + float64(h*ux)}
	pts[1] = geom.Point{X: f.X + float64(h*uy), Y: f.Y - float64(h*ux)}
	return pts, 2
}
