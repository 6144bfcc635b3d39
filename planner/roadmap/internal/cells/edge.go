package cells

import (
	"cmp"

	"example.com/wideberth/mapstore/floor"
)

// Kind is what kind of solid an edge belongs to.
type Kind uint8

// The kinds of solid.
const (
	Border Kind = iota // the end of the floor
	Raster             // solid cells
	Named              // a feature
)

// Source is the solid whose grown outline an edge is part of.
type Source struct {
	Kind Kind
	Name string // of a feature
}

// edge is a directed side of an outline, from its left to its right end, or from its
// lower to its upper end when upright. rise says by how much the number of outlines that
// cover a place grows across it: going up, or going right when it is upright.
type edge struct {
	a, b pt
	rise int8
	src  Source
}

// at is the edge's height at x, between its ends: whole and remaining part of b.x - a.x.
func (e *edge) at(x int64) (q, rem int64) {
	if e.a.y == e.b.y {
		return e.a.y, 0
	}
	q, rem = divFloor(x-e.a.x, e.b.y-e.a.y, e.b.x-e.a.x)
	return e.a.y + q, rem
}

// compareAt compares two edges' heights at x exactly.
func compareAt(e, f *edge, x int64) int {
	q, r := e.at(x)
	p, s := f.at(x)
	return cmp.Or(cmp.Compare(q, p), cmpProducts(r, f.b.x-f.a.x, s, e.b.x-e.a.x))
}

// sameLine says whether two edges lie on one line.
func sameLine(e, f *edge) bool {
	if e == f || e.a == f.a && e.b == f.b {
		return true
	}
	if e.a.y == e.b.y || f.a.y == f.b.y {
		return e.a.y == e.b.y && f.a.y == f.b.y && e.a.y == f.a.y
	}
	return turn(e.a, e.b, f.a) == 0 && turn(e.a, e.b, f.b) == 0
}

// slopeSign compares the slopes of two edges.
func slopeSign(e, f *edge) int {
	return cmpProducts(e.b.y-e.a.y, f.b.x-f.a.x, f.b.y-f.a.y, e.b.x-e.a.x)
}

// outline collects edges.
type outline struct {
	edges    []edge // not upright
	uprights []edge
	x0, x1   int64 // edges that do not come between are left out
}

// put adds the edge from p to q of an outline that goes round its solid counter-clockwise.
func (o *outline) put(p, q pt, src Source) {
	switch {
	case p == q || max(p.x, q.x) < o.x0 || min(p.x, q.x) > o.x1:
	case p.x < q.x:
		o.edges = append(o.edges, edge{p, q, 1, src})
	case q.x < p.x:
		o.edges = append(o.edges, edge{q, p, -1, src})
	case p.y < q.y:
		o.uprights = append(o.uprights, edge{p, q, -1, src})
	default:
		o.uprights = append(o.uprights, edge{q, p, 1, src})
	}
}

// growth is by how much a feature is grown, and whether it is an obstacle at all.
func (n Need) growth(k floor.FeatureKind) (float64, bool) {
	switch {
	case k == floor.Solid:
		return float64(n.ClearanceUm), true
	case k == floor.ClosedZone && n.Zones:
		return float64(n.ZoneUm), true
	}
	return 0, false
}
