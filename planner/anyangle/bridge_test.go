package anyangle

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// stairFloor has slanting shapes drawn as cells, rows of boxes, and a few lone cells.
func stairFloor(t testing.TB, rng *rand.Rand, w, h int) *floor.Map {
	f := newMask(w, h).floor(t, rng.IntN(3) == 0)
	var edits []floor.Edit
	for range 2 + rng.IntN(5) {
		s := randomSolid(rng, "s", f.Bounds())
		s.Shape.Grow = 0
		if s.Shape.Kind == floor.Polygon {
			edits = append(edits, floor.Edit{Kind: floor.PaintPolygon, Fill: floor.Occupied, Shape: s.Shape})
		}
	}
	for range rng.IntN(6) {
		x, y := rng.IntN(w), rng.IntN(h)
		edits = append(edits, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: x, Y0: y, X1: x + 1, Y1: y + 1}})
	}
	if rng.IntN(2) == 0 {
		x, y, long, step := rng.IntN(w/2), rng.IntN(h/2), 1+rng.IntN(8), 2+rng.IntN(24)
		for k := range 2 + rng.IntN(4) {
			r := floor.CellRect{X0: x + k*step, Y0: y, X1: min(w, x+k*step+max(1, step/2)), Y1: y + long}
			if step%2 == 0 {
				r = floor.CellRect{X0: x, Y0: y + k*step, X1: x + long, Y1: min(h, y+k*step+max(1, step/2))}
			}
			if r.X0 < r.X1 && r.Y0 < r.Y1 {
				edits = append(edits, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: r})
			}
		}
	}
	if rng.IntN(2) == 0 {
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: randomSolid(rng, "v", f.Bounds())})
	}
	f, err := f.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// TestFilledNotchesChangeNoWay compares the lean mesh with the full one, for ends
// that lie in both.
func TestFilledNotchesChangeNoWay(t *testing.T) {
	const seed = 9
	t.Logf("seed %d", seed)
	cases := 150
	if slow() {
		cases = 5000
	}
	filled, ways := 0, 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := stairFloor(t, rng, 40+rng.IntN(100), 40+rng.IntN(100))
		g := build(t, f, []int64{1, 20_000, 75_000, 200_000, 450_000}[rng.IntN(5)])
		for i := range g.blocks {
			if g.blocks[i].cut != g.lean.blocks[i].cut {
				filled++
			}
		}
		s := search{most: math.Inf(1)}
		for range 8 {
			a, b := randomPoint(rng, f.Bounds()), randomPoint(rng, f.Bounds())
			if !g.lean.Contains(a) || !g.lean.Contains(b) {
				continue
			}
			if !g.Contains(a) || !g.Contains(b) {
				t.Fatalf("case %d: %v or %v is in the lean mesh alone", k, a, b)
			}
			lean, okL, err := s.run(context.Background(), g.lean, a, b)
			if err != nil {
				t.Fatal(err)
			}
			full, okF, err := s.run(context.Background(), g, a, b)
			if err != nil {
				t.Fatal(err)
			}
			// Corners of the two may be snapUm apart, where their cells end at other heights.
			if slack := float64(snapUm * len(full.Points)); okL != okF || math.Abs(lean.LengthUm-full.LengthUm) > 1e-9*full.LengthUm+slack {
				t.Fatalf("case %d: %v to %v: %v (%v) in the lean mesh, %v (%v) in the full one\n%v\n%v", k, a, b,
					lean.LengthUm, okL, full.LengthUm, okF, lean.Points, full.Points)
			}
			if okF {
				ways++
			}
		}
	}
	t.Logf("%d blocks with filled notches, %d ways", filled, ways)
	if filled < cases/3 || ways < cases {
		t.Errorf("%d blocks with filled notches, %d ways", filled, ways)
	}
}

// TestEndInANotchIsReached plans to the depth of a notch that the lean mesh fills.
func TestEndInANotchIsReached(t *testing.T) {
	m := newMask(60, 60)
	for x := range 60 {
		m.fill(x, 0, x+1, 10+x/8, true)
	}
	g := build(t, m.floor(t, true), 450_000)
	found := 0
	for x := 12 * benchCell; x < 40*benchCell; x += 7_001 {
		for y := 20 * benchCell; y < 26*benchCell; y += 1_003 {
			p := geom.Point{X: float64(x), Y: float64(y)}
			if !g.Contains(p) || g.lean.Contains(p) {
				continue
			}
			found++
			if way, ok, err := g.Shortest(context.Background(), at50(30, 50), p); !ok || err != nil || way.Points[len(way.Points)-1] != p {
				t.Fatalf("no way to %v: %v, %v", p, way.Points, err)
			}
		}
	}
	if found == 0 {
		t.Error("no place is in a notch")
	}
}
