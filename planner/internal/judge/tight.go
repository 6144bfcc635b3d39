package judge

import (
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
)

// TightResolution is the length, in micrometres, down to which Tight tells
// stretches apart.
const TightResolution = 1000

// Tight gives the stretches of ab where clearance is below um, in order and apart from one
// another. What it leaves out has um or more throughout; a stretch may be longer
// than the truth by up to TightResolution at either end.
//
// ab is cut into the fewest equal parts, a power of two, no longer than TightResolution;
// those that hold a place below um are the stretches. The smallest clearance over
// a row of them is exact (clearance.Field.Segment) and names a place of a solid: all that is
// nearer than um to it is tight. Where that ends, what is nearest to there tells how far
// it goes on, and so forth; next to where a stretch ends that takes steps as short as
// Newton's. What is left to either side is searched in the same way.
func (j *Judge) Tight(a, b geom.Point, um float64) []geom.Span {
	if a == b || um > float64(j.Field.Cap()) { // which no clearance exceeds
		if j.At(a).Um < um {
			return []geom.Span{{From: 0, To: 1}}
		}
		return nil
	}
	t := tightener{j: j, a: a, b: b, um: um, parts: 1, long: geom.Dist(a, b), out: make([]geom.Span, 0, 4)}
	for t.long/t.parts > TightResolution {
		t.parts *= 2
	}
	k0, k1, n0, n1 := 0.0, t.parts, j.end(a), j.end(b)
	if n0.Um < um {
		k0, n0 = t.reach(k0, k1, n0, n1)
		t.add(0, k0)
	}
	end := k1
	if n1.Um < um {
		k1, n1 = t.reach(k1, k0, n1, n0)
	}
	t.find(k0, k1, n0, n1)
	t.add(k1, end)
	return t.out
}

// tightener finds the stretches of ab. Places are told by how many parts lie before them.
type tightener struct {
	j           *Judge
	a, b        geom.Point
	um          float64
	long, parts float64
	out         []geom.Span
}

// roundSlack, in micrometres, is far more than rounding may put distances off.
const roundSlack = 1e-3

func (t *tightener) at(k float64) geom.Point { return Along(t.a, t.b, k/t.parts) }

func (t *tightener) near(k float64) clearance.Nearest { return t.j.At(t.at(k)) }

// smallest is the smallest clearance from k0 to k1, of which the clearance is known.
func (t *tightener) smallest(k0, k1 float64, n0, n1 clearance.Nearest) clearance.Nearest {
	if k0 == 0 && k1 == t.parts {
		return t.j.Segment(t.a, t.b)
	}
	t.j.Exacts++
	p, q := t.at(k0), t.at(k1)
	return placed(t.j.vicinity(p, q).SegmentBetween(p, q, n0, n1), p)
}

// find adds what is tight between k0 and k1. n0 and n1 are what is nearest to there.
func (t *tightener) find(k0, k1 float64, n0, n1 clearance.Nearest) {
	for k0 < k1 {
		n := t.smallest(k0, k1, n0, n1)
		if n.Um >= t.um {
			return
		}
		along, _ := t.project(n.On)
		k := max(k0, min(math.Floor(along/t.long*t.parts), k1-1))
		lo, hi, n2 := k, k+1, n1
		var nlo clearance.Nearest
		if n.Um >= t.um-roundSlack {
			nlo, n2 = t.near(lo), t.near(hi)
			if t.smallest(lo, hi, nlo, n2).Um >= t.um { // it lies next to that part
				t.find(k0, lo, n0, nlo)
				k0, n0 = hi, n2
				continue
			}
		}
		lo, nlo = t.reach(lo, k0, n, n0)
		hi, n2 = t.reach(hi, k1, n, n1)
		t.find(k0, lo, n0, nlo)
		t.add(lo, hi)
		k0, n0 = hi, n2
	}
}

// add adds the stretch from lo to hi after all others.
func (t *tightener) add(lo, hi float64) {
	switch i := len(t.out) - 1; {
	case lo == hi:
	case i >= 0 && t.out[i].To == lo/t.parts:
		t.out[i].To = hi / t.parts
	default:
		t.out = append(t.out, geom.Span{From: lo / t.parts, To: hi / t.parts})
	}
}

// reach is how far from k towards end all parts are tight, and what is nearest to there, as
// last is to end. n is what is nearest to some place up to k.
func (t *tightener) reach(k, end float64, n, last clearance.Nearest) (float64, clearance.Nearest) {
	step := math.Copysign(1, end-k)
	for known := false; k != end; known = true { // whether n is what is nearest to k
		far, ok := t.within(n.At, k, end)
		switch {
		case ok:
			// The part beyond begins with a tight place.
			k = far + step
		case known:
			k += step
		}
		if step*(end-k) <= 0 {
			break
		}
		if n = t.near(k); n.Um >= t.um {
			return k, n
		}
	}
	return end, last
}

// within is the farthest place from k towards end with all between nearer than um to p; not ok
// when k is not.
func (t *tightener) within(p geom.Point, k, end float64) (far float64, ok bool) {
	along, off := t.project(p)
	half := float64(t.um*t.um) - float64(off*off)
	if !(half > 0) {
		return k, false
	}
	if half = math.Sqrt(half); end < k {
		far = max(end, math.Ceil((along-half)/t.long*t.parts))
	} else {
		far = min(end, math.Floor((along+half)/t.long*t.parts))
	}
	inside := func(k float64) bool { return geom.Dist(t.at(k), p) < t.um-roundSlack }
	return far, (far-k)*(end-k) >= 0 && inside(k) && inside(far)
}

// project gives how far along ab, in micrometres, and how far beside it, p is.
func (t *tightener) project(p geom.Point) (along, off float64) {
	x, y := p.X-t.a.X, p.Y-t.a.Y
	ux, uy := (t.b.X-t.a.X)/t.long, (t.b.Y-t.a.Y)/t.long
	return float64(x*ux) + float64(y*uy), float64(x*uy) - float64(y*ux)
}
