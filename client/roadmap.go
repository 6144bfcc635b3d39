package client

import (
	"context"
	"io"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Roadmap is a roadmap, or what of it meets an area. It is complete: what was sent
// arrived, and each edge's nodes are among Nodes.
type Roadmap struct {
	// Header says what it is, and counts the whole roadmap, area or not.
	Header *wideberthv1.RoadmapHeader
	Nodes  []*wideberthv1.RoadmapNode
	Edges  []*wideberthv1.RoadmapEdge
	Cells  []*wideberthv1.RoadmapCell
}

// Grown is what a body's centre must stay out of. It is complete: every outline arrived.
type Grown struct {
	Summary  *wideberthv1.GrownSummary
	Outlines []*wideberthv1.GrownOutline
}

// ShowRoadmap reads a roadmap as data. A stream that breaks is read again from its
// start until ctx ends or Timeouts.Content is over; one that does not add up is an error
// with code DATA_LOSS.
func (c *Client) ShowRoadmap(ctx context.Context, req *wideberthv1.ShowRoadmapRequest) (*Roadmap, error) {
	return collect(ctx, c, "ShowRoadmap", func(ctx context.Context) (*Roadmap, error) {
		stream, err := c.roadmaps.ShowRoadmap(ctx, req)
		if err != nil {
			return nil, err
		}
		return assembleRoadmap(stream.Recv)
	})
}

// ShowGrownSolids reads the outline of the solids grown for a body. Errors are as for
// ShowRoadmap.
func (c *Client) ShowGrownSolids(ctx context.Context, req *wideberthv1.ShowGrownSolidsRequest) (*Grown, error) {
	return collect(ctx, c, "ShowGrownSolids", func(ctx context.Context) (*Grown, error) {
		stream, err := c.roadmaps.ShowGrownSolids(ctx, req)
		if err != nil {
			return nil, err
		}
		return assembleGrown(stream.Recv)
	})
}

// CompareRoadmaps asks for each roadmap's own way between two places, and what it costs to
// have. With no deadline of ctx's own, Timeouts.Plan holds, with the time budget on top.
func (c *Client) CompareRoadmaps(ctx context.Context, req *wideberthv1.CompareRoadmapsRequest) (*wideberthv1.CompareRoadmapsResponse, error) {
	return c.roadmaps.CompareRoadmaps(ctx, req)
}

// collect reads a stream to its end, again while that may help.
func collect[T any](ctx context.Context, c *Client, what string, read func(context.Context) (*T, error)) (*T, error) {
	if _, ok := ctx.Deadline(); !ok {
		var cancel context.CancelFunc
		ctx, cancel = context.WithTimeout(ctx, c.cfg.timeouts.Content)
		defer cancel()
	}
	var got *T
	err := c.again(ctx, what, func() (err error) {
		ctx, cancel := context.WithCancel(ctx) // frees the stream when it is left early
		defer cancel()
		got, err = read(ctx)
		return err
	})
	if err != nil {
		return nil, err
	}
	return got, nil
}

func lostRoadmap(format string, args ...any) error {
	return status.Errorf(codes.DataLoss, "client: roadmap: "+format, args...)
}

// assembleRoadmap puts a ShowRoadmap stream together. next gives io.EOF at its end.
func assembleRoadmap(next func() (*wideberthv1.ShowRoadmapResponse, error)) (*Roadmap, error) {
	var r Roadmap
	for {
		msg, err := next()
		if err == io.EOF {
			return nil, lostRoadmap("the stream ended without its end mark")
		}
		if err != nil {
			return nil, err
		}
		if h := msg.GetHeader(); h != nil {
			if r.Header != nil {
				return nil, lostRoadmap("a second header")
			}
			r.Header = h
		}
		if r.Header == nil {
			return nil, lostRoadmap("the first message is not the header")
		}
		if end := msg.GetEnd(); end != nil {
			if n, e, c := int64(len(r.Nodes)), int64(len(r.Edges)), int64(len(r.Cells)); n != end.GetNodeCount() || e != end.GetEdgeCount() || c != end.GetCellCount() {
				return nil, lostRoadmap("%d nodes, %d edges and %d cells arrived, %d, %d and %d were sent",
					n, e, c, end.GetNodeCount(), end.GetEdgeCount(), end.GetCellCount())
			}
			return &r, nil
		}
		p := msg.GetPart()
		r.Nodes = append(r.Nodes, p.GetNodes()...)
		for _, e := range p.GetEdges() {
			if n := len(r.Nodes); e.GetFromNode() < 0 || int(e.GetFromNode()) >= n || e.GetToNode() < 0 || int(e.GetToNode()) >= n {
				return nil, lostRoadmap("edge %d joins nodes %d and %d, %d came before it", len(r.Edges), e.GetFromNode(), e.GetToNode(), n)
			}
			r.Edges = append(r.Edges, e)
		}
		r.Cells = append(r.Cells, p.GetCells()...)
	}
}

// assembleGrown puts a ShowGrownSolids stream together. next gives io.EOF at its end.
func assembleGrown(next func() (*wideberthv1.ShowGrownSolidsResponse, error)) (*Grown, error) {
	var g Grown
	for {
		msg, err := next()
		if err == io.EOF {
			return nil, status.Error(codes.DataLoss, "client: grown solids: the stream ended without its end mark")
		}
		if err != nil {
			return nil, err
		}
		if o := msg.GetOutline(); o != nil {
			g.Outlines = append(g.Outlines, o)
		}
		if g.Summary = msg.GetSummary(); g.Summary != nil {
			if n := int64(len(g.Outlines)); n != g.Summary.GetOutlineCount() {
				return nil, status.Errorf(codes.DataLoss, "client: grown solids: %d outlines arrived, %d were sent", n, g.Summary.GetOutlineCount())
			}
			return &g, nil
		}
	}
}
