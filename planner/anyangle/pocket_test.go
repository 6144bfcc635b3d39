package anyangle

import (
	"math"
	"math/rand/v2"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// beyondLine is the part of a rectangle on the far side of a line, in whole micrometres; nil when it
// is no polygon.
func beyondLine(b geom.Rect, on geom.Point, angle float64) []geom.Point {
	s, c := math.Sincos(angle)
	far := func(p geom.Point) float64 { return (p.X-on.X)*c + (p.Y-on.Y)*s }
	var ring []geom.Point
	box := b.Corners()
	for i, p := range box {
		q := box[(i+1)%4]
		dp, dq := far(p), far(q)
		if dp >= 0 {
			ring = append(ring, p)
		}
		if dp*dq < 0 {
			t := dp / (dp - dq)
			ring = append(ring, geom.Point{X: math.Round(p.X + t*(q.X-p.X)), Y: math.Round(p.Y + t*(q.Y-p.Y))})
		}
	}
	if len(ring) < 3 || geom.CheckPolygon([][]geom.Point{ring}) != nil {
		return nil
	}
	return ring
}

// TestLaw5PocketsBetweenLongSidesAreFound encloses rooms by solids as large as the floor, no
// corner of which is near: all of a room with the clearance is in the mesh.
func TestLaw5PocketsBetweenLongSidesAreFound(t *testing.T) {
	const seed = 5
	t.Logf("seed %d", seed)
	cases, inside := 250, 0
	if slow() {
		cases = 10_000
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		n := 100 + rng.IntN(100)
		f := newMask(n, n).floor(t, true)
		b := f.Bounds()
		var edits []floor.Edit
		for i := range 3 + rng.IntN(4) {
			angle, w := rng.Float64()*2*math.Pi, rng.Float64()*3e6
			s, c := math.Sincos(angle)
			p := randomPoint(rng, b.Grow(-b.Width()/4))
			if ring := beyondLine(b, geom.Point{X: p.X + c*w, Y: p.Y + s*w}, angle); ring != nil {
				edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{
					Name: string(rune('a' + i)), Kind: floor.Solid, Shape: floor.NewPolygon([][]geom.Point{ring}, 0)}})
			}
		}
		f, err := f.Apply(edits)
		if err != nil {
			t.Fatal(err)
		}
		r := int64(1 + rng.IntN(100_000))
		g, cores := build(t, f, r), coresOf(f)
		for range 200 {
			p := randomPoint(rng, b)
			if trueClearance(f, cores, p) < float64(r)+DeltaUm {
				continue
			}
			inside++
			if !g.Contains(p) {
				t.Fatalf("case %d: %v has clearance %v and is not in the mesh for %d µm", k, p, trueClearance(f, cores, p), r)
			}
		}
	}
	t.Logf("%d places", inside)
	if inside < 10*cases {
		t.Errorf("only %d places", inside)
	}
}
