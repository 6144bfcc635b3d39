package anyangle

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// awkwardPoint is often on or a micrometre beside a border of cells or of blocks.
func awkwardPoint(rng *rand.Rand, b geom.Rect) geom.Point {
	p := randomPoint(rng, b)
	snap := func(v float64) float64 {
		switch rng.IntN(5) {
		case 0:
			return math.Round(v/(blockCells*benchCell))*blockCells*benchCell + float64(rng.IntN(3)-1)
		case 1:
			return math.Round(v/benchCell) * benchCell
		case 2:
			return math.Round(v/benchCell)*benchCell + float64(rng.IntN(5)-2)
		}
		return v
	}
	return b.Nearest(geom.Point{X: snap(p.X), Y: snap(p.Y)})
}

// awkwardSolid is of any size from a micrometre up, with sides that are often all but along
// an axis.
func awkwardSolid(rng *rand.Rand, name string, b geom.Rect) *floor.Feature {
	f := &floor.Feature{Name: name, Kind: floor.Solid}
	if rng.IntN(4) == 0 {
		f.ToleranceUm = int64(rng.IntN(3))
	}
	a := awkwardPoint(rng, b)
	size := math.Exp(rng.Float64() * math.Log(b.Width()))
	near := func() geom.Point {
		d := func() float64 { return math.Round((2*rng.Float64() - 1) * size) }
		p := geom.Point{X: a.X + d(), Y: a.Y + d()}
		switch rng.IntN(4) {
		case 0:
			p.Y = a.Y + float64(rng.IntN(7)-3)
		case 1:
			p.X = a.X + float64(rng.IntN(7)-3)
		}
		return b.Nearest(p)
	}
	switch rng.IntN(4) {
	case 0:
		f.RadiusUm = int64(1 + rng.Float64()*size/3)
		f.Shape = floor.NewDisc(a, f.RadiusUm, f.ToleranceUm)
	case 1:
		f.WidthUm = 1 + int64(math.Exp(rng.Float64()*math.Log(200_000)))
		pts := []geom.Point{a}
		for range 1 + rng.IntN(4) {
			if p := near(); p != pts[len(pts)-1] {
				pts = append(pts, p)
			}
		}
		if len(pts) < 2 {
			return awkwardSolid(rng, name, b)
		}
		f.Shape = floor.NewPolyline(pts, f.WidthUm, f.ToleranceUm)
	default:
		var ring []geom.Point
		for range 3 + rng.IntN(5) {
			ring = append(ring, near())
		}
		f.Shape = floor.NewPolygon([][]geom.Point{ring}, f.ToleranceUm)
		if geom.CheckPolygon(f.Shape.Chains) != nil {
			return awkwardSolid(rng, name, b)
		}
	}
	return f
}

// awkwardEnd is a corner of the mesh, a place beside one by an ulp or by less than a
// thousandth of a micrometre, between two corners, or no place at all.
func awkwardEnd(rng *rand.Rand, corners []geom.Point, b geom.Rect) geom.Point {
	p := corners[rng.IntN(len(corners))]
	switch rng.IntN(6) {
	case 0:
		p.X = math.Nextafter(p.X, float64(rng.IntN(3)-1)*1e18)
		p.Y = math.Nextafter(p.Y, float64(rng.IntN(3)-1)*1e18)
	case 1:
		p.X += (rng.Float64() - 0.5) * 2e-3
		p.Y += (rng.Float64() - 0.5) * 2e-3
	case 2:
		q := corners[rng.IntN(len(corners))]
		p = geom.Point{X: (p.X + q.X) / 2, Y: (p.Y + q.Y) / 2}
	case 3:
		p = awkwardPoint(rng, b)
	case 4:
		if rng.IntN(10) == 0 {
			p.X = []float64{math.NaN(), math.Inf(1), math.Inf(-1), 1e300, -1e300, 5e-324}[rng.IntN(6)]
		}
	}
	return p
}

// TestAwkwardEnds asks for ways between corners of the mesh and places all but there, on floors
// of clutter and of solids all but along the axes: ways are found where the mesh is
// connected, they are as long there as back, and stay in the mesh. Ends that are no places
// have no ways.
func TestAwkwardEnds(t *testing.T) {
	const seed = 31
	t.Logf("seed %d", seed)
	cases := 40
	if slow() {
		cases = 2000
	}
	ctx := context.Background()
	found := 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		w, h := 20+rng.IntN(70), 20+rng.IntN(70)
		if k%10 == 0 { // several blocks
			w, h = 100+rng.IntN(80), 100+rng.IntN(80)
		}
		f := newMask(w, h).floor(t, rng.IntN(2) == 0)
		if rng.IntN(2) == 0 {
			f = randomMask(rng, w, h, []float64{0.01, 0.05, 0.2, 0.45}[rng.IntN(4)]).floor(t, rng.IntN(2) == 0)
		}
		var edits []floor.Edit
		for i := range rng.IntN(30) {
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: awkwardSolid(rng, fmt.Sprintf("s%d", i), f.Bounds())})
		}
		f, err := f.Apply(edits)
		if err != nil {
			t.Fatal(err)
		}
		r := []int64{0, 0, 1, 2, 25_000, 50_000, 150_000, 217_345}[rng.IntN(8)]
		g := build(t, f, r)
		var corners []geom.Point
		for p := range g.corners {
			corners = append(corners, p)
		}
		if len(corners) == 0 {
			continue
		}
		for range 20 {
			a, b := awkwardEnd(rng, corners, f.Bounds()), awkwardEnd(rng, corners, f.Bounds())
			way, ok, err := g.Shortest(ctx, a, b)
			if err != nil {
				t.Fatalf("case %d: %v to %v: %v", k, a, b, err)
			}
			if ok != g.Connected(a, b) {
				t.Fatalf("case %d: %v to %v at %d µm: a way is found: %v, there is one: %v", k, a, b, r, ok, !ok)
			}
			if p, ok := g.Nearest(a, []float64{0, 1, 8000, 1e9, math.Inf(1)}[rng.IntN(5)]); ok && !g.Contains(p) {
				t.Fatalf("case %d: the nearest place to %v, %v, is not in the mesh", k, a, p)
			}
			if !ok {
				continue
			}
			found++
			// 1e-3 µm: an end may be several times g.eps off the mesh.
			back, ok, err := g.Shortest(ctx, b, a)
			if !ok || err != nil || !(math.Abs(back.LengthUm-way.LengthUm) <= 1e-9*way.LengthUm+1e-3) {
				t.Fatalf("case %d: %v to %v at %d µm: %v, back %v (%v, %v)\n%v\n%v", k, a, b, r, way.LengthUm, back.LengthUm, ok, err, way.Points, back.Points)
			}
			for _, p := range way.Points {
				if !g.Contains(p) {
					t.Fatalf("case %d: %v to %v: %v is not in the mesh", k, a, b, p)
				}
			}
		}
	}
	t.Logf("%d ways", found)
	if found < 5*cases {
		t.Errorf("only %d ways", found)
	}
}
