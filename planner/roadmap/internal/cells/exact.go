package cells

import (
	"cmp"
	"math/bits"
)

// small bounds factors whose product is sure to fit an int64.
const small = 1 << 31

func isSmall(a int64) bool { return a > -small && a < small }

// cmpProducts compares a*b with c*d exactly.
func cmpProducts(a, b, c, d int64) int {
	if isSmall(a) && isSmall(b) && isSmall(c) && isSmall(d) {
		return cmp.Compare(a*b, c*d)
	}
	h1, l1 := mul128(a, b)
	h2, l2 := mul128(c, d)
	return cmp.Or(cmp.Compare(h1, h2), cmp.Compare(l1, l2))
}

// mul128 is the signed 128-bit product, high and low word.
func mul128(a, b int64) (hi int64, lo uint64) {
	h, l := bits.Mul64(uint64(a), uint64(b))
	if a < 0 {
		h -= uint64(b)
	}
	if b < 0 {
		h -= uint64(a)
	}
	return int64(h), l
}

// divFloor is a*b/c rounded down and what remains, for 0 <= a <= c and c > 0.
func divFloor(a, b, c int64) (q, rem int64) {
	if isSmall(a) && isSmall(b) {
		p := a * b
		if q, rem = p/c, p%c; rem < 0 {
			q, rem = q-1, rem+c
		}
		return q, rem
	}
	if b >= 0 {
		h, l := bits.Mul64(uint64(a), uint64(b))
		d, r := bits.Div64(h, l, uint64(c))
		return int64(d), int64(r)
	}
	h, l := bits.Mul64(uint64(a), uint64(-b))
	d, r := bits.Div64(h, l, uint64(c))
	if r == 0 {
		return -int64(d), 0
	}
	return -int64(d) - 1, c - int64(r)
}

// pt is a whole-micrometre point from the floor's lower left corner.
type pt struct{ x, y int64 }

// turn is 1 when a, b, c turn left, -1 right, 0 in line. Exact.
func turn(a, b, c pt) int { return cmpProducts(b.x-a.x, c.y-a.y, b.y-a.y, c.x-a.x) }
