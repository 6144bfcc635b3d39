package clearance

import (
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// piece is one straight piece of a solid's core; a == b for a disc's middle.
type piece struct{ a, b geom.Point }

// solid is a vector solid made ready: its core cut into pieces, and for a polygon its
// edges sorted into slabs of y, so that inside tests do not look at them all. A
// solid is immutable and shared between versions.
type solid struct {
	feature *floor.Feature
	grow    float64
	core    geom.Rect // bounds of the core
	bounds  geom.Rect // of the grown outline
	pieces  []piece
	slabs   [][]int32 // polygons: pieces whose y extent meets the slab
	slabY   float64   // lower edge of slab 0
	slabH   float64
}

// slabShare bounds how many edges, on average, the slabs list one edge.
const slabShare = 8

func newSolid(ft *floor.Feature) *solid {
	s := &solid{feature: ft, grow: ft.Shape.Grow}
	s.core = geom.EmptyRect()
	for a, b := range ft.Shape.Edges {
		s.pieces = append(s.pieces, piece{a, b})
		s.core = s.core.Add(a).Add(b)
	}
	s.bounds = s.core.Grow(s.grow)
	if ft.Shape.Kind == floor.Polygon {
		s.cutSlabs()
	}
	return s
}

func (s *solid) cutSlabs() {
	s.slabY = s.core.Min.Y
	for n := max(1, len(s.pieces)/4); ; n = (n + 1) / 2 {
		s.slabH = max(1, s.core.Height()/float64(n))
		s.slabs = make([][]int32, n)
		total := 0
		for k, p := range s.pieces {
			for y := s.slab(min(p.a.Y, p.b.Y)); y <= s.slab(max(p.a.Y, p.b.Y)); y++ {
				s.slabs[y] = append(s.slabs[y], int32(k))
				total++
			}
		}
		if n == 1 || total <= slabShare*len(s.pieces) {
			return
		}
	}
}

func (s *solid) slab(y float64) int {
	return int(max(0, min((y-s.slabY)/s.slabH, float64(len(s.slabs)-1))))
}

// holds says, exactly, whether p is in a polygon's core, by even-odd counting of the
// edges that a ray to the right crosses. A point on an edge may get either
// answer: its distance to the edge is 0 in any case.
func (s *solid) holds(p geom.Point) bool {
	if len(s.slabs) == 0 || !s.bounds.Contains(p) {
		return false
	}
	inside := false
	for _, k := range s.slabs[s.slab(p.Y)] {
		a, b := s.pieces[k].a, s.pieces[k].b
		if (a.Y > p.Y) == (b.Y > p.Y) {
			continue
		}
		switch {
		case a.X < p.X && b.X < p.X:
		case a.X > p.X && b.X > p.X:
			inside = !inside
		case (geom.Orient(a, b, p) > 0) == (b.Y > a.Y):
			inside = !inside
		}
	}
	return inside
}

// crossings appends where the horizontal line at y crosses a polygon's edges, in
// rising x: between the 1st and the 2nd is inside, and so on.
func (s *solid) crossings(y float64, dst []float64) []float64 {
	if len(s.slabs) == 0 {
		return dst
	}
	n := len(dst)
	for _, k := range s.slabs[s.slab(y)] {
		a, b := s.pieces[k].a, s.pieces[k].b
		if (a.Y > y) != (b.Y > y) {
			dst = append(dst, a.X+float64((y-a.Y)*(b.X-a.X))/(b.Y-a.Y))
		}
	}
	slices.Sort(dst[n:])
	return dst
}

// entry is what one bucket holds of one solid.
type entry struct {
	s      *solid
	pieces []int32 // those that, grown, come into the bucket
	area   bool    // a polygon's inside may come into the bucket
}

// bucket is what touches one block of cells, by name of feature. Buckets along the
// floor's edge reach outward without end.
type bucket []entry

// bucketSlack, in micrometres, is by how much pieces are entered beyond the bucket
// they touch, so that rounding in a query's own bounds loses none.
const bucketSlack = 1

// bucketRange is the buckets that meet r.
func (f *Field) bucketRange(r geom.Rect) (x0, y0, x1, y1 int) {
	return f.bucketAt(r.Min.X-f.ox, f.buckets.nx), f.bucketAt(r.Min.Y-f.oy, f.buckets.ny),
		f.bucketAt(r.Max.X-f.ox, f.buckets.nx), f.bucketAt(r.Max.Y-f.oy, f.buckets.ny)
}

func (f *Field) bucketAt(d float64, n int) int {
	return int(max(0, min(d/(blockSize*f.h), float64(n-1))))
}

// bucketRect is bucket (x, y)'s rectangle, endless at the floor's edge.
func (f *Field) bucketRect(x, y int) geom.Rect {
	const endless = 1 << 52
	side := blockSize * f.h
	r := geom.Rect{
		Min: geom.Point{X: f.ox + float64(x)*side, Y: f.oy + float64(y)*side},
		Max: geom.Point{X: f.ox + float64(x+1)*side, Y: f.oy + float64(y+1)*side},
	}
	if x == 0 {
		r.Min.X = -endless
	}
	if y == 0 {
		r.Min.Y = -endless
	}
	if x == f.buckets.nx-1 {
		r.Max.X = endless
	}
	if y == f.buckets.ny-1 {
		r.Max.Y = endless
	}
	return r
}

// enter puts s into the buckets it touches. f must be under construction. With fresh
// set, buckets are its own and s comes last by name.
func (f *Field) enter(s *solid, fresh bool) {
	x0, y0, x1, y1 := f.bucketRange(s.bounds.Grow(bucketSlack))
	nx, ny := x1-x0+1, y1-y0+1
	lists := make([][]int32, nx*ny)
	for k, p := range s.pieces {
		px0, py0, px1, py1 := f.bucketRange(geom.BoundsOf(p.a, p.b).Grow(s.grow + bucketSlack))
		for y := py0; y <= py1; y++ {
			for x := px0; x <= px1; x++ {
				if (px0 != px1 && py0 != py1) && geom.RectSegmentDist(f.bucketRect(x, y), p.a, p.b) > s.grow+bucketSlack {
					continue
				}
				at := (y-y0)*nx + x - x0
				lists[at] = append(lists[at], int32(k))
			}
		}
	}
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			e := entry{s: s, pieces: lists[(y-y0)*nx+x-x0]}
			e.area = len(s.slabs) > 0 && (len(e.pieces) > 0 || s.holds(f.blockMiddle(x, y)))
			if len(e.pieces) == 0 && !e.area {
				continue
			}
			old := f.buckets.at(x, y)
			if fresh {
				f.buckets.set(x, y, append(old, e))
				continue
			}
			k, _ := slices.BinarySearchFunc(old, s.feature.Name, byName)
			b := make(bucket, 0, len(old)+1)
			b = append(append(append(b, old[:k]...), e), old[k:]...)
			f.buckets.set(x, y, b)
		}
	}
}

func byName(e entry, name string) int {
	switch {
	case e.s.feature.Name < name:
		return -1
	case e.s.feature.Name > name:
		return 1
	}
	return 0
}

// holds says whether the solid of that name is in the bucket.
func (b bucket) holds(name string) bool {
	_, found := slices.BinarySearchFunc(b, name, byName)
	return found
}

// leave takes the solid of that name out of the buckets that bounds meet.
func (f *Field) leave(name string, bounds geom.Rect) {
	x0, y0, x1, y1 := f.bucketRange(bounds.Grow(bucketSlack))
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			old := f.buckets.at(x, y)
			k, found := slices.BinarySearchFunc(old, name, byName)
			if !found {
				continue
			}
			var b bucket
			if len(old) > 1 {
				b = make(bucket, 0, len(old)-1)
				b = append(append(b, old[:k]...), old[k+1:]...)
			}
			f.buckets.set(x, y, b)
		}
	}
}

func (f *Field) blockMiddle(x, y int) geom.Point {
	return geom.Point{X: f.ox + (float64(x)+0.5)*blockSize*f.h, Y: f.oy + (float64(y)+0.5)*blockSize*f.h}
}
