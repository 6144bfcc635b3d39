package voronoi

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/plainfloor"
)

// sound traces a floor up to its cap and wants no box given up, no edge that ends where none
// may, and clearances that are true.
func sound(t *testing.T, name any, m *floor.Map, zones bool) *Graph {
	t.Helper()
	f := fieldOf(t, m)
	g := newGraph(f, Need{MostUm: f.Cap(), Zones: zones})
	built, err := Build(context.Background(), f, g.need)
	if err != nil {
		t.Fatal(err)
	}
	for i, b := range built.blocks {
		tr := &tracer{ctx: context.Background()}
		built.traceBlock(tr, i, b.near)
		if tr.missed > 0 {
			t.Fatalf("%v: block %d, of %d sites, is given up in %d boxes, after %v", name, i, len(b.near), tr.missed, tr.levels)
		}
	}
	built.checkEnds(t, name)
	if zones {
		return built
	}
	o := plainOf(m)
	built.every(1, func(a *arc, p geom.Point, um float64) {
		if d, _ := o.nearest(p); math.Abs(d-um) > 1e-5 {
			t.Fatalf("%v: clearance %v at %v, said to be %v", name, d, p, um)
		}
	})
	return built
}

// line is a polyline along one line, to places on it in units of a step.
func lineUm(x, y, dx, dy float64, width int64, at ...float64) floor.Shape {
	var chain []geom.Point
	for _, v := range at {
		chain = append(chain, geom.Point{X: x + v*dx, Y: y + v*dy})
	}
	return floor.NewPolyline(chain, width, 0)
}

// A polyline that runs back over itself has the edges of one that does not.
func TestPolylinesThatTurnBack(t *testing.T) {
	for _, d := range [][2]float64{{1000, 0}, {0, 1000}, {300, 100}, {997, 1009}, {-700, 11}} {
		for _, width := range []int64{1, 1092, 200_001} {
			others := []floor.Edit{put("post", floor.NewDisc(geom.Point{X: 800_000, Y: 2_300_000}, 70_000, 0)), paint(50, 50, 52, 53, floor.Occupied)}
			there := append(others, put("a", lineUm(1_500_000, 1_500_000, d[0], d[1], width, 0, 124, -876, 124, 1000, 1000, 200, 300, 700, 0, 500, 499, 498, 497)))
			once := append(others, put("a", lineUm(1_500_000, 1_500_000, d[0], d[1], width, -876, 1000)))
			g, w := sound(t, d, newFloor(t, 64, 64, 1_500_000, false, there...), false), sound(t, d, newFloor(t, 64, 64, 1_500_000, false, once...), false)
			if !sameGraph(g, w) {
				t.Errorf("along %v, %d wide: the edges differ from those of the line driven once", d, width)
			}
		}
	}
}

func sameGraph(g, w *Graph) bool {
	for i := range g.blocks {
		if fmt.Sprint(g.blocks[i].arcs) != fmt.Sprint(w.blocks[i].arcs) {
			return false
		}
	}
	return true
}

func TestSolidsThatShareOutlines(t *testing.T) {
	at := func(x, y float64) geom.Point { return geom.Point{X: x, Y: y} }
	many := func(n int, f func(k int) floor.Shape) (out []floor.Edit) {
		for k := range n {
			out = append(out, put(fmt.Sprintf("f%03d", k), f(k)))
		}
		return out
	}
	ring := func(n int, mid geom.Point, d float64, f func(p geom.Point, k int) floor.Shape) []floor.Edit {
		return many(n, func(k int) floor.Shape {
			s, c := math.Sincos(2 * math.Pi * float64(k) / float64(n))
			return f(at(math.Round(mid.X+d*c), math.Round(mid.Y+d*s)), k)
		})
	}
	mid := at(1_600_000, 1_600_000)
	floors := map[string][]floor.Edit{
		"two polygons with an edge in common": {put("a", rectUm(1e6, 1e6, 2e6, 2e6)), put("b", rectUm(2e6, 1e6, 2_500_001, 2e6))},
		"a polygon in the corner of another":  {put("a", rectUm(1e6, 1e6, 2e6, 2e6)), put("b", rectUm(1e6, 1e6, 1_500_001, 1_300_000))},
		"rectangles from one corner": many(40, func(k int) floor.Shape {
			return rectUm(1e6, 1e6, 1_500_000+float64(1000*k), 1_300_000-float64(1000*k))
		}),
		"rectangles of one width, higher and higher": many(40, func(k int) floor.Shape {
			return rectUm(1e6, 1e6, 1_500_000, 1_300_000+float64(k*k))
		}),
		"rectangles on one line, a millimetre on": many(40, func(k int) floor.Shape {
			return rectUm(1e6+float64(1000*k), 1e6, 2_000_000+float64(1000*k), 1_300_000)
		}),
		"solids on cells": {paint(20, 20, 40, 40, floor.Occupied), put("a", rectUm(1e6, 1e6, 2e6, 2e6)),
			put("b", rectUm(1.2e6, 1.5e6, 1.7e6, 2e6)), put("c", rectUm(1.4e6, 1.5e6, 1.9e6, 2e6)), put("d", rectUm(1.6e6, 1.5e6, 2.3e6, 2e6))},
		"solids on the border": many(12, func(k int) floor.Shape {
			return rectUm(float64(100_000*k), 0, float64(100_000*k+700_000), float64(200_000+k))
		}),
		"wide lines on the sides of polygons": {put("a", rectUm(1e6, 1e6, 2e6, 2e6)), put("b", lineUm(1.2e6, 1.9e6, 1, 0, 200_000, 0, 5e5)),
			put("c", lineUm(1.3e6, 1.95e6, 1, 0, 100_000, 0, 5e5)), put("d", lineUm(1.4e6, 1.97e6, 1, 0, 60_000, 0, 5e5)), put("e", lineUm(1.5e6, 1.8e6, 1, 0, 400_000, 0, 5e5))},
		"discs about one place": many(30, func(k int) floor.Shape { return floor.NewDisc(mid, int64(300_000+k/2), 0) }),
		"discs that touch in one place": many(30, func(k int) floor.Shape {
			return floor.NewDisc(at(mid.X+float64(1000*k), mid.Y), int64(300_000-1000*k), 0)
		}),
		"discs that nearly touch in one place": many(30, func(k int) floor.Shape {
			return floor.NewDisc(at(mid.X+float64(3000*k), mid.Y+float64(1000*k)), 300_000-int64(math.Round(math.Hypot(3000, 1000)*float64(k))), 0)
		}),
		"posts in a ring":         ring(64, mid, 1_200_000, func(p geom.Point, _ int) floor.Shape { return floor.NewDisc(p, 10_000, 0) }),
		"more posts in a ring":    ring(300, mid, 1_200_000, func(p geom.Point, k int) floor.Shape { return floor.NewDisc(p, 5_000, 0) }),
		"spokes to one place":     ring(40, mid, 900_000, func(p geom.Point, _ int) floor.Shape { return floor.NewPolyline([]geom.Point{p, mid}, 30_000, 0) }),
		"a polyline of one place": {put("a", floor.NewPolyline([]geom.Point{mid, mid, mid}, 300_000, 0)), put("b", floor.NewDisc(mid, 150_000, 0))},
		"a polyline with stops":   {put("a", floor.NewPolyline([]geom.Point{mid, mid, at(2e6, 2e6), at(2e6, 2e6), at(2e6, 2e6), mid, at(1e6, 2e6), at(1e6, 2e6)}, 30_000, 0))},
		"a side of many pieces":   {put("a", floor.NewPolyline(steps(1500), 30_000, 0)), put("b", floor.NewPolygon([][]geom.Point{append(steps(1500), at(1_000_700, 2e6))}, 0))},
	}
	if !slow() {
		delete(floors, "more posts in a ring")
	}
	for name, edits := range floors {
		for _, open := range []bool{false, true} {
			sound(t, name, newFloor(t, 64, 64, 1_500_000, open, edits...), false)
			var zones []floor.Edit
			for k, e := range edits {
				zones = append(zones, e)
				if e.Kind == floor.PutFeature && e.Feature.Shape.Kind == floor.Polygon {
					z := *e.Feature
					z.Kind, z.Name = floor.ClosedZone, fmt.Sprint("z", k)
					zones = append(zones, floor.Edit{Kind: floor.PutFeature, Feature: &z})
				}
			}
			if open || len(zones) == len(edits) {
				continue
			}
			sound(t, name+", zones too", newFloor(t, 64, 64, 1_500_000, open, zones...), true)
		}
	}
}

// steps is n places along a line, a micrometre apart.
func steps(n int) (out []geom.Point) {
	for k := range n {
		out = append(out, geom.Point{X: 1e6 + float64(k), Y: 1e6})
	}
	return out
}

// Steps of a micrometre make edges that run side by side for metres. The work ends (see
// levelBoxes), and what there is of edges is true.
func TestStepsOfMicrometresEnd(t *testing.T) {
	var edits []floor.Edit
	for k := range 40 {
		edits = append(edits, put(fmt.Sprint(k), rectUm(1e6, 1e6, 1_500_000+float64(k), 1_300_000-float64(k))))
	}
	m := newFloor(t, 64, 64, 350_000, false, edits...)
	o := plainOf(m)
	tr := &tracer{ctx: context.Background()}
	g := newGraph(fieldOf(t, m), Need{MostUm: 350_000})
	for ft := range m.Features() {
		g.enter(ft)
	}
	g.blocks[0] = g.traceBlock(tr, 0, g.gather(0))
	if tr.missed == 0 {
		t.Error("no box was given up: the floor tries nothing")
	}
	g.every(1, func(_ *arc, p geom.Point, um float64) {
		if d, _ := o.nearest(p); math.Abs(d-um) > 1e-5 {
			t.Fatalf("clearance %v at %v, said to be %v", d, p, um)
		}
	})
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	tr = &tracer{ctx: ctx}
	if g.traceBlock(tr, 0, g.gather(0)); tr.boxes > 3*1024 {
		t.Errorf("%d boxes after the context had ended", tr.boxes)
	}
}

// TestDegenerateFloors draws solids from few places, directions and widths, so that most
// share corners, sides and lines.
func TestDegenerateFloors(t *testing.T) {
	const seed = 8
	t.Logf("seed %d", seed)
	cases := 40
	if slow() {
		cases = 4000
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		w := 20 + rng.IntN(60)
		step := []float64{100, 1000, testCell, 3 * testCell}[rng.IntN(4)]
		mid := geom.Point{X: math.Floor(float64(w)/2) * testCell, Y: math.Floor(float64(w)/2) * testCell}
		n := min(1+rng.IntN(4), int(mid.X/step)-1)
		place := func() geom.Point {
			return geom.Point{X: mid.X + step*float64(rng.IntN(2*n+1)-n), Y: mid.Y + step*float64(rng.IntN(2*n+1)-n)}
		}
		widths := []int64{2, int64(2 * step), 2 * testCell, 20_001}
		var edits []floor.Edit
		for range rng.IntN(3) {
			x, y := rng.IntN(w), rng.IntN(w)
			edits = append(edits, paint(x, y, min(w, x+1+rng.IntN(5)), min(w, y+1+rng.IntN(5)), floor.Occupied))
		}
		for i := range 2 + rng.IntN(14) {
			wide := widths[rng.IntN(len(widths))]
			var s floor.Shape
			switch rng.IntN(3) {
			case 0:
				s = floor.NewDisc(place(), wide/2, 0)
			case 1:
				chain := []geom.Point{place()}
				for range 1 + rng.IntN(8) {
					chain = append(chain, place())
				}
				s = floor.NewPolyline(chain, wide, 0)
			default:
				p, q := place(), place()
				s = rectUm(min(p.X, q.X), min(p.Y, q.Y), max(p.X, q.X)+100, max(p.Y, q.Y)+100)
				if rng.IntN(2) == 0 {
					s = floor.NewPolygon([][]geom.Point{{place(), place(), place()}}, 0)
					if geom.CheckPolygon(s.Chains) != nil {
						continue
					}
				}
			}
			edits = append(edits, put(fmt.Sprint(i), s))
		}
		sound(t, k, newFloor(t, w, w, 1_000_000, rng.IntN(3) == 0, edits...), false)
	}
}

// TestRandomPatchesTrace traces floors that random patches have left, up to their caps.
func TestRandomPatchesTrace(t *testing.T) {
	const seed = 4444
	t.Logf("seed %d", seed)
	cases := []uint64{3, 21, 182, 234, 249, 361, 448}
	if slow() {
		for k := range plainfloor.Sequences() {
			cases = append(cases, uint64(k))
		}
	}
	for _, k := range cases {
		s := plainfloor.NewSequence(seed, k)
		for range 4 {
			f, err := clearance.Build(context.Background(), s.Map)
			if err != nil {
				t.Fatal(err)
			}
			g, err := Build(context.Background(), f, Need{MostUm: f.Cap()})
			if err != nil {
				t.Fatal(err)
			}
			g.checkEnds(t, k)
			s.Next()
		}
	}
}
