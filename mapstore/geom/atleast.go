package geom

import (
	"math"
	"math/big"
)

// SegmentDistAtLeast says, exactly, whether the distance from p to the closed
// segment ab is at least r. It is the test behind "clearance >= r, equality
// admitted": SegmentDist may be off by its rounding, this is not. Points and r
// must be finite. Rational arithmetic is needed only when the rounded distance is
// within its own error of r.
func SegmentDistAtLeast(p, a, b Point, r float64) bool {
	if r <= 0 {
		return true
	}
	d, _ := SegmentDist(p, a, b)
	// Each difference SegmentDist takes is off by at most 2^-53 of itself, which moves
	// the segment and p by that share of their extent; the rest is RelativeError.
	extent := math.Abs(p.X-a.X) + math.Abs(p.Y-a.Y) + math.Abs(b.X-a.X) + math.Abs(b.Y-a.Y)
	margin := 2 * RelativeError * (r + extent)
	switch {
	case d > r+margin:
		return true
	case d < r-margin:
		return false
	}
	return atLeastRational(p, a, b, r)
}

func atLeastRational(p, a, b Point, r float64) bool {
	dx, dy := ratDiff(b.X, a.X), ratDiff(b.Y, a.Y)
	wx, wy := ratDiff(p.X, a.X), ratDiff(p.Y, a.Y)
	r2 := rational(r)
	r2.Mul(r2, r2)
	along, length2 := ratSum(wx, dx, wy, dy), ratSum(dx, dx, dy, dy)
	switch {
	case along.Sign() <= 0: // a is nearest, or a equals b
		return ratSum(wx, wx, wy, wy).Cmp(r2) >= 0
	case along.Cmp(length2) >= 0: // b is nearest
		vx, vy := ratDiff(p.X, b.X), ratDiff(p.Y, b.Y)
		return ratSum(vx, vx, vy, vy).Cmp(r2) >= 0
	}
	cross := ratSum(dx, wy, new(big.Rat).Neg(dy), wx)
	return cross.Mul(cross, cross).Cmp(r2.Mul(r2, length2)) >= 0
}

// SegmentSegmentDistAtLeast says, exactly, whether the closed segments ab and cd
// are at least r apart.
func SegmentSegmentDistAtLeast(a, b, c, d Point, r float64) bool {
	return r <= 0 || !SegmentsTouch(a, b, c, d) &&
		SegmentDistAtLeast(a, c, d, r) && SegmentDistAtLeast(b, c, d, r) &&
		SegmentDistAtLeast(c, a, b, r) && SegmentDistAtLeast(d, a, b, r)
}

// rational is v exactly. What is not finite lies outside every contract here and
// counts as 0 rather than panic.
func rational(v float64) *big.Rat {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return new(big.Rat)
	}
	return new(big.Rat).SetFloat64(v)
}

// ratDiff is x - y.
func ratDiff(x, y float64) *big.Rat { return new(big.Rat).Sub(rational(x), rational(y)) }

// ratSum is a*b + c*d.
func ratSum(a, b, c, d *big.Rat) *big.Rat {
	p, q := new(big.Rat).Mul(a, b), new(big.Rat).Mul(c, d)
	return p.Add(p, q)
}
