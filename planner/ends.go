package planner

import (
	"container/heap"
	"context"
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/join"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/roadmap"
)

// nearestSide is the side, in micrometres, of the squares that nearestFree ends at (a
// cell, for bodies that need less clearance than a cell's side): the place it
// finds is at most a diagonal of one farther than the nearest.
const nearestSide = 1000

// nearestLimit is how many squares it looks at before it gives up, and nearestPoll how
// many between two looks at its context.
const (
	nearestLimit = 200_000
	nearestPoll  = 256
)

// blockedEnd describes an end on which the body cannot stand.
func (t *task) blockedEnd(ctx context.Context, p geom.Point, zone *floor.Feature) (*BlockedEnd, error) {
	n := t.j.At(p)
	e := &BlockedEnd{At: p, ClearanceUm: t.roundedDown(n.Um), RequiredUm: t.q.Body.Required()}
	if !t.w.field.Bounds().Contains(p) {
		e.ClearanceUm = 0
	}
	if n.Feature != nil {
		e.Nearest = n.Feature.Name
	}
	if zone != nil {
		e.ClosedZone = zone.Name
	}
	at, ok, err := nearestFree(ctx, t.j, p, 2*float64(t.w.field.Cap()))
	if ok {
		e.HasFree, e.NearestFree, e.DistanceUm, e.Bearing = true, at, geom.Dist(p, at), bearing(p, at)
	}
	return e, err
}

// square is a square of the plane that may hold a free place, or a free place itself.
type square struct {
	mid  geom.Point
	half float64 // 0: a place
	dist float64 // from the place asked about
	seq  int     // order of making
}

type squares []square

func (s squares) Len() int { return len(s) }
func (s squares) Less(i, k int) bool {
	if s[i].dist != s[k].dist {
		return s[i].dist < s[k].dist
	}
	return s[i].seq < s[k].seq
}
func (s squares) Swap(i, k int) { s[i], s[k] = s[k], s[i] }
func (s *squares) Push(x any)   { *s = append(*s, x.(square)) }
func (s *squares) Pop() any {
	h := *s
	x := h[len(h)-1]
	*s = h[:len(h)-1]
	return x
}

// nearestFree is the place within reach of p, to about nearestSide, that is nearest
// to p and on which the body may stand, by branch and bound over squares: clearance
// changes no faster than one goes, so a square whose middle has too little by more
// than half its diagonal holds no free place.
func nearestFree(ctx context.Context, j *judge.Judge, p geom.Point, reach float64) (geom.Point, bool, error) {
	bounds := j.Field.Bounds()
	p0 := bounds.Nearest(p)
	var open squares
	seq := 0
	put := func(mid geom.Point, half float64) {
		r := geom.Rect{Min: mid, Max: mid}.Grow(half).Intersect(bounds)
		if r.IsEmpty() {
			return
		}
		if d := r.Dist(p); d <= reach {
			seq++
			heap.Push(&open, square{mid: mid, half: half, dist: d, seq: seq})
		}
	}
	// A required clearance below a cell's side prunes little: then cells will do.
	smallest := float64(nearestSide)
	if res := j.Field.Map().Settings().ResolutionUm; j.NeedUm < res {
		smallest = max(smallest, float64(res))
	}
	half := 1.0
	for half < reach {
		half *= 2
	}
	put(p0, half)
	for n := 1; len(open) > 0 && n <= nearestLimit; n++ {
		if n%nearestPoll == 0 && ctx.Err() != nil {
			return geom.Point{}, false, context.Cause(ctx)
		}
		s := heap.Pop(&open).(square)
		if s.half == 0 {
			return s.mid, true, nil
		}
		diag := float64(s.half * math.Sqrt2)
		mid := bounds.Nearest(s.mid)
		moved := geom.Dist(mid, s.mid)
		if j.At(mid).Um+diag+moved < float64(j.NeedUm) || j.Rules.Shut(mid, float64(j.RadiusUm)-diag-moved) {
			continue
		}
		// The place of the square nearest to p, when one may stand there, else its middle.
		r := geom.Rect{Min: s.mid, Max: s.mid}.Grow(s.half).Intersect(bounds)
		near := inward(r.Nearest(p), r)
		if ok, _ := j.Stands(near); ok {
			put(near, 0)
			continue
		}
		if 2*s.half > smallest {
			h := s.half / 2
			for _, d := range [4][2]float64{{-1, -1}, {1, -1}, {-1, 1}, {1, 1}} {
				put(geom.Point{X: s.mid.X + float64(d[0]*h), Y: s.mid.Y + float64(d[1]*h)}, h)
			}
			continue
		}
		mid = inward(mid, r)
		if ok, _ := j.Stands(mid); ok {
			put(mid, 0)
		}
	}
	return geom.Point{}, false, nil
}

// inward rounds p to whole micrometres, staying in r where r holds any.
func inward(p geom.Point, r geom.Rect) geom.Point {
	in := func(v, lo, hi float64) float64 { return max(math.Ceil(lo), min(math.Round(v), math.Floor(hi))) }
	return geom.Point{X: in(p.X, r.Min.X, r.Max.X), Y: in(p.Y, r.Min.Y, r.Max.Y)}
}

// connect joins an end to a roadmap over cells.
func (t *task) connect(p geom.Point, goal bool) []roadmap.Link {
	return join.Links(t.j, t.free, t.w.frame, p, goal, t.q.Options.Roadmap == Quadtree)
}
