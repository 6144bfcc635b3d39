// Package judge decides, exactly, what a body may do on one version of a floor: where
// it may stand, which straight pieces it may drive, and what they cost.
package judge

import (
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/rules"
	"example.com/wideberth/planner/internal/touch"
)

// Judge is one body on one version. It counts what it does, and is for one goroutine.
type Judge struct {
	Field    *clearance.Field
	Rules    *rules.Rules
	NeedUm   int64 // required clearance; at 0 the body is a point (package touch)
	RadiusUm int64 // kept from closed zones; at 0 they are touched, not entered
	// WideUm is the preferred clearance: a metre costs Weight more where clearance is
	// below it. 0: all metres are alike.
	WideUm int64
	Weight float64

	// Ends are where the route asked for begins and ends. They alone may be places
	// where solids touch one another, which only matters to a point.
	Ends [2]geom.Point

	Sights, Exacts int64 // lines of sight tried, distances evaluated

	mem *memory // nil: nothing is remembered

	near touch.Solids // see solids
}

// New makes a judge for a body's required clearance and radius.
func New(f *clearance.Field, r *rules.Rules, requiredUm, radiusUm int64) *Judge {
	return &Judge{Field: f, Rules: r, NeedUm: requiredUm, RadiusUm: radiusUm}
}

// Again is a judge of the same question that has counted nothing and remembers nothing.
func (j *Judge) Again() *Judge {
	n := New(j.Field, j.Rules, j.NeedUm, j.RadiusUm)
	n.WideUm, n.Weight, n.Ends = j.WideUm, j.Weight, j.Ends
	return n
}

// Place is At for the ends of pieces. They are remembered as pieces are.
func (j *Judge) Place(p geom.Point) clearance.Nearest { return j.end(p) }

func (j *Judge) end(p geom.Point) clearance.Nearest {
	m := j.remember()
	n := len(m.ends)
	for i := n - 1; i >= max(0, n-alike); i-- { // one piece ends where the next begins
		if m.ends[i].On == p {
			return m.ends[i]
		}
	}
	for i := m.askEnd; i < min(n, m.askEnd+alike); i++ {
		if m.ends[i].On == p {
			m.askEnd = i + 1
			return m.ends[i]
		}
	}
	if n >= mostDriven {
		m.ends, m.askEnd = m.ends[:0], 0
	}
	near := j.At(p)
	m.ends = append(m.ends, near)
	return near
}

// At is the field's answer, counted. Where nothing is nearer than the cap, the nearest
// place is p itself.
func (j *Judge) At(p geom.Point) clearance.Nearest {
	j.Exacts++
	return placed(j.vicinity(p, p).At(p), p)
}

// Segment is the field's answer, counted. Where nothing is nearer than the cap, both
// places are a.
func (j *Judge) Segment(a, b geom.Point) clearance.Nearest {
	if n := j.known(a, b); n != nil {
		return *n
	}
	na, nb := j.end(a), j.end(b)
	j.Exacts++
	return placed(j.vicinity(a, b).SegmentBetween(a, b, na, nb), a)
}

// Drive is Sight and Segment in one. Pieces that may be driven are remembered, for who asks
// about them once more.
func (j *Judge) Drive(a, b geom.Point) (near clearance.Nearest, ok bool) {
	if n := j.known(a, b); n != nil {
		return *n, n.Um >= float64(j.NeedUm)
	}
	near = j.Segment(a, b)
	j.Sights++
	r := j.Field.Bounds()
	ok = near.Um >= float64(j.NeedUm) && r.Contains(a) && r.Contains(b) &&
		(j.NeedUm > 0 && j.RadiusUm > 0 || j.keepsPoint(a, b, near.Um >= 1)) && j.Allowed(a, b)
	if m := j.remember(); ok && len(m.driven) < mostDriven {
		m.driven = append(m.driven, driven{a, b, near})
	}
	return near, ok
}

// Forget drops what is remembered, for who is about to ask for other pieces, some n.
func (j *Judge) Forget(n int) { j.remember().forget(n) }

func (m *memory) forget(n int) {
	n = min(n+8, mostDriven)
	m.driven, m.ask = slices.Grow(m.driven[:0], n), 0
	m.ends, m.askEnd = slices.Grow(m.ends[:0], n), 0
	m.runs, m.askNear, m.surveyed = 0, 0, false
}

// Rewind is for who goes over the same pieces once more, from the first on.
func (j *Judge) Rewind() {
	if m := j.mem; m != nil {
		m.ask, m.askEnd, m.askNear = 0, 0, 0
	}
}

// driven is a piece that may be driven. mostDriven bounds how many are remembered, and how many
// ends.
type driven struct {
	a, b geom.Point
	near clearance.Nearest
}

const mostDriven = 4096

// known is the smallest clearance along a piece driven before; nil when it was not. Pieces
// are asked for again mostly in the order they came.
func (j *Judge) known(a, b geom.Point) *clearance.Nearest {
	m := j.mem
	if m == nil {
		return nil
	}
	for i := max(0, m.ask-1); i < len(m.driven) && i < m.ask+alike; i++ {
		if d := &m.driven[i]; d.a == a && d.b == b {
			m.ask = i + 1
			return &d.near
		}
	}
	return nil
}

// alike is how many pieces from the one expected known looks at.
const alike = 8

func placed(n clearance.Nearest, p geom.Point) clearance.Nearest {
	if n.Feature == nil && !n.Border && !n.Cell {
		n.On, n.At = p, p
	}
	return n
}

// Stands says whether the body may stand at p. When not, zone is the closed zone that
// forbids it, nil when clearance or the floor's edge does.
func (j *Judge) Stands(p geom.Point) (ok bool, zone *floor.Feature) {
	if !j.Field.Bounds().Contains(p) || j.end(p).Um < float64(j.NeedUm) {
		return false, nil
	}
	if zone = j.Rules.Entered(p, p, float64(j.RadiusUm)); zone != nil {
		return false, zone
	}
	if j.NeedUm > 0 && j.RadiusUm > 0 {
		return true, nil
	}
	ok, _ = j.solids(p, p).Stands(p)
	return ok, nil
}

// Sight says whether the body may drive straight from a to b.
func (j *Judge) Sight(a, b geom.Point) bool {
	return j.Keeps(a, b, 0)
}

// Keeps is Sight, with least, rounded down, for the clearance to keep where that is more.
func (j *Judge) Keeps(a, b geom.Point, least float64) bool {
	j.Sights++
	r := j.Field.Bounds()
	need := max(j.NeedUm, int64(math.Floor(min(least, float64(j.Field.Cap())))))
	return r.Contains(a) && r.Contains(b) && (need == 0 || j.vicinity(a, b).SegmentClear(a, b, need)) &&
		(need > 0 && j.RadiusUm > 0 || j.keepsPoint(a, b, need > 0 || j.vicinity(a, b).SegmentClear(a, b, 1))) && j.Allowed(a, b)
}

// keepsPoint says whether solids, where NeedUm is 0, and closed zones, where RadiusUm
// is 0, let a point go from a to b, and on from there unless it is one of Ends. apart says that
// no solid is touched, as need not be known where NeedUm is more.
func (j *Judge) keepsPoint(a, b geom.Point, apart bool) bool {
	if (j.NeedUm > 0 || apart) && (j.RadiusUm > 0 || !j.Rules.HasClosed()) {
		return true
	}
	s := j.solids(a, b)
	if !s.Clear(a, b) {
		return false
	}
	for _, p := range [2]geom.Point{a, b} {
		if p == j.Ends[0] || p == j.Ends[1] {
			continue
		}
		if _, pinch := s.Stands(p); pinch {
			return false
		}
	}
	return true
}

// solids are the things along ab that matter to a point: solids where NeedUm is 0, and
// closed zones where RadiusUm is. They are good until the next are asked for.
func (j *Judge) solids(a, b geom.Point) *touch.Solids {
	s := &j.near
	s.Bounds, s.Cells, s.Shapes = j.Field.Bounds(), s.Cells[:0], s.Shapes[:0]
	if j.NeedUm == 0 {
		s.Shut = !j.Field.Map().Settings().OpenBorder
		var features []*floor.Feature
		s.Cells, features = j.Field.Touching(s.Cells, a, b)
		for _, f := range features {
			s.Shapes = append(s.Shapes, &f.Shape)
		}
	}
	if j.RadiusUm == 0 {
		s.Shapes = j.Rules.AppendClosed(s.Shapes, a, b)
	}
	return s
}

// Open is the clearance from which on a piece costs its length.
func (j *Judge) Open() float64 { return float64(j.WideUm) }

// Dearest is what a micrometre costs at most.
func (j *Judge) Dearest() float64 { return 1 + j.Weight }

// Allowed says whether zones let the body drive straight from a to b.
func (j *Judge) Allowed(a, b geom.Point) bool {
	return j.Rules.Entered(a, b, float64(j.RadiusUm)) == nil && j.Rules.Against(a, b, rules.BackwardSlackUm) == nil
}

// Weigh is what the straight piece ab costs, in micrometres, and the smallest
// clearance along it, at most Open. Where all metres are alike, clearance is not looked at.
func (j *Judge) Weigh(a, b geom.Point) (cost, least float64) {
	return j.Cost(a, b, math.Inf(1)), j.Least(a, b)
}

// Cost is what the straight piece ab costs, in micrometres; when that is more than most, it
// may be something less, but still more than most.
func (j *Judge) Cost(a, b geom.Point, most float64) float64 {
	long := geom.Dist(a, b)
	if j.Weight == 0 || long > most || j.vicinity(a, b).SegmentClear(a, b, j.WideUm) {
		return long
	}
	g := grader{j: j, a: a, b: b, long: long, most: (most - long) / j.Weight}
	pa, pb := g.at(a), g.at(b)
	g.halve(0, 1, &pa, &pb)
	return long + float64(j.Weight*g.sum)
}

// Least is the smallest clearance along the straight piece ab, at most Open.
func (j *Judge) Least(a, b geom.Point) float64 {
	if j.WideUm == 0 || j.vicinity(a, b).SegmentClear(a, b, j.WideUm) {
		return j.Open()
	}
	return j.Segment(a, b).Um
}

// Along is the point at a share of the way from a to b.
func Along(a, b geom.Point, share float64) geom.Point {
	switch share {
	case 0:
		return a
	case 1:
		return b
	}
	return geom.Point{X: a.X + float64(share*(b.X-a.X)), Y: a.Y + float64(share*(b.Y-a.Y))}
}
