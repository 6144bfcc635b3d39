package clearance

import (
	"fmt"
	"math"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Checks against values from outside. Unless a test says otherwise, the source is
// elementary geometry worked out by hand; figures that were computed with other
// software name it.

// cellsFloor is a floor of c x r cells of 1 m, all free, cap in cells.
func cellsFloor(t testing.TB, c, r int, cap int64, open bool, edits ...floor.Edit) *floor.Map {
	return mustMap(t, floor.Settings{ResolutionUm: geom.UmPerMetre, Columns: c, Rows: r, CapUm: cap * geom.UmPerMetre, OpenBorder: open, Initial: floor.Free}, edits...)
}

func paint(x0, y0, x1, y1 int, fill floor.Occupancy) floor.Edit {
	return floor.Edit{Kind: floor.PaintRect, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}, Fill: fill}
}

func disc(name string, x, y float64, radius int64) floor.Edit {
	return floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: name, Kind: floor.Solid, RadiusUm: radius,
		Shape: floor.NewDisc(geom.Point{X: x, Y: y}, radius, 0)}}
}

func box(name string, x0, y0, x1, y1 float64) floor.Edit {
	return floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: name, Kind: floor.Solid,
		Shape: floor.NewPolygon([][]geom.Point{{{X: x0, Y: y0}, {X: x1, Y: y0}, {X: x1, Y: y1}, {X: x0, Y: y1}}}, 0)}}
}

// TestDistanceTransformOfOneCell: in the transform of one marked cell in (2n+1)² cells
// the farthest is n√2 away, and for n = 4 all distances add up to 277.361650444919
// (computed with scipy 1.10.1). That transform measures from middle to middle.
// Here the middles are the lattice vertices of 2n x 2n cells and the marked one is a
// disc of 1 µm, whose radius is added back.
func TestDistanceTransformOfOneCell(t *testing.T) {
	const n = 4
	f := mustBuild(t, cellsFloor(t, 2*n, 2*n, 2*n, true, disc("one", n*1e6, n*1e6, 1)))
	var sum, farthest float64
	var rounded int64
	for j := range 2*n + 1 {
		for i := range 2*n + 1 {
			d := f.At(f.point(i, j)).Um
			if i != n || j != n {
				d++
				rounded++
			}
			sum += d
			farthest = max(farthest, d)
			rounded += int64(f.Vertex(i, j))
		}
	}
	if want := 277.361650444919; math.Abs(sum/1e6-want) > 1e-11 {
		t.Errorf("sum %.12f, want %.12f", sum/1e6, want)
	}
	if want := n * math.Sqrt2; math.Abs(farthest/1e6-want) > 1e-12 {
		t.Errorf("farthest %v, want %v", farthest/1e6, want)
	}
	// 80 vertices, each rounded down by less than 1 µm.
	if short := sum - float64(rounded); short < 0 || short >= 80 {
		t.Errorf("rounded values are %v µm short in all, want 0 to 80", short)
	}
	// The raster twin: the middle cell of (2n+1)² cells is n√2 from the floor's corner.
	r := mustBuild(t, cellsFloor(t, 2*n+1, 2*n+1, 2*n, true, paint(n, n, n+1, n+1, floor.Occupied)))
	if got, want := r.Vertex(0, 0), int32(math.Floor(n*math.Sqrt2*1e6)); got != want {
		t.Errorf("corner %d, want %d", got, want)
	}
}

// TestWallRing: in a 9 x 7 array with a wall ring of one cell, the largest distance is 3
// cells to the wall's middle, 2.5 cells to its face (scipy 1.10.1); a transform d
// between middles becomes a face clearance as res (d - ½) along walls.
func TestWallRing(t *testing.T) {
	m := cellsFloor(t, 9, 7, 5, true, paint(0, 0, 9, 1, floor.Occupied), paint(0, 6, 9, 7, floor.Occupied),
		paint(0, 0, 1, 7, floor.Occupied), paint(8, 0, 9, 7, floor.Occupied))
	f := mustBuild(t, m)
	var most float64
	for r := range 7 {
		for c := range 9 {
			got := f.At(geom.Point{X: (float64(c) + 0.5) * 1e6, Y: (float64(r) + 0.5) * 1e6}).Um
			d := min(c, 8-c, r, 6-r) // cells to the wall's middle
			if want := max(0, (float64(d)-0.5)*1e6); got != want {
				t.Errorf("cell (%d, %d): %v, want %v", c, r, got, want)
			}
			most = max(most, got)
		}
	}
	if most != 2.5e6 {
		t.Errorf("largest clearance %v, want 2.5 cells", most)
	}
}

// TestRectangleMedial: the largest clearance in a W x H room, W >= H, is H/2 (Blum's
// medial axis of a rectangle), all along the middle piece of length W - H.
func TestRectangleMedial(t *testing.T) {
	f := mustBuild(t, cellsFloor(t, 6, 2, 3, false))
	if got := f.Segment(geom.Point{X: 1e6, Y: 1e6}, geom.Point{X: 5e6, Y: 1e6}); got.Um != 1e6 {
		t.Errorf("along the axis %v, want 1 m", got.Um)
	}
	for x := 0.0; x <= 6e6; x += 125_000 {
		for y := 0.0; y <= 2e6; y += 125_000 {
			if got := f.At(geom.Point{X: x, Y: y}); got.Um > 1e6 {
				t.Errorf("(%v, %v): %v above H/2", x, y, got.Um)
			}
		}
	}
}

// junction is a floor of 5 cm cells, solid but for the given rectangles, in cells.
func junction(t *testing.T, free ...[4]int) *Field {
	m := mustMap(t, floor.Settings{ResolutionUm: 50_000, Columns: 200, Rows: 200, CapUm: 5_000_000, Initial: floor.Occupied})
	for _, r := range free {
		m = mustApply(t, m, paint(r[0], r[1], r[2], r[3], floor.Free))
	}
	return mustBuild(t, m)
}

// halfDiagonal is what a cell's vertices may miss of the largest clearance inside it.
const halfDiagonal = 50_000 / math.Sqrt2

// TestJunctions: passages of width w = 2 m. T-junction: the branch point lies 3w/8 above
// the line of the inner corners, with clearance 5w/8; along the branch arc, |x| <=
// w/2, y = w/2 - (w/2-|x|)²/(2w). Crossing: at most w/√2. Right-angle bend: at most
// (2-√2)w. (Worked out by hand; the extremes also by scipy's transform.) Points are
// met exactly, the largest value on the lattice within half a cell's diagonal.
func TestJunctions(t *testing.T) {
	const w = 2_000_000.0
	largest := func(f *Field) float64 {
		var v int32
		for j := 60; j <= 140; j++ {
			for i := 60; i <= 140; i++ {
				v = max(v, f.Vertex(i, j))
			}
		}
		return float64(v)
	}
	t.Run("T", func(t *testing.T) {
		f := junction(t, [4]int{0, 80, 200, 120}, [4]int{80, 0, 120, 80})
		for _, x := range []float64{0, w / 4, -w / 4, w / 2} {
			y := w/2 - (w/2-math.Abs(x))*(w/2-math.Abs(x))/(2*w)
			if got, want := f.At(geom.Point{X: 5e6 + x, Y: 4e6 + y}).Um, w-y; math.Abs(got-want) > 1e-6 {
				t.Errorf("arc at x = %v: %v, want %v", x, got, want)
			}
		}
		if got := f.At(geom.Point{X: 5e6, Y: 4e6 + 3*w/8}); got.Um != 5*w/8 {
			t.Errorf("branch point %v, want %v", got.Um, 5*w/8)
		}
		if got := largest(f); got > 5*w/8 || got < 5*w/8-halfDiagonal {
			t.Errorf("largest %v, want %v", got, 5*w/8)
		}
	})
	t.Run("crossing", func(t *testing.T) {
		f := junction(t, [4]int{0, 80, 200, 120}, [4]int{80, 0, 120, 200})
		if got, want := largest(f), w/math.Sqrt2; got > want || got < want-halfDiagonal {
			t.Errorf("largest %v, want %v", got, want)
		}
	})
	t.Run("bend", func(t *testing.T) {
		f := junction(t, [4]int{80, 80, 200, 120}, [4]int{80, 80, 120, 200})
		if got, want := largest(f), (2-math.Sqrt2)*w; got > want || got < want-halfDiagonal {
			t.Errorf("largest %v, want %v", got, want)
		}
	})
}

// TestDoorKeepsItsWidth: a 0.90 m door between two outlines is 0.90 m wide wherever it
// lies relative to the grid: a body needing 450,000 µm passes, one needing 450,001
// does not.
func TestDoorKeepsItsWidth(t *testing.T) {
	for _, off := range []float64{0, 1, 7_000, 25_000, 33_333, 49_999} {
		x := 2e6 + off
		m := mustMap(t, floor.Settings{ResolutionUm: 50_000, Columns: 100, Rows: 100, CapUm: 2_000_000, Initial: floor.Free},
			box("left", 0, 2e6, x, 2.1e6), box("right", x+900_000, 2e6, 5e6, 2.1e6))
		f := mustBuild(t, m)
		a, b := geom.Point{X: x + 450_000, Y: 1e6}, geom.Point{X: x + 450_000, Y: 3e6}
		if got := f.Segment(a, b); got.Um != 450_000 {
			t.Errorf("offset %v: clearance through the door %v, want 450000", off, got.Um)
		}
		if !f.SegmentClear(a, b, 450_000) || f.SegmentClear(a, b, 450_001) {
			t.Errorf("offset %v: admitted at 450000 %v, at 450001 %v", off, f.SegmentClear(a, b, 450_000), f.SegmentClear(a, b, 450_001))
		}
	}
}

// count is the number of nodes of the region quadtree of 2^q x 2^q cells: a node is cut
// while some, but not all, of its cells are solid.
func count(f *Field, q int) int {
	var walk func(Node) int
	walk = func(n Node) int {
		k := 1
		if n.Kind(0) == Mixed {
			var kids [4]Node
			for _, c := range kids[:n.Children(&kids)] {
				k += walk(c)
			}
		}
		return k
	}
	return walk(f.node(q, 0, 0))
}

// TestQuadtreeNodeCounts: region quadtrees of 2^q x 2^q cells have 4q+1 nodes for one solid
// cell, 2^(q+2)-3 for a wall of one cell's width or the main diagonal,
// 2^(q+4)-16q-11 for a wall round the border, (4^(q+1)-1)/3 for a checkerboard
// (counted by brute force). A square of side 2^m takes from 4(q-m)+1 to
// 4p+16(q-m)-27 nodes, p = 4·2^m its perimeter (exercise in Samet, Foundations of
// Multidimensional and Metric Data Structures, 2006; confirmed by brute force).
func TestQuadtreeNodeCounts(t *testing.T) {
	tree := func(q int, edits ...floor.Edit) int {
		return count(mustBuild(t, cellsFloor(t, 1<<q, 1<<q, 1, true, edits...)), q)
	}
	for _, q := range []int{2, 3, 5, 6, 7, 8} {
		n := 1 << q
		var diagonal, checks []floor.Edit
		for k := range n {
			diagonal = append(diagonal, paint(k, k, k+1, k+1, floor.Occupied))
		}
		for k := 0; q <= 6 && k < n*n; k++ {
			if x, y := k%n, k/n; (x+y)%2 == 0 {
				checks = append(checks, paint(x, y, x+1, y+1, floor.Occupied))
			}
		}
		for _, c := range []struct {
			name  string
			want  int
			edits []floor.Edit
		}{
			{"free", 1, nil},
			{"solid", 1, []floor.Edit{paint(0, 0, n, n, floor.Occupied)}},
			{"cell", 4*q + 1, []floor.Edit{paint(n/2, n/3, n/2+1, n/3+1, floor.Occupied)}},
			{"wall", 1<<(q+2) - 3, []floor.Edit{paint(n/3, 0, n/3+1, n, floor.Occupied)}},
			{"diagonal", 1<<(q+2) - 3, diagonal},
			{"border", 1<<(q+4) - 16*q - 11, []floor.Edit{paint(0, 0, n, n, floor.Occupied), paint(1, 1, n-1, n-1, floor.Free)}},
			{"checkerboard", (1<<(2*(q+1)) - 1) / 3, checks},
		} {
			if c.name == "checkerboard" && checks == nil {
				continue
			}
			if got := tree(q, c.edits...); got != c.want {
				t.Errorf("q = %d, %s: %d nodes, want %d", q, c.name, got, c.want)
			}
		}
	}
	const q = 4
	for m := 1; m < q; m++ {
		side, p := 1<<m, 4<<m
		best, worst := math.MaxInt, 0
		for y := 0; y+side <= 1<<q; y++ {
			for x := 0; x+side <= 1<<q; x++ {
				k := tree(q, paint(x, y, x+side, y+side, floor.Occupied))
				best, worst = min(best, k), max(worst, k)
			}
		}
		if best != 4*(q-m)+1 || worst != 4*p+16*(q-m)-27 {
			t.Errorf("square of side %d: %d to %d nodes, want %d to %d", side, best, worst, 4*(q-m)+1, 4*p+16*(q-m)-27)
		}
	}
}

// TestOutlinesCountLikeCells: solid outlines along the lattice give the node counts of the
// cells they cover.
func TestOutlinesCountLikeCells(t *testing.T) {
	const q, n = 7, 1 << 7
	wall := mustBuild(t, cellsFloor(t, n, n, 1, true, box("wall", 40e6, 0, 41e6, n*1e6)))
	if got, want := count(wall, q), 1<<(q+2)-3; got != want {
		t.Errorf("wall: %d nodes, want %d", got, want)
	}
	var edits []floor.Edit
	for k, b := range [][4]float64{{0, 0, n, 1}, {0, n - 1, n, n}, {0, 1, 1, n - 1}, {n - 1, 1, n, n - 1}} {
		edits = append(edits, box(fmt.Sprint("b", k), b[0]*1e6, b[1]*1e6, b[2]*1e6, b[3]*1e6))
	}
	if got, want := count(mustBuild(t, cellsFloor(t, n, n, 1, true, edits...)), q), 1<<(q+4)-16*q-11; got != want {
		t.Errorf("border: %d nodes, want %d", got, want)
	}
}

// TestAgainstTextbook: the raster part equals the transform as printed by Felzenszwalb &
// Huttenlocher (2012) on random cells of a floor wider and taller than a tile.
func TestAgainstTextbook(t *testing.T) {
	s := floor.Settings{ResolutionUm: 49_999, Columns: tileWidth + 150, Rows: tileHeight + 40, CapUm: 60 * 49_999, OpenBorder: true, Initial: floor.Free}
	m := mustMap(t, s)
	var edits []floor.Edit
	state := uint32(1)
	draw := func(n int) int { state = state*1664525 + 1013904223; return int(state>>8) % n }
	for range 600 {
		x, y := draw(s.Columns), draw(s.Rows)
		edits = append(edits, paint(x, y, min(s.Columns, x+1+draw(9)), min(s.Rows, y+1+draw(3)), floor.Occupied))
	}
	m = mustApply(t, m, edits...)
	f := mustBuild(t, m)
	g := textbook[float64](m)
	for j := range s.Rows + 1 {
		for i := range s.Columns + 1 {
			// Squares are whole numbers, exact in float64.
			want := min(int64(isqrt(uint64(min(g[j*(s.Columns+1)+i], 1<<20))*49_999*49_999)), s.CapUm)
			if got := f.Vertex(i, j); int64(got) != want {
				t.Fatalf("vertex (%d, %d): %d, want %d", i, j, got, want)
			}
		}
	}
}
