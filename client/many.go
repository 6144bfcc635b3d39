package client

import (
	"context"
	"io"
	"iter"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// defaultManyBudgetS is what a time_budget_s of 0 in a PlanManyRequest and in a
// CompareRoadmapsRequest asks for, from the contract.
const defaultManyBudgetS = 60

// ManyAnswer is the answer for one pair of a PlanMany.
type ManyAnswer struct {
	// Header is what all answers of the call have in common: the version they speak of,
	// how many there are.
	Header *wideberthv1.PlanManyHeader
	// Answer is a route, a summary or a refusal, and which pair it is for.
	Answer *wideberthv1.PairAnswer
}

// PlanMany asks for routes from each of the request's starts to each of its goals, and
// yields the answers as they are found, near pairs first on the whole. "No way" is not
// an error but a refusal in an answer. An error ends it and comes with a zero
// answer; without one every pair was answered once.
//
// A call that is refused for now, or breaks with UNAVAILABLE, is sent again until ctx
// ends: whole, and pinned to the version that the answers before it speak of, so that
// all speak of one. Pairs that were yielded are not yielded again, though the service
// works on them again; its time budget starts anew. Answers that do not add up are an
// error with code DATA_LOSS. With no deadline of ctx's own, Timeouts.Plan holds, with
// the time budget on top. Leaving the loop ends the call. The service ends a call
// that leaves an answer unread for half a minute.
func (c *Client) PlanMany(ctx context.Context, req *wideberthv1.PlanManyRequest) iter.Seq2[ManyAnswer, error] {
	return func(yield func(ManyAnswer, error) bool) {
		if _, ok := ctx.Deadline(); !ok {
			var cancel context.CancelFunc
			ctx, cancel = context.WithTimeout(ctx, c.timeout(req))
			defer cancel()
		}
		m := many{req: req, yield: yield, seen: map[[2]int32]bool{}}
		err := c.again(ctx, "PlanMany", func() error { return m.session(ctx, c) })
		if err != nil && !m.left {
			yield(ManyAnswer{}, err)
		}
	}
}

// many is a PlanMany over as many streams as it takes.
type many struct {
	req    *wideberthv1.PlanManyRequest // pinned once there is a header
	yield  func(ManyAnswer, error) bool
	header *wideberthv1.PlanManyHeader // of the first stream
	seen   map[[2]int32]bool           // pairs that were yielded
	left   bool                        // the caller wants no more
}

func lostMany(format string, args ...any) error {
	return status.Errorf(codes.DataLoss, "client: many routes: "+format, args...)
}

// session reads one stream to its end mark.
func (m *many) session(ctx context.Context, c *Client) error {
	ctx, cancel := context.WithCancel(ctx) // frees the stream when it is left early
	defer cancel()
	stream, err := c.routes.PlanMany(ctx, m.req)
	if err != nil {
		return err
	}
	var got tally
	for {
		msg, err := stream.Recv()
		if err == io.EOF {
			return lostMany("the stream ended without its end mark")
		}
		if err != nil {
			return err
		}
		if h := msg.GetHeader(); h != nil {
			if err := m.begin(h, got); err != nil {
				return err
			}
			got.pairs = map[[2]int32]bool{}
		}
		if got.pairs == nil {
			return lostMany("the first message is not the header")
		}
		if end := msg.GetEnd(); end != nil {
			return got.check(end, m.header)
		}
		if a := msg.GetAnswer(); a != nil {
			if err := got.add(a, m.req); err != nil {
				return err
			}
			if pair := pairOf(a); !m.seen[pair] {
				m.seen[pair] = true
				if !m.yield(ManyAnswer{Header: m.header, Answer: a}, nil) {
					m.left = true
					return nil
				}
			}
		}
	}
}

// begin takes a stream's header; a later stream must speak of the first one's version.
func (m *many) begin(h *wideberthv1.PlanManyHeader, got tally) error {
	switch want := int64(len(m.req.GetStarts()) * len(m.req.GetGoals())); {
	case got.pairs != nil:
		return lostMany("a second header")
	case h.GetPairCount() != want:
		return lostMany("header: %d pairs, %d were asked for", h.GetPairCount(), want)
	case m.header == nil:
		m.header = h
		m.req = proto.CloneOf(m.req)
		m.req.Version = Pinned(h.GetStamp().GetVersion())
	case !proto.Equal(h.GetStamp(), m.header.GetStamp()):
		return lostMany("asked again, version %d of floor %q is another than before", h.GetStamp().GetVersion(), h.GetStamp().GetFloor())
	}
	return nil
}

func pairOf(a *wideberthv1.PairAnswer) [2]int32 {
	return [2]int32{a.GetStartIndex(), a.GetGoalIndex()}
}

// tally is what came over one stream.
type tally struct {
	pairs             map[[2]int32]bool // nil before the header
	routes, refusals  int64
	outOfTime, others int64 // others: outcomes that this client does not know of
}

func (t *tally) add(a *wideberthv1.PairAnswer, req *wideberthv1.PlanManyRequest) error {
	pair := pairOf(a)
	if s, g := int(pair[0]), int(pair[1]); s < 0 || g < 0 || s >= len(req.GetStarts()) || g >= len(req.GetGoals()) {
		return lostMany("an answer for start %d and goal %d, %d and %d were asked for", s, g, len(req.GetStarts()), len(req.GetGoals()))
	}
	if t.pairs[pair] {
		return lostMany("start %d and goal %d were answered twice", pair[0], pair[1])
	}
	t.pairs[pair] = true
	switch {
	case a.GetRoute() != nil, a.GetSummary() != nil:
		t.routes++
	case a.GetRefusal() != nil:
		t.refusals++
		if a.GetRefusal().GetReason() == wideberthv1.RefusalReason_REFUSAL_REASON_OUT_OF_TIME {
			t.outOfTime++
		}
	default:
		t.others++
	}
	return nil
}

// check compares what came with the end mark and with what was to come.
func (t *tally) check(end *wideberthv1.PlanManyEnd, h *wideberthv1.PlanManyHeader) error {
	if t.others == 0 && (t.routes != end.GetRouteCount() || t.refusals != end.GetRefusalCount() || t.outOfTime != end.GetOutOfTimeCount()) {
		return lostMany("%d routes and %d refusals arrived, %d and %d were sent", t.routes, t.refusals, end.GetRouteCount(), end.GetRefusalCount())
	}
	if n := int64(len(t.pairs)); n != h.GetPairCount() {
		return lostMany("%d answers arrived, there are %d pairs", n, h.GetPairCount())
	}
	return nil
}
