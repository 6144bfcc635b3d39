package cells

// between adds the free space between two gaps with the same edges below them, or says
// where to halve the slab first; negative when there is no need.
func (s *sweeper) between(x0, x1 int64, a, b *gap) int64 {
	b0, b1, t0, t1 := &s.edges[a.bottom], &s.edges[b.bottom], &s.edges[a.top], &s.edges[b.top]
	sameB, sameT := sameLine(b0, b1), sameLine(t0, t1)
	narrow := x1-x0 <= 1
	switch {
	case !narrow && !sameB:
		// The lower side is the higher of the edges.
		return inner(x0, x1, last(x0, x1, func(x int64) bool { return compareAt(b0, b1, x) >= 0 }))
	case !narrow && !sameT:
		return inner(x0, x1, last(x0, x1, func(x int64) bool { return compareAt(t0, t1, x) <= 0 }))
	case a.lo > a.hi && b.lo > b.hi, narrow && (a.lo > a.hi || b.lo > b.hi):
		return none // less than a micrometre
	case a.lo > a.hi:
		return s.ends(x0, x1, b, true)
	case b.lo > b.hi:
		return s.ends(x0, x1, a, false)
	case a.lo == a.hi && b.lo == b.hi && !s.thin:
		return none
	}
	s.pend = append(s.pend, trap{x0: x0, x1: x1, lo0: a.lo, hi0: a.hi, lo1: b.lo, hi1: b.hi,
		bottom: b.bottom, top: b.top, bevel: !sameB || !sameT})
	return none
}

// ends is where to halve a slab for a gap on its left (or on its right) that has no like
// on the other side.
func (s *sweeper) ends(x0, x1 int64, g *gap, atRight bool) int64 {
	b, t := &s.edges[g.bottom], &s.edges[g.top]
	opens := slopeSign(t, b)
	if atRight {
		opens = -opens
	}
	if x1-x0 <= 1 || g.lo >= g.hi && opens <= 0 {
		return none // what is left is less than a micrometre, or a mere touch
	}
	fits := func(x int64) bool {
		lo, rest := b.at(x)
		if rest > 0 {
			lo++
		}
		hi, _ := t.at(x)
		return lo <= hi
	}
	x := x0 + (x1-x0)/2 // others shut it first, or it opens too slowly to tell
	if atRight {
		if !fits(x0) && g.lo <= g.hi {
			x = last(x0, x1, func(x int64) bool { return !fits(x) }) + 1
		}
	} else if !fits(x1) && g.lo <= g.hi {
		x = last(x0, x1, fits)
	}
	return inner(x0, x1, x)
}

// mostPairs bounds the edges among which pairs are looked at before a slab is halved.
const mostPairs = 48

// hidden is where to halve a slab in which a gap both opens and shuts; negative when there
// is none. Such a gap opens where one outline's side leaves another's, so both
// are in a run of edges that change places among themselves alone.
func (s *sweeper) hidden(x0, x1 int64) int64 {
	if x1-x0 <= 2 {
		return none
	}
	covered := 1
	for from := 0; from < len(s.items); {
		to := from + 1
		for ; s.reach[to] >= int32(to); to++ {
		}
		if to-from > mostPairs {
			return x0 + (x1-x0)/2
		}
		if to-from > 2 {
			if x := s.opens(x0, x1, s.items[from:to], covered); x >= 0 {
				return x
			}
		}
		for _, it := range s.items[from:to] {
			covered += int(it.rise)
		}
		from = to
	}
	return none
}

// opens is a place inside the slab where a gap has just opened among a run of edges, covered
// being how many outlines cover what is below them.
func (s *sweeper) opens(x0, x1 int64, run []item, covered int) int64 {
	for i := range run {
		if run[i].rise < 0 {
			continue
		}
		for j := i + 1; j < len(run); j++ {
			if run[j].rise > 0 || !s.beforeAtRight(&run[j], &run[i]) {
				continue
			}
			lower, upper := &s.edges[run[i].e], &s.edges[run[j].e]
			x := last(x0, x1, func(x int64) bool { return compareAt(lower, upper, x) <= 0 }) + 1
			if x >= x1 {
				continue
			}
			over := covered
			for k := range run {
				if compareAt(&s.edges[run[k].e], upper, x) <= 0 {
					over += int(run[k].rise)
				}
			}
			if over == 0 {
				return x
			}
		}
	}
	return none
}

// last is the last x before x1 at which a property holds that holds at x0 and, from
// some place on, no more.
func last(x0, x1 int64, holds func(int64) bool) int64 {
	for x1-x0 > 1 {
		if mid := x0 + (x1-x0)/2; holds(mid) {
			x0 = mid
		} else {
			x1 = mid
		}
	}
	return x0
}

func inner(x0, x1, x int64) int64 { return min(max(x, x0+1), x1-1) }

// wall is where a cell ends.
type wall struct {
	lo, hi int64
	id     int32
}

// advance joins the cells that begin at x, now in pend, to those that end there: one
// between the same lines goes on, others share a wall.
func (s *sweeper) advance(x int64) {
	s.walls, s.next = s.walls[:0], s.next[:0]
	for _, f := range s.front {
		s.walls = append(s.walls, wall{s.traps[f].lo1, s.traps[f].hi1, f})
	}
	j := 0
	for k := range s.pend {
		f := &s.pend[k]
		for j < len(s.walls) && s.walls[j].hi < f.lo0 {
			j++
		}
		id := int32(none)
		for i := j; i < len(s.walls) && s.walls[i].lo <= f.lo0; i++ {
			if p := &s.traps[s.walls[i].id]; p.x1 == x && s.goesOn(p, f) {
				id = s.walls[i].id
				p.x1, p.lo1, p.hi1 = f.x1, f.lo1, f.hi1
				break
			}
		}
		if id == none {
			id = int32(len(s.traps))
			s.traps = append(s.traps, *f)
			if x == s.x0 {
				s.first = append(s.first, id)
			}
			for i := j; i < len(s.walls) && s.walls[i].lo <= f.hi0; i++ {
				s.join(s.walls[i].id, id, x, max(s.walls[i].lo, f.lo0), min(s.walls[i].hi, f.hi0))
			}
			for _, t := range s.slit {
				p := &s.traps[t]
				s.join(t, id, x, max(p.lo1, f.lo0), min(p.hi1, f.hi0))
			}
		}
		s.next = append(s.next, id)
	}
	s.slit = s.slit[:0]
	s.front, s.next = s.next, s.front
}

// goesOn says whether f, that begins where p ends, lies between the same lines.
func (s *sweeper) goesOn(p, f *trap) bool {
	return p.lo1 == f.lo0 && p.hi1 == f.hi0 && !f.bevel &&
		sameLine(&s.edges[p.bottom], &s.edges[f.bottom]) && sameLine(&s.edges[p.top], &s.edges[f.top])
}

func (s *sweeper) join(a, b int32, x, lo, hi int64) {
	if lo > hi || lo == hi && !s.thin {
		return
	}
	s.links = append(s.links, link{a, b, x, lo, hi})
}
