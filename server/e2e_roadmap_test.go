package server

import (
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strings"
	"testing"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/roadmap/visibility"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/testdata"
)

func (r *running) roadmaps() pb.RoadmapServiceClient { return pb.NewRoadmapServiceClient(r.conn) }

// shown is a roadmap read whole.
type shown struct {
	header *pb.RoadmapHeader
	nodes  []*pb.RoadmapNode
	edges  []*pb.RoadmapEdge
	cells  []*pb.RoadmapCell
}

// show reads a roadmap and checks the stream's shape: header, parts whose edges name
// nodes sent before them, an end mark with the counts.
func (r *running) show(q *pb.ShowRoadmapRequest) (shown, error) {
	r.t.Helper()
	stream, err := r.roadmaps().ShowRoadmap(r.ctx(), q)
	if err != nil {
		r.t.Fatal(err)
	}
	var s shown
	for {
		m, err := stream.Recv()
		if err != nil {
			return s, err
		}
		if (m.GetHeader() != nil) != (s.header == nil) {
			r.t.Fatalf("got %v, wanted one header, first", m)
		}
		if m.GetHeader() != nil {
			s.header = m.GetHeader()
		}
		s.nodes = append(s.nodes, m.GetPart().GetNodes()...)
		s.edges = append(s.edges, m.GetPart().GetEdges()...)
		s.cells = append(s.cells, m.GetPart().GetCells()...)
		for _, e := range m.GetPart().GetEdges() {
			if n := int32(len(s.nodes)); e.FromNode < 0 || e.FromNode >= n || e.ToNode < 0 || e.ToNode >= n {
				r.t.Fatalf("edge %v names a node that was not sent before it", e)
			}
		}
		if size := proto.Size(m); size > 1<<20 {
			r.t.Errorf("a message of %d bytes, wanted at most 1 MiB", size)
		}
		if end := m.GetEnd(); end != nil {
			if _, err := stream.Recv(); !errors.Is(err, io.EOF) {
				r.t.Errorf("after the end mark: %v", err)
			}
			if end.NodeCount != int64(len(s.nodes)) || end.EdgeCount != int64(len(s.edges)) || end.CellCount != int64(len(s.cells)) {
				r.t.Errorf("end mark %v, %d nodes, %d edges, %d cells came", end, len(s.nodes), len(s.edges), len(s.cells))
			}
			return s, nil
		}
	}
}

func (r *running) mustShow(q *pb.ShowRoadmapRequest) shown {
	r.t.Helper()
	s, err := r.show(q)
	if err != nil {
		r.t.Fatal(err)
	}
	return s
}

func dist(a, b *pb.Point) float64 { return math.Hypot(a.XM-b.XM, a.YM-b.YM) }

// Every kind is shown whole and in part: what is described is what the header counts,
// and every edge keeps the body's clearance, on the version asked for.
func TestShowRoadmap(t *testing.T) {
	r := start(t)
	r.floor(&pb.FloorSettings{Columns: 100, Rows: 50, ResolutionM: proto.Float64(0.1), InitialOccupancy: pb.Occupancy_OCCUPANCY_FREE},
		put(solidPolygon("wall", polygon(4.9, 0, 5.1, 0, 5.1, 3, 4.9, 3))))
	head := r.head()
	r.push(put(solidPolygon("later", polygon(1, 4, 2, 4, 2, 4.5, 1, 4.5))))
	body := &pb.Body{RadiusM: 0.3, MarginM: 0.1, SensingRangeM: 0.7}
	for _, k := range shownRoadmaps {
		t.Run(k.String(), func(t *testing.T) {
			r := *r
			r.t = t
			q := &pb.ShowRoadmapRequest{Floor: "hall", Version: pinned(head.Version), Body: body, Roadmap: k}
			all := r.mustShow(q)
			if h := all.header; !proto.Equal(h.Stamp, head) || h.Roadmap != k || h.Body.GetPreferredClearanceM() != 0.9 || h.NodeLimit != 200_000 || h.MemoryBytes <= 0 {
				t.Errorf("header %v", h)
			}
			if h := all.header; h.NodeCount != int64(len(all.nodes)) || h.EdgeCount != int64(len(all.edges)) || h.CellCount != int64(len(all.cells)) || len(all.nodes) == 0 || len(all.edges) == 0 {
				t.Errorf("header %v, %d nodes, %d edges, %d cells came", h, len(all.nodes), len(all.edges), len(all.cells))
			}
			for _, n := range all.header.Notes {
				if n.Name == "" || !slices.Contains([]string{"m", "m2", "1"}, n.Unit) {
					t.Errorf("note %v, wanted a name and one of the contract's units", n)
				}
			}
			for i, e := range all.edges {
				a, b := all.nodes[e.FromNode], all.nodes[e.ToNode]
				n := len(e.Points)
				// Nodes of the visibility graph are arcs: their edges end somewhere on these.
				if k != pb.Roadmap_ROADMAP_VISIBILITY_GRAPH && (n < 2 || dist(e.Points[0], a.At) > 1e-6 || dist(e.Points[n-1], b.At) > 1e-6) {
					t.Fatalf("edge %d %v does not run from %v to %v", i, e, a, b)
				}
				if e.SmallestClearanceM < 0.4 || e.LengthM < 0 || e.LargestClearanceM > 0 && e.LargestClearanceM < e.SmallestClearanceM {
					t.Fatalf("edge %v, wanted a clearance of 0.4 m", e)
				}
				if want := e.LargestClearanceM > 0.7; e.BeyondSensing != want {
					t.Fatalf("edge %v with a sensing range of 0.7 m", e)
				}
			}
			if k == pb.Roadmap_ROADMAP_VORONOI_GRAPH && !slices.ContainsFunc(all.edges, func(e *pb.RoadmapEdge) bool { return e.BeyondSensing }) {
				t.Error("no edge is beyond the sensing range, the hall's middle is 2.5 m from its walls")
			}
			for _, c := range all.cells {
				if c.SmallestClearanceM < 0.4 || len(c.Ring.GetPoints()) < 3 {
					t.Fatalf("cell %v", c)
				}
			}
			// What meets the east half is some of all, and the header still counts all.
			q.Area = &pb.Area{MinXM: 5, MinYM: 0, MaxXM: 10, MaxYM: 5}
			part := r.mustShow(q)
			if !proto.Equal(part.header, all.header) {
				t.Errorf("header %v of a part, %v of all", part.header, all.header)
			}
			if len(part.edges) >= len(all.edges) && len(all.edges) > 2 || len(part.edges) == 0 {
				t.Errorf("%d of %d edges in half of the floor", len(part.edges), len(all.edges))
			}
			want := 0
			for _, n := range all.nodes {
				if n.At.XM >= 5 {
					want++
				}
			}
			got := 0
			for _, n := range part.nodes {
				if n.At.XM >= 5 {
					got++
				}
			}
			if got != want {
				t.Errorf("%d nodes in the area, %d of all are", got, want)
			}
		})
	}
}

// auction makes the demonstration floor.
func (r *running) auction() *pb.Body {
	r.t.Helper()
	hall, err := testdata.Hall()
	if err != nil {
		r.t.Fatal(err)
	}
	r.floor(hall.Settings, hall.Edits...)
	body, _ := hall.Body("tug")
	return body
}

// floor makes a floor with these edits as its second version.
func (r *running) floor(s *pb.FloorSettings, edits ...*pb.Edit) {
	r.t.Helper()
	if _, err := r.floors.CreateFloor(r.ctx(), &pb.CreateFloorRequest{Floor: "hall", Author: "survey", Settings: s}); err != nil {
		r.t.Fatal(err)
	}
	r.push(edits...)
}

// tooLarge: what is too large is refused with the limit, and a part of it is not.
func (r *running) tooLarge(body *pb.Body) {
	t := r.t
	q := &pb.ShowRoadmapRequest{Floor: "hall", Body: body}
	for _, k := range []pb.Roadmap{pb.Roadmap_ROADMAP_GRID4, pb.Roadmap_ROADMAP_GRID8} {
		q.Roadmap, q.Area = k, nil
		s, err := r.show(q)
		wantStatus(t, err, codes.FailedPrecondition, "ROADMAP_TOO_LARGE")
		if s.header != nil || !strings.Contains(err.Error(), "200000 nodes") || !strings.Contains(err.Error(), "smaller area") {
			t.Errorf("%v, wanted the limit and what to do, and nothing sent", err)
		}
		q.Area = &pb.Area{MinXM: 64, MinYM: 45, MaxXM: 67, MaxYM: 47}
		// 60 by 40 cells and those that touch the area from outside.
		if s := r.mustShow(q); len(s.nodes) < 200 || len(s.nodes) > 61*41 || s.header.NodeCount < 1_000_000 {
			t.Errorf("%s: %d nodes in the area, %d in all", k, len(s.nodes), s.header.NodeCount)
		}
	}
	for _, k := range []pb.Roadmap{pb.Roadmap_ROADMAP_VISIBILITY_GRAPH, pb.Roadmap_ROADMAP_MEADOW_MAP, pb.Roadmap_ROADMAP_EXACT_CELLS} {
		q.Roadmap, q.Area = k, nil
		if s := r.mustShow(q); len(s.nodes) == 0 || int64(len(s.edges)) != s.header.EdgeCount {
			t.Errorf("%s: %d nodes, %d edges of %v", k, len(s.nodes), len(s.edges), s.header)
		}
	}
}

// paintRect occupies a rectangle of cells.
func paintRect(x, y, w, h int32) *pb.Edit {
	return &pb.Edit{Action: &pb.Edit_PaintOccupancy{PaintOccupancy: &pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Rect{Rect: &pb.PaintRect{
		Rect: &pb.CellRect{Column: x, Row: y, Columns: w, Rows: h}, Occupancy: pb.Occupancy_OCCUPANCY_OCCUPIED}}}}}
}

func solidWall(name string, width float64, xy ...float64) *pb.Edit {
	line := &pb.Polyline{WidthM: width, Points: ring(xy...).Points}
	return put(&pb.Feature{Name: name, Kind: &pb.Feature_Solid{Solid: &pb.Solid{Shape: &pb.Solid_Polyline{Polyline: line}}}})
}

// floors for comparisons: 24 m by 16 m, with a way from a low left to a high right place.
func racks() (edits []*pb.Edit) { // in the raster
	for row := range int32(5) {
		for col := range int32(2) {
			edits = append(edits, paintRect(60+col*200, 50+row*50, 140, 18))
		}
	}
	return append(edits, put(station("a", 1.5, 1.5)), put(station("b", 22, 14)))
}

func office() (edits []*pb.Edit) { // walls with doors of 1.2 m clear
	for i := range 3 {
		x := 6.0 + 6*float64(i)
		door := 3 + 4*float64(i%2) + 2*float64(i)
		edits = append(edits,
			solidWall(fmt.Sprint("wall/south-", i), 0.2, x, 0, x, door-0.7),
			solidWall(fmt.Sprint("wall/north-", i), 0.2, x, door+0.7, x, 16))
	}
	return append(edits, solidWall("cross", 0.2, 12.8, 12, 17.2, 12), put(station("a", 1.5, 1.5)), put(station("b", 22, 14)))
}

func turnedRacks() (edits []*pb.Edit) {
	sin, cos := math.Sincos(0.3)
	for row := range 4 {
		for col := range 2 {
			var xy []float64
			for _, c := range [][2]float64{{-2.7, -0.4}, {2.7, -0.4}, {2.7, 0.4}, {-2.7, 0.4}} {
				u, v := c[0]+3.6*(2*float64(col)-1), c[1]+2.6*(float64(row)-1.5)
				xy = append(xy, 12+u*cos-v*sin, 8+u*sin+v*cos)
			}
			edits = append(edits, put(solidPolygon(fmt.Sprintf("rack-%d-%d", row, col), polygon(xy...))))
		}
	}
	return append(edits, put(station("a", 1.5, 1.5)), put(station("b", 22, 14)))
}

// turning is the sum of a route's turns, in radians.
func turning(route *pb.Route) float64 {
	var at []*pb.RoutePoint
	for _, l := range route.Legs {
		for _, p := range l.Points {
			if n := len(at); n == 0 || at[n-1].XM != p.XM || at[n-1].YM != p.YM {
				at = append(at, p)
			}
		}
	}
	sum := 0.0
	for i := 2; i < len(at); i++ {
		a := math.Atan2(at[i-1].YM-at[i-2].YM, at[i-1].XM-at[i-2].XM)
		b := math.Atan2(at[i].YM-at[i-1].YM, at[i].XM-at[i-1].XM)
		sum += math.Abs(math.Remainder(b-a, 2*math.Pi))
	}
	return sum
}

// The laws of a comparison, on the demonstration floor and three others. With L(x) the
// length of the shortest way at clearance x, L grows by a way's turning for each metre of
// x (its arcs do, its tangents turn with them), so that where a roadmap is sure of
// L(r + e) its route is at most e times turning longer than any other's. e is the outline
// error that the visibility graph notes and the error of its arcs; a radian is added,
// since the way turns more at r + e than at r (common practice, no source).
func TestCompareRoadmaps(t *testing.T) {
	settings := &pb.FloorSettings{Columns: 480, Rows: 320, InitialOccupancy: pb.Occupancy_OCCUPANCY_FREE}
	small := &pb.Body{RadiusM: 0.4, MarginM: 0.05}
	for name, c := range map[string]struct {
		edits    []*pb.Edit
		from, to string
		vector   bool
	}{
		"auction hall": {nil, "dock-3", "cold-3", false},
		"rack hall":    {racks(), "a", "b", false},
		"office":       {office(), "a", "b", true},
		"turned racks": {turnedRacks(), "a", "b", true},
	} {
		t.Run(name, func(t *testing.T) {
			r := start(t)
			body := small
			if c.edits == nil {
				body = r.auction()
			} else {
				r.floor(settings, c.edits...)
			}
			q := &pb.CompareRoadmapsRequest{Floor: "hall", Body: body, Start: atStation(c.from), Goal: atStation(c.to)}
			wanted := shownRoadmaps
			if c.edits == nil {
				r.tooLarge(body)
				if os.Getenv("WIDEBERTH_SLOW") == "" { // the others take seconds here, with -race half a minute
					wanted = []pb.Roadmap{pb.Roadmap_ROADMAP_VISIBILITY_GRAPH, pb.Roadmap_ROADMAP_MEADOW_MAP, pb.Roadmap_ROADMAP_EXACT_CELLS}
					q.Roadmaps = wanted
				}
			}
			got, err := r.roadmaps().CompareRoadmaps(r.ctx(), q)
			if err != nil {
				t.Fatal(err)
			}
			if !proto.Equal(got.Stamp, r.head()) || len(got.Rows) != len(wanted) || got.OptimumM <= 0 {
				t.Fatalf("answer %v", got)
			}
			rows := map[pb.Roadmap]*pb.RoadmapComparison{}
			for i, row := range got.Rows {
				rows[row.Roadmap] = row
				route := row.GetRoute()
				if row.Roadmap != wanted[i] || route == nil {
					t.Fatalf("row %d is %s without a route: %v", i, row.Roadmap, row)
				}
				t.Logf("%s: %.3f m, ratio %.5f, inner smallest %.3f m, mean %.3f m, %d nodes, %d edges, %d cells",
					row.Roadmap, route.LengthM, row.LengthRatio, row.InnerSmallestClearanceM, row.MeanClearanceM, row.NodeCount, row.EdgeCount, row.CellCount)
				if !proto.Equal(route.CheckedAgainst, got.Stamp) || route.SmallestClearanceM < body.RadiusM+body.MarginM {
					t.Errorf("%s: checked against %v, smallest clearance %v m", row.Roadmap, route.CheckedAgainst, route.SmallestClearanceM)
				}
				if row.NodeCount <= 0 || row.EdgeCount <= 0 || row.MemoryBytes <= 0 || row.BuildS <= 0 || row.UpdateS <= 0 || row.SearchS <= 0 {
					t.Errorf("%s: row %v, wanted its size and times", row.Roadmap, row)
				}
				if row.MeanClearanceM < route.SmallestClearanceM || row.InnerSmallestClearanceM < route.SmallestClearanceM || math.Abs(row.LengthRatio*got.OptimumM-route.LengthM) > 1e-9*route.LengthM {
					t.Errorf("%s: row %v does not add up", row.Roadmap, row)
				}
				// The optimum is that at the clearance and DeltaUm, so at least L(r), at most
				// L(r + DeltaUm).
				if short := got.OptimumM - route.LengthM; short > (turning(route)+1)*geom.Metres(float64(anyangle.DeltaUm)) {
					t.Errorf("%s: %v m shorter than the optimum", row.Roadmap, short)
				}
			}
			seen := rows[pb.Roadmap_ROADMAP_VISIBILITY_GRAPH]
			e := geom.Metres(visibility.ArcErrorUm)
			for _, n := range seen.Notes {
				if n.Name == "outline error" {
					e += n.Value
				}
			}
			if c.vector {
				e = geom.Metres(visibility.ArcErrorUm)
			}
			slack := e * (turning(seen.GetRoute()) + 1)
			cell := 0.05
			roomy := rows[pb.Roadmap_ROADMAP_VORONOI_GRAPH]
			for _, row := range got.Rows {
				if more := seen.GetRoute().LengthM - row.GetRoute().LengthM; more > slack {
					t.Errorf("the visibility graph's way is %v m longer than that of %s, wanted at most %v m", more, row.Roadmap, slack)
				}
				if roomy != nil && row.InnerSmallestClearanceM > roomy.InnerSmallestClearanceM+cell {
					t.Errorf("%s has a smallest clearance of %v m, the Voronoi graph of %v m", row.Roadmap, row.InnerSmallestClearanceM, roomy.InnerSmallestClearanceM)
				}
			}
			// So does the clearest route, ends and all: they are the same for all.
			answer, err := r.routes.Plan(r.ctx(), &pb.PlanRequest{Floor: "hall", Body: body, Start: q.Start, Goal: q.Goal, Options: &pb.PlanOptions{Preference: pb.Preference_PREFERENCE_CLEAREST}})
			if err != nil || answer.GetRoute() == nil {
				t.Fatalf("clearest: %v, %v", answer, err)
			}
			for _, row := range got.Rows {
				if row.GetRoute().SmallestClearanceM > answer.GetRoute().SmallestClearanceM+cell {
					t.Errorf("%s has a smallest clearance of %v m, the clearest route of %v m", row.Roadmap, row.GetRoute().SmallestClearanceM, answer.GetRoute().SmallestClearanceM)
				}
			}
			if more := seen.GetRoute().LengthM - got.OptimumM; more > slack {
				t.Errorf("the visibility graph's way is %v m longer than the optimum, wanted at most %v m", more, slack)
			}
		})
	}
}

// Rows come in the request's order; what has no way or no roadmap says why.
func TestCompareRoadmapsSaysWhyNot(t *testing.T) {
	r := start(t)
	// Single cells, each with four corners: more than the visibility graph takes.
	dots := make([]byte, 250*250/4)
	for y := 20; y < 245; y += 3 {
		for x := 20; x < 245; x += 3 {
			i := y*250 + x
			dots[i/4] |= byte(pb.Occupancy_OCCUPANCY_OCCUPIED-1) << (2 * (i % 4))
		}
	}
	r.floor(&pb.FloorSettings{Columns: 250, Rows: 250, InitialOccupancy: pb.Occupancy_OCCUPANCY_FREE},
		paintCells(&pb.CellBlock{Rect: &pb.CellRect{Columns: 250, Rows: 250}, Encoding: pb.CellEncoding_CELL_ENCODING_TWO_BIT, Cells: dots}),
		put(station("a", 0.4, 0.4)), put(station("b", 12.4, 12.4)))
	q := &pb.CompareRoadmapsRequest{Floor: "hall", Body: &pb.Body{RadiusM: 0.02}, Start: atStation("a"), Goal: atStation("b"),
		Roadmaps: []pb.Roadmap{pb.Roadmap_ROADMAP_VISIBILITY_GRAPH, pb.Roadmap_ROADMAP_GRID8}}
	got, err := r.roadmaps().CompareRoadmaps(r.ctx(), q)
	if err != nil {
		t.Fatal(err)
	}
	if len(got.Rows) != 2 || !strings.Contains(got.Rows[0].GetUnfit(), "at most 20000") || got.Rows[1].GetRoute() == nil {
		t.Errorf("rows %v, wanted an unfit one with the limit, then a route", got.Rows)
	}
	// A plan over it is refused as showing it is.
	_, err = r.routes.Plan(r.ctx(), &pb.PlanRequest{Floor: "hall", Body: q.Body, Start: q.Start, Goal: q.Goal,
		Options: &pb.PlanOptions{Preference: pb.Preference_PREFERENCE_SHORTEST, Roadmap: pb.Roadmap_ROADMAP_VISIBILITY_GRAPH}})
	wantStatus(t, err, codes.FailedPrecondition, "ROADMAP_TOO_LARGE")
	_, err = r.show(&pb.ShowRoadmapRequest{Floor: "hall", Body: q.Body, Roadmap: pb.Roadmap_ROADMAP_VISIBILITY_GRAPH})
	wantStatus(t, err, codes.FailedPrecondition, "ROADMAP_TOO_LARGE")
	q.Body.RadiusM = 0.5
	q.Start = atPose(6, 6)
	if got, err = r.roadmaps().CompareRoadmaps(r.ctx(), q); err != nil {
		t.Fatal(err)
	}
	for _, row := range got.Rows {
		if f := row.GetRefusal(); f.GetReason() != pb.RefusalReason_REFUSAL_REASON_START_BLOCKED || f.Explanation == "" || row.LengthRatio != 0 || got.OptimumM != 0 {
			t.Errorf("row %v from among the dots, wanted a refusal", row)
		}
	}
	q.TimeBudgetS = 0.001
	got, err = r.roadmaps().CompareRoadmaps(r.ctx(), q)
	if err != nil && status.Code(err) != codes.DeadlineExceeded {
		t.Errorf("out of time: %v", err)
	}
	for _, row := range got.GetRows() {
		if row.GetRoute() != nil || row.GetRefusal() == nil {
			t.Errorf("out of time: row %v", row)
		}
	}
}

// grown reads the grown solids.
func (r *running) grown(body *pb.Body) (out []*pb.GrownOutline, sum *pb.GrownSummary) {
	r.t.Helper()
	stream, err := r.roadmaps().ShowGrownSolids(r.ctx(), &pb.ShowGrownSolidsRequest{Floor: "hall", Body: body})
	if err != nil {
		r.t.Fatal(err)
	}
	for {
		m, err := stream.Recv()
		if err != nil {
			r.t.Fatal(err)
		}
		if sum = m.GetSummary(); sum != nil {
			if _, err := stream.Recv(); !errors.Is(err, io.EOF) || sum.OutlineCount != int64(len(out)) {
				r.t.Errorf("%v after the end mark %v, %d outlines came", err, sum, len(out))
			}
			return out, sum
		}
		out = append(out, m.GetOutline())
	}
}

// A square of side a grown by r has area a² + 4ar + πr² and perimeter 4a + 2πr (Steiner 1840).
// A closed border is grown inwards, into a rectangle with square corners.
func TestShowGrownSolids(t *testing.T) {
	const a, grow, w, h = 1.5, 0.45, 10.0, 5.0
	area, round := a*a+4*a*grow+math.Pi*grow*grow, 4*a+2*math.Pi*grow
	for _, open := range []bool{true, false} {
		r := start(t)
		r.floor(&pb.FloorSettings{Columns: 200, Rows: 100, InitialOccupancy: pb.Occupancy_OCCUPANCY_FREE, OpenBorder: open},
			put(solidPolygon("block", polygon(4, 1.5, 4+a, 1.5, 4+a, 1.5+a, 4, 1.5+a))))
		out, sum := r.grown(&pb.Body{RadiusM: 0.4, MarginM: 0.05})
		wantArea, wantRound, wantFree, wantOutlines := area, round, 0.0, 1
		if !open {
			wantFree = (w-2*grow)*(h-2*grow) - area
			wantArea, wantRound, wantOutlines = w*h-wantFree, round+2*(w-2*grow)+2*(h-2*grow), 2
		}
		// Rounding of areas of 1e13 µm² alone.
		near := func(got, want float64) bool { return math.Abs(got-want) <= 1e-9*max(1, want) }
		if !near(sum.AreaM2, wantArea) || !near(sum.PerimeterM, wantRound) || !near(sum.FreeAreaM2, wantFree) || sum.GrownByM != grow || len(out) != wantOutlines {
			t.Errorf("open border %v: %v, %d outlines, wanted area %v, perimeter %v, free %v", open, sum, len(out), wantArea, wantRound, wantFree)
		}
		arcs := 0
		for _, o := range out {
			for _, p := range o.Pieces {
				if p.RadiusM > 0 {
					arcs++
					if !near(p.RadiusM, grow) || math.Abs(dist(p.From, p.Center)-grow) > 1e-6 {
						t.Errorf("arc %v, wanted radius %v", p, grow)
					}
				}
			}
		}
		if arcs != 4 {
			t.Errorf("%d arcs, wanted one at each corner", arcs)
		}
	}
}

// Each bad request names its field and changes nothing.
func TestBadRoadmapRequests(t *testing.T) {
	r := start(t)
	before := r.hall()
	nan, inf := math.NaN(), math.Inf(1)
	show := func(edit func(*pb.ShowRoadmapRequest)) func() error {
		q := &pb.ShowRoadmapRequest{Floor: "hall", Body: &pb.Body{RadiusM: 0.3}, Roadmap: pb.Roadmap_ROADMAP_MEADOW_MAP}
		edit(q)
		return func() error { _, err := r.show(q); return err }
	}
	compare := func(edit func(*pb.CompareRoadmapsRequest)) func() error {
		q := &pb.CompareRoadmapsRequest{Floor: "hall", Body: &pb.Body{RadiusM: 0.3}, Start: atStation("dock"), Goal: atStation("bench")}
		edit(q)
		return func() error { _, err := r.roadmaps().CompareRoadmaps(r.ctx(), q); return err }
	}
	grown := func(edit func(*pb.ShowGrownSolidsRequest)) func() error {
		q := &pb.ShowGrownSolidsRequest{Floor: "hall", Body: &pb.Body{RadiusM: 0.3}}
		edit(q)
		return func() error {
			stream, err := r.roadmaps().ShowGrownSolids(r.ctx(), q)
			if err == nil {
				_, err = stream.Recv()
			}
			return err
		}
	}
	for name, c := range map[string]struct {
		call  func() error
		code  codes.Code
		why   string
		field string
	}{
		"no roadmap":           {show(func(q *pb.ShowRoadmapRequest) { q.Roadmap = 0 }), codes.InvalidArgument, "INVALID_FIELD", "roadmap"},
		"not one to show":      {show(func(q *pb.ShowRoadmapRequest) { q.Roadmap = pb.Roadmap_ROADMAP_CONVEX_CELLS }), codes.InvalidArgument, "INVALID_FIELD", "roadmap"},
		"unknown roadmap":      {show(func(q *pb.ShowRoadmapRequest) { q.Roadmap = 99 }), codes.InvalidArgument, "INVALID_FIELD", "roadmap"},
		"no body":              {show(func(q *pb.ShowRoadmapRequest) { q.Body = nil }), codes.InvalidArgument, "INVALID_FIELD", "body"},
		"body above the cap":   {show(func(q *pb.ShowRoadmapRequest) { q.Body.RadiusM = 5.1 }), codes.InvalidArgument, "INVALID_FIELD", "body.radius_m"},
		"radius no number":     {show(func(q *pb.ShowRoadmapRequest) { q.Body.RadiusM = nan }), codes.InvalidArgument, "INVALID_FIELD", "body.radius_m"},
		"area no number":       {show(func(q *pb.ShowRoadmapRequest) { q.Area = &pb.Area{MinXM: nan, MaxXM: 1, MaxYM: 1} }), codes.InvalidArgument, "INVALID_FIELD", "area.min_x_m"},
		"area without end":     {show(func(q *pb.ShowRoadmapRequest) { q.Area = &pb.Area{MaxXM: inf, MaxYM: 1} }), codes.InvalidArgument, "INVALID_FIELD", "area.max_x_m"},
		"area inside out":      {show(func(q *pb.ShowRoadmapRequest) { q.Area = &pb.Area{MinXM: 2, MaxXM: 1, MaxYM: 1} }), codes.InvalidArgument, "INVALID_FIELD", "area.max_x_m"},
		"area off the floor":   {show(func(q *pb.ShowRoadmapRequest) { q.Area = &pb.Area{MinXM: 20, MaxXM: 30, MaxYM: 1} }), codes.InvalidArgument, "INVALID_FIELD", "area"},
		"no such floor":        {show(func(q *pb.ShowRoadmapRequest) { q.Floor = "yard" }), codes.NotFound, "FLOOR_NOT_FOUND", ""},
		"no such version":      {show(func(q *pb.ShowRoadmapRequest) { q.Version = pinned(9) }), codes.NotFound, "VERSION_NOT_FOUND", ""},
		"compare twice":        {compare(func(q *pb.CompareRoadmapsRequest) { q.Roadmaps = []pb.Roadmap{1, 2, 1} }), codes.InvalidArgument, "INVALID_FIELD", "roadmaps[2]"},
		"compare nothing":      {compare(func(q *pb.CompareRoadmapsRequest) { q.Roadmaps = []pb.Roadmap{1, 0} }), codes.InvalidArgument, "INVALID_FIELD", "roadmaps[1]"},
		"compare too many":     {compare(func(q *pb.CompareRoadmapsRequest) { q.Roadmaps = slices.Repeat(shownRoadmaps, 2) }), codes.InvalidArgument, "INVALID_FIELD", "roadmaps"},
		"compare for no body":  {compare(func(q *pb.CompareRoadmapsRequest) { q.Body = nil }), codes.InvalidArgument, "INVALID_FIELD", "body"},
		"compare too wide":     {compare(func(q *pb.CompareRoadmapsRequest) { q.Body.MarginM = 4.9 }), codes.InvalidArgument, "INVALID_FIELD", "body.radius_m"},
		"from nowhere":         {compare(func(q *pb.CompareRoadmapsRequest) { q.Start = nil }), codes.InvalidArgument, "INVALID_FIELD", "start"},
		"to an unknown place":  {compare(func(q *pb.CompareRoadmapsRequest) { q.Goal = atStation("ramp") }), codes.NotFound, "STATION_NOT_FOUND", ""},
		"to a wall":            {compare(func(q *pb.CompareRoadmapsRequest) { q.Goal = atStation("wall") }), codes.NotFound, "STATION_NOT_FOUND", ""},
		"to off the floor":     {compare(func(q *pb.CompareRoadmapsRequest) { q.Goal = atPose(11, 1) }), codes.InvalidArgument, "INVALID_FIELD", "goal.pose.x_m"},
		"with too long a time": {compare(func(q *pb.CompareRoadmapsRequest) { q.TimeBudgetS = 601 }), codes.InvalidArgument, "INVALID_FIELD", "time_budget_s"},
		"with no time":         {compare(func(q *pb.CompareRoadmapsRequest) { q.TimeBudgetS = -1 }), codes.InvalidArgument, "INVALID_FIELD", "time_budget_s"},
		"grown for no body":    {grown(func(q *pb.ShowGrownSolidsRequest) { q.Body = nil }), codes.InvalidArgument, "INVALID_FIELD", "body"},
		"grown too far":        {grown(func(q *pb.ShowGrownSolidsRequest) { q.Body.RadiusM = 5.1 }), codes.InvalidArgument, "INVALID_FIELD", "body.radius_m"},
		"grown on no floor":    {grown(func(q *pb.ShowGrownSolidsRequest) { q.Floor = "" }), codes.InvalidArgument, "INVALID_FIELD", "floor"},
	} {
		err := c.call()
		if status.Code(err) != c.code || reason(err) != c.why {
			t.Errorf("%s: got %v (%s), wanted %s %s", name, err, reason(err), c.code, c.why)
			continue
		}
		var fields []string
		for _, v := range detail[*errdetails.BadRequest](err).GetFieldViolations() {
			fields = append(fields, v.Field)
		}
		if c.field != "" && !slices.Contains(fields, c.field) {
			t.Errorf("%s: names %q, wanted %s", name, fields, c.field)
		}
	}
	if after := r.head(); !proto.Equal(before, after) {
		t.Errorf("the head is %v, wanted %v as before", after, before)
	}
}
