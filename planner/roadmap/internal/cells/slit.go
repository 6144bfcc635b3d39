package cells

import (
	"cmp"
	"slices"
)

// mark is a height at which the cover of an upright line changes.
type mark struct {
	y                int64
	over, ends, from int
}

// slits adds, as cells of no width, what is free on the upright line at x between
// outlines that end there and outlines that begin there: passages exactly as wide as the body.
func (s *sweeper) slits(x int64, uprights []int32) {
	s.marks = s.marks[:0]
	put := func(y int64, over, ends, from int) {
		s.marks = append(s.marks, mark{min(max(y, s.y0), s.y1), over, ends, from})
	}
	some := [2]bool{x == s.x0 && s.left, x == s.x1 && s.right}
	ends, from := 0, 0
	if some[0] {
		ends = 1
	}
	if some[1] {
		from = 1
	}
	for _, i := range uprights {
		e := &s.uprights[i]
		if e.rise < 0 {
			some[0] = true
			put(e.a.y, 0, 1, 0)
			put(e.b.y, 0, -1, 0)
		} else {
			some[1] = true
			put(e.a.y, 0, 0, 1)
			put(e.b.y, 0, 0, -1)
		}
	}
	if !some[0] || !some[1] {
		return
	}
	for _, it := range s.items {
		e := &s.edges[it.e]
		if e.a.x == x {
			continue
		}
		// Rounded so that too much counts as covered.
		y, rest := e.at(x)
		if e.rise < 0 && rest > 0 {
			y++
		}
		put(y, int(e.rise), 0, 0)
	}
	slices.SortFunc(s.marks, func(a, b mark) int { return cmp.Compare(a.y, b.y) })
	over := 1 + ends // below the floor, whose ends are among the items
	begin := int64(none)
	for i := 0; i < len(s.marks); {
		y := s.marks[i].y
		for ; i < len(s.marks) && s.marks[i].y == y; i++ {
			m := &s.marks[i]
			over, ends, from = over+m.over, ends+m.ends, from+m.from
		}
		if over == ends && ends > 0 && from > 0 {
			if begin < 0 {
				begin = y
			}
			continue
		}
		if begin >= 0 && y > begin {
			s.addSlit(x, begin, y)
		}
		begin = none
	}
}

func (s *sweeper) addSlit(x, lo, hi int64) {
	id := int32(len(s.traps))
	s.traps = append(s.traps, trap{x0: x, x1: x, lo0: lo, hi0: hi, lo1: lo, hi1: hi, bottom: none, top: none})
	s.slit = append(s.slit, id)
	if x == s.x0 {
		s.first = append(s.first, id)
	}
	for _, f := range s.front {
		p := &s.traps[f]
		s.join(f, id, x, max(p.lo1, lo), min(p.hi1, hi))
	}
}
