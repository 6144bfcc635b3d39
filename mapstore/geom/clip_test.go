package geom

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

func TestClipSegment(t *testing.T) {
	// The courtyard of polygon_test.go: 12 by 8, a hole from (3, 2) to (9, 6).
	for _, c := range []struct {
		name string
		a, b Point
		want []Span
	}{
		{"outside", Point{0, 9}, Point{12, 9}, nil},
		{"within the wall", Point{1, 1}, Point{11, 1}, []Span{{0, 1}}},
		{"across the hole", Point{0, 4}, Point{12, 4}, []Span{{0, 0.25}, {0.75, 1}}},
		{"across all, from outside", Point{-6, 4}, Point{18, 4}, []Span{{0.25, 0.375}, {0.625, 0.75}}},
		{"along the outer border", Point{-12, 0}, Point{24, 0}, []Span{{1. / 3, 2. / 3}}},
		{"along the hole's border", Point{0, 6}, Point{12, 6}, []Span{{0, 1}}},
		{"touching a corner from outside", Point{10, 10}, Point{14, 6}, []Span{{0.5, 0.5}}},
		{"from hole border to hole border", Point{3, 4}, Point{9, 4}, []Span{{0, 0}, {1, 1}}},
		{"inside the hole", Point{4, 4}, Point{8, 4}, nil},
		{"point in the wall", Point{1, 1}, Point{1, 1}, []Span{{0, 1}}},
		{"point in the hole", Point{5, 4}, Point{5, 4}, nil},
		{"through two corners of the hole", Point{0, 0}, Point{12, 8}, []Span{{0, 0.25}, {0.75, 1}}},
	} {
		if got := ClipSegment(courtyard, c.a, c.b); !slices.Equal(got, c.want) {
			t.Errorf("%s: %v, wanted %v", c.name, got, c.want)
		}
		back := ClipSegment(courtyard, c.b, c.a)
		slices.Reverse(back)
		for i, s := range back {
			if w := c.want[i]; c.a != c.b && (math.Abs(1-s.From-w.To) > 1e-15 || math.Abs(1-s.To-w.From) > 1e-15) {
				t.Errorf("%s, backwards: %v, wanted %v", c.name, back, c.want)
			}
		}
	}
}

// Sampled points of a segment lie in the polygon exactly where the spans say so,
// but for rounding near the ends of spans.
func TestClipSegmentAgainstSamples(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		lattice := rapid.Bool().Draw(t, "lattice")
		var chains [][]Point
		p := rapid.Custom(func(t *rapid.T) Point {
			c := rapid.Map(rapid.IntRange(-25_000, 25_000), func(i int) float64 { return float64(i) * 1000 })
			return Point{c.Draw(t, "x"), c.Draw(t, "y")}
		})
		if lattice {
			p = latticePoint(5)
			chains = [][]Point{rapid.SliceOfN(p, 3, 7).Draw(t, "ring")}
			if CheckPolygon(chains) != nil {
				t.Skip("not a polygon")
			}
		} else {
			chains = drawStars().Draw(t, "polygon")
		}
		a, b := p.Draw(t, "a"), p.Draw(t, "b")
		spans := ClipSegment(chains, a, b)
		for i, s := range spans {
			if s.From < 0 || s.To > 1 || s.From > s.To || i > 0 && s.From <= spans[i-1].To {
				t.Fatalf("spans out of order: %v", spans)
			}
		}
		const n = 240 // divisible by the lattice's steps, so that samples hit corners
		for i := range n + 1 {
			u := float64(i) / n
			q := Point{a.X + u*(b.X-a.X), a.Y + u*(b.Y-a.Y)}
			if d, _ := BorderDist(chains, q); d < 1e-3 && q != (Point{math.Round(q.X), math.Round(q.Y)}) {
				continue
			}
			in := slices.ContainsFunc(spans, func(s Span) bool { return s.From-1e-12 <= u && u <= s.To+1e-12 })
			if in != InPolygon(chains, q) {
				t.Fatalf("at %v (%v): in a span %v of %v, in the polygon %v", u, q, in, spans, !in)
			}
		}
	})
}
