package solids

import (
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/plainfloor"
)

const um = plainfloor.CellUm

func raster(t testing.TB, rng *rand.Rand, w, h int, p float64, open bool) *floor.Map {
	t.Helper()
	c := plainfloor.Random(rng, w, h, p)
	f, err := floor.New(floor.Settings{ResolutionUm: um, Columns: w, Rows: h, CapUm: 5_000_000, OpenBorder: open})
	if err != nil {
		t.Fatal(err)
	}
	cells := make([]byte, (w*h+3)/4)
	for i, s := range c.Solid {
		if s {
			cells[i/4] |= 1 << (2 * (i % 4))
		}
	}
	if f, err = f.Apply([]floor.Edit{{Kind: floor.PaintCells, Rect: floor.CellRect{X1: w, Y1: h}, Cells: cells}}); err != nil {
		t.Fatal(err)
	}
	return f
}

// winding is the number of times the chains go round p, by a ray to the right (Sunday's
// half-open rule, from memory).
func winding(chains [][]geom.Point, p geom.Point) int {
	n := 0
	for _, c := range chains {
		for i, b := range c {
			a := c[(i+len(c)-1)%len(c)]
			switch {
			case a.Y <= p.Y && b.Y > p.Y && geom.Orient(a, b, p) > 0:
				n++
			case b.Y <= p.Y && a.Y > p.Y && geom.Orient(a, b, p) < 0:
				n--
			}
		}
	}
	return n
}

// TestTracedOutlineHoldsTheSolidCells: the winding number about each cell's middle says
// what the cell is, each turn is a right angle, and the area is that of the cells.
func TestTracedOutlineHoldsTheSolidCells(t *testing.T) {
	const seed = 7
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 0))
	for k := range 60 {
		w, h := 1+rng.IntN(90), 1+rng.IntN(40)
		if k%5 == 0 {
			w = 64 * (1 + rng.IntN(2)) // ends with a block
		}
		open := k%2 == 0
		f := raster(t, rng, w, h, rng.Float64(), open)
		loops := ReadRaster(f).Trace()
		area, cells := 0.0, 0
		for _, l := range loops {
			area += geom.Ring(l).SignedArea() / (um * um)
			for i, b := range l {
				a, c := l[(i+len(l)-1)%len(l)], l[(i+1)%len(l)]
				if geom.Orient(a, b, c) == 0 {
					t.Fatalf("case %d: no turn at %v", k, b)
				}
			}
		}
		for r := range h {
			for c := range w {
				p := geom.Point{X: (float64(c) + 0.5) * um, Y: (float64(r) + 0.5) * um}
				want := 0
				if f.Solid(c, r) {
					want, cells = 1, cells+1
				}
				if !open { // all beyond the floor is solid: the round about it is not drawn
					want--
				}
				if got := winding(loops, p); got != want {
					t.Fatalf("case %d: winding number %d about cell (%d, %d), wanted %d", k, got, c, r, want)
				}
			}
		}
		if !open {
			cells -= w * h
		}
		if area != float64(cells) {
			t.Fatalf("case %d: area of %v cells, wanted %d", k, area, cells)
		}
	}
}

// TestSimplifiedOutlineIsOutside: nothing solid is lost, and what is added is near the
// solid; a slanting wall's teeth go.
func TestSimplifiedOutlineIsOutside(t *testing.T) {
	const seed = 8
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 0))
	for k := range 40 {
		f := raster(t, rng, 1+rng.IntN(60), 1+rng.IntN(60), []float64{0.02, 0.2, 0.5, 0.9}[k%4], true)
		loops := ReadRaster(f).Trace()
		var simple [][]geom.Point
		for _, l := range loops {
			s := Simplify(l, um)
			simple = append(simple, s)
			for i, p := range s {
				q := s[(i+1)%len(s)]
				for u := range 9 {
					v := float64(u) / 8
					on := geom.Point{X: p.X + v*(q.X-p.X), Y: p.Y + v*(q.Y-p.Y)}
					if d, _ := geom.BorderDist([][]geom.Point{l}, on); d > um {
						t.Fatalf("case %d: %v of the chord %v %v is %v µm from the outline", k, on, p, q, d)
					}
				}
			}
		}
		for range 500 {
			b := f.Bounds().Grow(um)
			p := geom.Point{X: b.Min.X + rng.Float64()*b.Width(), Y: b.Min.Y + rng.Float64()*b.Height()}
			if winding(loops, p) > 0 && winding(simple, p) < 1 {
				t.Fatalf("case %d: %v is solid, but not in the simplified outline", k, p)
			}
		}
	}
	slant, err := plainfloor.RackHall(256, 7, false)
	if err != nil {
		t.Fatal(err)
	}
	before, after := 0, 0
	for _, l := range ReadRaster(slant).Trace() {
		before += len(l)
		after += len(Simplify(l, um))
	}
	t.Logf("slanting racks: %d turns, %d after", before, after)
	if after*4 > before {
		t.Errorf("%d of %d turns are left of racks that slant", after, before)
	}
}

// TestGapsAreFilled against a plain scan of rows, then of columns.
func TestGapsAreFilled(t *testing.T) {
	const seed = 9
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 0))
	for k := range 60 {
		w, h, gap := 1+rng.IntN(150), 1+rng.IntN(40), rng.IntN(9)
		f := raster(t, rng, w, h, 0.1+0.3*rng.Float64(), k%2 == 0)
		got := ReadRaster(f)
		got.FillGaps(gap)
		solid := make([]bool, w*h)
		for i := range solid {
			solid[i] = f.Solid(i%w, i/w)
		}
		fill := func(n int, at func(i int) *bool) {
			last := -1 // the last solid one; the border, unless it is open
			if k%2 == 0 {
				last = -1000
			}
			for i := 0; i <= n; i++ {
				if i < n && !*at(i) || i == n && k%2 == 0 {
					continue
				}
				if i-last-1 <= gap {
					for j := last + 1; j < i; j++ {
						*at(j) = true
					}
				}
				last = i
			}
		}
		for y := range h {
			fill(w, func(i int) *bool { return &solid[y*w+i] })
		}
		for x := range w {
			fill(h, func(i int) *bool { return &solid[i*w+x] })
		}
		for i, want := range solid {
			if got.Solid(i%w, i/w) != want {
				t.Fatalf("case %d: cell (%d, %d) of %d by %d, gap %d: wanted %v", k, i%w, i/w, w, h, gap, want)
			}
		}
	}
}
