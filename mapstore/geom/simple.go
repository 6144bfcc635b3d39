package geom

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"github.com/tidwall/btree"
)

// PolygonError says what is wrong with a polygon and where.
type PolygonError struct {
	Ring    int    // 0: the outer ring, k: hole k-1
	Index   int    // of the point; -1 when the whole ring is meant
	Problem string // in words, with places in metres
}

// Error names the ring, the point and the problem.
func (e *PolygonError) Error() string {
	name := "outer ring"
	if e.Ring > 0 {
		name = fmt.Sprintf("hole %d", e.Ring-1)
	}
	if e.Index < 0 {
		return name + ": " + e.Problem
	}
	return fmt.Sprintf("%s, point %d: %s", name, e.Index, e.Problem)
}

// CheckPolygon says whether chains are a simple polygon: an outer ring, then
// holes, each of three points or more, all finite, no edge crossing or touching
// another except where neighbours share an end, holes inside the outer ring and
// apart from one another. The error is a *PolygonError.
//
// The answer is exact. Time is O(n log n) for n points plus the number of holes
// times n (a sweep after Shamos & Hoey, "Geometric Intersection Problems", FOCS
// 1976), whatever the shape.
func CheckPolygon(chains [][]Point) error {
	if len(chains) == 0 {
		return &PolygonError{0, -1, "no points, wanted at least 3"}
	}
	for ring, chain := range chains {
		if err := checkRing(ring, chain); err != nil {
			return err
		}
	}
	if err := checkVertices(chains); err != nil {
		return err
	}
	if err := checkEdges(chains); err != nil {
		return err
	}
	return checkNesting(chains)
}

func checkRing(ring int, chain []Point) error {
	n := len(chain)
	if n < 3 {
		return &PolygonError{ring, -1, fmt.Sprintf("%d points, wanted at least 3", n)}
	}
	for i, p := range chain {
		if !finite(p.X) || !finite(p.Y) {
			return &PolygonError{ring, i, "not a finite place"}
		}
	}
	for i, p := range chain {
		if p != chain[(i+1)%n] {
			continue
		}
		if i == n-1 {
			return &PolygonError{ring, i, "repeats the first point; the last point joins the first by itself"}
		}
		return &PolygonError{ring, i + 1, "repeats the point before it"}
	}
	flat := true
	for i := 2; i < n && flat; i++ {
		flat = Orient(chain[0], chain[1], chain[i]) == 0
	}
	if flat {
		return &PolygonError{ring, -1, "encloses no area: all points lie on one line"}
	}
	for i, p := range chain {
		before, after := chain[(i+n-1)%n], chain[(i+1)%n]
		if Orient(before, p, after) == 0 && less(before, p) == less(after, p) {
			return &PolygonError{ring, i, "the ring turns straight back at " + place(p)}
		}
	}
	return nil
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

func place(p Point) string { return fmt.Sprintf("(%.6g, %.6g) m", Metres(p.X), Metres(p.Y)) }

// less orders points from left to right, and upward where x is equal.
func less(p, q Point) bool { return comparePoints(p, q) < 0 }

func comparePoints(p, q Point) int {
	if c := cmp.Compare(p.X, q.X); c != 0 {
		return c
	}
	return cmp.Compare(p.Y, q.Y)
}

type vertexRef struct{ ring, index int }

// checkVertices finds points that two corners share.
func checkVertices(chains [][]Point) error {
	total := 0
	for _, c := range chains {
		total += len(c)
	}
	seen := make(map[Point]vertexRef, total)
	for ring, chain := range chains {
		for i, p := range chain {
			key := Point{p.X + 0, p.Y + 0} // -0 and 0 are one place
			if at, ok := seen[key]; ok {
				return &PolygonError{ring, i, "touches " + at.String() + " at " + place(p)}
			}
			seen[key] = vertexRef{ring, i}
		}
	}
	return nil
}

func (v vertexRef) String() string {
	if v.ring == 0 {
		return fmt.Sprintf("point %d of the outer ring", v.index)
	}
	return fmt.Sprintf("point %d of hole %d", v.index, v.ring-1)
}

// sweepEdge is an edge with its ends in sweep order.
type sweepEdge struct {
	left, right Point
	start       vertexRef // the ring's point the edge starts at
	n           int       // points in the ring
}

// neighbours says whether e and f follow each other in one ring.
func (e *sweepEdge) neighbours(f *sweepEdge) bool {
	if e.start.ring != f.start.ring {
		return false
	}
	d := e.start.index - f.start.index
	return d == 1 || d == -1 || d == e.n-1 || d == 1-e.n
}

// below orders edges that a sweep line meets at the same time. It is a strict
// order as long as no two of them cross or touch other than at a shared left end.
func (e *sweepEdge) below(f *sweepEdge) bool {
	if e == f {
		return false
	}
	if less(f.left, e.left) {
		return f.sideOf(e) < 0
	}
	return e.sideOf(f) > 0
}

// sideOf is where f starts as seen from e, or where it goes when it starts on e:
// +1 above, -1 below. f must not start before e.
func (e *sweepEdge) sideOf(f *sweepEdge) int {
	if s := Orient(e.left, e.right, f.left); s != 0 {
		return s
	}
	return Orient(e.left, e.right, f.right)
}

// checkEdges finds two edges that share a point though they are not neighbours.
// Corners are distinct and no ring turns straight back, so neighbours share
// their common end alone. A line sweeps from left to right; the first common
// point, if there is one, belongs to two edges that lie next to each other on
// the line before it gets there, so looking at pairs that become neighbours on
// the line is enough.
func checkEdges(chains [][]Point) error {
	var edges []sweepEdge
	for ring, chain := range chains {
		for i := range chain {
			a, b := Ring(chain).Edge(i)
			if less(b, a) {
				a, b = b, a
			}
			edges = append(edges, sweepEdge{a, b, vertexRef{ring, i}, len(chain)})
		}
	}
	type event struct {
		at   Point
		edge int
		ends bool
	}
	events := make([]event, 0, 2*len(edges))
	for i := range edges {
		events = append(events, event{edges[i].left, i, false}, event{edges[i].right, i, true})
	}
	slices.SortFunc(events, func(p, q event) int {
		if c := comparePoints(p.at, q.at); c != 0 {
			return c
		}
		if p.ends != q.ends { // edges leave the line before others join it
			if p.ends {
				return -1
			}
			return 1
		}
		return cmp.Compare(p.edge, q.edge)
	})
	line := btree.NewBTreeGOptions((*sweepEdge).below, btree.Options{NoLocks: true})
	for _, ev := range events {
		e := &edges[ev.edge]
		if ev.ends {
			line.Delete(e)
			lower, upper := around(line, e)
			if err := contact(lower, upper); err != nil {
				return err
			}
			continue
		}
		lower, upper := around(line, e)
		if err := contact(lower, e); err != nil {
			return err
		}
		if err := contact(e, upper); err != nil {
			return err
		}
		line.Set(e)
	}
	return nil
}

// around gives the edges next below and next above e, which is not on the line.
func around(line *btree.BTreeG[*sweepEdge], e *sweepEdge) (lower, upper *sweepEdge) {
	line.Descend(e, func(f *sweepEdge) bool { lower = f; return false })
	line.Ascend(e, func(f *sweepEdge) bool { upper = f; return false })
	return lower, upper
}

func contact(e, f *sweepEdge) error {
	if e == nil || f == nil || e.neighbours(f) || !SegmentsTouch(e.left, e.right, f.left, f.right) {
		return nil
	}
	if p, q := e.start, f.start; p.ring < q.ring || p.ring == q.ring && p.index < q.index {
		e, f = f, e
	}
	at := touchPoint(e.left, e.right, f.left, f.right)
	return &PolygonError{e.start.ring, e.start.index,
		"the edge from here meets the edge from " + f.start.String() + " at " + place(at)}
}

// checkNesting wants each hole inside the outer ring and in no other hole. No two
// rings touch, so one point decides for a whole ring.
func checkNesting(chains [][]Point) error {
	bounds := make([]Rect, len(chains))
	for i, c := range chains {
		bounds[i] = Ring(c).Bounds()
	}
	for i := 1; i < len(chains); i++ {
		p := chains[i][0]
		if !InPolygon(chains[:1], p) {
			return &PolygonError{i, 0, "lies outside the outer ring at " + place(p)}
		}
		for j := 1; j < len(chains); j++ {
			if i != j && bounds[j].Contains(p) && InPolygon(chains[j:j+1], p) {
				return &PolygonError{i, 0, fmt.Sprintf("lies inside hole %d at %s", j-1, place(p))}
			}
		}
	}
	return nil
}
