package judge

import (
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/spare"
)

// Points of a way that lie close together, such as the chords of a turn about a corner, are
// judged from one look at the floor (clearance.Vicinity). The answers are the same with
// and without; only the time differs.
const (
	// runSide is how wide and how tall a run of points may be, in micrometres, and closeSide
	// is that among clutter.
	runSide   = 8 * geom.UmPerMetre
	closeSide = 2 * geom.UmPerMetre
	// mostRuns is how many vicinities are kept; further points are judged one by one.
	mostRuns = 64
	// runSlack is how much farther than the clearance about a run is looked, in cells.
	runSlack = 4
)

// memory is what a judge remembers. It is used again by others once let go.
type memory struct {
	driven   []driven // see Drive
	ends     []clearance.Nearest
	near     []clearance.Vicinity // of runs of points, in order; only the first runs of them count
	runs     int
	focus    clearance.Vicinity // of one piece; see Focus
	alone    clearance.Vicinity // knows nothing, and asks the field
	ask      int                // which of driven, ends and near are likely to be asked for next
	askEnd   int
	askNear  int
	surveyed bool
}

var memories spare.Shelf[memory]

func (j *Judge) remember() *memory {
	if j.mem == nil {
		j.mem = memories.Get()
		j.mem.alone.Gather(j.Field, geom.EmptyRect())
		j.mem.focus.Gather(j.Field, geom.EmptyRect())
		j.mem.forget(0)
	}
	return j.mem
}

// Release gives back what is remembered. The judge may still be asked, and then begins anew.
func (j *Judge) Release() {
	if m := j.mem; m != nil {
		for i := range m.near {
			m.near[i].Release()
		}
		m.focus.Release()
		m.alone.Release()
		memories.Put(m)
		j.mem = nil
	}
}

// Survey looks at the floor about a way that is about to be asked about, and as far as ahead
// straight on from the ends of its pieces.
func (j *Judge) Survey(pts []geom.Point, ahead float64) {
	m := j.remember()
	m.runs, m.askNear, m.surveyed = 0, 0, true
	if j.NeedUm == 0 {
		return // what touches a point is asked of the field anyway
	}
	for i := 0; i+1 < len(pts) && m.runs < mostRuns; {
		if m.runs == len(m.near) {
			m.near = append(m.near, clearance.Vicinity{})
		}
		next := i + 1
		for _, side := range [2]float64{runSide, closeSide} {
			k, box := run(pts, i, side)
			if k < i+2 {
				break
			}
			if m.near[m.runs].Gather(j.Field, j.about(pts[i:k], box, ahead)) {
				m.runs++
				next = k - 1 // the last point of one is the first of the next
				break
			}
		}
		i = next
	}
}

// mostFocus is how large, in square micrometres, an area may be that is looked at for one piece.
const mostFocus = 400 * geom.UmPerMetre * geom.UmPerMetre

// Focus looks at the floor about a piece that much is about to be asked about, as far as
// reach from it.
func (j *Judge) Focus(a, b geom.Point, reach float64) {
	if j.vicinity(a, b) != &j.mem.alone {
		return
	}
	area := geom.BoundsOf(a, b).Grow(reach + runSlack*float64(j.Field.Map().Settings().ResolutionUm))
	if area.Width()*area.Height() <= mostFocus {
		j.mem.focus.Gather(j.Field, area)
	}
}

// Surveyed says whether Survey was asked for since the last Forget.
func (j *Judge) Surveyed() bool { return j.mem != nil && j.mem.surveyed }

// run is the points from i up to k that lie in a box of that side.
func run(pts []geom.Point, i int, side float64) (k int, box geom.Rect) {
	box = geom.BoundsOf(pts[i])
	for k = i + 1; k < len(pts); k++ {
		wider := box.Add(pts[k])
		if max(wider.Width(), wider.Height()) > side {
			break
		}
		box = wider
	}
	return k, box
}

// about is the area that matters to a run.
func (j *Judge) about(pts []geom.Point, box geom.Rect, ahead float64) geom.Rect {
	reach := float64(j.NeedUm)
	for _, p := range [2]geom.Point{pts[0], pts[len(pts)-1]} {
		if j.Field.Bounds().Contains(p) {
			_, most := j.Field.Bracket(p)
			reach = max(reach, most)
		}
	}
	slack := runSlack * float64(j.Field.Map().Settings().ResolutionUm)
	area := box.Grow(reach + slack)
	for i := 1; i < len(pts) && ahead > 0; i++ {
		a, b := pts[i-1], pts[i]
		if long := geom.Dist(a, b); long > 0 && long < ahead {
			share := ahead / long
			to := geom.Point{X: a.X + float64(share*(b.X-a.X)), Y: a.Y + float64(share*(b.Y-a.Y))}
			area = area.Union(geom.BoundsOf(to).Grow(float64(j.RadiusUm) + slack))
		}
	}
	return area
}

// vicinity is the one that a piece lies in, or one that knows nothing.
func (j *Judge) vicinity(a, b geom.Point) *clearance.Vicinity {
	m := j.remember()
	if m.focus.Holds(a, b) {
		return &m.focus
	}
	for _, k := range [3]int{m.askNear, m.askNear + 1, m.askNear - 1} {
		if k >= 0 && k < m.runs && m.near[k].Holds(a, b) {
			m.askNear = k
			return &m.near[k]
		}
	}
	return &m.alone
}

// Travel is the field's answer.
func (j *Judge) Travel(p geom.Point, heading float64, radiusUm, most int64) float64 {
	to := geom.Point{X: p.X + float64(float64(most)*math.Cos(heading)), Y: p.Y + float64(float64(most)*math.Sin(heading))}
	v := j.vicinity(p, to)
	if v == &j.mem.alone {
		v = j.vicinity(p, p)
	}
	return v.Travel(p, heading, radiusUm, most)
}
