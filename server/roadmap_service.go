package server

import (
	"context"
	"errors"
	"fmt"
	"math"
	"time"

	"google.golang.org/grpc"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/grown"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

const (
	// roadmapTimeout bounds ShowRoadmap's and ShowGrownSolids' work.
	roadmapTimeout = time.Minute
	// partSize is about how many points a RoadmapPart carries, well below 1 MiB.
	partSize = 8000
	// outlinePieces is how many pieces one outline may have in a message of 1 MiB.
	outlinePieces = 15_000
	// trialSolidUm is the side of the solid that update_s is measured with, and
	// trialSolid what it would be called. It is never pushed.
	trialSolidUm = 1_000_000
	trialSolid   = "compare-roadmaps.trial-solid"
)

// roadmapService carries out RoadmapService. Requests reach it checked. Its calls take
// turns with the pairs of PlanMany calls, so that controllers find a lane.
type roadmapService struct {
	pb.UnimplementedRoadmapServiceServer
	s *Server
}

// workplace is a version made ready for an engineer's call, with a body on it.
type workplace struct {
	snap  *mapstore.Snapshot
	world *planner.World
	body  planner.Body
	leave func()
}

func (v roadmapService) workplace(ctx context.Context, floorID string, sel *pb.VersionSelector, b *pb.Body, more func(*mapstore.Snapshot, *faults) error) (workplace, subject, error) {
	snap, about, err := v.s.resolve(ctx, floorID, sel)
	if err != nil {
		return workplace{}, about, err
	}
	note(ctx, floorID, snap.Info.Version)
	p := workplace{snap: snap, body: bodyIn(b, snap.Map.Settings())}
	var f faults
	f.bodyOnFloor(root.at("body"), p.body, snap.Map.Settings())
	if more != nil {
		err = more(snap, &f)
	}
	if f.any() {
		err = f.err()
	}
	if err != nil {
		return p, about, err
	}
	if p.world, err = v.s.world(ctx, snap); err != nil {
		return p, about, err
	}
	p.leave, err = v.s.lanes.enterPair(ctx)
	return p, about, err
}

// area is a request's area, or the whole floor.
func (p *workplace) area(a *pb.Area) geom.Rect {
	if a == nil {
		return p.snap.Map.Bounds()
	}
	return wire.AreaIn(a)
}

func (v roadmapService) ShowRoadmap(r *pb.ShowRoadmapRequest, stream grpc.ServerStreamingServer[pb.ShowRoadmapResponse]) error {
	ctx, cancel := timed(stream.Context(), roadmapTimeout, context.DeadlineExceeded)
	defer cancel()
	p, about, err := v.workplace(ctx, r.Floor, r.Version, r.Body, func(snap *mapstore.Snapshot, f *faults) error {
		if b := snap.Map.Bounds(); r.Area != nil && !wire.AreaIn(r.Area).Intersects(b) {
			f.add(root.at("area"), "is off the floor, wanted an area that meets its bounds, x %v to %v and y %v to %v",
				geom.Metres(b.Min.X), geom.Metres(b.Max.X), geom.Metres(b.Min.Y), geom.Metres(b.Max.Y))
		}
		return nil
	})
	if err != nil {
		return statusOf(ctx, err, about)
	}
	rm, d, err := func() (roadmap.Roadmap, roadmap.Description, error) {
		defer p.leave()
		rm, err := p.world.Roadmap(ctx, roadmaps.in(r.Roadmap), p.body)
		if err != nil {
			return nil, roadmap.Description{}, err
		}
		d, err := describeIn(ctx, rm, p.area(r.Area))
		return rm, d, err
	}()
	if err != nil {
		return statusOf(ctx, err, about)
	}
	size := d.Size()
	if w, ok := rm.(roadmap.Windowed); ok {
		size = w.Size()
	}
	header := &pb.RoadmapHeader{
		Stamp: stampOut(p.snap.Info), Body: bodyOut(p.body), Roadmap: r.Roadmap,
		NodeCount: size.Nodes, EdgeCount: size.Edges, CellCount: size.Cells, MemoryBytes: size.Bytes,
		Notes: notesOut(d.Notes), NodeLimit: roadmap.MaxWindow,
	}
	if d = clip(d, p.area(r.Area)); len(d.Nodes) > roadmap.MaxWindow {
		return statusOf(ctx, fmt.Errorf("%w: more than %d nodes in this area", roadmap.ErrTooLarge, roadmap.MaxWindow), about)
	}
	send := func(m *pb.ShowRoadmapResponse) error {
		return patiently(stream.Context(), sendPatience, func() error { return stream.Send(m) })
	}
	if err := send(&pb.ShowRoadmapResponse{Piece: &pb.ShowRoadmapResponse_Header{Header: header}}); err != nil {
		return statusOf(stream.Context(), err, about)
	}
	if err := sendDescription(&d, p.body.SensingUm, send); err != nil {
		return statusOf(stream.Context(), err, about)
	}
	end := &pb.RoadmapEnd{NodeCount: int64(len(d.Nodes)), EdgeCount: int64(len(d.Edges)), CellCount: int64(len(d.Cells))}
	return statusOf(stream.Context(), send(&pb.ShowRoadmapResponse{Piece: &pb.ShowRoadmapResponse_End{End: end}}), about)
}

// describeIn is the roadmap as data, in an area where it can be had in parts.
func describeIn(ctx context.Context, rm roadmap.Roadmap, area geom.Rect) (roadmap.Description, error) {
	if w, ok := rm.(roadmap.Windowed); ok {
		return w.DescribeIn(ctx, area)
	}
	if p, ok := rm.(roadmap.Preparing); ok {
		if err := p.Prepare(ctx); err != nil {
			return roadmap.Description{}, err
		}
	}
	return rm.Describe(), ctx.Err()
}

// clip leaves what meets the area: nodes in it, edges and cells whose bounds meet it, and
// the nodes of those edges.
func clip(d roadmap.Description, area geom.Rect) roadmap.Description {
	meets := func(pts []geom.Point) bool {
		b := geom.EmptyRect()
		for _, p := range pts {
			b = b.Union(geom.Rect{Min: p, Max: p})
		}
		return b.Intersects(area)
	}
	out := roadmap.Description{Bytes: d.Bytes, Notes: d.Notes}
	keep := make([]bool, len(d.Nodes))
	for i := range d.Nodes {
		keep[i] = area.Contains(d.Nodes[i].At)
	}
	for i := range d.Edges {
		if e := &d.Edges[i]; meets(e.Points) {
			keep[e.A], keep[e.B] = true, true
		}
	}
	id := make([]int32, len(d.Nodes))
	for i := range d.Nodes {
		if id[i] = int32(len(out.Nodes)); keep[i] {
			out.Nodes = append(out.Nodes, d.Nodes[i])
		}
	}
	for _, e := range d.Edges {
		if meets(e.Points) {
			e.A, e.B = id[e.A], id[e.B]
			out.Edges = append(out.Edges, e)
		}
	}
	for _, c := range d.Cells {
		if meets(c.Ring) {
			out.Cells = append(out.Cells, c)
		}
	}
	return out
}

// sendDescription sends nodes, then edges, then cells.
func sendDescription(d *roadmap.Description, sensingUm int64, send func(*pb.ShowRoadmapResponse) error) error {
	part, points := &pb.RoadmapPart{}, 0
	flush := func() error {
		if points == 0 {
			return nil
		}
		err := send(&pb.ShowRoadmapResponse{Piece: &pb.ShowRoadmapResponse_Part{Part: part}})
		part, points = &pb.RoadmapPart{}, 0
		return err
	}
	took := func(n int) error {
		if points += n; points < partSize {
			return nil
		}
		return flush()
	}
	for _, n := range d.Nodes {
		part.Nodes = append(part.Nodes, &pb.RoadmapNode{At: wire.PointOut(n.At), ClearanceM: wire.Metres(n.ClearanceUm)})
		if err := took(1); err != nil {
			return err
		}
	}
	for i := range d.Edges {
		e := &d.Edges[i]
		part.Edges = append(part.Edges, &pb.RoadmapEdge{
			FromNode: e.A, ToNode: e.B, Points: pointsOut(e.Points), LengthM: geom.Metres(e.LengthUm),
			SmallestClearanceM: wire.Metres(e.ClearanceUm), LargestClearanceM: wire.Metres(e.WidestUm),
			BeyondSensing: sensingUm > 0 && e.WidestUm > sensingUm,
		})
		if err := took(len(e.Points)); err != nil {
			return err
		}
	}
	for _, c := range d.Cells {
		part.Cells = append(part.Cells, &pb.RoadmapCell{Ring: &pb.Ring{Points: pointsOut(c.Ring)}, SmallestClearanceM: wire.Metres(c.ClearanceUm)})
		if err := took(len(c.Ring)); err != nil {
			return err
		}
	}
	return flush()
}

func pointsOut(pts []geom.Point) []*pb.Point {
	out := make([]*pb.Point, len(pts))
	for i, p := range pts {
		out[i] = wire.PointOut(p)
	}
	return out
}

func notesOut(notes []roadmap.Note) []*pb.RoadmapNote {
	var out []*pb.RoadmapNote
	for _, n := range notes {
		out = append(out, &pb.RoadmapNote{Name: n.Name, Value: n.Value, Unit: n.Unit})
	}
	return out
}

func (v roadmapService) ShowGrownSolids(r *pb.ShowGrownSolidsRequest, stream grpc.ServerStreamingServer[pb.ShowGrownSolidsResponse]) error {
	ctx, cancel := timed(stream.Context(), roadmapTimeout, context.DeadlineExceeded)
	defer cancel()
	p, about, err := v.workplace(ctx, r.Floor, r.Version, r.Body, nil)
	if err != nil {
		return statusOf(ctx, err, about)
	}
	o, err := func() (*grown.Outline, error) {
		defer p.leave()
		return grown.Of(ctx, p.snap.Map, roadmap.Need{ClearanceUm: p.body.Required(), Zones: true, ZoneUm: p.body.RadiusUm})
	}()
	if err != nil {
		return statusOf(ctx, err, about)
	}
	send := func(m *pb.ShowGrownSolidsResponse) error {
		return patiently(stream.Context(), sendPatience, func() error { return stream.Send(m) })
	}
	for i := range o.Loops {
		l := &o.Loops[i]
		if len(l.Pieces) > outlinePieces {
			return statusOf(ctx, fmt.Errorf("%w: an outline of %d pieces", roadmap.ErrTooLarge, len(l.Pieces)), about)
		}
		out := &pb.GrownOutline{AreaM2: l.AreaUm2 / 1e12, PerimeterM: geom.Metres(l.PerimeterUm)}
		for _, c := range l.Pieces {
			q := &pb.GrownPiece{From: wire.PointOut(c.From), Zone: c.Zone}
			if c.RadiusUm > 0 {
				q.Center, q.RadiusM = wire.PointOut(c.Center), geom.Metres(c.RadiusUm)
			}
			out.Pieces = append(out.Pieces, q)
		}
		if err := send(&pb.ShowGrownSolidsResponse{Piece: &pb.ShowGrownSolidsResponse_Outline{Outline: out}}); err != nil {
			return statusOf(stream.Context(), err, about)
		}
	}
	return statusOf(stream.Context(), send(&pb.ShowGrownSolidsResponse{Piece: &pb.ShowGrownSolidsResponse_Summary{Summary: &pb.GrownSummary{
		Stamp: stampOut(p.snap.Info), Body: bodyOut(p.body), GrownByM: wire.Metres(p.body.Required()),
		AreaM2: o.AreaUm2 / 1e12, PerimeterM: geom.Metres(o.PerimeterUm), FreeAreaM2: o.FreeUm2 / 1e12, OutlineCount: int64(len(o.Loops)),
	}}}), about)
}

// shownRoadmaps are the roadmaps that CompareRoadmaps compares when none is named.
var shownRoadmaps = []pb.Roadmap{
	pb.Roadmap_ROADMAP_GRID4, pb.Roadmap_ROADMAP_GRID8, pb.Roadmap_ROADMAP_QUADTREE,
	pb.Roadmap_ROADMAP_VISIBILITY_GRAPH, pb.Roadmap_ROADMAP_MEADOW_MAP,
	pb.Roadmap_ROADMAP_VORONOI_GRAPH, pb.Roadmap_ROADMAP_EXACT_CELLS,
}

// compareBudget is how long a comparison may take.
func compareBudget(r *pb.CompareRoadmapsRequest) time.Duration {
	if r.TimeBudgetS > 0 {
		return seconds(r.TimeBudgetS)
	}
	return defaultManyBudget
}

func (v roadmapService) CompareRoadmaps(ctx context.Context, r *pb.CompareRoadmapsRequest) (*pb.CompareRoadmapsResponse, error) {
	var c comparison
	p, about, err := v.workplace(ctx, r.Floor, r.Version, r.Body, func(snap *mapstore.Snapshot, f *faults) (err error) {
		if c.start, err = placeOn(r.Start, snap, root.at("start"), f); err == nil {
			c.goal, err = placeOn(r.Goal, snap, root.at("goal"), f)
		}
		return err
	})
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	defer p.leave()
	ctx, cancel := timed(ctx, compareBudget(r), planner.ErrTimeBudget)
	defer cancel()
	c.roadmapService, c.workplace = v, p
	out, err := c.run(ctx, r.Roadmaps)
	return out, statusOf(ctx, err, about)
}

// comparison is one CompareRoadmaps call being answered.
type comparison struct {
	roadmapService
	workplace
	start, goal planner.Pose
	optimumUm   float64
	trial       *clearance.Field // of the version with the trial solid; nil without
	change      floor.Change
}

func (c *comparison) ask(k planner.Roadmap) asked {
	q := asked{Request: planner.Request{Body: c.body, Start: c.start, Goal: c.goal}}
	q.Options = planner.Options{Preference: planner.Shortest, Roadmap: k, KeepRoadmapPath: k != planner.ConvexCells, TightWeight: defaultTightWeight, TightBelowUm: c.body.PreferredUm}
	q.options = optionsOut(q.Options, 0)
	return q
}

func (c *comparison) run(ctx context.Context, kinds []pb.Roadmap) (*pb.CompareRoadmapsResponse, error) {
	best, err := c.world.Plan(ctx, c.ask(planner.ConvexCells).Request)
	if err != nil {
		return nil, err
	}
	out := &pb.CompareRoadmapsResponse{Stamp: stampOut(c.snap.Info), Body: bodyOut(c.body)}
	if r := best.Route; r != nil {
		c.optimumUm = r.LengthUm
		if err := c.tryOut(ctx, r); err != nil && ctx.Err() == nil {
			return nil, err
		}
	}
	out.OptimumM = geom.Metres(c.optimumUm)
	if len(kinds) == 0 {
		kinds = shownRoadmaps
	}
	for _, k := range kinds {
		row, err := c.row(ctx, k)
		if err != nil {
			return nil, err
		}
		out.Rows = append(out.Rows, row)
	}
	return out, nil
}

// tryOut makes the field of the version with the trial solid, in the middle of the shortest way.
func (c *comparison) tryOut(ctx context.Context, r *planner.Route) error {
	at := middle(r)
	b := c.snap.Map.Bounds()
	const half = trialSolidUm / 2
	lo := geom.Point{X: max(b.Min.X, at.X-half), Y: max(b.Min.Y, at.Y-half)}
	hi := geom.Point{X: min(b.Max.X, at.X+half), Y: min(b.Max.Y, at.Y+half)}
	shape := floor.NewPolygon([][]geom.Point{{lo, {X: hi.X, Y: lo.Y}, hi, {X: lo.X, Y: hi.Y}}}, 0)
	m, err := c.snap.Map.Apply([]floor.Edit{{Kind: floor.PutFeature, Feature: &floor.Feature{Name: trialSolid, Kind: floor.Solid, Shape: shape}}})
	if err != nil {
		return nil // a floor that is full, say: nothing is measured then
	}
	c.change = floor.Diff(c.snap.Map, m)
	c.trial, err = c.world.Field().Advance(ctx, m, c.change)
	return err
}

// middle is the place half way along a route, in whole micrometres.
func middle(r *planner.Route) geom.Point {
	for _, l := range r.Legs {
		for k := 1; k < len(l.Points); k++ {
			if a, b := l.Points[k-1], l.Points[k]; b.S >= r.LengthUm/2 && b.S > a.S {
				t := (r.LengthUm/2 - a.S) / (b.S - a.S)
				return geom.Point{X: math.Round(a.At.X + (b.At.X-a.At.X)*t), Y: math.Round(a.At.Y + (b.At.Y-a.At.Y)*t)}
			}
		}
	}
	return r.Start.At
}

// row makes a roadmap from scratch, brings it up to date with the trial solid, searches it
// and plans over it.
func (c *comparison) row(ctx context.Context, k pb.Roadmap) (*pb.RoadmapComparison, error) {
	row := &pb.RoadmapComparison{Roadmap: k}
	q := c.ask(roadmaps.in(k))
	fail := func(err error) (*pb.RoadmapComparison, error) {
		switch {
		case errors.Is(err, roadmap.ErrTooLarge):
			row.Outcome = &pb.RoadmapComparison_Unfit{Unfit: err.Error()}
		case ctx.Err() != nil && errors.Is(context.Cause(ctx), planner.ErrTimeBudget):
			row.Outcome = &pb.RoadmapComparison_Refusal{Refusal: refusalOut(&planner.Refusal{Reason: planner.OutOfTime}, retryOutOfTime.Seconds())}
		default:
			return nil, err
		}
		return row, nil
	}
	t0 := time.Now()
	rm, err := c.world.BuildRoadmap(ctx, q.Options.Roadmap, c.body)
	row.BuildS = time.Since(t0).Seconds()
	if err != nil {
		return fail(err)
	}
	if c.trial != nil {
		t0 = time.Now()
		_, err := rm.Advance(ctx, c.trial, c.change)
		if row.UpdateS = time.Since(t0).Seconds(); err != nil {
			return fail(err)
		}
	}
	t0 = time.Now()
	_, _, err = rm.Search(ctx, c.start.At, c.goal.At)
	if row.SearchS = time.Since(t0).Seconds(); err != nil {
		return fail(err)
	}
	a, err := c.world.PlanOver(ctx, rm, q.Request)
	if err != nil {
		return fail(err)
	}
	d := roadmap.Description{}
	size := roadmap.Size{}
	if w, ok := rm.(roadmap.Windowed); ok {
		size = w.Size()
		d, _ = w.DescribeIn(ctx, geom.Rect{Min: c.start.At, Max: c.start.At})
	} else {
		if d, err = describeIn(ctx, rm, geom.Rect{}); err != nil {
			return fail(err)
		}
		size = d.Size()
	}
	row.NodeCount, row.EdgeCount, row.CellCount, row.MemoryBytes = size.Nodes, size.Edges, size.Cells, size.Bytes
	row.Notes = notesOut(d.Notes)
	if a.Route == nil {
		row.Outcome = &pb.RoadmapComparison_Refusal{Refusal: refusalOut(a.Refusal, retryOutOfTime.Seconds())}
		return row, nil
	}
	if c.optimumUm > 0 {
		row.LengthRatio = a.Route.LengthUm / c.optimumUm
	}
	profile := c.world.Profile(a.Route)
	row.MeanClearanceM = geom.Metres(profile.MeanUm)
	row.InnerSmallestClearanceM, row.EndReachM = wire.Metres(profile.InnerSmallestUm), geom.Metres(profile.EndReachUm)
	row.Outcome = &pb.RoadmapComparison_Route{Route: routeService{s: c.s}.route(c.snap, q, a.Route)}
	return row, nil
}
