package geom

import (
	"cmp"
	"slices"
)

// Span is a stretch of a segment, as shares of the way from its start to its end.
type Span struct{ From, To float64 }

// ClipSegment gives the stretches of the segment ab that lie in the polygon or on
// its border, in order and apart from one another. A single point of contact is a
// Span of no length. The ends of spans are rounded to float64, the rest of the
// answer is exact but for stretches shorter than that rounding. Of a degenerate
// segment (a equal to b) the answer is {0, 1} or nothing.
func ClipSegment(chains [][]Point, a, b Point) []Span {
	if a == b {
		if InPolygon(chains, a) {
			return []Span{{0, 1}}
		}
		return nil
	}
	cuts := []float64{0, 1}
	var spans []Span // known to be inside: contacts and stretches along the border
	for _, p := range [2]float64{0, 1} {
		end := a
		if p == 1 {
			end = b
		}
		if InPolygon(chains, end) {
			spans = append(spans, Span{p, p})
		}
	}
	for _, chain := range chains {
		for i := range chain {
			c, d := Ring(chain).Edge(i)
			if !SegmentsTouch(a, b, c, d) {
				continue
			}
			var s Span
			if Orient(a, b, c) == 0 && Orient(a, b, d) == 0 {
				s = Span{alongParam(a, b, c), alongParam(a, b, d)}
				if s.From > s.To {
					s.From, s.To = s.To, s.From
				}
			} else {
				t := crossingParam(a, b, c, d)
				switch { // keep what is known exactly
				case OnSegment(a, c, d):
					t = 0
				case OnSegment(b, c, d):
					t = 1
				}
				s = Span{t, t}
			}
			cuts = append(cuts, s.From, s.To)
			spans = append(spans, s)
		}
	}
	slices.Sort(cuts)
	for i := 1; i < len(cuts); i++ {
		from, to := cuts[i-1], cuts[i]
		if from == to {
			continue
		}
		t := from + (to-from)/2
		m := Point{a.X + float64(t*(b.X-a.X)), a.Y + float64(t*(b.Y-a.Y))}
		if InPolygon(chains, m) {
			spans = append(spans, Span{from, to})
		}
	}
	return mergeSpans(spans)
}

// alongParam is where c, on the line ab, lies between a and b, clamped to them.
func alongParam(a, b, c Point) float64 {
	if dx, dy := b.X-a.X, b.Y-a.Y; dx*dx > dy*dy {
		return clamp((c.X-a.X)/dx, 0, 1)
	} else {
		return clamp((c.Y-a.Y)/dy, 0, 1)
	}
}

func mergeSpans(spans []Span) []Span {
	slices.SortFunc(spans, func(p, q Span) int {
		if c := cmp.Compare(p.From, q.From); c != 0 {
			return c
		}
		return cmp.Compare(p.To, q.To)
	})
	var out []Span
	for _, s := range spans {
		if n := len(out); n > 0 && s.From <= out[n-1].To {
			out[n-1].To = max(out[n-1].To, s.To)
			continue
		}
		out = append(out, s)
	}
	return out
}
