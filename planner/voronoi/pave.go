package voronoi

import (
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
)

// paved is the tight pieces of one block's arcs. But where afar is set it depends on the block
// and on the mesh about it alone, so that versions share it. It never changes.
type paved struct {
	roads  []road  // their ends count stops
	pieces []int32 // of arc k: roads[pieces[k]:pieces[k+1]]
	stops  []stop  // in the order in which roads have them
	spots  []anyangle.Spot
	afar   bool // it rests on how parts of the mesh hang together elsewhere
}

// stop is an end of tight pieces.
type stop struct {
	at           geom.Point
	um           float64
	own          int32 // the block's node, -1 within an arc
	spot0, spot1 int32 // its spots, if it may be a portal
}

// paver finds the tight pieces of blocks for one clearance.
type paver struct {
	g    *Graph
	open *anyangle.Mesh
	p    float64

	*paved
	block  int32
	stopOf []int32 // of the block's nodes, -1 for none yet
	in, to []anyangle.Spot
	probe  anyangle.Probe
}

func (v *paver) pave(block int32) *paved {
	b := v.g.blocks[block]
	v.paved, v.block = &paved{pieces: make([]int32, 1, len(b.arcs)+1)}, block
	v.stopOf = v.stopOf[:0]
	for range b.nodes {
		v.stopOf = append(v.stopOf, -1)
	}
	for k := range b.arcs {
		v.arc(int32(k))
		v.pieces = append(v.pieces, int32(len(v.roads)))
	}
	return v.paved
}

func (v *paver) stop(at geom.Point, um float64, own int32) int32 {
	s := stop{at: at, um: um, own: own, spot0: int32(len(v.spots))}
	if um >= v.p-tieUm {
		v.spots = v.open.Spots(v.spots, at)
	}
	s.spot1 = int32(len(v.spots))
	v.stops = append(v.stops, s)
	return int32(len(v.stops) - 1)
}

// end is the stop at an end of an arc.
func (v *paver) end(a *arc, upper bool) int32 {
	n, s, um := a.from, a.s0, a.um0
	if upper {
		n, s, um = a.to, a.s1, a.um1
	}
	if v.stopOf[n] < 0 {
		v.stopOf[n] = v.stop(v.g.place(v.block, a.curve.at(s)), um, n)
	}
	return v.stopOf[n]
}

func (v *paver) holds(p geom.Point) bool {
	v.in = v.open.Spots(v.in[:0], p)
	return len(v.in) > 0
}

// pocketUm is how far above p the mesh is looked for. It may lack a pocket of Open a few
// millimetres wide, from which edges lead on: they are tight as well, lest the
// passage be lost.
const pocketUm = 32 * anyangle.DeltaUm

// arc adds the tight pieces of an arc: below p all of it, and above it as far as the mesh does
// not hold it, within the mesh's shortfall as a rule.
func (v *paver) arc(k int32) {
	a := &v.g.blocks[v.block].arcs[k]
	high := v.p + anyangle.DeltaUm
	if a.um0 >= v.p+pocketUm {
		return
	}
	at := func(s float64) geom.Point { return v.g.place(v.block, a.curve.at(s)) }
	lay := func(from, to int32, s0, s1 float64) {
		v.roads = append(v.roads, road{
			a: from, b: to, step: step{v.block, k, false}, s0: s0, s1: s1,
			um0: a.clearance(s0), length: a.length(s0, s1),
		})
	}
	s, low := a.s0, int32(-1)
	if a.um0 < v.p-tieUm {
		low = v.end(a, false)
		if a.um1 <= v.p+tieUm {
			lay(low, v.end(a, true), a.s0, a.s1)
			return
		}
		s = a.levelBetween(v.p)
		n := v.stop(at(s), v.p, -1)
		lay(low, n, a.s0, s)
		low = n
	}
	// From here on the arc is in Open; the mesh may lack some of it.
	var top float64
	clipped, inQ := false, false
	for _, um := range [2]float64{high, v.p + pocketUm} {
		if a.um0 < um && !inQ {
			top = a.s1
			if clipped = a.um1 > um; clipped {
				top = a.levelBetween(um)
			}
			inQ = v.holds(at(top))
		}
	}
	v.to = append(v.to[:0], v.in...)
	inP := v.holds(at(s))
	if inP && inQ && v.joined() {
		return
	}
	if low < 0 {
		low = v.end(a, false)
	}
	if inQ && !inP {
		in := v.takenUp(at, s, top)
		lay(low, v.stop(at(in), a.clearance(in), -1), s, in)
		return
	}
	if clipped {
		lay(low, v.stop(at(top), a.clearance(top), -1), s, top)
		return
	}
	lay(low, v.end(a, true), s, top)
}

// joined says whether the places that in and to are spots of are joined by a way in Open.
func (v *paver) joined() bool {
	for _, i := range v.in {
		for _, k := range v.to {
			if i == k {
				return true
			}
		}
	}
	v.afar = true
	for _, i := range v.in {
		for _, k := range v.to {
			if v.open.Part(i) == v.open.Part(k) {
				return true
			}
		}
	}
	return false
}

// insideUm is how far beyond the place at which a mesh first holds it a portal is put:
// a mesh holds places that are off it by a little rounding, but a search from there may
// see nothing.
const insideUm = joinUm

// takenUp is where the mesh takes up an arc: it holds the place at in, not that at out.
func (v *paver) takenUp(at func(float64) geom.Point, out, in float64) float64 {
	top := in
	p, q := at(out), at(in)
	// An arc turns by less than a right angle: between two places it is within the
	// square of their distance about one.
	v.probe.Aim(v.open, geom.BoundsOf(q).Grow(2*geom.Dist(p, q)))
	for n := 0; n < 60 && geom.Dist(p, q) > insideUm/8; n++ {
		m := (out + in) / 2
		if c := at(m); v.probe.Holds(c) {
			in, q = m, c
		} else {
			out, p = m, c
		}
	}
	return stepTo(in, top)
}

func stepTo(s, top float64) float64 {
	if top > s {
		return min(top, s+insideUm)
	}
	return max(top, s-insideUm)
}

// levelBetween is the parameter between the arc's ends at which clearance is um, which
// is between the clearances there.
func (a *arc) levelBetween(um float64) float64 {
	var at [2]float64
	best, off := a.s1, math.Inf(1)
	for _, s := range a.levels(at[:0], um) {
		s = min(max(s, min(a.s0, a.s1)), max(a.s0, a.s1))
		if d := math.Abs(a.clearance(s) - um); d < off {
			best, off = s, d
		}
	}
	return best
}
