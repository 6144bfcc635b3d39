package geom

import (
	"math"
	"math/big"
)

// Orient says on which side of the directed line from a to b the point c lies:
// +1 to the left (a, b, c turn counter-clockwise), -1 to the right, 0 on it.
//
// The answer is exact for finite coordinates that are 0 or between 2^-400 and
// 2^500 in size. A float64 determinant decides when it exceeds its own error
// bound (the filter of Shewchuk, "Adaptive Precision Floating-Point Arithmetic and
// Fast Robust Geometric Predicates", 1997, §4.3). Otherwise, when the four
// differences are exact, as they are for all points of one floor, the two
// products are compared with their rounding errors (Dekker 1971); else rational
// arithmetic decides.
func Orient(a, b, c Point) int {
	acx, bcx := a.X-c.X, b.X-c.X
	acy, bcy := a.Y-c.Y, b.Y-c.Y
	left, right := float64(acx*bcy), float64(acy*bcx)
	det := left - right
	const bound = (3 + 16*0x1p-53) * 0x1p-53
	if limit := bound * (math.Abs(left) + math.Abs(right)); det > limit {
		return 1
	} else if det < -limit {
		return -1
	}
	if exactDiff(a.X, c.X, acx) && exactDiff(b.X, c.X, bcx) && exactDiff(a.Y, c.Y, acy) && exactDiff(b.Y, c.Y, bcy) {
		return compareProducts(acx, bcy, acy, bcx)
	}
	return orientRational(a, b, c)
}

// exactDiff says whether d = x - y was computed without rounding (the error term
// of Knuth's TwoDiff is zero).
func exactDiff(x, y, d float64) bool {
	bv := x - d
	av := d + bv
	return x-av == 0 && bv-y == 0
}

// compareProducts is the sign of a*b - c*d. Rounding is monotonic, so unequal
// rounded products are ordered like the exact ones; equal ones differ by their
// rounding errors, which FMA gives exactly.
func compareProducts(a, b, c, d float64) int {
	p, q := float64(a*b), float64(c*d)
	if p == q {
		p, q = math.FMA(a, b, -p), math.FMA(c, d, -q)
	}
	switch {
	case p > q:
		return 1
	case p < q:
		return -1
	}
	return 0
}

func orientRational(a, b, c Point) int {
	left := new(big.Rat).Mul(ratDiff(a.X, c.X), ratDiff(b.Y, c.Y))
	right := new(big.Rat).Mul(ratDiff(a.Y, c.Y), ratDiff(b.X, c.X))
	return left.Cmp(right)
}

// OnSegment says, exactly, whether p lies on the closed segment ab.
func OnSegment(p, a, b Point) bool {
	return min(a.X, b.X) <= p.X && p.X <= max(a.X, b.X) &&
		min(a.Y, b.Y) <= p.Y && p.Y <= max(a.Y, b.Y) && Orient(a, b, p) == 0
}

// SegmentsTouch says, exactly, whether the closed segments ab and cd share a
// point: a crossing, a common end, an end on the other, or an overlap.
func SegmentsTouch(a, b, c, d Point) bool {
	if max(a.X, b.X) < min(c.X, d.X) || max(c.X, d.X) < min(a.X, b.X) ||
		max(a.Y, b.Y) < min(c.Y, d.Y) || max(c.Y, d.Y) < min(a.Y, b.Y) {
		return false
	}
	c1, d1 := Orient(a, b, c), Orient(a, b, d)
	if c1*d1 > 0 {
		return false
	}
	a1, b1 := Orient(c, d, a), Orient(c, d, b)
	return a1*b1 <= 0
}

// SegmentsCross says, exactly, whether ab and cd cross: they share exactly one
// point, and it is an end of neither.
func SegmentsCross(a, b, c, d Point) bool {
	return Orient(a, b, c)*Orient(a, b, d) < 0 && Orient(c, d, a)*Orient(c, d, b) < 0
}
