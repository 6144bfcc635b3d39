package meadow

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/cells"
)

// Relaxation ends with the first sweep that shortens the way by less than GainUm, or
// after MaxSweeps.
const (
	GainUm    = 100.0
	MaxSweeps = 2000
)

// further is how far a place is moved beyond where it would be best were its neighbours to
// stay (over-relaxation, Young 1954): changes then travel faster along the way.
const further = 1.6

// Options choose how a way is found. The zero value relaxes.
type Options struct {
	Unrelaxed bool // keep to the middles of borders
}

// graph is the relational graph. Its borders are passed in their middle or, when lean is
// set, where they are nearest to the straight piece between the ends of the way.
type graph struct {
	*Roadmap
	lean     bool
	from, to geom.Point
}

// Doors is how many borders there are, see cells.Rooms.
func (g graph) Doors() int { return len(g.borders) }

// Door is a border, the place at which it is passed, and the regions on its sides.
func (g graph) Door(d int32) (at geom.Point, a, b int32) {
	w := &g.s.Walls[g.borders[d]]
	a, b = g.of[w.A], g.of[w.B]
	if !g.lean {
		return g.s.Mid(g.borders[d]), a, b
	}
	lo, hi := g.s.Point(float64(w.X), float64(w.Lo)), g.s.Point(float64(w.X), float64(w.Hi))
	_, _, at = geom.SegmentSegmentDist(g.from, g.to, lo, hi)
	at.X, at.Y = lo.X, min(max(at.Y, lo.Y), hi.Y)
	return at, a, b
}

func (g graph) DoorsOf(region int32) []int32 { return g.at[region] }

func (g graph) Cost(from geom.Point, _ int32, to geom.Point) float64 { return geom.Dist(from, to) }

// enter joins an end to the regions.
func (r *Roadmap) enter(p geom.Point) (cells.Entry, bool) {
	e, ok := r.s.Enter(p)
	for i, c := range e.In {
		e.In[i] = r.of[c]
	}
	return e, ok
}

// Search finds the shortest way over the relational graph by A* and relaxes it. Middles of wide
// borders lie far from short ways, so it also searches with each border passed
// where it is nearest to the straight piece between the ends, relaxes that way too, and gives
// the shorter one. Time is about
// proportional to the borders of the regions visited, times the borders of one region,
// and then to the borders passed times the sweeps.
func (r *Roadmap) Search(ctx context.Context, s, t geom.Point) (roadmap.Way, bool, error) {
	return r.SearchWith(ctx, s, t, Options{})
}

// SearchWith is Search with options.
func (r *Roadmap) SearchWith(ctx context.Context, s, t geom.Point, o Options) (w roadmap.Way, ok bool, err error) {
	from, okFrom := r.enter(s)
	to, okTo := r.enter(t)
	if !okFrom || !okTo {
		return w, false, ctx.Err()
	}
	g := graph{Roadmap: r, from: from.At, to: to.At}
	for k := range 2 {
		g.lean = k == 1
		p, ok, err := cells.Find(ctx, g, from, to)
		w.Expanded, w.Queued = w.Expanded+p.Expanded, w.Queued+p.Queued
		if !ok || err != nil {
			return w, false, err
		}
		places := []geom.Point{from.At}
		for _, d := range p.Doors {
			at, _, _ := g.Door(d)
			places = append(places, at)
		}
		places = append(places, to.At)
		if !o.Unrelaxed {
			if err := r.relax(ctx, p.Doors, places); err != nil {
				return w, false, err
			}
		}
		places = append(append([]geom.Point{s}, places...), t)
		if !o.Unrelaxed {
			places = r.straighten(places)
		}
		pts, length := cells.Polyline(places...)
		if k == 0 || length < w.LengthUm {
			w.Points, w.LengthUm = pts, length
		}
		if o.Unrelaxed || len(p.Doors) == 0 {
			break
		}
	}
	return w, true, nil
}

// relax slides the places, of which the first and the last stay, along their borders
// (Thorpe 1984): there and back, each to where the way over its neighbours is
// shortest. Regions are convex, so every piece stays in one. No sweep makes it longer.
func (r *Roadmap) relax(ctx context.Context, doors []int32, at []geom.Point) error {
	for sweep := range MaxSweeps {
		if err := ctx.Err(); err != nil {
			return err
		}
		gain := 0.0
		for k := range doors {
			i := k
			if sweep%2 == 1 {
				i = len(doors) - 1 - k
			}
			w := &r.s.Walls[r.borders[doors[i]]]
			lo, hi := r.s.Point(float64(w.X), float64(w.Lo)), r.s.Point(float64(w.X), float64(w.Hi))
			p, a, b := at[i+1], at[i], at[i+2]
			best := lo
			best.Y = min(max(crossing(a, b, lo.X), lo.Y), hi.Y)
			was := geom.Dist(a, p) + geom.Dist(p, b)
			// Beyond, when that is no worse than staying.
			far := best
			far.Y = min(max(p.Y+further*(best.Y-p.Y), lo.Y), hi.Y)
			for _, q := range [2]geom.Point{far, best} {
				if is := geom.Dist(a, q) + geom.Dist(q, b); is < was {
					at[i+1] = q
					gain += was - is
					break
				}
			}
		}
		if gain < GainUm {
			break
		}
	}
	return nil
}

// crossing is the height at which the shortest way from a to b by the upright line at x
// passes it; from one side back to the same one, as if b were on the other.
func crossing(a, b geom.Point, x float64) float64 {
	da, db := math.Abs(x-a.X), math.Abs(x-b.X)
	if da+db == 0 {
		return (a.Y + b.Y) / 2
	}
	return a.Y + float64((b.Y-a.Y)*(da/(da+db)))
}

// straightUm is how far, in micrometres, places may lie from a straight piece that takes
// their place.
const straightUm = 1.0

// straighten leaves out places that are in line, where the straight piece keeps the clearance.
func (r *Roadmap) straighten(at []geom.Point) []geom.Point {
	out := []geom.Point{at[0]}
	for i := 0; i+1 < len(at); {
		to := i + 1
		for k := i + 2; k < len(at); k++ {
			inLine := true
			for j := i + 1; j < k && inLine; j++ {
				d, _ := geom.SegmentDist(at[j], at[i], at[k])
				inLine = d <= straightUm
			}
			if !inLine || !r.s.Clear(at[i], at[k]) {
				break
			}
			to = k
		}
		out = append(out, at[to])
		i = to
	}
	return out
}
