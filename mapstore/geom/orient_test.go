package geom

import (
	"math/big"
	"testing"

	"pgregory.net/rapid"
)

// plainOrient is the determinant in rational numbers.
func plainOrient(a, b, c Point) int {
	r := func(v float64) *big.Rat { return new(big.Rat).SetFloat64(v) }
	l := new(big.Rat).Mul(new(big.Rat).Sub(r(b.X), r(a.X)), new(big.Rat).Sub(r(c.Y), r(a.Y)))
	return l.Cmp(new(big.Rat).Mul(new(big.Rat).Sub(r(b.Y), r(a.Y)), new(big.Rat).Sub(r(c.X), r(a.X))))
}

func TestOrientIsExact(t *testing.T) {
	counts := map[int]int{}
	rapid.Check(t, func(t *rapid.T) {
		a, b := drawPoint().Draw(t, "a"), drawPoint().Draw(t, "b")
		var c Point
		switch rapid.IntRange(0, 2).Draw(t, "third") {
		case 0:
			c = drawPoint().Draw(t, "c")
		case 1: // on the line or next to it
			k := float64(rapid.IntRange(-3, 4).Draw(t, "k"))
			c = Point{a.X + k*(b.X-a.X), a.Y + k*(b.Y-a.Y) + float64(rapid.IntRange(-1, 1).Draw(t, "off"))}
		case 2: // between them, rounded: fractions, differences not exact
			f := rapid.Float64Range(0, 1).Draw(t, "f")
			c = Point{a.X + f*(b.X-a.X), a.Y + f*(b.Y-a.Y)}
		}
		got := Orient(a, b, c)
		if want := plainOrient(a, b, c); got != want {
			t.Fatalf("Orient(%v, %v, %v) = %d, exactly %d", a, b, c, got, want)
		}
		counts[got]++
	})
	t.Logf("signs seen: %v", counts)
}

// Shewchuk's paper shows how a plain determinant fails near the line through
// (12, 12) and (24, 24); points there one rounding step apart must be told apart.
func TestOrientNearADiagonal(t *testing.T) {
	const ulp = 0x1p-53
	for i := range 64 {
		for j := range 64 {
			c := Point{0.5 + float64(i)*ulp, 0.5 + float64(j)*ulp}
			if got, want := Orient(Point{12, 12}, Point{24, 24}, c), plainOrient(Point{12, 12}, Point{24, 24}, c); got != want {
				t.Fatalf("at %d, %d: %d, exactly %d", i, j, got, want)
			}
		}
	}
}

func TestSegmentsTouchAndCross(t *testing.T) {
	for _, c := range []struct {
		name         string
		a, b, c, d   Point
		touch, cross bool
	}{
		{"x: crossing", Point{0, 0}, Point{2, 2}, Point{0, 2}, Point{2, 0}, true, true},
		{"T: end on the other", Point{0, 0}, Point{4, 0}, Point{2, 0}, Point{2, 3}, true, false},
		{"L: common end", Point{0, 0}, Point{4, 0}, Point{4, 0}, Point{4, 3}, true, false},
		{"-- overlap", Point{0, 0}, Point{4, 0}, Point{2, 0}, Point{6, 0}, true, false},
		{"-- end to end in line", Point{0, 0}, Point{4, 0}, Point{4, 0}, Point{6, 0}, true, false},
		{"- - gap in line", Point{0, 0}, Point{4, 0}, Point{5, 0}, Point{6, 0}, false, false},
		{"// parallel oblique, bounds overlap", Point{0, 0}, Point{4, 4}, Point{0, 1}, Point{3, 4}, false, false},
		{"one inside the other", Point{0, 0}, Point{9, 9}, Point{3, 3}, Point{6, 6}, true, false},
		{". on a segment", Point{0, 0}, Point{4, 2}, Point{2, 1}, Point{2, 1}, true, false},
		{". off a segment, within its bounds", Point{0, 0}, Point{4, 2}, Point{2, 2}, Point{2, 2}, false, false},
		{"crossing 1 µm beyond the end", Point{0, 0}, Point{1_000_000_000, 1}, Point{1_000_000_001, 0}, Point{1_000_000_001, 2}, false, false},
	} {
		for _, s := range [][4]Point{{c.a, c.b, c.c, c.d}, {c.b, c.a, c.c, c.d}, {c.c, c.d, c.a, c.b}, {c.d, c.c, c.b, c.a}} {
			if got := SegmentsTouch(s[0], s[1], s[2], s[3]); got != c.touch {
				t.Errorf("%s: touch %v for %v", c.name, got, s)
			}
			if got := SegmentsCross(s[0], s[1], s[2], s[3]); got != c.cross {
				t.Errorf("%s: cross %v for %v", c.name, got, s)
			}
		}
	}
}
