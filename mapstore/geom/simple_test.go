package geom

import (
	"errors"
	"testing"

	"pgregory.net/rapid"
)

// plainCheck is CheckPolygon written out as its definition, all pairs of edges.
func plainCheck(chains [][]Point) bool {
	type edge struct {
		a, b    Point
		ring, i int
	}
	var edges []edge
	for r, c := range chains {
		if len(c) < 3 {
			return false
		}
		for i := range c {
			a, b := Ring(c).Edge(i)
			if a == b {
				return false
			}
			edges = append(edges, edge{a, b, r, i})
		}
	}
	for i, e := range edges {
		for _, f := range edges[:i] {
			n := len(chains[e.ring])
			next := e.ring == f.ring && e.i == f.i+1           // f ends where e starts
			last := e.ring == f.ring && e.i == n-1 && f.i == 0 // e ends where f starts
			switch {
			case next || last:
				if next && (OnSegment(e.b, f.a, f.b) && !(last && e.b == f.a) || OnSegment(f.a, e.a, e.b) && !(last && e.b == f.a)) {
					return false
				}
				if last && (OnSegment(e.a, f.a, f.b) && !(next && e.a == f.b) || OnSegment(f.b, e.a, e.b) && !(next && e.a == f.b)) {
					return false
				}
			case SegmentsTouch(e.a, e.b, f.a, f.b):
				return false
			}
		}
	}
	for i := 1; i < len(chains); i++ {
		if !InPolygon(chains[:1], chains[i][0]) {
			return false
		}
		for j := 1; j < len(chains); j++ {
			if i != j && InPolygon(chains[j:j+1], chains[i][0]) {
				return false
			}
		}
	}
	return true
}

func latticePoint(side int) *rapid.Generator[Point] {
	return rapid.Custom(func(t *rapid.T) Point {
		return Point{float64(rapid.IntRange(0, side).Draw(t, "x")), float64(rapid.IntRange(0, side).Draw(t, "y"))}
	})
}

// On a small lattice touching, overlap and coincidence are common.
func TestCheckPolygonAgainstAllPairs(t *testing.T) {
	valid := 0
	rapid.Check(t, func(t *rapid.T) {
		side := rapid.SampledFrom([]int{3, 5, 9, 30, 1000}).Draw(t, "side")
		n := rapid.IntRange(1, 2).Draw(t, "rings")
		var chains [][]Point
		for range n {
			chains = append(chains, rapid.SliceOfN(latticePoint(side), 3, 8).Draw(t, "ring"))
		}
		err := CheckPolygon(chains)
		want := plainCheck(chains)
		if (err == nil) != want {
			t.Fatalf("CheckPolygon: %v, all pairs: valid %v", err, want)
		}
		if want {
			valid++
		}
		var pe *PolygonError
		if err != nil && (!errors.As(err, &pe) || pe.Ring < 0 || pe.Ring >= len(chains) || pe.Index >= len(chains[pe.Ring])) {
			t.Fatalf("error does not point at a corner: %#v", err)
		}
	})
	t.Logf("%d polygons were valid", valid)
}
