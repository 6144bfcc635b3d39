package grown

import (
	"fmt"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// part is what is left of a curve between two joints.
type part struct {
	curve    int32
	from, to int32 // joints; none below 0
	a, b     float64
	next     int32
}

// snapSlacks is how far apart, at most, in slacks, ends may be that should be one.
const snapSlacks = 16

// parts lists what is kept of all curves, in their order.
func (s *set) parts() []part {
	ends := make([]int32, len(s.curves)) // the joint at the end of each
	for i := range ends {
		ends[i] = -1
	}
	for i := range s.curves {
		if v := &s.curves[i]; v.next >= 0 {
			ends[i] = int32(len(s.joints))
			s.joints = append(s.joints, joint{p: v.b, a: int32(i), b: v.next})
		}
	}
	tol := s.tol()
	var out []part
	for i := range s.curves {
		v := &s.curves[i]
		if v.dropped {
			continue
		}
		at, from := 0.0, int32(-1)
		if v.prev >= 0 {
			from = ends[v.prev]
		}
		add := func(t float64, joint int32) {
			if t > at && !s.inside(v.at(at+(t-at)/2), tol) {
				out = append(out, part{curve: int32(i), from: from, to: joint, a: at, b: t, next: -1})
			}
			at, from = t, joint
		}
		for _, c := range v.cuts {
			add(c.t, c.joint)
		}
		add(v.long, ends[i])
	}
	return out
}

// link joins the parts to loops.
func (s *set) link() ([]Loop, error) {
	parts := s.parts()
	begins := make(map[int32]int32, len(parts))
	taken := make([]bool, len(parts))
	for i, p := range parts {
		if p.from >= 0 {
			begins[p.from] = int32(i)
		}
	}
	var open []int32
	for i := range parts {
		k, ok := begins[parts[i].to]
		if parts[i].to < 0 || !ok || taken[k] {
			open = append(open, int32(i))
			continue
		}
		parts[i].next, taken[k] = k, true
	}
	if err := s.mend(parts, taken, open); err != nil {
		return nil, err
	}
	var loops []Loop
	done := make([]bool, len(parts))
	for i := range parts {
		if done[i] {
			continue
		}
		var l Loop
		for k := int32(i); !done[k]; k = parts[k].next {
			done[k] = true
			l.Pieces = append(l.Pieces, s.piece(&parts[k]))
		}
		if l.tidy(); len(l.Pieces) > 0 {
			loops = append(loops, l)
		}
	}
	slices.SortStableFunc(loops, func(a, b Loop) int { return before(a.Pieces[0].From, b.Pieces[0].From) })
	return loops, nil
}

// mend joins ends that rounding has kept from meeting to the nearest beginning that is
// left.
func (s *set) mend(parts []part, taken []bool, open []int32) error {
	for _, i := range open {
		end := s.curves[parts[i].curve].at(parts[i].b)
		best, near := int32(-1), snapSlacks*s.slack
		for k := range parts {
			if taken[k] {
				continue
			}
			if d := geom.Dist(end, s.curves[parts[k].curve].at(parts[k].a)); d < near {
				best, near = int32(k), d
			}
		}
		if best < 0 {
			return fmt.Errorf("grown: the outline does not close at (%.6f, %.6f) m",
				geom.Metres(end.X+s.origin.X), geom.Metres(end.Y+s.origin.Y))
		}
		parts[i].next, taken[best] = best, true
	}
	return nil
}

// piece is a part at its true radius.
func (s *set) piece(p *part) Piece {
	v := &s.curves[p.curve]
	out := Piece{From: s.place(p.from, v, p.a), To: s.place(p.to, v, p.b), Zone: v.zone}
	if v.arc {
		out.Center, out.RadiusUm = s.onFloor(v.p), v.exact
		if out.Turn() > p.b-p.a+1 {
			out.Center, out.RadiusUm = geom.Point{}, 0 // of no length at the true radius
		}
	}
	return out
}

func (s *set) onFloor(p geom.Point) geom.Point {
	return geom.Point{X: p.X + s.origin.X, Y: p.Y + s.origin.Y}
}

// place is where a joint is at the true radii: where the two carriers meet nearest to
// where they did, or come nearest to one another.
func (s *set) place(id int32, v *curve, t float64) geom.Point {
	if id < 0 {
		return s.onFloor(v.at(t))
	}
	j := &s.joints[id]
	a, b := &s.curves[j.a], &s.curves[j.b]
	if a.next == j.b && j.p == a.b {
		// The corner's side, or its arc, moved out by the true radius.
		q := a.q
		x, y := 0.0, 0.0
		if !a.arc {
			x, y = normal(a.p, a.q)
		} else if !b.arc {
			q = b.p
			x, y = normal(b.p, b.q)
		} else {
			y, x = math.Sincos(a.from + a.long)
		}
		return s.onFloor(geom.Point{X: q.X + float64(a.exact*x), Y: q.Y + float64(a.exact*y)})
	}
	pts, n := carriersMeet(a, b, a.exact, b.exact)
	best, near := j.p, 4*math.Sqrt(2*(max(a.rho, b.rho)+s.slack)*s.slack)+s.slack
	for _, p := range pts[:n] {
		if d := geom.Dist(p, j.p); d <= near {
			best, near = p, d
		}
	}
	return s.onFloor(best)
}

// tidy joins arcs about one centre and straight pieces in line, drops pieces of no
// length, and begins at the lowest, then leftmost end.
func (l *Loop) tidy() {
	var out []Piece
	for _, p := range l.Pieces {
		if p.From == p.To || p.LengthUm() < 1e-6 {
			if k := len(out); k > 0 {
				out[k-1].To = p.To
			}
			continue
		}
		if k := len(out); k > 0 && out[k-1].joins(p) {
			out[k-1].To = p.To
			continue
		}
		out = append(out, p)
	}
	if k := len(out) - 1; k > 0 && out[k].joins(out[0]) {
		out[0].From = out[k].From
		out = out[:k]
	}
	l.Pieces = out
	if len(out) < 2 {
		return
	}
	first := 0
	for i := range out {
		if before(out[i].From, out[first].From) < 0 {
			first = i
		}
	}
	l.Pieces = append(out[first:len(out):len(out)], out[:first]...)
}

// joins says whether p and q are one arc.
func (p Piece) joins(q Piece) bool {
	return p.RadiusUm > 0 && p.RadiusUm == q.RadiusUm && p.Center == q.Center && p.Turn()+q.Turn() <= 2*math.Pi+1e-12
}
