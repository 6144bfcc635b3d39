package anyangle

import (
	"cmp"
	"math/bits"
)

// small bounds factors whose product is sure to fit an int64.
const small = 1 << 31

// cmpProducts compares a*b with c*d exactly.
func cmpProducts(a, b, c, d int64) int {
	if isSmall(a) && isSmall(b) && isSmall(c) && isSmall(d) {
		return cmp.Compare(a*b, c*d)
	}
	h1, l1 := mul128(a, b)
	h2, l2 := mul128(c, d)
	return cmp.Or(cmp.Compare(h1, h2), cmp.Compare(l1, l2))
}

func isSmall(a int64) bool { return a > -small && a < small }

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

// farAway stands for quotients beyond any floor: lines nearly level, far from their ends.
const farAway = 1 << 61

// mulDivFloor is a*b/c rounded down, for c > 0; farAway at most, either way.
func mulDivFloor(a, b, c int64) int64 {
	if isSmall(a) && isSmall(b) {
		p := a * b
		q := p / c
		if p%c < 0 {
			q--
		}
		return q
	}
	negative := (a < 0) != (b < 0)
	h, l := bits.Mul64(abs(a), abs(b))
	if h >= uint64(c)>>3 { // a quotient of 2^61 or more
		if negative {
			return -farAway
		}
		return farAway
	}
	q, rem := bits.Div64(h, l, uint64(c))
	if !negative {
		return int64(q)
	}
	if rem != 0 {
		q++
	}
	return -int64(q)
}

func abs(a int64) uint64 {
	if a < 0 {
		return uint64(-a)
	}
	return uint64(a)
}

// edge is a side of a piece, from its lower to its upper end; ya < yb.
type edge struct {
	xa, ya, xb, yb int64
	piece          int32
}

// floorAt and ceilAt are where the line through e meets height y, rounded. y must
// lie within a piece's height of the edge.
func (e *edge) floorAt(y int64) int64 {
	if e.xa == e.xb {
		return e.xa
	}
	return e.xa + mulDivFloor(y-e.ya, e.xb-e.xa, e.yb-e.ya)
}

func (e *edge) ceilAt(y int64) int64 {
	if e.xa == e.xb {
		return e.xa
	}
	return e.xa - mulDivFloor(y-e.ya, e.xa-e.xb, e.yb-e.ya)
}
