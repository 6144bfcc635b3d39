package anyangle

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
)

// paintedFloor has random solids, some of them painted, so that slanting sides become stairs.
func paintedFloor(t testing.TB, rng *rand.Rand, w, h int) *floor.Map {
	t.Helper()
	f := randomFloor(t, rng, w, h)
	var edits []floor.Edit
	for range 4 {
		if s := randomSolid(rng, "x", f.Bounds()); s.Shape.Kind == floor.Polygon && rng.IntN(2) == 0 {
			edits = append(edits, floor.Edit{Kind: floor.PaintPolygon, Fill: floor.Occupied, Shape: floor.NewPolygon(s.Shape.Chains, 0)})
		}
	}
	f, err := f.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// ringsOf are the outlines of all cells.
func (g *Mesh) ringsOf() [][]geom.Point {
	var out [][]geom.Point
	for i, b := range g.blocks {
		o := g.corner(i)
		for c := range b.cells {
			ring := b.outline(nil, int32(c), geom.Point{X: g.o.X + float64(o.x), Y: g.o.Y + float64(o.y)})
			if b.turned {
				slices.Reverse(ring)
			}
			if box := geom.BoundsOf(ring...); box.Width() == 0 || box.Height() == 0 {
				ring = []geom.Point{box.Min, box.Max} // of no width: there, and not back
			}
			out = append(out, slices.Compact(ring))
		}
	}
	return out
}

// checkConvex fails where a cell is not convex: what is seen through a portal is
// taken to be all of the cell beyond, so that a cell that is not loses ways, and lets
// others leave the mesh.
func checkConvex(t *testing.T, g *Mesh) {
	t.Helper()
	for _, m := range []*Mesh{g, g.lean} {
		for _, b := range m.blocks {
			for c := range b.cells {
				for r := b.rowsOf(int32(c)); len(r) > 2; r = r[1:] {
					if !convexAt(r[0], r[1], r[2]) {
						t.Fatalf("a cell has rows %v at clearance %d µm, not convex", b.rowsOf(int32(c)), g.need.ClearanceUm)
					}
				}
			}
		}
	}
}

// covered says whether the cells hold all of the segment ab.
func covered(rings [][]geom.Point, a, b geom.Point) bool {
	// 1e-3 µm: rounding, and what a way may be off a cell's slanting side.
	const tol = 1e-3
	long := geom.Dist(a, b)
	if long == 0 {
		return true
	}
	box := geom.BoundsOf(a, b).Grow(tol)
	var in [][2]float64
	for _, ring := range rings {
		if len(ring) < 2 || !box.Intersects(geom.BoundsOf(ring...)) {
			continue
		}
		t0, t1 := 0.0, 1.0
		for i, p := range ring {
			q := ring[(i+1)%len(ring)]
			if p == q {
				continue
			}
			l := geom.Dist(p, q)
			da := ((q.X-p.X)*(a.Y-p.Y)-(q.Y-p.Y)*(a.X-p.X))/l + tol
			db := ((q.X-p.X)*(b.Y-p.Y)-(q.Y-p.Y)*(b.X-p.X))/l + tol
			switch {
			case da < 0 && db < 0:
				t0, t1 = 1, 0
			case da < 0:
				t0 = max(t0, da/(da-db))
			case db < 0:
				t1 = min(t1, da/(da-db))
			}
		}
		if len(ring) == 2 { // of no width: the lines' ends do not end it
			along := func(p geom.Point) float64 { return ((p.X-a.X)*(b.X-a.X) + (p.Y-a.Y)*(b.Y-a.Y)) / (long * long) }
			u, v := along(ring[0]), along(ring[1])
			t0, t1 = max(t0, min(u, v)), min(t1, max(u, v))
		}
		if t0 <= t1 {
			in = append(in, [2]float64{t0, t1})
		}
	}
	slices.SortFunc(in, func(x, y [2]float64) int { return cmp.Compare(x[0], y[0]) })
	at := 0.0
	for _, x := range in {
		if x[0] > at+tol/long {
			return false
		}
		at = max(at, x[1])
	}
	return at >= 1-tol/long
}

// outlineShortest is A* over the visibility graph of all corners of all cells: the
// optimum in the mesh, found without portals or intervals; +Inf when there is none.
func outlineShortest(rings [][]geom.Point, s, e geom.Point) float64 {
	vs := []geom.Point{s, e}
	for _, r := range rings {
		vs = append(vs, r...)
	}
	slices.SortFunc(vs[2:], func(p, q geom.Point) int { return cmp.Or(cmp.Compare(p.X, q.X), cmp.Compare(p.Y, q.Y)) })
	vs = append(vs[:2], slices.Compact(vs[2:])...)
	return overGraph(vs, func(a, b geom.Point) bool { return covered(rings, a, b) })
}

// checkPair fails unless there is a way from s to e exactly when the two are connected,
// one as long back, and both keep the clearance. It gives the length.
func checkPair(t *testing.T, g *Mesh, s, e geom.Point) (lengthUm float64, ok bool) {
	t.Helper()
	there, ok, err := g.Shortest(context.Background(), s, e)
	if err != nil {
		t.Fatal(err)
	}
	back, okBack, err := g.Shortest(context.Background(), e, s)
	if err != nil {
		t.Fatal(err)
	}
	r := g.need.ClearanceUm
	if connected := g.Connected(s, e); ok != connected || okBack != connected {
		t.Fatalf("%v to %v at %d µm: connected %v, a way there %v, back %v", s, e, r, connected, ok, okBack)
	}
	if !ok {
		return 0, false
	}
	// 1e-9 relative is what the package promises; 1e-3 µm for ends that nearly meet.
	if math.Abs(there.LengthUm-back.LengthUm) > 1e-9*there.LengthUm+1e-3 {
		t.Fatalf("%v to %v at %d µm: %v µm there, %v back\n%v\n%v", s, e, r, there.LengthUm, back.LengthUm, there.Points, back.Points)
	}
	for _, w := range [2]Way{there, back} {
		if f := check.Way(g.m, w.Points, r, r); f.Problem != "" {
			t.Fatalf("%v to %v at %d µm: %s\n%v", s, e, r, f.Problem, w.Points)
		}
	}
	return there.LengthUm, true
}

// TestWaysThereAndBack checks many ways on random floors: as many there as back and as
// long, law 5 along each with the checker's own arithmetic, and, where that is
// cheap, the length itself.
func TestWaysThereAndBack(t *testing.T) {
	const seed = 61
	t.Logf("seed %d", seed)
	cases, pairs := 80, 30
	if slow() {
		cases, pairs = 3000, 60
	}
	found, apart, weighed := 0, 0, 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		w, h := 20+rng.IntN(120), 20+rng.IntN(140)
		weigh := k%4 == 0
		if weigh {
			w, h = 15+rng.IntN(35), 15+rng.IntN(35)
		}
		f := randomFloor(t, rng, w, h)
		if k%2 == 1 {
			f = paintedFloor(t, rng, w, h)
		}
		g := build(t, f, []int64{0, 1, 40_000, 125_000, 217_345, 300_000, 450_001, 600_000}[rng.IntN(8)])
		checkConvex(t, g)
		var corners []geom.Point
		for p := range g.corners {
			corners = append(corners, p)
		}
		if len(corners) == 0 {
			continue
		}
		end := func() geom.Point { // most are corners or middles of cells
			if rng.IntN(3) == 0 {
				return randomPoint(rng, f.Bounds())
			}
			return corners[rng.IntN(len(corners))]
		}
		rings := g.ringsOf()
		for i := range pairs {
			s, e := end(), end()
			got, ok := checkPair(t, g, s, e)
			switch {
			case ok:
				found++
			case g.Contains(s) && g.Contains(e):
				apart++
			}
			// At clearance 0 what touches in a point is not joined there, as rings have it.
			if !ok || !weigh || i >= 4 || len(rings) > 120 || g.need.ClearanceUm == 0 {
				continue
			}
			weighed++
			// 0.01 µm: what the oracle's own tolerance may save at some bends.
			if want := outlineShortest(rings, s, e); math.Abs(got-want) > 1e-9*want+0.01 {
				t.Fatalf("case %d: %v to %v at %d µm: %v µm, wanted %v", k, s, e, g.need.ClearanceUm, got, want)
			}
		}
	}
	t.Logf("%d ways, %d between parts, %d weighed", found, apart, weighed)
	if found < cases*pairs/4 || weighed < cases/4 {
		t.Errorf("only %d ways, %d weighed", found, weighed)
	}
}

// points are points from coordinates in micrometres.
func points(xy ...float64) (out []geom.Point) {
	for i := 0; i < len(xy); i += 2 {
		out = append(out, geom.Point{X: xy[i], Y: xy[i+1]})
	}
	return out
}

func solids(t *testing.T, w, h int, cells []floor.CellRect, shapes ...floor.Shape) *floor.Map {
	t.Helper()
	var edits []floor.Edit
	for _, r := range cells {
		edits = append(edits, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: r})
	}
	for i, s := range shapes {
		f := &floor.Feature{Name: fmt.Sprintf("s%d", i), Kind: floor.Solid, Shape: s}
		switch s.Kind {
		case floor.Disc:
			f.RadiusUm = int64(s.Grow)
		case floor.Polyline:
			f.WidthUm = int64(2 * s.Grow)
		default:
			f.ToleranceUm = int64(s.Grow)
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: f})
	}
	f, err := newMask(w, h).floor(t, true).Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// TestRoundedRowsStayConvex holds two floors on which a row whose ends were rounded,
// left out as one too many, had made a cell that was not convex: one had a way that
// cut a corner of the grown solid, one a way in one direction only.
func TestRoundedRowsStayConvex(t *testing.T) {
	g := build(t, solids(t, 81, 138, nil, floor.NewPolygon([][]geom.Point{points(
		3961107, 2572215, 2850735, 2292575, 2608232, 2152160, 2588830, 1955955, 1619116, 1071045, 2869223, 1697049, 3741796, 1577636)}, 14344)), 600_000)
	checkConvex(t, g)
	if _, ok := checkPair(t, g, geom.Point{X: 18418, Y: 2880214}, geom.Point{X: 1888014, Y: 497392}); !ok {
		t.Error("no way round the first floor's solid")
	}

	var cells []floor.CellRect
	for _, r := range [][3]int{{46, 49, 56}, {47, 43, 55}, {48, 37, 54}, {49, 31, 53}, {50, 25, 52}, {51, 26, 51}, {52, 27, 49}, {53, 29, 48},
		{54, 31, 47}, {55, 33, 46}, {56, 35, 45}, {57, 37, 44}, {58, 39, 43}, {59, 41, 42}, {67, 32, 39}, {68, 32, 39}, {70, 63, 75}, {71, 63, 75}} {
		cells = append(cells, floor.CellRect{X0: r[1], Y0: r[0], X1: r[2], Y1: r[0] + 1})
	}
	g = build(t, solids(t, 79, 97, cells,
		floor.NewDisc(geom.Point{X: 3775133, Y: 2593818}, 368221, 0),
		floor.NewPolygon([][]geom.Point{points(588175, 2010751, 328816, 2010751, 328816, 1074341, 588175, 1074341)}, 0),
		floor.NewPolygon([][]geom.Point{points(1765940, 2632585, 493984, 2142707, 195973, 2121605, 82465, 618758, 1134992, 1204050)}, 34994),
		floor.NewPolygon([][]geom.Point{points(1446277, 2475137, 313391, 2887628, 452524, 2416082, 657862, 2117623, 1036945, 1966077)}, 0),
		floor.NewPolyline(points(3411566, 211205, 2534691, 1024404, 3361881, 1631112, 3718370, 1093201), 117384, 0)), 300_000)
	checkConvex(t, g)
	if _, ok := checkPair(t, g, geom.Point{X: 2284084.7270950486, Y: 2049711.1889857003}, geom.Point{X: 2385818.5791112585, Y: 3135818.5791112585}); !ok {
		t.Error("no way on the second floor")
	}
}

// TestSidesAllButAlongAnAxisAreFollowed goes along a side that is a millimetre in ten metres off
// an axis, where a post's end cuts the cells beside it: their corners there, on whole micrometres,
// bend the side by less than a billionth of a radian, and a ray that misses its end may not be lost.
func TestSidesAllButAlongAnAxisAreFollowed(t *testing.T) {
	const r = 60_000
	rack := points(600_000, 3_000_000, 5_600_000, 3_000_500, 5_600_000, 5_000_000, 600_000, 5_000_000)
	s, e := geom.Point{X: 5_750_000, Y: 3_300_000}, geom.Point{X: 300_000, Y: 3_300_000}
	for k := range 4 {
		turned := func(ps ...geom.Point) (out []geom.Point) {
			for _, p := range ps {
				if k&1 != 0 {
					p.X = 6_500_000 - p.X
				}
				if k&2 != 0 {
					p.X, p.Y = p.Y, p.X
				}
				out = append(out, p)
			}
			return out
		}
		shape := func(ring []geom.Point) floor.Shape { return floor.NewPolygon([][]geom.Point{turned(ring...)}, 0) }
		ends := turned(s, e)
		want, ok := checkPair(t, build(t, solids(t, 130, 130, nil, shape(rack)), r), ends[0], ends[1])
		if !ok {
			t.Fatal("no way")
		}
		for up := 5.0; up < 500; up += 31 {
			y := 3_000_000 - 2*r + up
			post := points(5_900_000, 2_000_000, 6_000_000, 2_000_000, 6_000_000, y, 5_900_000, y)
			got, ok := checkPair(t, build(t, solids(t, 130, 130, nil, shape(rack), shape(post)), r), ends[0], ends[1])
			// Corners of the two may be snapUm apart.
			if !ok || math.Abs(got-want) > 20*snapUm {
				t.Errorf("way round %d: %v µm with a post %v µm up, %v without", k, got, up, want)
			}
		}
	}
}
