package voronoi

import (
	"cmp"
	"context"
	"math"
	"slices"
)

// box is a square or rectangle of a block.
type box struct{ x0, y0, x1, y1 float64 }

func (b box) mid() vec        { return vec{(b.x0 + b.x1) / 2, (b.y0 + b.y1) / 2} }
func (b box) radius() float64 { return math.Hypot(b.x1-b.x0, b.y1-b.y0) / 2 }

// cutAt is where to cut an interval in two: about the middle, off all lines that edges
// between whole micrometres run along (see shiftUm).
func cutAt(lo, hi float64) float64 {
	m := (lo + hi) / 2
	if hi-lo > 8 {
		m = math.Floor(m) + shiftUm
	}
	return m
}

func (b box) holds(p vec) bool {
	return p.x > b.x0 && p.x < b.x1 && p.y > b.y0 && p.y < b.y1
}

const (
	// leafSites is how many sites a box may have before it is cut in four.
	leafSites = 6
	// tiedSites is how many it may have where cutting on is of no use: when stuckCuts cuts have
	// not made them fewer, since sites that touch or share a line tie for long, or when
	// levelBoxes have run out.
	tiedSites = 16
	stuckCuts = 3
	// levelBoxes is how many boxes of one size there may be in a block; see square for those
	// beyond.
	levelBoxes = 1 << 15
	// tieUm is by how much two distances must differ to be told apart: far above the
	// rounding of distances within a block's reach (1e-9 µm for 10 m), far below a micrometre.
	tieUm = 1e-6
	// joinUm is how near ends of arcs are to be one node, and how short arcs are
	// nothing: 10 nm, far above the error of a node, far below a micrometre.
	joinUm = 0.01
	// sameTurn is the angle, in radians, below which two sites that are equally far
	// have the same nearest place. To it comes the angle off a side's end within which
	// the side and its end are equally far, to tieUm.
	sameTurn = 1e-6
	// leastUm is the least clearance of an arc. It keeps the two sides of a point that
	// two solids touch in apart.
	leastUm = 0.2
)

// piece is an arc of one pair of sites in one box. j below 0 is a side of an open
// border: 0 left, 1 right, 2 bottom, 3 top are -1 to -4.
type piece struct {
	i, j   int32
	s0, s1 float64
}

// tracer finds the arcs of one block. It holds scratch space only.
type tracer struct {
	near        []site
	least, most float64
	mid         vec
	rims        [4]bool // sides of the block that are an open border
	rimAt       box
	inside      func(vec) bool
	buried      func(mid vec, rad float64) bool // whether one solid or zone has all within rad in it

	ctx    context.Context
	ended  bool  // ctx has
	boxes  int   // so far
	levels []int // of them, by how often they were cut
	missed int   // boxes beyond levelBoxes
	pieces []piece
	cands  []cand
	ids    []int32 // stack of the sites of the boxes that are being cut
	splits []float64
	inner  []float64
	places []vec
}

// cand is a site that may be nearest somewhere in the box at hand.
type cand struct {
	id   int32
	d    float64
	away vec
	core float64
	flat bool // dist is linear in the box
}

// square cuts box b down to boxes with few sites (those listed in ids, in rising order)
// and traces the arcs in these. free says whether all of b is known to be free, depth how
// often it has been cut, stuck how many of the last cuts left the sites the same.
//
// The boxes of one size do not number more than levelBoxes, so that the work ends whatever the solids are. A
// box beyond them that has more than tiedSites sites gets no edges. It takes tens of solids that make steps of micrometres:
// their edges run side by side, micrometres apart, for metres.
func (t *tracer) square(b box, ids []int32, free bool, depth, stuck int) {
	if t.boxes++; t.boxes%1024 == 0 {
		t.ended = t.ctx.Err() != nil
	}
	if t.ended {
		return // what there is goes nowhere
	}
	for len(t.levels) <= depth {
		t.levels = append(t.levels, 0)
	}
	t.levels[depth]++
	mid, rad := b.mid(), b.radius()
	from := len(t.cands)
	best, outline := -1, math.Inf(1)
	for _, id := range ids {
		s := &t.near[id]
		c := cand{id: id}
		if s.straight {
			f := mid.sub(s.a).dot(s.t)
			if f < -rad-tieUm || f > s.l+rad+tieUm {
				continue
			}
			if mid.sub(s.a).dot(s.n) < -rad-tieUm {
				continue // seen from behind: solid, or the other side of a polyline speaks
			}
			c.flat = f >= rad && f <= s.l-rad
		}
		c.d, c.away, c.core = s.closed(mid)
		outline = min(outline, c.core-max(0, s.grow))
		if best < 0 || c.d < t.cands[best].d {
			best = len(t.cands)
		}
		t.cands = append(t.cands, c)
	}
	defer func() { t.cands = t.cands[:from] }()
	if best < 0 {
		return
	}
	near := t.cands[best]
	if near.d+rad < t.least || near.d-rad > t.most {
		return
	}
	if !free && outline > rad {
		if t.inside(mid) {
			return
		}
		free = true
	}
	// A distance from a convex core is convex: it is at least its tangent. That of the
	// nearest is at most its tangent and what its curvature adds.
	bend := 2 * rad
	switch {
	case near.flat && near.core > rad:
		bend = 0
	case near.core > rad:
		bend = min(bend, rad*rad/(2*(near.core-rad)))
	}
	low := len(t.ids)
	defer func() { t.ids = t.ids[:low] }()
	for _, c := range t.cands[from:] {
		if c.d-rad > t.most {
			continue
		}
		if c.d-near.d-float64(rad*c.away.sub(near.away).length())-bend > tieUm {
			continue
		}
		// Of two corners the directions differ by no more than their distance over theirs.
		if r := min(c.core, near.core) - rad; r > 0 && !t.near[c.id].straight && !t.near[near.id].straight &&
			c.d-near.d-rad*t.near[c.id].a.sub(t.near[near.id].a).length()/r > tieUm {
			continue
		}
		t.ids = append(t.ids, c.id)
	}
	t.cands = t.cands[:from]
	kept := t.ids[low:]
	if stuck++; len(kept) < len(ids) {
		stuck = 0
	}
	if worthHiding(len(kept), depth, stuck) {
		kept = t.unhidden(kept, mid, rad)
		t.ids = t.ids[:low+len(kept)]
	}
	over := t.levels[depth] > levelBoxes
	switch {
	case len(kept) <= leafSites, len(kept) <= tiedSites && (over || stuck >= stuckCuts):
		if len(kept) > 1 || t.rims != [4]bool{} {
			t.leaf(b, kept, free)
		}
	case over:
		t.missed++
	case !free && depth >= 6 && t.buried(mid, rad):
		// Outlines of other solids in it do not matter.
	case rad < joinUm/4:
		// Many sites are equally far here: what comes in from all sides is joined.
	default:
		x, y := cutAt(b.x0, b.x1), cutAt(b.y0, b.y1)
		for _, q := range [4]box{{b.x0, b.y0, x, y}, {x, b.y0, b.x1, y}, {b.x0, y, x, b.y1}, {x, y, b.x1, b.y1}} {
			t.square(q, kept, free, depth+1, stuck)
		}
	}
}

func (t *tracer) leaf(b box, ids []int32, free bool) {
	for n, i := range ids {
		for _, j := range ids[n+1:] {
			if c, ok := bisector(&t.near[i], &t.near[j], t.mid); ok {
				t.pair(b, ids, i, j, &c, free)
			}
		}
		for side, is := range t.rims {
			if is && t.meetsRim(b, side) {
				c := rimCurve(&t.near[i], t.rimAt, side)
				t.pair(b, ids, i, int32(-1-side), &c, free)
			}
		}
	}
}

func (t *tracer) meetsRim(b box, side int) bool {
	return [4]bool{b.x0 == t.rimAt.x0, b.x1 == t.rimAt.x1, b.y0 == t.rimAt.y0, b.y1 == t.rimAt.y1}[side]
}

// leastFocalUm keeps the clearance along a rim smooth where a corner lies on it; it
// changes a clearance by no more than itself.
const leastFocalUm = 1e-4

// rimCurve is a side of an open border, as far as site i is nearest.
func rimCurve(i *site, at box, side int) curve {
	n := [4]vec{{1, 0}, {-1, 0}, {0, 1}, {0, -1}}[side] // into the floor
	o := [4]vec{{at.x0, at.y0}, {at.x1, at.y0}, {at.x0, at.y0}, {at.x0, at.y1}}[side]
	u := n.left()
	foot := i.a.sub(o).dot(u)
	c := curve{shape: line, o: o.along(u, foot), u: u, w: n}
	if i.straight {
		c.linear, c.rate = true, i.n.dot(u)
		if c.rate < 0 {
			c.u, c.rate = u.times(-1), -c.rate
		}
		c.base = i.dist(c.o)
		return c
	}
	c.base, c.focal = i.grow, max(leastFocalUm, math.Abs(i.a.sub(o).dot(n)))
	c.b = c.focal
	return c
}

// pair traces the arcs of curve c of sites i and j (or of i and a rim) in box b, where no
// other of ids is nearer.
func (t *tracer) pair(b box, ids []int32, i, j int32, c *curve, free bool) {
	si := &t.near[i]
	sj := si
	sp := t.splits[:0]
	if j >= 0 {
		sj = &t.near[j]
	}
	if j >= 0 || j < -2 {
		sp = c.crossings(sp, vec{1, 0}, b.x0)
		sp = c.crossings(sp, vec{1, 0}, b.x1)
	}
	if j >= -2 {
		sp = c.crossings(sp, vec{0, 1}, b.y0)
		sp = c.crossings(sp, vec{0, 1}, b.y1)
	}
	if len(sp) < 2 {
		t.splits = sp
		return
	}
	for _, s := range [2]*site{si, sj} {
		if s.straight {
			sp = c.crossings(sp, s.t, s.a.dot(s.t))
			sp = c.crossings(sp, s.t, s.a.dot(s.t)+s.l)
		}
	}
	sp = c.levels(sp, t.least)
	sp = c.levels(sp, t.most)
	if !c.linear {
		sp = append(sp, 0)
	}
	slices.Sort(sp)
	t.splits = sp
	for n := 1; n < len(sp); n++ {
		s0, s1 := sp[n-1], sp[n]
		if c.tiny(s0, s1) {
			continue
		}
		m := (s0 + s1) / 2
		p := c.at(m)
		if !t.inBox(b, p, j) || !si.owns(p, 0) || !sj.owns(p, 0) {
			continue
		}
		if um := c.clearance(m); um < t.least-tieUm || um > t.most+tieUm {
			continue
		}
		t.span(ids, i, j, c, s0, s1, free)
	}
}

func (t *tracer) inBox(b box, p vec, j int32) bool {
	switch {
	case j >= 0:
		return b.holds(p)
	case j >= -2:
		return p.y > b.y0 && p.y < b.y1
	}
	return p.x > b.x0 && p.x < b.x1
}

// span keeps the parts of [s0, s1] of curve c at which no third site is nearer.
func (t *tracer) span(ids []int32, i, j int32, c *curve, s0, s1 float64, free bool) {
	si := &t.near[i]
	m := c.at((s0 + s1) / 2)
	dm := si.dist(m)
	// Along the span, which does not turn back, a distance differs from the middle's by
	// no more than this.
	reach := max(c.at(s0).sub(m).length(), c.at(s1).sub(m).length())
	sp := append(t.inner[:0], s0, s1)
	for _, k := range ids {
		if k == i || k == j {
			continue
		}
		sk := &t.near[k]
		if d, _, _ := sk.closed(m); d > dm+2*reach+tieUm {
			continue
		}
		if sk.straight {
			sp = c.crossings(sp, sk.t, sk.a.dot(sk.t))
			sp = c.crossings(sp, sk.t, sk.a.dot(sk.t)+sk.l)
		}
		if j < 0 {
			if o, ok := bisector(min2(si, sk, i, k), max2(si, sk, i, k), t.mid); ok {
				var at [4]float64
				for _, s := range o.crossings(at[:0], c.w, c.o.dot(c.w)) {
					sp = append(sp, c.param(o.at(s)))
				}
			}
			continue
		}
		v := [3]int32{i, j, k}
		slices.Sort(v[:])
		t.places = triple(t.places[:0], &t.near[v[0]], &t.near[v[1]], &t.near[v[2]])
		for _, p := range t.places {
			sp = append(sp, c.settle(c.param(p), si, sk))
		}
	}
	slices.Sort(sp)
	t.inner = sp
	for n := 1; n < len(sp); n++ {
		a, b := sp[n-1], sp[n]
		if a < s0 || b > s1 || c.tiny(a, b) {
			continue
		}
		p := c.at((a + b) / 2)
		if t.nearest(ids, i, j, p) && (free || !t.inside(p)) {
			t.pieces = append(t.pieces, piece{i, j, a, b})
		}
	}
}

func min2(a, b *site, i, j int32) *site {
	if i < j {
		return a
	}
	return b
}

func max2(a, b *site, i, j int32) *site {
	if i < j {
		return b
	}
	return a
}

// before says whether site k speaks for places that it and site i are equally near to
// with the same nearest place: sides come before the corners that they end in.
func (t *tracer) before(k, i int32) bool {
	if a, b := t.near[k].straight, t.near[i].straight; a != b {
		return a
	}
	return k < i
}

// nearest says whether no other site is nearer to p than i and j, nor has the same
// nearest place as one of them and comes before it.
func (t *tracer) nearest(ids []int32, i, j int32, p vec) bool {
	si := &t.near[i]
	d := si.dist(p)
	same := sameTurn + 2*math.Sqrt(2*tieUm/max(d, tieUm))
	for _, k := range ids {
		sk := &t.near[k]
		if k == i || k == j || !sk.owns(p, 0) {
			continue
		}
		dk, away, _ := sk.closed(p)
		switch {
		case dk < d-tieUm:
			return false
		case dk > d+tieUm || sk.straight && p.sub(sk.a).dot(sk.n) <= 0:
			// Further, or seen from behind: its other side, if it has one, speaks for itself.
		case t.before(k, i) && away.sub(si.away(p)).length() < same:
			return false
		case j >= 0 && t.before(k, j) && away.sub(t.near[j].away(p)).length() < same:
			return false
		}
	}
	return true
}

// merge joins the pieces of each pair that boxes have cut.
func (t *tracer) merge() []piece {
	slices.SortFunc(t.pieces, func(a, b piece) int {
		return cmp.Or(cmp.Compare(a.i, b.i), cmp.Compare(a.j, b.j), cmp.Compare(a.s0, b.s0), cmp.Compare(a.s1, b.s1))
	})
	var out []piece
	for _, p := range t.pieces {
		if n := len(out) - 1; n >= 0 {
			q := &out[n]
			if q.i == p.i && q.j == p.j && p.s0 <= q.s1+joinUm/2 && (math.Abs(q.s1) > joinUm || p.s1 <= q.s1) {
				q.s1 = max(q.s1, p.s1)
				continue
			}
		}
		out = append(out, p)
	}
	return out
}
