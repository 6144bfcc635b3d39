// Package plainfloor makes floors for benchmarks and tests, each from a fixed seed, and has
// the plain twin that searches are compared with. Nothing served uses it.
package plainfloor

import (
	"fmt"
	"math"
	"math/rand/v2"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// CellUm is the side of a cell of these floors.
const CellUm = 50_000

// Cells is a raster, row 0 at the bottom.
type Cells struct {
	W, H  int
	Solid []bool
}

// NewCells is a raster with nothing solid.
func NewCells(w, h int) Cells { return Cells{w, h, make([]bool, w*h)} }

// Fill sets the cells from (x0, y0) up to, but not with, (x1, y1), as far as there are any.
func (c Cells) Fill(x0, y0, x1, y1 int, solid bool) {
	for y := max(0, y0); y < min(c.H, y1); y++ {
		for x := max(0, x0); x < min(c.W, x1); x++ {
			c.Solid[y*c.W+x] = solid
		}
	}
}

// Floor is a floor of those cells with a closed border and a clearance cap of 5 m.
func (c Cells) Floor() (*floor.Map, error) {
	f, err := empty(c.W, c.H)
	if err != nil {
		return nil, err
	}
	cells := make([]byte, (len(c.Solid)+3)/4)
	for i, s := range c.Solid {
		if s {
			cells[i/4] |= byte(floor.Occupied) << (2 * (i % 4))
		}
	}
	return f.Apply([]floor.Edit{{Kind: floor.PaintCells, Rect: floor.CellRect{X1: c.W, Y1: c.H}, Cells: cells}})
}

func empty(w, h int) (*floor.Map, error) {
	return floor.New(floor.Settings{ResolutionUm: CellUm, Columns: w, Rows: h, CapUm: 100 * CellUm})
}

// rack is a rack's outline in cells.
type rack struct{ x0, y0, x1, y1 float64 }

// racks are rows of racks 1.2 m deep and 6 to 12 m long, 3 m apart, with gaps of 2.5 to 3.5 m.
func racks(n int) []rack {
	rng := rand.New(rand.NewPCG(7, 7))
	var out []rack
	for y := 40; y+24 <= n-40; y += 24 + 60 {
		for x := 40; x < n-80; {
			l := 120 + rng.IntN(120)
			end := min(x+l, n-40)
			out = append(out, rack{float64(x), float64(y), float64(end), float64(y + 24)})
			x = end + 50 + rng.IntN(20)
		}
	}
	return out
}

// ring is the outline turned about the middle of a floor of n by n cells, cut to it.
func (r rack) ring(turn float64, n int) []geom.Point {
	s, c := math.Sincos(turn)
	m, lim := float64(n)/2, float64(n)*CellUm
	var ring []geom.Point
	for _, p := range [4][2]float64{{r.x0, r.y0}, {r.x1, r.y0}, {r.x1, r.y1}, {r.x0, r.y1}} {
		x, y := p[0]-m, p[1]-m
		q := geom.Point{X: math.Round((m + x*c - y*s) * CellUm), Y: math.Round((m + x*s + y*c) * CellUm)}
		ring = append(ring, geom.Point{X: min(max(q.X, 0), lim), Y: min(max(q.Y, 0), lim)})
	}
	return ring
}

// RackHall is a hall of n by n cells with rows of racks, turned about its middle, as cells or
// as polygons.
func RackHall(n int, turn float64, vector bool) (*floor.Map, error) {
	f, err := empty(n, n)
	if err != nil {
		return nil, err
	}
	var edits []floor.Edit
	for i, r := range racks(n) {
		ring := r.ring(turn, n)
		s := floor.NewPolygon([][]geom.Point{ring}, 0)
		switch {
		case geom.CheckPolygon([][]geom.Point{ring}) != nil: // turned off the floor
		case vector:
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: fmt.Sprintf("rack-%d", i), Kind: floor.Solid, Shape: s}})
		case turn == 0:
			edits = append(edits, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: int(r.x0), Y0: int(r.y0), X1: int(r.x1), Y1: int(r.y1)}})
		default:
			edits = append(edits, floor.Edit{Kind: floor.PaintPolygon, Fill: floor.Occupied, Shape: s})
		}
	}
	return f.Apply(edits)
}

// Office is a building of n by n cells: rooms of 3 to 6 m on both sides of corridors 2 m
// wide, walls one cell thick, doors of 1.2 m, some between rooms.
func Office(n int) Cells {
	const corridor, door = 40, 24
	rng := rand.New(rand.NewPCG(17, 17))
	c := NewCells(n, n)
	for y := 0; y < n; {
		depth := 60 + rng.IntN(60)
		for side := range 2 { // a row of rooms below the corridor and one above it
			y0 := y + side*(depth+corridor)
			wall := y0 + depth - 1 // towards the corridor
			if side == 1 {
				wall = y0
			}
			c.Fill(0, wall, n, wall+1, true)
			for x := 0; x < n; {
				w := 60 + rng.IntN(60)
				c.Fill(x, y0, x+1, y0+depth, true)
				at := x + 4 + rng.IntN(w-door-8)
				c.Fill(at, wall, at+door, wall+1, false)
				if x > 0 && rng.IntN(3) == 0 {
					at := y0 + 4 + rng.IntN(depth-door-8)
					c.Fill(x, at, x+1, at+door, false)
				}
				x += w
			}
		}
		y += 2*depth + corridor
		for x := 0; x < n; x += 400 { // through the outer walls to the next corridor
			c.Fill(x+20, y-depth, x+20+corridor, y+2, false)
		}
		c.Fill(0, y, n, y+1, true)
		for x := 20; x < n; x += 400 {
			c.Fill(x, y-1, x+corridor, y+2, false)
		}
		y++
	}
	return c
}

// Maze is a perfect maze of corridors some cells wide with walls one cell thick,
// carved depth first.
func Maze(n, corridor int) Cells {
	m := NewCells(n, n)
	m.Fill(0, 0, n, n, true)
	rng := rand.New(rand.NewPCG(3, 3))
	step := corridor + 1
	k := (n - 1) / step
	open := func(x, y int) {
		m.Fill(1+x*step, 1+y*step, 1+x*step+corridor, 1+y*step+corridor, false)
	}
	seen := make([]bool, k*k)
	stack := [][2]int{{0, 0}}
	seen[0] = true
	open(0, 0)
	for len(stack) > 0 {
		p := stack[len(stack)-1]
		var next [][2]int
		for _, d := range [4][2]int{{1, 0}, {0, 1}, {-1, 0}, {0, -1}} {
			x, y := p[0]+d[0], p[1]+d[1]
			if x >= 0 && y >= 0 && x < k && y < k && !seen[y*k+x] {
				next = append(next, d)
			}
		}
		if len(next) == 0 {
			stack = stack[:len(stack)-1]
			continue
		}
		d := next[rng.IntN(len(next))]
		x, y := p[0]+d[0], p[1]+d[1]
		seen[y*k+x] = true
		open(x, y)
		wx, wy := 1+p[0]*step, 1+p[1]*step
		m.Fill(wx+min(0, d[0]), wy+min(0, d[1]), wx+corridor+max(0, d[0]), wy+corridor+max(0, d[1]), false)
		stack = append(stack, [2]int{x, y})
	}
	return m
}

// Random has single cells solid with probability p.
func Random(rng *rand.Rand, w, h int, p float64) Cells {
	c := NewCells(w, h)
	for i := range c.Solid {
		c.Solid[i] = rng.Float64() < p
	}
	return c
}
