package cells

import (
	"cmp"
	"slices"
)

// none stands for no edge.
const none = -1

// trap is a trapezoid between two upright lines, from [lo0, hi0] at x0 to [lo1, hi1] at
// x1, between the lines of edges bottom and top. A slit has no width and no edges.
// bevel says that another edge bounds its first micrometre: walls stand on whole
// micrometres, the last one before two outlines cross.
type trap struct {
	x0, x1             int64
	lo0, hi0, lo1, hi1 int64
	bottom, top        int32
	bevel              bool
}

func (t *trap) slit() bool { return t.x0 == t.x1 }

// link says that cell a, on the left, and b share the wall at x from lo to hi.
type link struct {
	a, b      int32
	x, lo, hi int64
}

// gap is a free stretch of an upright line above edge bottom and below edge top;
// under is how many edges are below it.
type gap struct {
	lo, hi      int64
	bottom, top int32
	under       int32
}

// item is an edge that reaches from one side of a slab to the other, and its heights
// there (edge.at).
type item struct {
	e, at          int32 // at is its place on the left
	rise           int8
	q0, r0, q1, r1 int64
}

// sweeper finds the free space between two upright lines: it goes through the slabs
// between the corners of all outlines from left to right.
type sweeper struct {
	edges       []edge // not upright
	uprights    []edge
	x0, x1      int64
	y0, y1      int64
	left, right bool // x0, x1 is an end of the floor
	thin        bool // passages of no width count
	most        int  // cells
	stop        func() bool

	traps []trap
	links []link
	first []int32 // cells that begin at x0
	front []int32 // cells that end at the current line, from below
	slit  []int32 // slits at the current line
	pend  []trap
	next  []int32
	walls []wall

	order, upOrder []int32
	items, second  []item
	reach          []int32
	spare          [][]gap
	marks          []mark
}

// run sweeps from x0 to x1. It stops early when there are too many cells.
func (s *sweeper) run() {
	s.order, s.upOrder = byX(s.order, s.edges), byX(s.upOrder, s.uprights)
	xs := []int64{s.x0, s.x1}
	for i := range s.edges {
		for _, x := range [2]int64{s.edges[i].a.x, s.edges[i].b.x} {
			if x > s.x0 && x < s.x1 {
				xs = append(xs, x)
			}
		}
	}
	slices.Sort(xs)
	xs = slices.Compact(xs)
	next, up := 0, 0
	for i, x := range xs {
		if len(s.traps) > s.most || s.stop() {
			return
		}
		if i == 0 {
			for ; next < len(s.order) && s.edges[s.order[next]].a.x < x; next++ {
				s.take(s.order[next])
			}
		}
		for up < len(s.upOrder) && s.uprights[s.upOrder[up]].a.x < x {
			up++
		}
		here := up
		for up < len(s.upOrder) && s.uprights[s.upOrder[up]].a.x == x {
			up++
		}
		s.slit = s.slit[:0]
		// A line between two strips is the right one's.
		if s.thin && up > here && (i < len(xs)-1 || s.right) {
			s.slits(x, s.upOrder[here:up])
		}
		if i == len(xs)-1 {
			return
		}
		s.items = slices.DeleteFunc(s.items, func(it item) bool { return s.edges[it.e].b.x <= x })
		for ; next < len(s.order) && s.edges[s.order[next]].a.x == x; next++ {
			s.take(s.order[next])
		}
		s.slab(x, xs[i+1])
	}
}

// byX are the numbers of edges in the order of their left ends.
func byX(order []int32, edges []edge) []int32 {
	order = order[:0]
	for i := range edges {
		order = append(order, int32(i))
	}
	slices.SortFunc(order, func(i, j int32) int { return cmp.Or(cmp.Compare(edges[i].a.x, edges[j].a.x), cmp.Compare(i, j)) })
	return order
}

func (s *sweeper) take(e int32) { s.items = append(s.items, item{e: e, rise: s.edges[e].rise}) }

// slab cuts the space between two upright lines that no outline has a corner between.
// Each connected free part of it is convex: where the same edges are below a gap at
// its left as below a gap at its right, what is between them is free. Where
// other edges bound it on the right than on the left it is halved where they cross.
func (s *sweeper) slab(x0, x1 int64) {
	s.place(x0, x1)
	g0 := s.gaps(s.items, true)
	g1, reach := s.atRight()
	s.pend = s.pend[:0]
	split := int64(none)
	i, j := 0, 0
	for split < 0 && (i < len(g0) || j < len(g1)) {
		switch {
		case i < len(g0) && j < len(g1) && g0[i].under == g1[j].under && (reach == nil || reach[g0[i].under] < g0[i].under):
			split = s.between(x0, x1, &g0[i], &g1[j])
			i++
			j++
		case j >= len(g1) || i < len(g0) && g0[i].under <= g1[j].under:
			split = s.ends(x0, x1, &g0[i], false)
			i++
		default:
			split = s.ends(x0, x1, &g1[j], true)
			j++
		}
	}
	s.spare = append(s.spare, g0[:0], g1[:0])
	if split < 0 && reach != nil {
		split = s.hidden(x0, x1)
	}
	if split < 0 {
		s.advance(x0)
		return
	}
	s.slab(x0, split)
	s.slab(split, x1)
}

// place sorts the items by height at x0.
func (s *sweeper) place(x0, x1 int64) {
	for i := range s.items {
		it := &s.items[i]
		e := &s.edges[it.e]
		it.q0, it.r0 = e.at(x0)
		it.q1, it.r1 = e.at(x1)
	}
	sortItems(s.items, s.before)
}

// before orders items at x0 and just right of it; closing outlines come before opening ones.
func (s *sweeper) before(a, b *item) bool {
	if a.q0 != b.q0 {
		return a.q0 < b.q0
	}
	if c := s.fraction(a, a.r0, b, b.r0); c != 0 {
		return c < 0
	}
	if a.q1 != b.q1 {
		return a.q1 < b.q1
	}
	if c := s.fraction(a, a.r1, b, b.r1); c != 0 {
		return c < 0
	}
	return a.rise < b.rise || a.rise == b.rise && a.e < b.e
}

// beforeAtRight does so at x1 and just left of it.
func (s *sweeper) beforeAtRight(a, b *item) bool {
	if a.q1 != b.q1 {
		return a.q1 < b.q1
	}
	if c := s.fraction(a, a.r1, b, b.r1); c != 0 {
		return c < 0
	}
	return s.before(a, b)
}

func (s *sweeper) fraction(a *item, ra int64, b *item, rb int64) int {
	if ra == 0 || rb == 0 {
		return cmp.Compare(ra, rb)
	}
	e, f := &s.edges[a.e], &s.edges[b.e]
	return cmpProducts(ra, f.b.x-f.a.x, rb, e.b.x-e.a.x)
}

// sortItems sorts by insertion as long as that is quick: successive lines have much the same order.
func sortItems(v []item, less func(a, b *item) bool) {
	moves := 0
	for i := 1; i < len(v); i++ {
		if !less(&v[i], &v[i-1]) {
			continue
		}
		x := v[i]
		k := i
		for ; k > 0 && less(&x, &v[k-1]); k-- {
			v[k] = v[k-1]
		}
		v[k] = x
		if moves += i - k; moves > 16*len(v) {
			slices.SortFunc(v, func(a, b item) int {
				switch {
				case less(&a, &b):
					return -1
				case less(&b, &a):
					return 1
				}
				return 0
			})
			return
		}
	}
}

// atRight is the gaps at the slab's right side and, for each number k of edges, the highest
// place there of the k lowest on the left; nil when the order is the same.
func (s *sweeper) atRight() (gaps []gap, reach []int32) {
	same := true
	for i := 1; i < len(s.items) && same; i++ {
		same = !s.beforeAtRight(&s.items[i], &s.items[i-1])
	}
	if same {
		return s.gaps(s.items, false), nil
	}
	for i := range s.items {
		s.items[i].at = int32(i)
	}
	s.second = append(s.second[:0], s.items...)
	sortItems(s.second, s.beforeAtRight)
	s.reach = append(s.reach[:0], make([]int32, len(s.items)+1)...)
	for i := range s.second {
		s.reach[s.second[i].at+1] = int32(i)
	}
	s.reach[0] = none
	for i := range s.items {
		s.reach[i+1] = max(s.reach[i+1], s.reach[i])
	}
	return s.gaps(s.second, false), s.reach
}

// gaps are the free stretches of a side of the slab, from below. A stretch of less than a
// micrometre may have lo above hi.
func (s *sweeper) gaps(items []item, left bool) []gap {
	var out []gap
	if n := len(s.spare); n > 0 {
		out, s.spare = s.spare[n-1], s.spare[:n-1]
	}
	covered := 1
	for i := range items {
		it := &items[i]
		if covered += int(it.rise); covered != 0 || i+1 == len(items) {
			continue
		}
		to := &items[i+1]
		g := gap{lo: it.q0, hi: to.q0, bottom: it.e, top: to.e, under: int32(i + 1)}
		rest := it.r0
		if !left {
			g.lo, g.hi, rest = it.q1, to.q1, it.r1
		}
		if rest > 0 {
			g.lo++
		}
		out = append(out, g)
	}
	return out
}
