package plainfloor

import (
	"fmt"
	"math"
	"math/rand/v2"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Passage is a floor on which a start and a goal are joined by a passage whose width is known from
// how it was made: it lies between two convex solids a known distance apart (or two such
// passages side by side, or one after the other), and everywhere else is more room.
type Passage struct {
	Family      string
	Map         *floor.Map
	Start, Goal geom.Point
	// BetaUm is the largest radius, in micrometres, at which a disc can move from start to
	// goal: half a distance of two solids.
	BetaUm float64
	// Aligned says that the passage is between sides along the axes; BetaUm is then exact,
	// otherwise right to geom.RelativeError.
	Aligned bool
}

// MostBetaUm is the largest BetaUm of a Passage. Start and goal have 100 mm more room.
const MostBetaUm = 400_000

// PassageFamilies are the kinds of passage that NewPassage makes: doors in walls of
// cells, in outlines along the axes and in others; in one polygon; corridors of metres,
// with bends or slanting; doors with a third solid before, behind or in them.
var PassageFamilies = []string{"aligned raster", "aligned vector", "oblique", "one feature", "long corridor", "shadowed"}

// NewPassage makes a passage of a family. The floor is turned and mirrored at random, and
// the passage often touches a border between blocks of 64 or of 128 cells.
func NewPassage(rng *rand.Rand, family string) (Passage, error) {
	n := 150 + rng.IntN(60)
	for {
		k := &sketch{rng: rng, n: n, side: float64(n * CellUm), turn: rng.IntN(8)}
		make, ok := map[string]func(*sketch) bool{
			"aligned raster": (*sketch).alignedRaster,
			"aligned vector": (*sketch).alignedVector,
			"oblique":        (*sketch).oblique,
			"one feature":    (*sketch).oneFeature,
			"long corridor":  (*sketch).longCorridor,
			"shadowed":       (*sketch).shadowed,
		}[family]
		if !ok {
			return Passage{}, fmt.Errorf("plainfloor: no family of passages %q", family)
		}
		// The wall is in the middle third, the ends in the others.
		k.y0 = math.Floor(k.side * (0.36 + 0.1*rng.Float64()))
		if k.turn&2 == 0 && rng.IntN(3) == 0 { // on a border between blocks
			k.y0 = 64 * CellUm
		}
		k.y1 = k.y0 + 1 + math.Floor(k.side*0.1*rng.Float64())
		k.start, k.goal = geom.Point{X: k.side / 2, Y: k.side / 6}, geom.Point{X: k.side / 2, Y: 5 * k.side / 6}
		if !make(k) || k.beta < 1 || k.beta > MostBetaUm {
			continue
		}
		m, err := empty(n, n)
		if err == nil {
			m, err = m.Apply(k.edits)
		}
		return Passage{family, m, k.at(k.start), k.at(k.goal), k.beta, k.aligned}, err
	}
}

// sketch is a passage in the making: upwards through a wall from y0 to y1.
type sketch struct {
	rng         *rand.Rand
	n           int
	side        float64
	turn        int // one of the eight symmetries of a square
	y0, y1      float64
	start, goal geom.Point
	edits       []floor.Edit
	beta        float64
	aligned     bool
}

// at puts a place where it is after turning.
func (k *sketch) at(p geom.Point) geom.Point {
	if k.turn&1 != 0 {
		p.X = k.side - p.X
	}
	if k.turn&2 != 0 {
		p.Y = k.side - p.Y
	}
	if k.turn&4 != 0 {
		p.X, p.Y = p.Y, p.X
	}
	return p
}

func (k *sketch) put(s floor.Shape) {
	f := &floor.Feature{Name: fmt.Sprintf("solid-%d", len(k.edits)), Kind: floor.Solid, Shape: s}
	switch s.Kind {
	case floor.Disc:
		f.RadiusUm = int64(s.Grow)
	case floor.Polyline:
		f.WidthUm = int64(2 * s.Grow)
	}
	k.edits = append(k.edits, floor.Edit{Kind: floor.PutFeature, Feature: f})
}

// polygon adds a solid polygon; it is false when the ring is not simple.
func (k *sketch) polygon(ring ...geom.Point) bool {
	out := make([]geom.Point, len(ring))
	for i, p := range ring {
		out[i] = k.at(p)
	}
	chains := [][]geom.Point{out}
	k.put(floor.NewPolygon(chains, 0))
	return geom.CheckPolygon(chains) == nil
}

func (k *sketch) disc(p geom.Point, radius float64) {
	k.put(floor.NewDisc(k.at(p), int64(radius), 0))
}

func (k *sketch) polyline(width int64, pts ...geom.Point) {
	var out []geom.Point
	for _, p := range pts {
		out = append(out, k.at(p))
	}
	k.put(floor.NewPolyline(out, width, 0))
}

// rect adds a solid rectangle, as cells when raster is true; it must then be whole cells.
func (k *sketch) rect(raster bool, x0, y0, x1, y1 float64) bool {
	if x0 >= x1 || y0 >= y1 {
		return true
	}
	if !raster {
		return k.polygon(geom.Point{X: x0, Y: y0}, geom.Point{X: x1, Y: y0}, geom.Point{X: x1, Y: y1}, geom.Point{X: x0, Y: y1})
	}
	r := geom.BoundsOf(k.at(geom.Point{X: x0, Y: y0}), k.at(geom.Point{X: x1, Y: y1}))
	k.edits = append(k.edits, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{
		X0: int(r.Min.X / CellUm), Y0: int(r.Min.Y / CellUm), X1: int(r.Max.X / CellUm), Y1: int(r.Max.Y / CellUm)}})
	return true
}

// cells rounds to whole cells when raster is true, else to whole micrometres.
func cells(raster bool, v float64) float64 {
	if raster {
		return math.Round(v/CellUm) * CellUm
	}
	return math.Round(v)
}

// width is the width of a passage along an axis: of any size from 2 µm.
func (k *sketch) width(raster bool) float64 {
	switch {
	case raster:
		return float64(1+k.rng.IntN(2*MostBetaUm/CellUm)) * CellUm
	case k.rng.IntN(4) == 0:
		return math.Floor(2 * math.Exp(k.rng.Float64()*math.Log(MostBetaUm)))
	}
	return float64(2 + k.rng.IntN(2*MostBetaUm-2))
}

// place is the left side of a passage of a width.
func (k *sketch) place(raster bool, width float64) float64 {
	x := k.side * (0.25 + 0.5*k.rng.Float64())
	if k.rng.IntN(2) == 0 { // a border between blocks runs through it, touches it, or nearly so
		x = 64*CellUm - width*float64(k.rng.IntN(3))/2
		if k.n > 170 && k.rng.IntN(2) == 0 {
			x += 64 * CellUm
		}
		if k.turn&1 != 0 {
			x = k.side - x - width
		}
		if !raster {
			x += float64(k.rng.IntN(3) - 1)
		}
	}
	return cells(raster, x)
}

// wall puts up the wall with doors of these widths from x on, with posts a cell or so wide between.
func (k *sketch) wall(raster bool, x float64, widths ...float64) bool {
	from, ok := 0.0, true
	for _, w := range widths {
		ok = k.rect(raster, from, k.y0, x, k.y1) && ok
		from = x + w
		x = from + cells(raster, CellUm*float64(1+k.rng.IntN(6)))
		k.beta = max(k.beta, w/2)
	}
	return k.rect(raster, from, k.y0, k.side, k.y1) && ok && from < 0.9*k.side
}

func (k *sketch) alignedRaster() bool {
	k.aligned = true
	k.y0 = cells(true, k.y0)
	k.y1 = k.y0 + CellUm*float64(1+k.rng.IntN(k.n/10))
	w := []float64{k.width(true)}
	if k.rng.IntN(3) == 0 {
		w = append(w, k.width(true))
	}
	return k.wall(true, k.place(true, w[0]), w...)
}

func (k *sketch) alignedVector() bool {
	k.aligned = true
	w := []float64{k.width(false)}
	if k.rng.IntN(3) == 0 {
		w = append(w, k.width(false))
	}
	return k.wall(false, k.place(false, w[0]), w...)
}

// oblique is a door between the round ends of two thick lines, or between two convex outlines.
func (k *sketch) oblique() bool {
	if k.rng.IntN(2) == 0 {
		a, b, ok := k.arms()
		k.beta = apart(a, b) / 2
		return k.polygon(a...) && k.polygon(b...) && ok
	}
	a := geom.Point{X: 0, Y: k.y0}
	b := geom.Point{X: k.side, Y: math.Floor(k.side * (0.36 + 0.2*k.rng.Float64()))}
	on := func(t float64) geom.Point {
		return geom.Point{X: math.Round(a.X + t*(b.X-a.X)), Y: math.Round(a.Y + t*(b.Y-a.Y))}
	}
	t := 0.3 + 0.3*k.rng.Float64()
	p, q := on(t), on(t+0.001+0.1*k.rng.Float64())
	width := int64(1 + k.rng.IntN(60_000))
	k.polyline(width, a, p)
	k.polyline(width, q, b)
	k.beta = (geom.Dist(p, q) - float64(width)) / 2
	return true
}

// arms are two convex parts of a wall, from the left and from the right border, whose ends
// slant as they please: their nearest places may be corners, or sides all but parallel.
// It is false when they are not convex.
func (k *sketch) arms() (a, b []geom.Point, ok bool) {
	w := k.width(false)
	x := k.place(false, w)
	slant := func() float64 { return math.Round((k.y1 - k.y0) * (3*k.rng.Float64() - 1.5)) }
	l := slant()
	r := slant()
	if k.rng.IntN(3) == 0 { // parallel
		r = l
	}
	low, high := k.y0, k.y1
	a = []geom.Point{{X: 0, Y: low}, {X: x, Y: low}, {X: x + l, Y: high}, {X: 0, Y: high}}
	b = []geom.Point{{X: k.side, Y: high}, {X: x + w + r, Y: high}, {X: x + w, Y: low}, {X: k.side, Y: low}}
	if k.rng.IntN(3) == 0 { // one comes to a point
		a[2] = geom.Point{X: x + math.Abs(l), Y: math.Round(low + (high-low)*k.rng.Float64())}
	}
	return a, b, min(a[1].X, a[2].X) > CellUm && max(b[1].X, b[2].X) < k.side-CellUm
}

// apart is the distance of two convex outlines, 0 when they meet.
func apart(a, b []geom.Point) float64 {
	best := math.Inf(1)
	for i := range a {
		for j := range b {
			d, _, _ := geom.SegmentSegmentDist(a[i], a[(i+1)%len(a)], b[j], b[(j+1)%len(b)])
			best = min(best, d)
		}
	}
	return best
}
