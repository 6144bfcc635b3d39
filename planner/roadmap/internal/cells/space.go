package cells

import (
	"context"
	"fmt"
	"math"
	"sync/atomic"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/parallel"
	"example.com/wideberth/planner/roadmap"
)

// Need is what the space is free for.
type Need roadmap.Need

// The limits of a Space; roadmap.ErrTooLarge is wrapped beyond.
const (
	MaxClearanceUm = 100 * geom.UmPerMetre
	MaxCells       = 1 << 22 // before those that go on beyond a strip are put together
)

// Cell is a convex part of the free space between two upright walls, in micrometres from
// the floor's lower left corner: at X0 it reaches from Lo0 to Hi0, at X1 from Lo1 to Hi1.
// Either side may have no length, and a slit has no width.
type Cell struct {
	X0, X1, Lo0, Hi0, Lo1, Hi1 int64

	bottom, top *edge
	bevel       bool
}

// Wall is what two cells share: A on the left of x, B on the right, or one of them in it.
type Wall struct {
	A, B      int32
	X, Lo, Hi int64
}

// Space is the free space of one version as cells. It never changes and is safe for any
// number of readers.
type Space struct {
	Cells []Cell // by strip from the left, then by their left walls
	Walls []Wall

	f         *clearance.Field
	m         *floor.Map
	need      Need
	chord     float64
	origin    geom.Point
	low, high pt // where the body's middle may be
	strips    []*strip
	most      int       // cells
	ids       [][]int32 // of each strip's cells
	of, at    []int32   // Walls of cell i: of[at[i]:at[i+1]]
}

// Build cuts the version of field f, on all processors. chord is the most, in
// micrometres and at least 10, by which chords outside an arc may stand off from
// it, slack included. The error is ctx's, wraps roadmap.ErrTooLarge or names the
// clearance that cannot be served. Time is about linear in the floor's
// cells, 64 at a time, plus the corners of outlines times how many outlines an
// upright line meets.
func Build(ctx context.Context, f *clearance.Field, need roadmap.Need, chord float64) (*Space, error) {
	if err := check(need); err != nil {
		return nil, err
	}
	s := newSpace(f, Need(need), chord)
	all := make([]int, len(s.strips))
	for i := range all {
		all[i] = i
	}
	if err := s.fill(ctx, all); err != nil {
		return nil, err
	}
	return s, nil
}

func check(n roadmap.Need) error {
	if n.ClearanceUm < 0 || n.ClearanceUm > MaxClearanceUm {
		return fmt.Errorf("clearance: %d µm, wanted 0 to %d µm", n.ClearanceUm, MaxClearanceUm)
	}
	if n.ZoneUm < 0 || n.ZoneUm > MaxClearanceUm {
		return fmt.Errorf("zone clearance: %d µm, wanted 0 to %d µm", n.ZoneUm, MaxClearanceUm)
	}
	return nil
}

func newSpace(f *clearance.Field, need Need, chord float64) *Space {
	m := f.Map()
	st := m.Settings()
	s := &Space{f: f, m: m, most: MaxCells, need: need, chord: chord, origin: st.Vertex(0, 0)}
	s.high = pt{int64(st.Columns) * st.ResolutionUm, int64(st.Rows) * st.ResolutionUm}
	if !st.OpenBorder {
		r := need.ClearanceUm
		s.low, s.high = pt{r, r}, pt{s.high.x - r, s.high.y - r}
	}
	s.strips = make([]*strip, (st.Columns+floor.BlockSize-1)/floor.BlockSize)
	return s
}

// Advance is the space of another version of the same floor, of field f, change being
// what differs. It equals Build's; strips out of reach of the change are shared.
func (s *Space) Advance(ctx context.Context, f *clearance.Field, change floor.Change) (*Space, error) {
	n := newSpace(f, s.need, s.chord)
	if n.high != s.high || n.origin != s.origin || len(n.strips) != len(s.strips) {
		return Build(ctx, f, roadmap.Need(s.need), s.chord)
	}
	copy(n.strips, s.strips)
	stale := make([]bool, len(s.strips))
	mark := func(r geom.Rect, d float64) {
		a, b := s.stripsOf(r, d)
		for i := a; i <= b; i++ {
			stale[i] = true
		}
	}
	st := s.m.Settings()
	for _, c := range change.Cells {
		mark(st.CellBounds(c), float64(s.need.ClearanceUm+2*st.ResolutionUm))
	}
	for _, c := range change.Features {
		for _, v := range [2]*floor.Feature{c.Before, c.After} {
			if v == nil {
				continue
			}
			if r, ok := s.need.growth(v.Kind); ok {
				mark(v.Bounds(), r)
			}
		}
	}
	var list []int
	for i, is := range stale {
		if is {
			list = append(list, i)
		}
	}
	if len(list) == 0 {
		n.Cells, n.Walls, n.ids, n.of, n.at = s.Cells, s.Walls, s.ids, s.of, s.at
		return n, nil
	}
	if err := n.fill(ctx, list); err != nil {
		return nil, err
	}
	return n, nil
}

// side is a strip's width.
func (s *Space) side() int64 { return floor.BlockSize * s.m.Settings().ResolutionUm }

// span is where strip i begins and ends.
func (s *Space) span(i int) (x0, x1 int64) {
	return max(int64(i)*s.side(), s.low.x), min(int64(i+1)*s.side(), s.high.x)
}

// stripsOf is the first and the last strip that may touch r grown by d and a chord.
func (s *Space) stripsOf(r geom.Rect, d float64) (first, last int) {
	d += s.chord + 2*slackUm
	side, n := float64(s.side()), float64(len(s.strips)-1)
	a := math.Ceil((r.Min.X-d-s.origin.X)/side) - 1
	b := math.Floor((r.Max.X + d - s.origin.X) / side)
	return int(min(max(a, 0), n+1)), int(min(max(b, -1), n))
}

// fill sweeps the strips listed and puts all together.
func (s *Space) fill(ctx context.Context, list []int) error {
	near := make(map[int][]*floor.Feature, len(list))
	for _, i := range list {
		near[i] = nil
	}
	for f := range s.m.Features() {
		r, ok := s.need.growth(f.Kind)
		if !ok {
			continue
		}
		a, b := s.stripsOf(f.Bounds(), r)
		for i := a; i <= b; i++ {
			if l, wanted := near[i]; wanted {
				near[i] = append(l, f)
			}
		}
	}
	var made atomic.Int64 // so that far too large a floor does not fill the memory first
	err := parallel.Each(ctx, 0, len(list), func() func(int) {
		p := &stripper{}
		return func(k int) {
			i := list[k]
			if s.strips[i] = nil; made.Load() > int64(s.most) {
				return
			}
			if s.strips[i] = p.make(ctx, s, i, near[i]); s.strips[i] != nil {
				made.Add(int64(len(s.strips[i].traps)))
			}
		}
	})
	if err != nil {
		return err
	}
	total := 0
	for _, t := range s.strips {
		if t == nil {
			return fmt.Errorf("%w: more than %d sides in a strip or %d cells", roadmap.ErrTooLarge, MaxStripEdges, s.most)
		}
		if total += len(t.traps); total > s.most {
			return fmt.Errorf("%w: more than %d cells", roadmap.ErrTooLarge, s.most)
		}
	}
	s.assemble()
	return nil
}

// thin says whether passages of no width count.
func (s *Space) thin() bool {
	return s.need.ClearanceUm > 0 && !(s.need.Zones && s.need.ZoneUm == 0)
}

// assemble numbers the cells of all strips, puts those together that go on from one
// to the next, and lists their walls.
func (s *Space) assemble() {
	s.ids = make([][]int32, len(s.strips))
	traps, links := 0, 0
	for _, t := range s.strips {
		traps, links = traps+len(t.traps), links+len(t.links)+len(t.last)+len(t.first)
	}
	s.Cells, s.Walls = make([]Cell, 0, traps), make([]Wall, 0, links)
	var left *strip
	var leftIDs []int32
	for i, t := range s.strips {
		ids := make([]int32, len(t.traps))
		for k := range ids {
			ids[k] = none
		}
		s.ids[i] = ids
		for _, k := range t.first {
			f := &t.traps[k]
			if left == nil || f.slit() {
				continue
			}
			for _, l := range left.beside(f) {
				p := &left.traps[l]
				if !f.bevel && p.lo1 == f.lo0 && p.hi1 == f.hi0 &&
					sameLine(&left.edges[p.bottom], &t.edges[f.bottom]) && sameLine(&left.edges[p.top], &t.edges[f.top]) {
					ids[k] = leftIDs[l]
				}
			}
		}
		for k := range t.traps {
			f := &t.traps[k]
			if ids[k] != none {
				c := &s.Cells[ids[k]]
				c.X1, c.Lo1, c.Hi1 = f.x1, f.lo1, f.hi1
				continue
			}
			ids[k] = int32(len(s.Cells))
			c := Cell{X0: f.x0, X1: f.x1, Lo0: f.lo0, Hi0: f.hi0, Lo1: f.lo1, Hi1: f.hi1, bevel: f.bevel}
			if !f.slit() {
				c.bottom, c.top = &t.edges[f.bottom], &t.edges[f.top]
			}
			s.Cells = append(s.Cells, c)
		}
		if left != nil {
			for _, k := range t.first {
				f := &t.traps[k]
				for _, l := range left.beside(f) {
					p := &left.traps[l]
					if lo, hi := max(p.lo1, f.lo0), min(p.hi1, f.hi0); leftIDs[l] != ids[k] && (lo < hi || lo == hi && s.thin()) {
						s.Walls = append(s.Walls, Wall{leftIDs[l], ids[k], t.x0, lo, hi})
					}
				}
			}
		}
		for _, l := range t.links {
			s.Walls = append(s.Walls, Wall{ids[l.a], ids[l.b], l.x, l.lo, l.hi})
		}
		left, leftIDs = t, ids
		if len(t.traps) == 0 {
			left = nil
		}
	}
	s.at = make([]int32, len(s.Cells)+1)
	for _, w := range s.Walls {
		s.at[w.A+1]++
		s.at[w.B+1]++
	}
	for i := range s.Cells {
		s.at[i+1] += s.at[i]
	}
	s.of = make([]int32, 2*len(s.Walls))
	fill := append([]int32(nil), s.at...)
	for i, w := range s.Walls {
		for _, c := range [2]int32{w.A, w.B} {
			s.of[fill[c]] = int32(i)
			fill[c]++
		}
	}
}

// WallsOf are the walls of cell i, by number.
func (s *Space) WallsOf(i int32) []int32 { return s.of[s.at[i]:s.at[i+1]] }

// Field is the field of the version that the space is of.
func (s *Space) Field() *clearance.Field { return s.f }

// Need is what the space is free for.
func (s *Space) Need() roadmap.Need { return roadmap.Need(s.need) }
