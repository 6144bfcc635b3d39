package clearance

import (
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// TestVicinityAnswersAsTheField: bit for bit, ties included, whether it knows or asks.
func TestVicinityAnswersAsTheField(t *testing.T) {
	asked, known := 0, 0
	check(t, 8, func(t *rapid.T) {
		m := genMap(t, 200)
		f := buildT(t, m)
		s := m.Settings()
		var v Vicinity
		for range 2 {
			mid := genPlace(t, s, s.ResolutionUm)
			side := float64(rapid.Int64Range(1, 30).Draw(t, "side") * s.ResolutionUm)
			area := geom.BoundsOf(mid).Grow(side)
			v.Gather(f, area)
			// Half of the places are on the half lattice, where much is equally near.
			rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "places"), 1))
			place := func() geom.Point {
				p := geom.Point{X: mid.X + (2*rng.Float64()-1)*side, Y: mid.Y + (2*rng.Float64()-1)*side}
				if rng.IntN(2) == 0 {
					half := f.h / 2
					p.X, p.Y = f.ox+math.Round((p.X-f.ox)/half)*half, f.oy+math.Round((p.Y-f.oy)/half)*half
				}
				return p
			}
			for range 12 {
				a, b := place(), place()
				switch rng.IntN(4) {
				case 0:
					b.X = a.X
				case 1:
					b.Y = a.Y
				case 2:
					b = geom.Point{X: a.X + (b.X-a.X)/16, Y: a.Y + (b.Y-a.Y)/16}
				}
				asked += 2
				na, nb := f.At(a), f.At(b)
				if n, ok := v.at(a); ok && n != na {
					t.Fatalf("at %v: %+v, the field says %+v", a, n, na)
				} else if ok {
					known++
				}
				want := f.SegmentBetween(a, b, na, nb)
				if n, ok := v.segment(a, b, na, nb); ok && n != want {
					t.Fatalf("%v to %v: %+v, the field says %+v", a, b, n, want)
				} else if ok {
					known++
				}
				for _, um := range []int64{1, int64(want.Um), int64(want.Um) + 1, 1 + rng.Int64N(s.CapUm)} {
					if got, want := v.SegmentClear(a, b, um), f.SegmentClear(a, b, um); got != want {
						t.Fatalf("%v to %v clear by %d: %v, the field says %v", a, b, um, got, want)
					}
				}
				heading, most := 2*math.Pi*rng.Float64(), 1+rng.Int64N(s.CapUm)
				if rng.IntN(3) == 0 {
					heading = float64(rng.IntN(8)) * math.Pi / 4
				}
				for _, um := range []int64{0, int64(na.Um), rng.Int64N(s.CapUm)} {
					if got, want := v.Travel(a, heading, um, most), f.Travel(a, heading, um, most); got != want {
						t.Fatalf("from %v along %v with %d: %v, the field says %v", a, heading, um, got, want)
					}
				}
			}
		}
	})
	if known*5 < asked {
		t.Errorf("it knew %d of %d answers", known, asked)
	}
	t.Logf("it knew %d of %d answers", known, asked)
}

// TestVicinityMergesRows: racks are one box each, by however many blocks they go through, and
// an area with too much in it is left to the field.
func TestVicinityMergesRows(t *testing.T) {
	f := mustBuild(t, cellsFloor(t, 300, 300, 100, true,
		paint(10, 20, 200, 44, floor.Occupied), paint(10, 104, 140, 128, floor.Occupied), paint(150, 104, 200, 128, floor.Occupied)))
	var v Vicinity
	v.Gather(f, f.Bounds())
	if len(v.boxes) != 3 {
		t.Errorf("%d boxes: %+v, wanted 3", len(v.boxes), v.boxes)
	}
	var dots []floor.Edit
	for k := range 200 {
		dots = append(dots, paint(k+k%2*50, 2*(k%97), k+k%2*50+1, 2*(k%97)+1, floor.Occupied))
	}
	g := mustBuild(t, mustApply(t, f.Map(), dots...))
	v.Gather(g, g.Bounds())
	for k := range 50 {
		p := geom.Point{X: f.ox + float64(k)*f.h*5.3, Y: f.oy + float64(k)*f.h*4.1}
		if got, want := v.At(p), g.At(p); got != want {
			t.Errorf("at %v: %+v, the field says %+v", p, got, want)
		}
	}
}
