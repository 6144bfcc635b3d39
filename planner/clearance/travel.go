package clearance

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// Travel is how far, in micrometres, a disc of radiusUm about p can move straight along
// heading (radians) before its swept area touches deeper than its border: at
// least 0, at most maxUm and never over-stated, short by at most about a
// micrometre. 0 when the disc overlaps a solid where it stands.
func (f *Field) Travel(p geom.Point, heading float64, radiusUm int64, maxUm int64) float64 {
	v := Vicinity{f: f, area: geom.EmptyRect()}
	return v.Travel(p, heading, radiusUm, maxUm)
}

// Travel is Field.Travel.
func (v *Vicinity) Travel(p geom.Point, heading float64, radiusUm int64, maxUm int64) float64 {
	if math.IsNaN(heading) || math.IsInf(heading, 0) || maxUm <= 0 || radiusUm > v.f.cap {
		return 0
	}
	t := traveller{v: v, p: p, ux: math.Cos(heading), uy: math.Sin(heading), radius: float64(max(radiusUm, 0)), hi: float64(maxUm)}
	if radiusUm > 0 && v.SegmentClear(p, t.at(t.hi), radiusUm) {
		return t.hi
	}
	guess, ok := t.trace()
	if !ok {
		return 0
	}
	for t.hi-t.lo > 1 {
		mid := guess
		if !(mid > t.lo && mid < t.hi) {
			mid = (t.lo + t.hi) / 2
		}
		before := t.hi - t.lo
		if guess = t.try(mid); t.hi-t.lo > before/2 && mid != t.lo+before/2 {
			guess = -1 // halve by turns, since guesses may come nearer little by little
		}
	}
	return math.Floor(t.lo)
}

// traveller finds how far a disc may go: clear up to lo, not up to hi.
type traveller struct {
	v      *Vicinity
	p      geom.Point
	ux, uy float64
	radius float64
	lo, hi float64
}

func (t *traveller) at(s float64) geom.Point {
	return geom.Point{X: t.p.X + float64(s*t.ux), Y: t.p.Y + float64(s*t.uy)}
}

// trace moves lo on by what clearance is left there, for as long as there is some, and
// gives a place beyond lo to ask about. It says no where the disc may not even stand.
// Clearance is taken from the lattice's vertices as long as there is much.
func (t *traveller) trace() (guess float64, ok bool) {
	f := t.v.f
	step := f.h
	for range 16 {
		for p := t.at(t.lo); f.bounds.Contains(p); p = t.at(t.lo) {
			least, _ := f.bracket(p)
			surplus := least - t.radius - roundSlack
			if surplus < f.h {
				break
			}
			if t.lo += surplus; t.lo >= t.hi {
				t.lo = t.hi
				return t.lo + step, true
			}
		}
		um := t.v.At(t.at(t.lo)).Um
		if t.lo == 0 && (um < t.radius || um <= 0) {
			return 0, false
		}
		surplus := um - t.radius - roundSlack
		if surplus <= 0.25 {
			step = 0.75
			break
		}
		if t.lo += surplus; t.lo >= t.hi {
			t.lo = t.hi
			break
		}
	}
	return t.lo + step, true
}

// try asks whether the disc may go on from lo to s, and gives the next place to ask
// about, or something that is not between lo and hi: short of where it would touch the
// place that was in the way, deeper than its border.
func (t *traveller) try(s float64) (next float64) {
	a, b := t.at(t.lo), t.at(s)
	n := t.v.SegmentBetween(a, b, t.v.At(a), t.v.At(b))
	if n.Um > 0 && n.Um >= t.radius {
		t.lo = s
		return -1
	}
	t.hi = s
	x, y := n.At.X-t.p.X, n.At.Y-t.p.Y
	along, off := float64(x*t.ux)+float64(y*t.uy), float64(x*t.uy)-float64(y*t.ux)
	if n.Um == 0 {
		off = 0 // At is on the way
	} else if math.Abs(off) >= t.radius {
		return -1
	}
	meets := along - math.Sqrt(float64(t.radius*t.radius)-float64(off*off))
	if meets >= s {
		return -1
	}
	t.hi = min(t.hi, max(meets, t.lo)+0.5)
	return meets - 0.25
}
