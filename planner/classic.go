package planner

import (
	"context"
	"fmt"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/rules"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/cellgrid"
	"example.com/wideberth/planner/roadmap/gvg"
	"example.com/wideberth/planner/roadmap/meadow"
	"example.com/wideberth/planner/roadmap/trapezoid"
	"example.com/wideberth/planner/roadmap/visibility"
)

const (
	// ClassicLimit is how many roadmaps a World keeps for engineers: all kinds for one body
	// and some for a second. They may take hundreds of megabytes on a floor of many
	// corners, so they are few.
	ClassicLimit = 10
	// classicIdle is for how many versions one is brought up to date without being asked for.
	classicIdle = 4
)

// classical is roadmap.Roadmap, by a name that does not clash with the searches over cells.
type classical = roadmap.Roadmap

// classicKey is a roadmap for a body.
type classicKey struct {
	kind         Roadmap
	um, radiusUm int64
}

func (k classicKey) need() roadmap.Need {
	return roadmap.Need{ClearanceUm: k.um, Zones: true, ZoneUm: k.radiusUm}
}

func newClassics(f *clearance.Field) *shelf[classicKey, roadmap.Roadmap] {
	return &shelf[classicKey, roadmap.Roadmap]{limit: ClassicLimit, idle: classicIdle, behind: true, make: func(ctx context.Context, k classicKey) (roadmap.Roadmap, error) {
		return buildClassic(ctx, f, k)
	}}
}

func buildClassic(ctx context.Context, f *clearance.Field, k classicKey) (r roadmap.Roadmap, err error) {
	switch k.kind {
	case Grid4:
		r, err = cellgrid.Build(ctx, f, k.need(), cellgrid.Grid4)
	case Grid8:
		r, err = cellgrid.Build(ctx, f, k.need(), cellgrid.Grid8)
	case Quadtree:
		r, err = cellgrid.Build(ctx, f, k.need(), cellgrid.Quadtree)
	case VisibilityGraph:
		r, err = visibility.Build(ctx, f, k.need())
	case MeadowMap:
		r, err = meadow.Build(ctx, f, k.need())
	case ExactCells:
		r, err = trapezoid.Build(ctx, f, k.need())
	case VoronoiGraph:
		r, err = gvg.Build(ctx, f, k.need())
	default:
		return nil, &RequestError{"roadmap", fmt.Sprintf("%d: want a roadmap that can be shown: grid4, grid8, quadtree, visibility graph, meadow map, Voronoi graph or exact cells", k.kind)}
	}
	if err != nil { // not a typed nil
		return nil, err
	}
	return r, nil
}

// Roadmap is the roadmap of that kind for a body, kept for the next question and brought up
// to date by Advance. The error is ctx's, a *RequestError, or wraps roadmap.ErrTooLarge.
func (w *World) Roadmap(ctx context.Context, kind Roadmap, b Body) (roadmap.Roadmap, error) {
	if err := w.validBody(b); err != nil {
		return nil, err
	}
	return w.classics.get(ctx, classicKey{kind, b.Required(), b.RadiusUm})
}

// BuildRoadmap is Roadmap from scratch, for those who want to know what that takes. It is
// not kept.
func (w *World) BuildRoadmap(ctx context.Context, kind Roadmap, b Body) (roadmap.Roadmap, error) {
	if err := w.validBody(b); err != nil {
		return nil, err
	}
	return buildClassic(ctx, w.field, classicKey{kind, b.Required(), b.RadiusUm})
}

func (w *World) validBody(b Body) error {
	var f fault
	f.body(b, w.m.Settings())
	return f.error()
}

// Field is the version's clearance.
func (w *World) Field() *clearance.Field { return w.field }

func (o *Options) classic() bool { return o.Roadmap >= VisibilityGraph }

// PlanOver is Plan over a roadmap of this version that the caller has, made for the
// request's body, whatever kind the options name.
func (w *World) PlanOver(ctx context.Context, r roadmap.Roadmap, q Request) (Answer, error) {
	t, err := w.task(q)
	if err != nil {
		return Answer{}, err
	}
	t.over = r
	a, err := t.plan(ctx)
	return t.finish(ctx, a, err)
}

// classic asks a classical roadmap; nil when it has no way, or one that goes against a
// one-way zone, which t.barred then tells of.
func (t *task) classic(ctx context.Context) (*course, error) {
	r, err := t.over, error(nil)
	if r == nil {
		r, err = t.w.classics.get(ctx, classicKey{t.q.Options.Roadmap, t.j.NeedUm, t.j.RadiusUm})
	}
	if err != nil {
		return nil, err
	}
	way, ok, err := r.Search(ctx, t.q.Start.At, t.q.Goal.At)
	t.search.Expanded += way.Expanded
	t.search.Queued += way.Queued
	if err != nil || !ok {
		return nil, err
	}
	c := &course{pts: way.Points, kind: RoadmapOptimum, roadmap: way.LengthUm}
	if t.q.Options.classic() {
		c.bias = meshBias
	}
	for i := 1; i < len(c.pts); i++ {
		if z := t.w.rules.Against(c.pts[i-1], c.pts[i], rules.BackwardSlackUm); z != nil {
			_, at := z.Shape.SegmentDist(c.pts[i-1], c.pts[i])
			t.barred = &Bottleneck{Exists: true, At: at, Zone: z.Name, NeededUm: 2 * t.j.NeedUm}
			return nil, nil
		}
	}
	if !t.q.Options.KeepRoadmapPath {
		c.pts, err = t.straighten(ctx, c.pts)
		c.kind = AtMostRoadmapOptimum
	}
	return c, err
}

// Profile is the clearance along a route as a whole, in micrometres, each place counted as
// the floor's cap at most.
type Profile struct {
	MeanUm float64
	// InnerSmallestUm is the smallest but for a stretch at each end, of the length EndReachUm
	// in all, over which clearance does nothing but rise from the end. It is SmallestUm of
	// the route when these stretches meet.
	InnerSmallestUm int64
	EndReachUm      float64
}

// Profile looks at a route at places at most a cell apart.
func (w *World) Profile(r *Route) Profile {
	var s, um []float64
	for i := range r.Legs {
		pts := r.Legs[i].Points
		for k := 1; k < len(pts); k++ {
			a, b := &pts[k-1], &pts[k]
			long := geom.Dist(a.At, b.At)
			n := max(1, math.Ceil(long/w.frame.Res))
			for j := 0.0; j < n; j++ {
				s, um = append(s, a.S+float64(long*(j/n))), append(um, w.field.At(geom.Point{
					X: a.At.X + float64((b.At.X-a.At.X)*(j/n)), Y: a.At.Y + float64((b.At.Y-a.At.Y)*(j/n)),
				}).Um)
			}
			if i == len(r.Legs)-1 && k == len(pts)-1 {
				s, um = append(s, b.S), append(um, w.field.At(b.At).Um)
			}
		}
	}
	capUm := float64(w.field.Cap())
	p := Profile{InnerSmallestUm: r.SmallestUm}
	sum, long := 0.0, s[len(s)-1]
	for i := range um {
		um[i] = min(um[i], capUm)
		if i > 0 {
			sum += float64((s[i] - s[i-1]) * (um[i] + um[i-1]) / 2)
		}
	}
	if p.MeanUm = um[0]; long > 0 {
		p.MeanUm = sum / long
	}
	i, k := 0, len(um)-1
	for i < len(um)-1 && um[i+1] > um[i] {
		i++
	}
	for k > 0 && um[k-1] > um[k] {
		k--
	}
	if i >= k {
		return p
	}
	p.EndReachUm = s[i] + long - s[k]
	least := math.Inf(1)
	for _, v := range um[i : k+1] {
		least = min(least, v)
	}
	p.InnerSmallestUm = int64(math.Floor(least + roundingUm))
	return p
}
