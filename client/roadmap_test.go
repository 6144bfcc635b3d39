package client

import (
	"context"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

type (
	shownPart = wideberthv1.ShowRoadmapResponse
	grownPart = wideberthv1.ShowGrownSolidsResponse
)

func roadmapHeader(nodes int64) *shownPart {
	return &shownPart{Piece: &wideberthv1.ShowRoadmapResponse_Header{Header: &wideberthv1.RoadmapHeader{Stamp: stampAt(3), NodeCount: nodes}}}
}

// roadmapPart has some nodes, and an edge between each of two.
func roadmapPart(nodes int, edges ...[2]int32) *shownPart {
	p := &wideberthv1.RoadmapPart{}
	for range nodes {
		p.Nodes = append(p.Nodes, &wideberthv1.RoadmapNode{})
	}
	for _, e := range edges {
		p.Edges = append(p.Edges, &wideberthv1.RoadmapEdge{FromNode: e[0], ToNode: e[1]})
	}
	return &shownPart{Piece: &wideberthv1.ShowRoadmapResponse_Part{Part: p}}
}

func roadmapEnd(nodes, edges int64) *shownPart {
	return &shownPart{Piece: &wideberthv1.ShowRoadmapResponse_End{End: &wideberthv1.RoadmapEnd{NodeCount: nodes, EdgeCount: edges}}}
}

// plays sends messages on a stream, then ends it with err.
func plays[Q, M any](err error, parts ...*M) func(*Q, grpc.ServerStreamingServer[M]) error {
	return func(_ *Q, s grpc.ServerStreamingServer[M]) error {
		for _, p := range parts {
			if e := s.Send(p); e != nil {
				return e
			}
		}
		return err
	}
}

func TestRoadmapIsCompleteOrAnError(t *testing.T) {
	t.Parallel()
	head := roadmapHeader(9)
	for _, tc := range []struct {
		name  string
		parts []*shownPart
		want  string // in the error; "" for none
	}{
		{"all there", []*shownPart{head, roadmapPart(2, [2]int32{0, 1}), {}, roadmapPart(1, [2]int32{2, 0}), roadmapEnd(3, 2)}, ""},
		{"no end mark", []*shownPart{head, roadmapPart(3)}, "without its end mark"},
		{"a node lost on the way", []*shownPart{head, roadmapPart(2), roadmapEnd(3, 0)}, "2 nodes, 0 edges and 0 cells arrived, 3, 0 and 0 were sent"},
		{"an edge before its node", []*shownPart{head, roadmapPart(1, [2]int32{0, 1}), roadmapPart(1), roadmapEnd(2, 1)}, "joins nodes 0 and 1, 1 came before it"},
		{"an edge to nowhere", []*shownPart{head, roadmapPart(1, [2]int32{-1, 0}), roadmapEnd(1, 1)}, "joins nodes -1 and 0"},
		{"no header", []*shownPart{roadmapPart(1), roadmapEnd(1, 0)}, "the first message is not the header"},
		{"two headers", []*shownPart{head, head}, "a second header"},
	} {
		c := serve(t, &fakeService{showRoadmap: plays[wideberthv1.ShowRoadmapRequest](nil, tc.parts...)})
		r, err := c.ShowRoadmap(t.Context(), &wideberthv1.ShowRoadmapRequest{Floor: "hall"})
		switch {
		case tc.want == "" && (err != nil || r.Header.GetNodeCount() != 9 || len(r.Nodes) != 3 || len(r.Edges) != 2):
			t.Errorf("%s: %v, %+v", tc.name, err, r)
		case tc.want != "" && (r != nil || status.Code(err) != codes.DataLoss || !strings.Contains(err.Error(), tc.want)):
			t.Errorf("%s: %v, want DATA_LOSS with %q", tc.name, err, tc.want)
		}
	}
}

func TestGrownIsCompleteOrAnError(t *testing.T) {
	t.Parallel()
	outline := &grownPart{Piece: &wideberthv1.ShowGrownSolidsResponse_Outline{Outline: &wideberthv1.GrownOutline{AreaM2: 2}}}
	end := func(n int64) *grownPart {
		return &grownPart{Piece: &wideberthv1.ShowGrownSolidsResponse_Summary{Summary: &wideberthv1.GrownSummary{AreaM2: 4, OutlineCount: n}}}
	}
	for _, tc := range []struct {
		name  string
		parts []*grownPart
		want  string
	}{
		{"all there", []*grownPart{outline, {}, outline, end(2)}, ""},
		{"no end mark", []*grownPart{outline}, "without its end mark"},
		{"an outline lost on the way", []*grownPart{outline, end(2)}, "1 outlines arrived, 2 were sent"},
	} {
		c := serve(t, &fakeService{showGrown: plays[wideberthv1.ShowGrownSolidsRequest](nil, tc.parts...)})
		g, err := c.ShowGrownSolids(t.Context(), &wideberthv1.ShowGrownSolidsRequest{Floor: "hall"})
		switch {
		case tc.want == "" && (err != nil || g.Summary.GetAreaM2() != 4 || len(g.Outlines) != 2):
			t.Errorf("%s: %v, %+v", tc.name, err, g)
		case tc.want != "" && (g != nil || status.Code(err) != codes.DataLoss || !strings.Contains(err.Error(), tc.want)):
			t.Errorf("%s: %v, want DATA_LOSS with %q", tc.name, err, tc.want)
		}
	}
}

// A stream that breaks is read again from its start; nothing of the first comes twice.
// One that is refused is not.
func TestRoadmapIsReadAgain(t *testing.T) {
	t.Parallel()
	calls := 0
	whole := plays[wideberthv1.ShowRoadmapRequest](nil, roadmapHeader(2), roadmapPart(2, [2]int32{0, 1}), roadmapEnd(2, 1))
	f := &fakeService{showRoadmap: func(q *wideberthv1.ShowRoadmapRequest, s grpc.ServerStreamingServer[shownPart]) error {
		if calls++; calls < 3 {
			return plays[wideberthv1.ShowRoadmapRequest](statusWith(codes.Unavailable), roadmapHeader(2), roadmapPart(2))(q, s)
		}
		return whole(q, s)
	}}
	c := serve(t, f)
	r, err := c.ShowRoadmap(t.Context(), &wideberthv1.ShowRoadmapRequest{Floor: "hall"})
	if err != nil || calls != 3 || len(r.Nodes) != 2 || len(r.Edges) != 1 {
		t.Errorf("%v after %d calls, %+v", err, calls, r)
	}
	calls = 0
	f.showRoadmap = func(*wideberthv1.ShowRoadmapRequest, grpc.ServerStreamingServer[shownPart]) error {
		calls++
		return statusWith(codes.FailedPrecondition)
	}
	if _, err := c.ShowRoadmap(t.Context(), &wideberthv1.ShowRoadmapRequest{Floor: "hall"}); status.Code(err) != codes.FailedPrecondition || calls != 1 {
		t.Errorf("%v after %d calls, want FAILED_PRECONDITION after one", err, calls)
	}
}

// A comparison has the time it asks for, or a minute, and Timeouts.Plan with it.
func TestCompareRoadmapsDeadline(t *testing.T) {
	t.Parallel()
	for budget, want := range map[float64]time.Duration{0: 75 * time.Second, 20: 35 * time.Second} {
		var left time.Duration
		c := serve(t, &fakeService{compareRoadmaps: func(ctx context.Context, _ *wideberthv1.CompareRoadmapsRequest) (*wideberthv1.CompareRoadmapsResponse, error) {
			end, _ := ctx.Deadline()
			left = time.Until(end)
			return &wideberthv1.CompareRoadmapsResponse{OptimumM: 5}, nil
		}})
		resp, err := c.CompareRoadmaps(t.Context(), &wideberthv1.CompareRoadmapsRequest{Floor: "hall", TimeBudgetS: budget})
		if err != nil || resp.GetOptimumM() != 5 || left > want || left < want-5*time.Second {
			t.Errorf("budget %v: %v, %v, deadline in %v, want %v", budget, resp, err, left, want)
		}
	}
}
