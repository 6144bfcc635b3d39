package check_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
)

// What lies together is checked against one list; among clutter, and along pieces that are
// long, there is none. Either way the smallest distance is that over all solids in turn.
func TestWayAgainstAllSolids(t *testing.T) {
	for seed := range uint64(60) {
		rng := rand.New(rand.NewPCG(seed, 7))
		at := func() geom.Point { return pt(20*rng.Float64(), 10*rng.Float64()) }
		var es []floor.Edit
		for range rng.IntN(8) << (seed % 6) {
			x, y := rng.IntN(400), rng.IntN(200)
			es = append(es, cells(x, y, min(400, x+1+rng.IntN(30)), min(200, y+1+rng.IntN(30))))
		}
		for k := range rng.IntN(4) {
			name, r := fmt.Sprint("drum", k), 1+rng.Int64N(400_000)
			es = append(es, put(floor.Feature{Name: name, Kind: floor.Solid, Shape: floor.NewDisc(at(), r, 0), RadiusUm: r}))
		}
		f := hall(t, seed%2 == 0, es...)
		pts := []geom.Point{at()}
		for range 1 + rng.IntN(12) { // mostly short pieces
			p, q := pts[len(pts)-1], at()
			share := math.Pow(rng.Float64(), 6)
			pts = append(pts, geom.Point{X: math.Round(p.X + share*(q.X-p.X)), Y: math.Round(p.Y + share*(q.Y-p.Y))})
		}
		s := f.Settings()
		want := float64(s.CapUm)
		for i := 1; i < len(pts); i++ {
			a, b := pts[i-1], pts[i]
			for r := range s.Rows {
				for c := range s.Columns {
					if f.Solid(c, r) {
						want = min(want, geom.RectSegmentDist(s.CellBounds(floor.CellRect{X0: c, Y0: r, X1: c + 1, Y1: r + 1}), a, b))
					}
				}
			}
			for ft := range f.Features() {
				d, _ := ft.Shape.SegmentDist(a, b)
				want = min(want, d)
			}
			if !s.OpenBorder {
				for _, p := range [2]geom.Point{a, b} {
					want = min(want, p.X, 20*m-p.X, p.Y, 10*m-p.Y)
				}
			}
		}
		for _, need := range []int64{0, 1, int64(want), 300_000} {
			got := check.Way(f, pts, need, need)
			if float64(need) <= want && math.Abs(got.SmallestUm-want) > check.SlackUm {
				t.Errorf("seed %d, need %d: smallest %v, over all solids %v", seed, need, got.SmallestUm, want)
			}
			if need > 0 && (got.Problem != "") != (want < float64(need)-check.SlackUm) {
				t.Errorf("seed %d, need %d: problem %q, smallest over all solids %v", seed, need, got.Problem, want)
			}
		}
	}
}
