package anyangle

import (
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// TestLaw5PocketsBesideOpenBordersAreFound has a pocket between three discs grown and an open
// border, a few centimetres wide and some millimetres high: all of it that has the clearance is in the mesh.
func TestLaw5PocketsBesideOpenBordersAreFound(t *testing.T) {
	f := newMask(112, 68).floor(t, true)
	var edits []floor.Edit
	for i, p := range []geom.Point{{X: 2979439, Y: 3384029}, {X: 2358762, Y: 86796}, {X: 2150164, Y: 2520206}, {X: 1145795, Y: 2779445}, {X: 2694965, Y: 999247}} {
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{
			Name: string(rune('a' + i)), Kind: floor.Solid, RadiusUm: 229_767, Shape: floor.NewDisc(p, 229_767, 0)}})
	}
	f, err := f.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	const r = 700_000
	g, cores, inside := build(t, f, r), coresOf(f), 0
	for x := 1_800_000.0; x <= 1_900_000; x += 250 {
		for y := 3_380_000.0; y <= 3_400_000; y += 250 {
			p := geom.Point{X: x, Y: y}
			if trueClearance(f, cores, p) < r+DeltaUm {
				continue
			}
			inside++
			if !g.Contains(p) {
				t.Fatalf("%v has clearance %v and is not in the mesh for %d µm", p, trueClearance(f, cores, p), r)
			}
		}
	}
	if t.Logf("%d places", inside); inside == 0 {
		t.Error("there is no pocket")
	}
}
