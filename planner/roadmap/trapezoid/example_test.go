package trapezoid

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/testfloor"
	"example.com/wideberth/planner/roadmap"
)

func build(t testing.TB, m *floor.Map, need roadmap.Need) *Roadmap {
	t.Helper()
	r, err := Build(context.Background(), testfloor.Field(t, m), need)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// TestWorkedExample is a room with one triangle, for a point:
//
//	+----------------+   Walls go up and down from its left corner, up from its top one and
//	|   |  |   |     |   up and down from its right one: cells L, A, B above, C below, R.
//	| L | A/\B |  R  |   By hand: 1 cell at the left; the left corner opens 2, the
//	|   |/____\|     |   top one 1, the right one 1: 5. Walls shared: L-A, L-C, A-B, B-R,
//	|   | C    |     |   C-R: 5. de Berg et al. (chapter 6) allow 3n+1 = 10 for
//	+----------------+   n = 3 segments, those inside the triangle included.
func TestWorkedExample(t *testing.T) {
	m := testfloor.New(t, 200, 100, false) // 10 m by 5 m, in 4 strips
	m = testfloor.Apply(t, m, testfloor.Solid(m, "tri", [2]float64{3e6, 1.5e6}, [2]float64{7e6, 1.6e6}, [2]float64{5e6, 3e6}))
	r := build(t, m, roadmap.Need{})
	d := r.Describe()
	if len(d.Cells) != 5 || len(r.s.Walls) != 5 {
		t.Fatalf("%d cells and %d walls, wanted 5 and 5", len(d.Cells), len(r.s.Walls))
	}
	if len(d.Nodes) != 10 || len(d.Edges) != 10 {
		t.Errorf("%d nodes and %d edges, wanted a node each for cells and walls, and two edges a wall", len(d.Nodes), len(d.Edges))
	}
	if got, want := r.Size(), d.Size(); got != want {
		t.Errorf("size %+v, the description has %+v", got, want)
	}
	o := m.Settings().Vertex(0, 0)
	right := geom.BoundsOf(geom.Point{X: o.X + 8e6, Y: o.Y + 2e6}) // in R alone
	if d, err := r.DescribeIn(context.Background(), right); err != nil || len(d.Cells) != 1 || len(d.Nodes) != 3 || len(d.Edges) != 2 {
		t.Errorf("%d cells, %d nodes, %d edges (%v), wanted 1, 3 and 2", len(d.Cells), len(d.Nodes), len(d.Edges), err)
	}
	at := map[string]geom.Point{"L": {X: 1e6, Y: 2e6}, "A": {X: 4e6, Y: 4e6}, "B": {X: 6e6, Y: 4e6}, "C": {X: 5e6, Y: 1e6}, "R": {X: 8e6, Y: 2e6}}
	name := map[int32]string{}
	for n, p := range at {
		in := r.s.Locate(geom.Point{X: o.X + p.X, Y: o.Y + p.Y})
		if len(in) != 1 {
			t.Fatalf("%s is in cells %v, wanted one", n, in)
		}
		name[in[0]] = n
	}
	var walls []string
	for _, w := range r.s.Walls {
		walls = append(walls, name[w.A]+name[w.B])
	}
	slices.Sort(walls)
	if want := []string{"AB", "BR", "CR", "LA", "LC"}; !slices.Equal(walls, want) {
		t.Errorf("walls between %v, wanted %v", walls, want)
	}
	// The room less half of |(4,0.1) x (2,1.5)| = 2.9 m².
	if got, want := area(r), 50-2.9; math.Abs(got-want) > 1e-5 {
		t.Errorf("area %v m², wanted %v", got, want)
	}
}

func area(r *Roadmap) float64 {
	a := 0.0
	for i := range r.s.Cells {
		a += r.s.Cells[i].Area() / 1e12
	}
	return a
}

// TestAreaOfGrownRectangle has the sum for a rectangle of a by b in a room: what is left is the
// room shrunk by r, less ab + 2r(a+b) + πr² (Steiner's formula).
func TestAreaOfGrownRectangle(t *testing.T) {
	m := testfloor.New(t, 200, 100, false)
	m = testfloor.Apply(t, m, testfloor.Solid(m, "box", [2]float64{3e6, 2e6}, [2]float64{6e6, 2e6}, [2]float64{6e6, 3e6}, [2]float64{3e6, 3e6}))
	raster := testfloor.New(t, 200, 100, false, testfloor.Paint(60, 40, 120, 60, floor.Occupied))
	for _, rad := range []float64{0, 0.1, 0.45, 1} {
		want := (10-2*rad)*(5-2*rad) - (3*1 + 2*rad*(3+1) + math.Pi*rad*rad)
		for name, m := range map[string]*floor.Map{"outline": m, "cells": raster} {
			r := build(t, m, roadmap.Need{ClearanceUm: int64(rad * 1e6)})
			// Chords leave out at most their error along the arcs.
			if got, slack := area(r), 2*math.Pi*rad*OutlineErrorUm/1e6; got > want+1e-9 || got < want-slack-1e-9 {
				t.Errorf("%s, r = %v m: area %v m², wanted %v, at most %v less", name, rad, got, want, slack)
			}
		}
	}
}

// disjointStars are stars that do not touch, nor the room's sides.
func disjointStars(rng *rand.Rand, m *floor.Map, most int) [][]geom.Point {
	b := m.Bounds().Grow(-50_000)
	var out [][]geom.Point
	for range most {
		ring := testfloor.Star(rng, testfloor.Point(rng, b), 900_000, b.Grow(1e6))
		if geom.CheckPolygon([][]geom.Point{ring}) != nil || b.Union(geom.BoundsOf(ring...)) != b {
			continue
		}
		apart := true
		for _, o := range out {
			for i, p := range ring {
				for k, q := range o {
					if d, _, _ := geom.SegmentSegmentDist(p, ring[(i+1)%len(ring)], q, o[(k+1)%len(o)]); d < 1000 {
						apart = false
					}
				}
			}
			apart = apart && !geom.InPolygon([][]geom.Point{o}, ring[0]) && !geom.InPolygon([][]geom.Point{ring}, o[0])
		}
		if apart {
			out = append(out, ring)
		}
	}
	return out
}

// plain is a brute-force twin: in each slab between corners it sorts all edges and pairs
// them up, then unites stretches between the same two edges.
func plain(rings [][]geom.Point, b geom.Rect) (cells, walls int, areaUm float64) {
	type side struct{ a, b geom.Point }
	var edges []side
	xs := []float64{b.Min.X, b.Max.X}
	put := func(p, q geom.Point) {
		if p.X > q.X {
			p, q = q, p
		}
		if p.X < q.X {
			edges = append(edges, side{p, q})
		}
	}
	c := b.Corners()
	put(c[0], c[1])
	put(c[2], c[3])
	for _, r := range rings {
		for i, p := range r {
			xs = append(xs, p.X)
			put(p, r[(i+1)%len(r)])
		}
	}
	slices.Sort(xs)
	xs = slices.Compact(xs)
	y := func(e side, x float64) float64 {
		switch x {
		case e.a.X:
			return e.a.Y
		case e.b.X:
			return e.b.Y
		}
		return e.a.Y + (e.b.Y-e.a.Y)*(x-e.a.X)/(e.b.X-e.a.X)
	}
	type stretch struct{ low, high int }
	var before []stretch
	for k := 0; k+1 < len(xs); k++ {
		x0, x1 := xs[k], xs[k+1]
		mid := (x0 + x1) / 2
		var at []int
		for i, e := range edges {
			if e.a.X <= x0 && e.b.X >= x1 {
				at = append(at, i)
			}
		}
		slices.SortFunc(at, func(i, j int) int {
			if y(edges[i], mid) < y(edges[j], mid) {
				return -1
			}
			return 1
		})
		var now []stretch
		for i := 0; i+1 < len(at); i += 2 {
			s := stretch{at[i], at[i+1]}
			now = append(now, s)
			areaUm += (x1 - x0) * (y(edges[s.high], mid) - y(edges[s.low], mid))
			if !slices.Contains(before, s) {
				cells++
			}
			for _, p := range before {
				if p != s && min(y(edges[p.high], x0), y(edges[s.high], x0)) > max(y(edges[p.low], x0), y(edges[s.low], x0)) {
					walls++
				}
			}
		}
		before = now
	}
	return cells, walls, areaUm
}

// TestCountsAgainstBruteForce compares cells, walls and area with the twin's on random polygons, with
// de Berg et al.'s bound of 3n+1 cells for n segments, and, corners being in general
// position, with Euler's relation: the graph of cells has as many independent
// rounds as there are polygons.
func TestCountsAgainstBruteForce(t *testing.T) {
	const seed = 5
	t.Logf("seed %d", seed)
	cases, segments := 40, 0
	if testfloor.Slow() {
		cases = 3000
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := testfloor.New(t, 40+rng.IntN(200), 40+rng.IntN(60), false)
		rings := disjointStars(rng, m, 1+rng.IntN(25))
		var edits []floor.Edit
		n := 0
		xs := map[float64]bool{}
		general := true
		for i, r := range rings {
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "p" + string(rune('a'+i)), Kind: floor.Solid,
				Shape: floor.NewPolygon([][]geom.Point{r}, 0)}})
			n += len(r)
			for _, p := range r {
				general = general && !xs[p.X]
				xs[p.X] = true
			}
		}
		m = testfloor.Apply(t, m, edits...)
		r := build(t, m, roadmap.Need{})
		cells, walls, a := plain(rings, m.Bounds())
		if len(r.s.Cells) != cells || len(r.s.Walls) != walls {
			t.Fatalf("case %d: %d cells and %d walls, the twin has %d and %d", k, len(r.s.Cells), len(r.s.Walls), cells, walls)
		}
		// A cell's corners are rounded to the inside by less than a micrometre.
		if got := area(r) * 1e12; got > a*(1+1e-12) || got < a-2*m.Bounds().Width()*float64(len(rings)+1) {
			t.Fatalf("case %d: area %v µm², wanted %v", k, got, a)
		}
		if cells > 3*n+1 {
			t.Fatalf("case %d: %d cells for %d segments", k, cells, n)
		}
		if general && walls-cells+1 != len(rings) {
			t.Fatalf("case %d: %d walls, %d cells, %d polygons", k, walls, cells, len(rings))
		}
		segments += n
	}
	if segments < 10*cases {
		t.Errorf("%d segments in all", segments)
	}
}
