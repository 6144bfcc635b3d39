package anyangle

// Stairs of raster cells, as slanting walls have them, grow into walls of round
// teeth, whose every chord would cut the aisle before it. A way between two places
// outside the notch between two teeth never enters it, as long as nothing pokes into it:
// the notch lies behind a straight line. So it is with the notches over the gaps in a row of solids,
// too narrow to go through. So there are two meshes: one of the solids, and a lean one with such
// notches filled, for ways with both ends in it.

// filling is a filled notch: the hull of two neighbouring corners' pieces, or what lies between
// them, and its side over the notch.
type filling struct {
	over piece
	a, b pt
}

// tread is an exposed horizontal side, free above or below.
type tread struct {
	x0, x1, y int64
	freeAbove bool
}

// riserKey is an end of an exposed vertical side, by the cell beside it.
type riserKey struct {
	x, y            int64
	freeLeft, isLow bool
}

// cornerKey is an exposed corner and the way that it faces.
type cornerKey struct{ x, y, sx, sy int64 }

// steps collects the exposed sides and corners of a block's surroundings.
type steps struct {
	treads  []tread
	risers  map[riserKey]int64 // to the other end's height
	walls   []cornerKey        // the risers' ends, facing as a corner there would
	corners map[cornerKey]int32
}

func (s *steps) reset() {
	s.treads, s.walls = s.treads[:0], s.walls[:0]
	if s.risers == nil {
		s.risers, s.corners = make(map[riserKey]int64), make(map[cornerKey]int32)
	}
	clear(s.risers)
	clear(s.corners)
}

func (s *steps) riser(x, y0, y1 int64, freeLeft bool) {
	s.risers[riserKey{x, y0, freeLeft, true}] = y1
	s.risers[riserKey{x, y1, freeLeft, false}] = y0
	sx := int64(1)
	if freeLeft {
		sx = -1
	}
	s.walls = append(s.walls, cornerKey{x, y1, sx, 1})
}

// gaps are the notches over gaps between two corners, on one line along an axis and facing each
// other, that are too narrow to go through: whatever lies between, the notch is shut off by the
// line along what the two stand off. A gap that does not begin and end in the block of w x h is
// not looked for; a notch's tip beyond the block's border stays, cut off from the rest.
func (z *rasterizer) gaps(out []filling, w, h int64, free func(a, b pt) bool) []filling {
	try := func(from cornerKey, level bool) {
		begin, end := from.x, w
		if !level {
			begin, end = from.y, h
		}
		if _, ok := z.steps.corners[from]; !ok || begin < 0 {
			return
		}
		for d := z.h; d < 2*z.r-aloneUm && begin+d <= end; d += z.h {
			to := cornerKey{from.x + d, from.y, -1, from.sy}
			a, b := pt{from.x, from.y + from.sy*z.r}, pt{from.x + d, from.y + from.sy*z.r}
			over := rectPiece(a.x, min(a.y, from.y), b.x, max(a.y, from.y))
			if !level {
				to = cornerKey{from.x, from.y + d, from.sx, -1}
				a, b = pt{from.x + from.sx*z.r, from.y}, pt{from.x + from.sx*z.r, from.y + d}
				over = rectPiece(min(a.x, from.x), a.y, max(a.x, from.x), b.y)
			}
			if _, ok := z.steps.corners[to]; !ok {
				continue
			}
			if free(a, b) {
				out = append(out, filling{over: over, a: a, b: b})
			}
			return
		}
	}
	for _, t := range z.steps.treads {
		sy := int64(1)
		if !t.freeAbove {
			sy = -1
		}
		try(cornerKey{t.x1, t.y, 1, sy}, true)
	}
	for _, k := range z.steps.walls {
		try(k, false)
	}
	return out
}

// fills are the notches over gaps, and those of single steps: from a corner along a tread, then
// along the riser at its end, to a corner that faces the same way. pieces holds the corners' pieces, and
// all obstacles that touch the block of w x h; only notches within it, with nothing
// poking into them, are filled.
func (z *rasterizer) fills(pieces []piece, w, h int64) []filling {
	free := func(a, b pt) bool {
		if min(a.x, b.x) < 0 || max(a.x, b.x) > w || min(a.y, b.y) < 0 || max(a.y, b.y) > h {
			return false
		}
		for i := range pieces {
			if pieces[i].crossedBy(a, b) {
				return false
			}
		}
		return true
	}
	out := z.gaps(nil, w, h, free)
	for _, t := range z.steps.treads {
		sy := int64(1)
		if !t.freeAbove {
			sy = -1
		}
		for _, sx := range [2]int64{-1, 1} {
			// The corner faces sx: it is the tread's end there, the riser is at the other.
			from, at := t.x0, t.x1
			if sx > 0 {
				from, at = t.x1, t.x0
			}
			top, ok := z.steps.risers[riserKey{at, t.y, sx < 0, sy > 0}]
			if !ok {
				continue
			}
			a, okA := z.steps.corners[cornerKey{from, t.y, sx, sy}]
			b, okB := z.steps.corners[cornerKey{at, top, sx, sy}]
			dx, dy := max(at-from, from-at), max(top-t.y, t.y-top)
			// Deeper notches would let the hull out of the grown solid on its other side.
			if !okA || !okB || cmpProducts(dx, dy, z.r, dx+dy) > 0 {
				continue
			}
			if f, ok := hullOver(&pieces[a], &pieces[b], sx, sy); ok && free(f.a, f.b) {
				out = append(out, f)
			}
		}
	}
	return out
}

// hullOver is the hull of two corners' pieces and the side of it that joins the two
// on the side that they face.
func hullOver(a, b *piece, sx, sy int64) (filling, bool) {
	v := append(append(make([]pt, 0, len(a.v)+len(b.v)), a.v...), b.v...)
	f := filling{over: newPiece(hull(v))}
	n := len(f.over.v)
	for i, p := range f.over.v {
		q := f.over.v[(i+1)%n]
		if (q.y-p.y)*sx-(q.x-p.x)*sy > 0 && (a.has(p) && b.has(q) || b.has(p) && a.has(q)) {
			f.a, f.b = p, q
			return f, true
		}
	}
	return f, false
}

func (p *piece) has(v pt) bool {
	for _, q := range p.v {
		if q == v {
			return true
		}
	}
	return false
}

// crossedBy says whether the segment ab passes through the inside of p (separating
// axes, exact).
func (p *piece) crossedBy(a, b pt) bool {
	if max(a.x, b.x) <= p.lo.x || min(a.x, b.x) >= p.hi.x || max(a.y, b.y) <= p.lo.y || min(a.y, b.y) >= p.hi.y {
		return false
	}
	left, right := false, false
	for i, v := range p.v {
		switch turnSign(a, b, v) {
		case 1:
			left = true
		case -1:
			right = true
		}
		q := p.v[(i+1)%len(p.v)]
		if turnSign(v, q, a) <= 0 && turnSign(v, q, b) <= 0 {
			return false
		}
	}
	return left && right
}
