package judge

import (
	"math"
	"sync"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
)

// Points of a way that lie close together, such as the chords of a turn about a corner, are
// judged from one look at the floor (clearance.Vicinity). The answers are the same with
// and without; only the time differs.
const (
	// runSide is how wide and how tall a run of points may be, in micrometres.
	runSide = 2.5 * geom.UmPerMetre
	// leastRun is from how many points on a look at the floor pays.
	leastRun = 3
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
	alone    clearance.Vicinity // knows nothing, and asks the field
	ask      int                // which of driven, ends and near are likely to be asked for next
	askEnd   int
	askNear  int
	surveyed bool
}

var memories = sync.Pool{New: func() any { return new(memory) }}

func (j *Judge) remember() *memory {
	if j.mem == nil {
		j.mem = memories.Get().(*memory)
		j.mem.alone.Gather(j.Field, geom.EmptyRect())
		j.mem.forget(0)
	}
	return j.mem
}

// Release gives back what is remembered. The judge may still be asked, and then begins anew.
func (j *Judge) Release() {
	if j.mem != nil {
		memories.Put(j.mem)
		j.mem = nil
	}
}

// Survey looks at the floor about a way that is about to be asked about, and as far as ahead
// straight on from the ends of its pieces.
func (j *Judge) Survey(pts []geom.Point, ahead float64) {
	m := j.remember()
	m.runs, m.askNear, m.surveyed = 0, 0, true
	for i := 0; i < len(pts) && m.runs < mostRuns; {
		k, box := run(pts, i)
		if k-i >= leastRun {
			if m.runs == len(m.near) {
				m.near = append(m.near, clearance.Vicinity{})
			}
			m.near[m.runs].Gather(j.Field, j.about(pts[i:k], box, ahead))
			m.runs++
		}
		i = max(k-1, i+1) // the last point of one may be the first of the next
	}
}

// Surveyed says whether Survey was asked for since the last Forget.
func (j *Judge) Surveyed() bool { return j.mem != nil && j.mem.surveyed }

// run is the points from i up to k that lie in a box of runSide.
func run(pts []geom.Point, i int) (k int, box geom.Rect) {
	box = geom.BoundsOf(pts[i])
	for k = i + 1; k < len(pts); k++ {
		wider := box.Add(pts[k])
		if max(wider.Width(), wider.Height()) > runSide {
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
	for k := m.askNear; k < min(m.runs, m.askNear+2); k++ {
		if m.near[k].Holds(a, b) {
			m.askNear = k
			return &m.near[k]
		}
	}
	for k := max(0, m.askNear-1); k < m.askNear; k++ {
		if m.near[k].Holds(a, b) {
			m.askNear = k
			return &m.near[k]
		}
	}
	return &m.alone
}

// Travel is the field's answer.
func (j *Judge) Travel(p geom.Point, heading float64, radiusUm, most int64) float64 {
	to := geom.Point{X: p.X + float64(float64(most)*math.Cos(heading)), Y: p.Y + float64(float64(most)*math.Sin(heading))}
	return j.vicinity(p, to).Travel(p, heading, radiusUm, most)
}
