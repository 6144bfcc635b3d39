package plainfloor

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Sequences is how many sequences of patches a law is tried on: 500, 10,000 with
// WIDEBERTH_SLOW=1 in the environment.
func Sequences() int {
	if os.Getenv("WIDEBERTH_SLOW") == "1" {
		return 10_000
	}
	return 500
}

// Sequence is a small floor of a few blocks of 64x64 cells that random patches change
// step by step: solids of all kinds, with and without a survey tolerance, zones,
// stations, paint, and all of them taken away, moved and renamed.
type Sequence struct {
	Map *floor.Map // the version reached
	// Rng draws the floor and its patches; a test may draw from it too.
	Rng *rand.Rand
}

// NewSequence draws the floor that number k of a seed begins with, and a patch on it.
func NewSequence(seed, k uint64) *Sequence {
	rng := rand.New(rand.NewPCG(seed, k))
	res := []int64{1000, CellUm, CellUm, 49_999, 77_777}[rng.IntN(5)]
	side := func() int {
		if rng.IntN(2) == 0 {
			return 64*(1+rng.IntN(2)) + rng.IntN(3) - 1
		}
		return 1 + rng.IntN(150)
	}
	w, h := side(), side()
	switch rng.IntN(20) {
	case 0:
		w, h = 1+rng.IntN(8), 300+rng.IntN(300)
	case 1:
		w, h = 300+rng.IntN(300), 1+rng.IntN(8)
	}
	reach := 2 + rng.IntN(40)
	if rng.IntN(10) == 0 {
		reach = 1 + rng.IntN(floor.MaxCapCells-1)
	}
	m, err := floor.New(floor.Settings{
		ResolutionUm: res, Columns: w, Rows: h,
		OriginX: rng.Int64N(6_000_000) - 3_000_000, OriginY: rng.Int64N(6_000_000) - 3_000_000,
		CapUm:         int64(reach)*res + rng.Int64N(2)*rng.Int64N(res),
		UnknownIsFree: rng.IntN(2) == 0, OpenBorder: rng.IntN(2) == 0,
		Initial: []floor.Occupancy{floor.Free, floor.Free, floor.Free, floor.Unknown}[rng.IntN(4)],
	})
	if err != nil {
		panic(err) // the settings above are within the limits
	}
	s := &Sequence{Map: m, Rng: rng}
	for range rng.IntN(5) {
		s.Next()
	}
	return s
}

// Next patches the floor and says what changed.
func (s *Sequence) Next() floor.Change {
	before := s.Map
	for range 1 + s.Rng.IntN(4) {
		// One by one, for an edit may be refused: an outline that crosses itself.
		if m, err := s.Map.Apply(s.edits()); err == nil {
			s.Map = m
		}
	}
	return floor.Diff(before, s.Map)
}

// edits is one change, of one or two edits.
func (s *Sequence) edits() []floor.Edit {
	rng, set := s.Rng, s.Map.Settings()
	one := func(e floor.Edit) []floor.Edit { return []floor.Edit{e} }
	put := func(f floor.Feature) []floor.Edit { return one(floor.Edit{Kind: floor.PutFeature, Feature: &f}) }
	fill := []floor.Occupancy{floor.Free, floor.Occupied, floor.Occupied, floor.Unknown}[rng.IntN(4)]
	switch rng.IntN(16) {
	case 0, 1, 2:
		return one(floor.Edit{Kind: floor.PaintRect, Rect: s.cells(8), Fill: fill})
	case 3:
		return one(floor.Edit{Kind: floor.PaintPolygon, Shape: floor.NewPolygon(s.polygon(), 0), Fill: fill})
	case 4:
		r := s.cells(16)
		cells := make([]byte, (r.Count()+3)/4)
		for k := range r.Count() {
			if rng.IntN(3) == 0 {
				cells[k/4] |= byte(floor.Occupied) << (k % 4 * 2)
			}
		}
		return one(floor.Edit{Kind: floor.PaintCells, Rect: r, Cells: cells})
	case 5:
		return one(floor.Edit{Kind: floor.ClearRect, Rect: s.cells(1 + rng.IntN(100))})
	case 6, 7, 8: // one that is there
		f := s.pick()
		if f == nil {
			return nil
		}
		gone := floor.Edit{Kind: floor.RemoveFeature, Name: f.Name}
		g := *f
		switch rng.IntN(6) {
		case 0:
			g.Name = s.name(g.Kind)
			return append(one(gone), put(g)...)
		case 1:
			g.Note = fmt.Sprint("seen ", rng.IntN(100))
			return put(g)
		case 2: // the same outline with another tolerance
			g.Shape.Grow -= float64(g.ToleranceUm)
			g.ToleranceUm = rng.Int64N(set.ResolutionUm)
			g.Shape.Grow += float64(g.ToleranceUm)
			return put(g)
		}
		return one(gone)
	case 9:
		return put(s.zone())
	case 10:
		return put(floor.Feature{Kind: floor.Station, Name: s.name(floor.Station), At: s.point(), Heading: 3 - 6*rng.Float64()})
	}
	return put(s.solid())
}

func (s *Sequence) pick() *floor.Feature {
	n := s.Map.FeatureCount()
	if n == 0 {
		return nil
	}
	at := s.Rng.IntN(n)
	for f := range s.Map.Features() {
		if at--; at < 0 {
			return f
		}
	}
	return nil
}

// name is one of few, so that features replace others.
func (s *Sequence) name(k floor.FeatureKind) string { return fmt.Sprintf("k%d-%d", k, s.Rng.IntN(8)) }

func (s *Sequence) cells(most int) floor.CellRect {
	set := s.Map.Settings()
	x, y := s.Rng.IntN(set.Columns), s.Rng.IntN(set.Rows)
	return floor.CellRect{X0: x, Y0: y, X1: min(set.Columns, x+1+s.Rng.IntN(most)), Y1: min(set.Rows, y+1+s.Rng.IntN(most))}
}

// point is anywhere on the floor, on a corner of a cell, or close to a block's border.
func (s *Sequence) point() geom.Point {
	rng, set := s.Rng, s.Map.Settings()
	along := func(n int) int64 {
		most := int64(n) * set.ResolutionUm
		v := rng.Int64N(most + 1)
		switch rng.IntN(4) {
		case 0:
			v = v / set.ResolutionUm * set.ResolutionUm
		case 1:
			side := 64 * set.ResolutionUm
			v = (v+side/2)/side*side + (rng.Int64N(7)-3)*set.ResolutionUm/2
		}
		return max(0, min(v, most))
	}
	return geom.Point{X: float64(set.OriginX + along(set.Columns)), Y: float64(set.OriginY + along(set.Rows))}
}

func (s *Sequence) zone() floor.Feature {
	f := floor.Feature{Shape: floor.NewPolygon(s.polygon(), 0)}
	switch s.Rng.IntN(4) {
	case 0:
		f.Kind, f.SpeedMps = floor.SpeedLimitZone, 0.1+s.Rng.Float64()
	case 1:
		f.Kind, f.Heading = floor.OneWayZone, 3-6*s.Rng.Float64()
	default:
		f.Kind = floor.ClosedZone
	}
	f.Name = s.name(f.Kind)
	return f
}

func (s *Sequence) solid() floor.Feature {
	rng, res := s.Rng, s.Map.Settings().ResolutionUm
	f := floor.Feature{Kind: floor.Solid, Name: s.name(floor.Solid)}
	if rng.IntN(4) == 0 {
		f.ToleranceUm = 1 + rng.Int64N(res)
	}
	switch rng.IntN(4) {
	case 0:
		f.RadiusUm = 1 + rng.Int64N(3*res)
		f.Shape = floor.NewDisc(s.point(), f.RadiusUm, f.ToleranceUm)
	case 1:
		f.WidthUm = 1 + rng.Int64N([]int64{2, 2, 20}[rng.IntN(3)]*res)
		chain := []geom.Point{s.point()}
		for range 1 + rng.IntN(4) {
			p, last := s.point(), chain[len(chain)-1]
			switch rng.IntN(3) {
			case 0:
				p.X = last.X
			case 1:
				p.Y = last.Y
			}
			chain = append(chain, p)
		}
		f.Shape = floor.NewPolyline(chain, f.WidthUm, f.ToleranceUm)
	default:
		f.Shape = floor.NewPolygon(s.polygon(), f.ToleranceUm)
	}
	return f
}

// polygon is a rectangle, an L, a diamond with a hole or a star, small or as large as the
// floor.
func (s *Sequence) polygon() [][]geom.Point {
	rng, b := s.Rng, s.Map.Bounds()
	box := geom.BoundsOf(s.point(), s.point())
	if rng.IntN(3) > 0 {
		res := float64(s.Map.Settings().ResolutionUm)
		box = geom.BoundsOf(box.Min, b.Nearest(geom.Point{X: box.Min.X + math.Floor(res*20*rng.Float64()), Y: box.Min.Y + math.Floor(res*20*rng.Float64())}))
	}
	at := func(x, y float64) geom.Point {
		return geom.Point{X: box.Min.X + math.Round(x*box.Width()), Y: box.Min.Y + math.Round(y*box.Height())}
	}
	switch rng.IntN(4) {
	case 0:
		return [][]geom.Point{{at(0, 0), at(1, 0), at(1, 1), at(0, 1)}}
	case 1: // clockwise
		return [][]geom.Point{{at(0, 0), at(0, 1), at(0.5, 1), at(0.5, 0.5), at(1, 0.5), at(1, 0)}}
	case 2:
		return [][]geom.Point{
			{at(0.5, 0), at(1, 0.5), at(0.5, 1), at(0, 0.5)},
			{at(0.4, 0.4), at(0.6, 0.4), at(0.5, 0.6)},
		}
	}
	n := 3 + rng.IntN(7)
	var ring []geom.Point
	for k := range n {
		y, x := math.Sincos(2 * math.Pi * float64(k) / float64(n))
		l := 0.5 * (0.2 + 0.8*rng.Float64())
		ring = append(ring, at(0.5+l*x, 0.5+l*y))
	}
	return [][]geom.Point{ring}
}
