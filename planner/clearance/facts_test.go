package clearance

import (
	"context"
	"errors"
	"math"
	"sync"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// TestRasterCellLowerIsExact: without vector solids the smallest clearance over a closed
// cell is the smallest over its four vertices, exactly.
func TestRasterCellLowerIsExact(t *testing.T) {
	check(t, 3, func(t *rapid.T) {
		m, err := floor.New(genSettings(t, 30))
		if err != nil {
			t.Fatal(err)
		}
		s := m.Settings()
		for range rapid.IntRange(0, 8).Draw(t, "rects") {
			m = tryApply(t, m, []floor.Edit{{Kind: floor.PaintRect, Rect: genCells(t, s), Fill: floor.Occupied}})
		}
		f := buildT(t, m)
		for range 20 {
			c, r := rapid.IntRange(0, s.Columns-1).Draw(t, "c"), rapid.IntRange(0, s.Rows-1).Draw(t, "r")
			want := math.Floor(plainRect(m, f.cellRect(c, r)))
			if got := f.CellLower(c, r); float64(got) != want {
				t.Fatalf("cell (%d, %d): %d, want %v", c, r, got, want)
			}
		}
	})
}

// TestLargestInCell: nowhere in a closed cell is the clearance above the largest of its
// vertices by more than h/√2; Node.Max bounds squares of cells alike.
func TestLargestInCell(t *testing.T) {
	check(t, 3, func(t *rapid.T) {
		m := genMap(t, 90)
		f := buildT(t, m)
		for range 20 {
			p := genPoint(t, m.Settings(), 0)
			d := f.At(p).Um
			for n := f.Root(); ; {
				if d > float64(n.Max)+1+f.h/math.Sqrt2 {
					t.Fatalf("%v: clearance %v, largest vertex of node %v %d", p, d, n.Cells(), n.Max)
				}
				if d < float64(f.lower(int64(n.Min), n.near())) {
					t.Fatalf("%v: clearance %v, smallest vertex of node %v %d", p, d, n.Cells(), n.Min)
				}
				var kids [4]Node
				k := 0
				for _, c := range kids[:n.Children(&kids)] {
					if f.m.Settings().CellBounds(c.Cells()).Contains(p) {
						n, k = c, k+1
					}
				}
				if k == 0 {
					break
				}
			}
		}
	})
}

// TestBoundsAreTight: a tiny disc in the middle of a cell leaves its vertices h/√2 and the
// cell 0; one in front of a side's middle leaves the cell sqrt(m² - h²/4).
func TestBoundsAreTight(t *testing.T) {
	const h = 1e6
	f := mustBuild(t, cellsFloor(t, 9, 9, 6, true, disc("in", 4.5*h, 4.5*h, 1)))
	if m, low := f.Vertex(4, 4), f.CellLower(4, 4); m != 707_105 || low != 0 {
		t.Errorf("disc inside: vertex %d, lower bound %d", m, low)
	}
	f = mustBuild(t, cellsFloor(t, 9, 9, 6, true, disc("ahead", 4.5*h, 2*h, 1)))
	// Cell (4, 4) begins 2 m above the disc: 2 m less 1 µm, known to the last micrometre
	// but for the rounding of its vertices.
	if low := f.CellLower(4, 4); low > 1_999_999 || low < 1_999_997 {
		t.Errorf("disc ahead: lower bound %d", low)
	}
	if !f.CellClear(4, 4, 1_999_999) || f.CellClear(4, 4, 2_000_000) {
		t.Errorf("disc ahead: clear by 1999999 %v, by 2000000 %v", f.CellClear(4, 4, 1_999_999), f.CellClear(4, 4, 2_000_000))
	}
}

// TestNodesAgree: Node.Kind of every node is what its cells say, at 0 and above, and Min and
// Max are those of its vertices.
func TestNodesAgree(t *testing.T) {
	check(t, 3, func(t *rapid.T) {
		m := genMap(t, 80)
		f := buildT(t, m)
		s := m.Settings()
		um := rapid.SampledFrom([]int64{0, 1, s.ResolutionUm / 2, s.ResolutionUm, 2 * s.ResolutionUm, s.CapUm}).Draw(t, "um")
		var walk func(n Node) int
		walk = func(n Node) int {
			r := n.Cells()
			clear, lo, hi := 0, int32(math.MaxInt32), int32(-1)
			for y := r.Y0; y <= r.Y1; y++ {
				for x := r.X0; x <= r.X1; x++ {
					v := f.Vertex(x, y)
					lo, hi = min(lo, v), max(hi, v)
					if x < r.X1 && y < r.Y1 && f.CellClear(x, y, um) {
						clear++
					}
				}
			}
			if lo != n.Min || hi != n.Max {
				t.Fatalf("node %v: %d to %d, want %d to %d", r, n.Min, n.Max, lo, hi)
			}
			all := int(r.Count())
			switch k := n.Kind(um); {
			case k == Free && clear != all, k == Blocked && clear != 0:
				t.Fatalf("node %v at %d: kind %v, %d of %d cells clear", r, um, k, clear, all)
			case k == Mixed && um == 0 && (clear == 0 || clear == all):
				t.Fatalf("node %v at 0: mixed, %d of %d cells clear", r, clear, all)
			}
			cells := 0
			var kids [4]Node
			for _, c := range kids[:n.Children(&kids)] {
				cells += walk(c)
			}
			if n.Level == 0 {
				return 1
			} else if cells != all {
				t.Fatalf("node %v: children hold %d cells", r, cells)
			}
			return cells
		}
		walk(f.Root())
	})
}

// TestSameBlock: where SameBlock says so, every clearance gives the same bits; and a small
// change leaves most of a floor the same.
func TestSameBlock(t *testing.T) {
	check(t, 3, func(t *rapid.T) {
		m := genMap(t, 300)
		f := buildT(t, m)
		next := tryApply(t, m, genEdits(t, m))
		g, err := f.Advance(t.Context(), next, floor.Diff(m, next))
		if err != nil {
			t.Fatal(err)
		}
		for _, o := range []*Field{g, buildT(t, next)} {
			for by := range f.sums.ny {
				for bx := range f.sums.nx {
					if !f.SameBlock(o, bx, by) {
						continue
					}
					var a, b [blockSize]uint64
					for _, um := range []int64{0, 1, m.Settings().ResolutionUm, f.cap/2 + 1, f.cap} {
						f.ClearBits(bx, by, um, &a)
						o.ClearBits(bx, by, um, &b)
						if a != b {
							t.Fatalf("block (%d, %d) said to be the same, but not at %d", bx, by, um)
						}
					}
				}
			}
		}
	})
	m := mustMap(t, floor.Settings{ResolutionUm: 50_000, Columns: 1024, Rows: 1024, CapUm: 5_000_000, Initial: floor.Free})
	f := mustBuild(t, m)
	for _, e := range []floor.Edit{paint(500, 500, 520, 520, floor.Occupied), disc("spill", 25e6, 25e6, 300_000)} {
		g := mustAdvance(t, f, mustApply(t, m, e))
		same := 0
		for k := range 256 {
			if f.SameBlock(g, k%16, k/16) {
				same++
			}
		}
		// The cap is not quite two blocks: a change in one block touches 5x5 at most,
		// over a block's edge 6x6.
		if same < 256-36 || same == 256 {
			t.Errorf("%d of 256 blocks the same", same)
		}
	}
}

// TestSameBlockSeesNeighbours: two changes that show in no vertex of the block itself. With
// a cap of one cell, a cell painted right of the block changes only vertices that
// are the neighbour's first; and an outline may come nearer to the middle of a cell's
// side than to any vertex that something else is not nearer to.
func TestSameBlockSeesNeighbours(t *testing.T) {
	m := cellsFloor(t, 192, 192, 1, true)
	f := mustBuild(t, m)
	for _, e := range []floor.Edit{paint(64, 30, 65, 31, floor.Occupied), paint(30, 64, 31, 65, floor.Occupied), paint(64, 64, 65, 65, floor.Occupied)} {
		g := mustAdvance(t, f, mustApply(t, m, e))
		if f.SameBlock(g, 0, 0) || !f.CellClear(63, 63, 1) || g.SameBlock(f, 0, 0) {
			t.Errorf("%+v: block said to be the same", e.Rect)
		}
	}

	const h = 1e6
	at := func(above float64) *Field {
		return mustBuild(t, cellsFloor(t, 192, 192, 3, true,
			disc("left", 29*h, 64*h, 1), disc("right", 32*h, 64*h, 1), disc("above", 30.5*h, 64*h+above, 1)))
	}
	near, far := at(0.90*h), at(0.95*h)
	if *near.values.at(0, 0) != *far.values.at(0, 0) {
		t.Fatal("a vertex of the block differs: this test shows nothing")
	}
	if near.CellClear(30, 63, 930_000) || !far.CellClear(30, 63, 930_000) {
		t.Errorf("cell below the outline: clear %v and %v", near.CellClear(30, 63, 930_000), far.CellClear(30, 63, 930_000))
	}
	if near.SameBlock(far, 0, 0) {
		t.Error("block said to be the same")
	}
}

// TestAcrossBlocks: an outline in the next block is measured for the cells along the
// edge, on all four sides.
func TestAcrossBlocks(t *testing.T) {
	const h = 1e6
	for _, d := range []struct {
		x, y float64
		c, r int
	}{{30.5, 65, 30, 63}, {30.5, 127, 30, 128}, {65, 30.5, 63, 30}, {127, 30.5, 128, 30}} {
		f := mustBuild(t, cellsFloor(t, 192, 192, 3, true, disc("d", d.x*h, d.y*h, 1)))
		if !f.CellClear(d.c, d.r, h-1) || f.CellClear(d.c, d.r, h) {
			t.Errorf("disc at (%v, %v): cell clear by 999999 %v, by 1000000 %v", d.x, d.y, f.CellClear(d.c, d.r, h-1), f.CellClear(d.c, d.r, h))
		}
	}
}

// TestTouchingIsFree: at 0 a cell that a solid touches from outside is free, even where
// the touching place is a corner; at um, equality is admitted. Distances are 3-4-5
// triangles' and diagonals', exact in float64.
func TestTouchingIsFree(t *testing.T) {
	const h = 1e6
	// A disc of 5 cells whose border passes through the corner (20, 20) of cell (20, 20).
	f := mustBuild(t, cellsFloor(t, 40, 40, 12, true, disc("d", 17*h, 16*h, 5*h)))
	if !f.CellClear(20, 20, 0) || f.CellClear(20, 20, 1) || f.CellClear(19, 19, 0) || f.Vertex(20, 20) != 0 {
		t.Error("cell that a disc touches at a corner")
	}
	// The same disc, 5 cells further from the corner (23, 24) of cell (23, 24).
	if !f.CellClear(23, 24, 5*h) || f.CellClear(23, 24, 5*h+1) || f.Vertex(23, 24) != 5*h {
		t.Errorf("cell 5 cells from a disc: vertex %d", f.Vertex(23, 24))
	}
	if a, b := f.point(23, 24), f.point(26, 28); !f.SegmentClear(a, b, 5*h) || f.SegmentClear(a, b, 5*h+1) {
		t.Error("segment 5 cells from a disc")
	}
	// A diamond through lattice vertices: its sides cut cells from corner to corner and
	// touch the cells beside at a corner only.
	f = mustBuild(t, cellsFloor(t, 40, 40, 12, true, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "p", Kind: floor.Solid,
		Shape: floor.NewPolygon([][]geom.Point{{{X: 20 * h, Y: 10 * h}, {X: 30 * h, Y: 20 * h}, {X: 20 * h, Y: 30 * h}, {X: 10 * h, Y: 20 * h}}}, 0)}}))
	barred := 0
	for r := range 40 {
		for c := range 40 {
			if !f.CellClear(c, r, 0) {
				barred++
			}
		}
	}
	// Row by row 2, 4, ... 20, twice.
	if want := 2 * (2 + 20) * 10 / 2; barred != want {
		t.Errorf("diamond bars %d cells, want %d", barred, want)
	}
}

// TestWindowsDoNotMatter: values computed for any window, from any guess of how large they
// get, are those of the whole floor.
func TestWindowsDoNotMatter(t *testing.T) {
	check(t, 3, func(t *rapid.T) {
		m := genMap(t, 150)
		f := buildT(t, m)
		var s scratch
		s.raster.lad = f.lad
		for range 12 {
			i, j := rapid.IntRange(0, f.cols).Draw(t, "i"), rapid.IntRange(0, f.rows).Draw(t, "j")
			if rapid.Bool().Draw(t, "read from a block's edge") {
				i = min(f.cols, i&^blockMask+f.lad.reach)
			}
			w := window{i, j, i + rapid.IntRange(1, 80).Draw(t, "across"), j + rapid.IntRange(1, 80).Draw(t, "up")}.intersect(window{0, 0, f.cols + 1, f.rows + 1})
			if err := f.evaluate(t.Context(), &s, w, rapid.IntRange(0, f.lad.reach).Draw(t, "reach")); err != nil {
				t.Fatal(err)
			}
			for k, v := range s.out {
				if i, j := w.i0+k%w.width(), w.j0+k/w.width(); v != f.Vertex(i, j) {
					t.Fatalf("window %v, vertex (%d, %d): %d, want %d", w, i, j, v, f.Vertex(i, j))
				}
			}
		}
	})
}

// TestReadsOneCapFurther: a solid exactly the cap's whole cells beyond a window's edge is
// seen, wherever the window lies relative to the blocks.
func TestReadsOneCapFurther(t *testing.T) {
	const res, reach = 50_000, 14
	for c := range 200 {
		m := mustMap(t, floor.Settings{ResolutionUm: res, Columns: 230, Rows: 230, CapUm: reach*res + 20_000, OpenBorder: true, Initial: floor.Free},
			paint(c, c, c+1, c+1, floor.Occupied))
		f := mustBuild(t, m)
		var s scratch
		s.raster.lad = f.lad
		for _, w := range []window{
			{c + 1 + reach, c, c + 3 + reach, c + 1}, {c - reach - 1, c, c - reach + 1, c + 1},
			{c, c + 1 + reach, c + 1, c + 3 + reach}, {c, c - reach - 1, c + 1, c - reach + 1},
		} {
			if w.i0 < 0 || w.j0 < 0 {
				continue
			}
			out := make([]int32, w.vertices())
			if err := s.raster.raster(t.Context(), f, w, out); err != nil {
				t.Fatal(err)
			}
			if got := min(out[0], out[1]); got != reach*res {
				t.Errorf("cell (%d, %d), window %v: %d, want %d", c, c, w, got, reach*res)
			}
		}
	}
}

// TestTravel: over the distance given, a disc moves without overlapping a solid; three
// micrometres further, or at the bound, it does.
func TestTravel(t *testing.T) {
	check(t, 3, func(t *rapid.T) {
		m := genMap(t, 60)
		f := buildT(t, m)
		s := m.Settings()
		p := genPlace(t, s, 0)
		heading := rapid.Float64Range(-math.Pi, math.Pi).Draw(t, "heading")
		if rapid.Bool().Draw(t, "square") {
			heading = rapid.SampledFrom([]float64{0, math.Pi / 2, math.Pi, -math.Pi / 2}).Draw(t, "heading")
		}
		radius := max(0, rapid.Int64Range(-s.CapUm/8, s.CapUm).Draw(t, "radius")) // now and then a point
		most := rapid.Int64Range(1, 2*s.CapUm).Draw(t, "most")
		at := func(d float64) geom.Point {
			return geom.Point{X: p.X + d*math.Cos(heading), Y: p.Y + d*math.Sin(heading)}
		}
		got := f.Travel(p, heading, radius, most)
		switch {
		case got < 0 || got > float64(most):
			t.Fatalf("travel %v beyond 0 to %d", got, most)
		case got > 0 && plainSegment(m, p, at(got)) < float64(radius)-1e-6:
			t.Fatalf("travel %v: clearance on the way %v, radius %d", got, plainSegment(m, p, at(got)), radius)
		case got+3 < float64(most) && plainSegment(m, p, at(got+3)) >= max(float64(radius), 1e-6):
			t.Fatalf("travel %v: could go on, radius %d", got, radius)
		}
	})
}

// TestManyChangesAtOnce: a patch that touches many places far apart takes another way
// through Advance and still equals Build.
func TestManyChangesAtOnce(t *testing.T) {
	m := mustMap(t, floor.Settings{ResolutionUm: 50_000, Columns: 1300, Rows: 1300, CapUm: 400_000, Initial: floor.Free},
		box("wall", 10e6, 3e6, 50e6, 3.3e6))
	f := mustBuild(t, m)
	var edits []floor.Edit
	for k := range 150 {
		x, y := k%13*97+20, k/13*101+30
		if k%3 == 0 {
			edits = append(edits, disc("d"+string(rune('a'+k%26))+string(rune('a'+k/26)), float64(x)*50_000, float64(y)*50_000, 70_001))
		} else {
			edits = append(edits, paint(x, y, x+2, y+1, floor.Occupied))
		}
	}
	next := mustApply(t, m, edits...)
	g := mustAdvance(t, f, next)
	if !g.Equal(mustBuild(t, next)) {
		t.Error("patched differs from rebuilt")
	}
	if back := mustAdvance(t, g, m); !back.Equal(f) {
		t.Error("taking the patch back does not give the field it started from")
	}
}

// TestEqualSeesEverything: Equal is the judge of law 4, so it must tell fields apart that
// differ in one place only.
func TestEqualSeesEverything(t *testing.T) {
	base := cellsFloor(t, 100, 100, 5, false, box("a", 20e6, 20e6, 22e6, 30e6))
	f := mustBuild(t, base)
	for name, e := range map[string]floor.Edit{
		"cell":    paint(70, 70, 71, 71, floor.Occupied),
		"moved":   box("a", 20e6, 20e6, 22e6, 30.000001e6),
		"renamed": box("b", 20e6, 20e6, 22e6, 30e6),
		"hidden":  box("b", 20.2e6, 20.2e6, 21.8e6, 29.5e6), // inside a: no value differs
	} {
		if f.Equal(mustBuild(t, mustApply(t, base, e))) {
			t.Errorf("%s: said to be equal", name)
		}
	}
	if !f.Equal(mustBuild(t, base)) {
		t.Error("equal fields said to differ")
	}
}

// TestOutOfRange: questions off the floor, not finite or above the cap get an answer that
// admits nothing.
func TestOutOfRange(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, open := range []bool{false, true} {
		f := mustBuild(t, cellsFloor(t, 10, 10, 3, open, disc("d", 5e6, 5e6, 1000)))
		mid := geom.Point{X: 2e6, Y: 2e6}
		for _, p := range []geom.Point{{X: nan, Y: 1}, {X: 1, Y: inf}, {X: -inf, Y: nan}} {
			if n := f.At(p); n.Um != 0 {
				t.Errorf("clearance at %v: %v", p, n.Um)
			}
			if n := f.Segment(mid, p); n.Um != 0 {
				t.Errorf("clearance to %v: %v", p, n.Um)
			}
			if f.SegmentClear(mid, p, 1) || f.SegmentClear(p, mid, 0) || f.Travel(p, 0, 1, 1000) != 0 {
				t.Errorf("%v admitted", p)
			}
		}
		if f.Travel(mid, nan, 1, 1000) != 0 || f.Travel(mid, 0, 1, -5) != 0 {
			t.Error("travel without a heading or distance")
		}
		if f.SegmentClear(mid, mid, f.Cap()+1) || f.CellClear(0, 0, f.Cap()+1) {
			t.Error("admitted above the cap")
		}
		for _, c := range [][2]int{{-1, 0}, {0, -1}, {10, 0}, {0, 10}} {
			if f.CellClear(c[0], c[1], 0) || f.CellClear(c[0], c[1], 1) || f.CellLower(c[0], c[1]) != 0 {
				t.Errorf("cell %v admitted", c)
			}
		}
		words := [blockSize]uint64{1}
		if f.ClearBits(-1, 0, 1, &words); words != [blockSize]uint64{} {
			t.Error("block off the floor admitted")
		}
		if f.Vertex(-1, 0) != 0 || f.Vertex(0, 11) != 0 {
			t.Error("clearance off the lattice")
		}
		far := f.At(geom.Point{X: 1e15, Y: -1e15})
		if closed := far.Border && far.Um == 0; closed == open {
			t.Errorf("far off the floor: %+v", far)
		}
	}
}

// TestLargestCap: a cap beyond 32 bits of micrometres is cut to MaxCapUm, nothing else.
func TestLargestCap(t *testing.T) {
	m := mustMap(t, floor.Settings{ResolutionUm: 10_000_000, Columns: 300, Rows: 3, CapUm: 2_500_000_000, OpenBorder: true, Initial: floor.Free},
		paint(0, 1, 1, 2, floor.Occupied), disc("d", 1, 1, 1))
	f := mustBuild(t, m)
	if f.Cap() != MaxCapUm {
		t.Fatalf("cap %d", f.Cap())
	}
	for _, i := range []int{0, 1, 2, 100, 214, 215, 216, 300} {
		want := min(int64(max(0, i-1))*10_000_000, MaxCapUm)
		if got := f.Vertex(i, 1); int64(got) != want {
			t.Errorf("vertex %d: %d, want %d", i, got, want)
		}
	}
	if !f.CellClear(299, 0, MaxCapUm) || f.CellClear(215, 0, MaxCapUm) {
		t.Error("cells about the cap misjudged")
	}
	var words [blockSize]uint64
	if f.ClearBits(3, 0, MaxCapUm, &words); words[0] != f.width(3)&^(1<<(216-192)-1) {
		t.Errorf("bits about the cap %b", words[0])
	}
}

// TestCancelled: a cancelled context ends the work with its error.
func TestCancelled(t *testing.T) {
	m := cellsFloor(t, 300, 300, 5, false)
	f := mustBuild(t, m)
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := Build(ctx, m); !errors.Is(err, context.Canceled) {
		t.Errorf("Build: %v", err)
	}
	next := mustApply(t, m, paint(1, 1, 2, 2, floor.Occupied))
	if _, err := f.Advance(ctx, next, floor.Diff(m, next)); !errors.Is(err, context.Canceled) {
		t.Errorf("Advance: %v", err)
	}
}

// TestLaw1ReadersSeeOneVersion: readers of a field see the same values while fields are
// advanced from it. Under the race detector it also shows that nothing shared is
// written.
func TestLaw1ReadersSeeOneVersion(t *testing.T) {
	m := cellsFloor(t, 200, 200, 5, false, box("a", 20e6, 20e6, 22e6, 30e6))
	f := mustBuild(t, m)
	want := f.At(geom.Point{X: 50e6, Y: 50e6})
	var wg sync.WaitGroup
	for k := range 3 {
		wg.Go(func() {
			next := mustApply(t, m, paint(47+k, 47, 49+k, 49, floor.Occupied), disc("d", 52e6, 52e6, 500_000))
			mustAdvance(t, f, next)
		})
	}
	for range 100 {
		if got := f.At(geom.Point{X: 50e6, Y: 50e6}); got != want {
			t.Errorf("%+v, want %+v", got, want)
		}
		var words [blockSize]uint64
		f.ClearBits(0, 0, 500_000, &words)
	}
	wg.Wait()
}

// TestWideOutlines: an outline that covers whole blocks without an edge in them, with a
// hole that does too, bars what is inside and nothing else.
func TestWideOutlines(t *testing.T) {
	const um = 1_000_000
	m := cellsFloor(t, 700, 700, 70, false, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{
		Name: "hall", Kind: floor.Solid, Shape: floor.NewPolygon([][]geom.Point{
			{{X: 350 * um, Y: 3 * um}, {X: 697 * um, Y: 350*um + 17}, {X: 350 * um, Y: 697 * um}, {X: 3*um + 5, Y: 350 * um}},
			{{X: 250 * um, Y: 250 * um}, {X: 250 * um, Y: 450 * um}, {X: 450 * um, Y: 450 * um}, {X: 450 * um, Y: 250 * um}},
		}, 0),
	}})
	f := mustBuild(t, m)
	bare := 0
	for by := range f.buckets.ny {
		for bx := range f.buckets.nx {
			for _, e := range f.buckets.at(bx, by) {
				if len(e.pieces) == 0 {
					bare++
				}
			}
		}
	}
	if bare == 0 {
		t.Fatal("no block without an edge is covered: the outline is too small for this test")
	}
	check(t, 3, func(t *rapid.T) {
		p := genPlace(t, m.Settings(), 0)
		q := genPlace(t, m.Settings(), 0)
		ft, _ := m.Feature("hall")
		d, _ := ft.Shape.Dist(p)
		want := max(0, min(d, float64(f.cap), p.X, p.Y, 700*um-p.X, 700*um-p.Y))
		if got := f.At(p); !within(got.Um, want) {
			t.Fatalf("%v: %v, want %v", p, got.Um, want)
		}
		sd, _ := ft.Shape.SegmentDist(p, q)
		want = max(0, min(sd, want, q.X, q.Y, 700*um-q.X, 700*um-q.Y))
		if got := f.Segment(p, q); !within(got.Um, want) {
			t.Fatalf("%v %v: %v, want %v", p, q, got.Um, want)
		}
		if got := f.SegmentClear(p, q, 1); got != (want >= 1) && !within(want, 1) {
			t.Fatalf("%v %v: clear %v at clearance %v", p, q, got, want)
		}
		c, r := int(p.X/um), int(p.Y/um)
		if c >= 700 || r >= 700 {
			return
		}
		in := ft.Shape.RectDist(f.cellRect(c, r).Grow(-0.001)) == 0
		if got := f.CellClear(c, r, 0); got == in {
			t.Fatalf("cell (%d, %d): free %v, inside %v", c, r, got, in)
		}
	})
	// Taken away and put back: blocks without anything near are shared again.
	ft, _ := m.Feature("hall")
	without := mustApply(t, m, floor.Edit{Kind: floor.RemoveFeature, Name: "hall"})
	g := mustAdvance(t, f, without)
	if !g.Equal(mustBuild(t, without)) {
		t.Error("taken away: patched differs from rebuilt")
	}
	if g.values.at(5, 5) != g.capBlock || g.sums.at(5, 5) != g.allCap || f.values.at(5, 1) != zeroBlock {
		t.Error("uniform blocks are not shared")
	}
	if back := mustAdvance(t, g, mustApply(t, without, floor.Edit{Kind: floor.PutFeature, Feature: ft})); !back.Equal(f) {
		t.Error("put back: patched differs from rebuilt")
	}
}
