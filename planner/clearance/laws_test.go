package clearance

import (
	"fmt"
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/plainfloor"
)

// TestLaw4PatchedEqualsRebuilt: a field advanced through random patches equals, bit for
// bit, one built from scratch: values, smallest and largest by square, solid and barred
// cells, what is near. The field it came from is untouched.
func TestLaw4PatchedEqualsRebuilt(t *testing.T) {
	const seed = 4
	t.Logf("seed %d", seed)
	for k := range plainfloor.Sequences() {
		s := plainfloor.NewSequence(seed, uint64(k))
		f := mustBuild(t, s.Map)
		was := f
		for step := range 3 {
			ch := s.Next()
			g, err := f.Advance(t.Context(), s.Map, ch)
			if err != nil {
				t.Fatal(err)
			}
			again := mustBuild(t, s.Map)
			if !g.Equal(again) {
				t.Fatalf("sequence %d, step %d: patched differs from rebuilt", k, step)
			}
			if step > 0 && !f.Equal(was) {
				t.Fatalf("sequence %d, step %d: advancing changed the field it started from", k, step)
			}
			f, was = g, again
		}
	}
}

func buildT(t *rapid.T, m *floor.Map) *Field {
	f, err := Build(t.Context(), m)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// TestLaw5NeverOverstated: at every vertex, the field is the distance to all solids
// looked at one by one, rounded down: never above it and less than 1 µm below.
func TestLaw5NeverOverstated(t *testing.T) {
	check(t, 3, func(t *rapid.T) {
		m := genMap(t, 130)
		f := buildT(t, m)
		s := m.Settings()
		// Every vertex of a tiny floor, some of a larger one: each costs a look at all solids.
		step := 1 + (s.Rows+1)*(s.Columns+1)/300
		for k := rapid.IntRange(0, step-1).Draw(t, "from"); k < (s.Rows+1)*(s.Columns+1); k += step {
			i, j := k%(s.Columns+1), k/(s.Columns+1)
			want := plainAt(m, s.Vertex(i, j))
			if got := f.Vertex(i, j); float64(got) != math.Floor(want) {
				t.Fatalf("vertex (%d, %d): %d, want floor of %v", i, j, got, want)
			}
		}
	})
}

// TestCellsAreExact: CellLower never exceeds the smallest clearance over the closed
// cell; CellClear is exactly that clearance compared; ClearBits and Node.Kind say
// the same.
func TestCellsAreExact(t *testing.T) {
	check(t, 3, func(t *rapid.T) {
		m := genMap(t, 70)
		f := buildT(t, m)
		s := m.Settings()
		um := rapid.Int64Range(1, s.CapUm).Draw(t, "um")
		if rapid.Bool().Draw(t, "whole cells") {
			um = max(s.ResolutionUm, um/s.ResolutionUm*s.ResolutionUm)
		}
		var words, zero [blockSize]uint64
		for k := range 12 {
			c, r := rapid.IntRange(0, s.Columns-1).Draw(t, "c"), rapid.IntRange(0, s.Rows-1).Draw(t, "r")
			cell := s.CellBounds(floor.CellRect{X0: c, Y0: r, X1: c + 1, Y1: r + 1})
			want := plainRect(m, cell)
			if low := f.CellLower(c, r); float64(low) > want {
				t.Fatalf("cell (%d, %d): lower bound %d above %v", c, r, low, want)
			}
			if k < 4 {
				um = min(s.CapUm, max(1, int64(want)+int64(k)-1)) // at the edge of admittance
			}
			got := f.CellClear(c, r, um)
			if got != (want >= float64(um)) {
				t.Fatalf("cell (%d, %d) at %d: %v, but its clearance is %v", c, r, um, got, want)
			}
			f.ClearBits(c>>6, r>>6, um, &words)
			f.ClearBits(c>>6, r>>6, 0, &zero)
			for y := range blockSize {
				for x := range blockSize {
					cc, rr := c&^63+x, r&^63+y
					if (words[y]>>x&1 == 1) != f.CellClear(cc, rr, um) || (zero[y]>>x&1 == 1) != f.CellClear(cc, rr, 0) {
						t.Fatalf("ClearBits differs from CellClear at (%d, %d)", cc, rr)
					}
				}
			}
			if kind := f.node(0, c, r).Kind(um); (kind == Free) != got || kind == Mixed {
				t.Fatalf("node of cell (%d, %d) at %d: %v", c, r, um, kind)
			}
		}
	})
}

// TestFreeAtZero: at um = 0 a cell is free when nothing solid comes into its open square,
// judged by the shrunken square: a solid that only touches from outside leaves it
// free, one that comes in by a micrometre's hundredth does not.
func TestFreeAtZero(t *testing.T) {
	check(t, 2, func(t *rapid.T) {
		m := genMap(t, 130)
		f := buildT(t, m)
		s := m.Settings()
		for r := range s.Rows {
			for c := range s.Columns {
				cell := s.CellBounds(floor.CellRect{X0: c, Y0: r, X1: c + 1, Y1: r + 1})
				free := !m.Solid(c, r)
				for ft := range m.Features() {
					free = free && ft.Shape.RectDist(cell.Grow(-0.01)) > 0
				}
				if got := f.CellClear(c, r, 0); got && !free {
					t.Fatalf("cell (%d, %d): %v, want %v", c, r, got, free)
				} else if !got && free {
					// Only an oblique or round outline may end within 0.01 µm of the cell's
					// border without merely touching it.
					ends := false
					for ft := range m.Features() {
						ends = ends || !square(&ft.Shape) && ft.Shape.RectDist(cell) == 0
					}
					if !ends {
						t.Fatalf("cell (%d, %d): %v, want %v", c, r, got, free)
					}
				}
			}
		}
	})
}

// square says whether a shape has horizontal and vertical edges only.
func square(s *floor.Shape) bool {
	ok := s.Kind != floor.Disc
	for a, b := range s.Edges {
		ok = ok && (a.X == b.X || a.Y == b.Y)
	}
	return ok
}

// within says whether two lengths agree to a thousandth of a micrometre: far more
// than geom.RelativeError times any length here, far less than what is reported.
func within(a, b float64) bool { return math.Abs(a-b) <= 1e-3 }

// TestQueriesAgainstAllSolids: At, Segment and SegmentClear against every solid in turn.
func TestQueriesAgainstAllSolids(t *testing.T) {
	check(t, 3, func(t *rapid.T) {
		m := genMap(t, 200)
		f := buildT(t, m)
		s := m.Settings()
		for range 6 {
			a, b := genPlace(t, s, s.ResolutionUm), genPlace(t, s, s.ResolutionUm)
			if rapid.Bool().Draw(t, "short") {
				b = geom.Point{X: a.X + math.Round((b.X-a.X)/16), Y: a.Y + math.Round((b.Y-a.Y)/16)}
			}
			checkNearest(t, m, f.At(a), plainAt(m, a), a, a)
			want := plainSegment(m, a, b)
			checkNearest(t, m, f.Segment(a, b), want, a, b)
			for _, um := range []int64{1, int64(want) - 1, int64(want), int64(want) + 1, rapid.Int64Range(1, s.CapUm).Draw(t, "um")} {
				if um < 1 || um > s.CapUm {
					continue
				}
				if got := f.SegmentClear(a, b, um); got != (want >= float64(um)) && math.Abs(want-float64(um)) > 1e-6 {
					t.Fatalf("segment %v %v clear by %d: %v, clearance %v", a, b, um, got, want)
				}
			}
			if got := f.SegmentClear(a, b, 0); got != (want > 0) {
				t.Fatalf("segment %v %v clear by 0: %v, clearance %v", a, b, got, want)
			}
		}
	})
}

// TestSegmentsAmongColumns: long segments past many single cells and discs, where what is
// nearest changes along the way.
func TestSegmentsAmongColumns(t *testing.T) {
	check(t, 1, func(t *rapid.T) {
		s := floor.Settings{ResolutionUm: 50_000, Columns: 200, Rows: 200, CapUm: 1_510_000, OpenBorder: true, Initial: floor.Free}
		m, err := floor.New(s)
		if err != nil {
			t.Fatal(err)
		}
		var edits []floor.Edit
		for k := range rapid.IntRange(5, 60).Draw(t, "columns") {
			c := genCells(t, s)
			if k%4 == 0 {
				edits = append(edits, disc(fmt.Sprint("d", k), float64(c.X0)*50_000+11, float64(c.Y0)*50_000+7, 60_000))
			} else {
				edits = append(edits, paint(c.X0, c.Y0, c.X0+1, c.Y0+1, floor.Occupied))
			}
		}
		m = tryApply(t, m, edits)
		f := buildT(t, m)
		for range 20 {
			a, b := genPlace(t, s, 0), genPlace(t, s, 0)
			switch rapid.IntRange(0, 3).Draw(t, "along") {
			case 0:
				b.X = a.X
			case 1:
				b.Y = a.Y
			}
			want := plainSegment(m, a, b)
			checkNearest(t, m, f.Segment(a, b), want, a, b)
			// An oblique distance nearer to a whole micrometre than rounding can tell may
			// get either answer; along the axes equality is exact.
			if a.X != b.X && a.Y != b.Y && math.Abs(want-math.Round(want)) <= 1e-6 {
				continue
			}
			if um := int64(want); um > 0 && (!f.SegmentClear(a, b, um) || um < f.cap && f.SegmentClear(a, b, um+1)) {
				t.Fatalf("%v %v: clear by %d %v, by one more %v, clearance %v", a, b, um, f.SegmentClear(a, b, um), f.SegmentClear(a, b, um+1), want)
			}
		}
	})
}

// checkNearest checks the figure, and that the places named bear it out.
func checkNearest(t *rapid.T, m *floor.Map, n Nearest, want float64, a, b geom.Point) {
	if !within(n.Um, want) {
		t.Fatalf("%v %v: clearance %v, want %v", a, b, n.Um, want)
	}
	if named := n.Feature != nil || n.Border || n.Cell; !named {
		if n.Um != float64(m.Settings().CapUm) || n.On != (geom.Point{}) {
			t.Fatalf("%v %v: nothing named at clearance %v", a, b, n.Um)
		}
		return
	}
	if !m.Settings().OpenBorder && n.Border && n.Um == 0 {
		return
	}
	if d := geom.Dist(n.On, n.At); !within(d, n.Um) {
		t.Fatalf("%v %v: places %v and %v are %v apart, clearance %v", a, b, n.On, n.At, d, n.Um)
	}
	if d, _ := geom.SegmentDist(n.On, a, b); d > 1e-3 {
		t.Fatalf("%v %v: %v is not on it", a, b, n.On)
	}
	if n.Feature != nil {
		if d, _ := n.Feature.Shape.Dist(n.At); d > 1e-3 {
			t.Fatalf("%v %v: %v is %v off feature %s", a, b, n.At, d, n.Feature.Name)
		}
	}
}
