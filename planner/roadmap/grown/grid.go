package grown

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// grid sorts elements, curves and polygons into square buckets.
type grid struct {
	side   float64
	origin geom.Point
	nx, ny int
	elems  [][]int32
	areas  [][]int32
}

// maxBuckets bounds the buckets of a grid.
const maxBuckets = 1 << 18

func newGrid(s *set) grid {
	box := geom.EmptyRect()
	reach, sum := 0.0, 0.0
	for i := range s.elems {
		e := &s.elems[i]
		box = box.Union(e.box)
		reach = max(reach, e.rho)
		sum += e.box.Width() + e.box.Height()
	}
	g := grid{nx: 1, ny: 1, side: 1}
	if box.IsEmpty() {
		return g
	}
	g.origin = box.Min
	n := float64(len(s.elems))
	g.side = max(math.Sqrt(box.Width()*box.Height()/min(maxBuckets, 4*n+1)), min(reach, sum/n)/2, 16*s.slack, 1)
	g.nx = int(box.Width()/g.side) + 1
	g.ny = int(box.Height()/g.side) + 1
	g.elems = make([][]int32, g.nx*g.ny)
	g.areas = make([][]int32, g.nx*g.ny)
	for i := range s.elems {
		e := &s.elems[i]
		oblique := e.a.X != e.b.X && e.a.Y != e.b.Y
		g.each(e.box, func(k int, r geom.Rect) {
			if !oblique || geom.RectSegmentDist(r, e.a, e.b) < e.rho {
				g.elems[k] = append(g.elems[k], int32(i))
			}
		})
	}
	for i, b := range s.boxes {
		g.each(b, func(k int, _ geom.Rect) { g.areas[k] = append(g.areas[k], int32(i)) })
	}
	return g
}

func (g *grid) col(x float64) int { return max(0, min(g.nx-1, int((x-g.origin.X)/g.side))) }
func (g *grid) row(y float64) int { return max(0, min(g.ny-1, int((y-g.origin.Y)/g.side))) }

// bucket is the index of the bucket that holds p.
func (g *grid) bucket(p geom.Point) int { return g.row(p.Y)*g.nx + g.col(p.X) }

// each calls do with the buckets that meet r and their squares.
func (g *grid) each(r geom.Rect, do func(k int, square geom.Rect)) {
	for y := g.row(r.Min.Y); y <= g.row(r.Max.Y); y++ {
		for x := g.col(r.Min.X); x <= g.col(r.Max.X); x++ {
			p := geom.Point{X: g.origin.X + float64(x)*g.side, Y: g.origin.Y + float64(y)*g.side}
			do(y*g.nx+x, geom.Rect{Min: p, Max: geom.Point{X: p.X + g.side, Y: p.Y + g.side}})
		}
	}
}
