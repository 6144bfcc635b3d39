// Package solids gives the solids of one version of a floor as chains with the
// solid on their left: raster cells, the closed border, vector solids, closed zones.
//
// raster.go holds the cells and fills gaps, trace.go follows their outline, simplify.go
// takes its teeth away.
package solids

import (
	"hash/fnv"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Solid is one solid: closed chains with its inside on the left, all grown by GrowUm.
// A chain of one point is a disc's middle, one of two points a segment with round
// ends, there and back.
type Solid struct {
	Chains [][]geom.Point
	GrowUm float64
	Zone   bool    // a closed zone
	Area   bool    // the chains have an inside
	Raster *Raster // cells and the closed border, in one Solid
	Key    uint32  // differs from solid to solid, as a rule; of the name alone
}

// Simplification says what may be added to the raster.
type Simplification struct {
	GapCells int     // see Raster.FillGaps
	NotchUm  float64 // see Simplify; 0: none
}

// MaxCorners is how many turns of the raster's outline Of follows.
const MaxCorners = 4_000_000

// Of collects the solids of m, closed zones too when zones is set. The raster comes
// first, simplified, then features by name. ok is false beyond MaxCorners. Time is linear
// in the cells' bits and in the outlines.
func Of(m *floor.Map, zones bool, simple Simplification) (out []Solid, ok bool) {
	r := ReadRaster(m)
	r.FillGaps(simple.GapCells)
	if r.turns() > MaxCorners {
		return nil, false
	}
	loops := r.Trace()
	if simple.NotchUm > 0 {
		for i := range loops {
			loops[i] = Simplify(loops[i], simple.NotchUm)
		}
	}
	out = append(out, Solid{Chains: loops, Area: true, Raster: r})
	for f := range m.Features() {
		if f.Kind == floor.Solid || zones && f.Kind == floor.ClosedZone {
			out = appendFeature(out, f)
		}
	}
	return out, true
}

// appendFeature adds a feature's solids: each segment of a polyline is one of its own.
func appendFeature(out []Solid, f *floor.Feature) []Solid {
	h := fnv.New32a()
	h.Write([]byte(f.Name))
	s := Solid{GrowUm: f.Shape.Grow, Zone: f.Kind == floor.ClosedZone, Key: h.Sum32()}
	switch f.Shape.Kind {
	case floor.Polygon:
		s.Area = true
		for i, c := range f.Shape.Chains {
			c = slices.Clone(c)
			if (geom.Ring(c).SignedArea() > 0) != (i == 0) {
				slices.Reverse(c)
			}
			s.Chains = append(s.Chains, c)
		}
		return append(out, s)
	case floor.Disc:
		s.Chains = [][]geom.Point{f.Shape.Chains[0][:1]}
		return append(out, s)
	}
	key := s.Key
	for i, c := 1, f.Shape.Chains[0]; i < len(c); i++ {
		if c[i-1] == c[i] && len(c) > 2 {
			continue
		}
		s.Key = (key + uint32(i)) * 2654435761 // Fibonacci hashing, Knuth 1973
		s.Chains = [][]geom.Point{c[i-1 : i+1]}
		if c[i-1] == c[i] {
			s.Chains = [][]geom.Point{c[i : i+1]}
		}
		out = append(out, s)
	}
	return out
}
