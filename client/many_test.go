package client

import (
	"context"
	"slices"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

type (
	manyPart   = wideberthv1.PlanManyResponse
	manyStream = grpc.ServerStreamingServer[manyPart]
)

func manyHeader(version, pairs int64) *manyPart {
	return &manyPart{Part: &wideberthv1.PlanManyResponse_Header{Header: &wideberthv1.PlanManyHeader{Stamp: stampAt(version), PairCount: pairs}}}
}

func summary(start, goal int32) *manyPart {
	return &manyPart{Part: &wideberthv1.PlanManyResponse_Answer{Answer: &wideberthv1.PairAnswer{StartIndex: start, GoalIndex: goal,
		Outcome: &wideberthv1.PairAnswer_Summary{Summary: &wideberthv1.RouteSummary{LengthM: float64(goal)}}}}}
}

func refusal(start, goal int32, why wideberthv1.RefusalReason) *manyPart {
	return &manyPart{Part: &wideberthv1.PlanManyResponse_Answer{Answer: &wideberthv1.PairAnswer{StartIndex: start, GoalIndex: goal,
		Outcome: &wideberthv1.PairAnswer_Refusal{Refusal: &wideberthv1.Refusal{Reason: why}}}}}
}

func manyEnd(routes, refusals, outOfTime int64) *manyPart {
	return &manyPart{Part: &wideberthv1.PlanManyResponse_End{End: &wideberthv1.PlanManyEnd{RouteCount: routes, RefusalCount: refusals, OutOfTimeCount: outOfTime}}}
}

// oneToThree asks for three pairs.
func oneToThree() *wideberthv1.PlanManyRequest {
	place := &wideberthv1.Place{Where: &wideberthv1.Place_Station{Station: "dock"}}
	return &wideberthv1.PlanManyRequest{Floor: "hall", Version: Newest(), Starts: []*wideberthv1.Place{place}, Goals: slices.Repeat([]*wideberthv1.Place{place}, 3)}
}

// sends gives a service that plays these parts, then ends with err.
func sends(err error, parts ...*manyPart) func(*wideberthv1.PlanManyRequest, manyStream) error {
	return func(_ *wideberthv1.PlanManyRequest, s manyStream) error {
		for _, p := range parts {
			if e := s.Send(p); e != nil {
				return e
			}
		}
		return err
	}
}

// gather takes all answers of a call: the goals in order, and what ended it.
func gather(ctx context.Context, c *Client, req *wideberthv1.PlanManyRequest) (goals []int32, last ManyAnswer, err error) {
	for a, e := range c.PlanMany(ctx, req) {
		if err = e; err != nil {
			break
		}
		goals, last = append(goals, a.Answer.GetGoalIndex()), a
	}
	return goals, last, err
}

const (
	noPassage = wideberthv1.RefusalReason_REFUSAL_REASON_NO_PASSAGE
	outOfTime = wideberthv1.RefusalReason_REFUSAL_REASON_OUT_OF_TIME
)

func TestManyIsCompleteOrAnError(t *testing.T) {
	t.Parallel()
	head := manyHeader(3, 3)
	for _, tc := range []struct {
		name  string
		parts []*manyPart
		want  string // in the error; "" for none
	}{
		{"all there", []*manyPart{head, summary(0, 2), refusal(0, 0, noPassage), refusal(0, 1, outOfTime), manyEnd(1, 2, 1)}, ""},
		{"an outcome not known here", []*manyPart{head, summary(0, 2), summary(0, 1), {Part: &wideberthv1.PlanManyResponse_Answer{Answer: &wideberthv1.PairAnswer{}}}, {}, manyEnd(3, 0, 0)}, ""},
		{"no end mark", []*manyPart{head, summary(0, 2), summary(0, 1), summary(0, 0)}, "without its end mark"},
		{"a pair missing", []*manyPart{head, summary(0, 2), summary(0, 1), manyEnd(2, 0, 0)}, "2 answers arrived, there are 3 pairs"},
		{"a pair lost on the way", []*manyPart{head, summary(0, 2), summary(0, 1), manyEnd(3, 0, 0)}, "2 routes and 0 refusals arrived, 3 and 0 were sent"},
		{"a pair twice", []*manyPart{head, summary(0, 2), summary(0, 2)}, "start 0 and goal 2 were answered twice"},
		{"a pair not asked for", []*manyPart{head, summary(1, 0)}, "start 1 and goal 0"},
		{"other pairs than asked for", []*manyPart{manyHeader(3, 4)}, "4 pairs, 3 were asked for"},
		{"no header", []*manyPart{summary(0, 0)}, "the first message is not the header"},
		{"two headers", []*manyPart{head, head}, "a second header"},
	} {
		c := serve(t, &fakeService{planMany: sends(nil, tc.parts...)})
		_, last, err := gather(t.Context(), c, oneToThree())
		switch {
		case tc.want == "" && (err != nil || last.Header.GetStamp().GetVersion() != 3):
			t.Errorf("%s: %v, header %v", tc.name, err, last.Header)
		case tc.want != "" && (status.Code(err) != codes.DataLoss || !strings.Contains(err.Error(), tc.want)):
			t.Errorf("%s: %v, want DATA_LOSS with %q", tc.name, err, tc.want)
		}
	}
}

// A call that breaks is taken up on the version it began with, and no pair comes twice.
func TestManyIsTakenUpWhereItBroke(t *testing.T) {
	t.Parallel()
	calls := 0
	var asked []*wideberthv1.VersionSelector
	later := manyHeader(3, 3)
	f := &fakeService{planMany: func(r *wideberthv1.PlanManyRequest, s manyStream) error {
		calls++
		asked = append(asked, r.GetVersion())
		switch calls {
		case 1:
			return statusWith(codes.ResourceExhausted, comeBackIn(time.Millisecond))
		case 2:
			return sends(statusWith(codes.Unavailable), manyHeader(3, 3), summary(0, 2))(r, s)
		}
		return sends(nil, later, summary(0, 2), summary(0, 0), refusal(0, 1, noPassage), manyEnd(2, 1, 0))(r, s)
	}}
	c := serve(t, f)
	req := oneToThree()
	goals, _, err := gather(t.Context(), c, req)
	if err != nil || !slices.Equal(goals, []int32{2, 0, 1}) {
		t.Errorf("goals %v, %v; want each of them once", goals, err)
	}
	if asked[0].GetNewest() == nil || asked[1].GetNewest() == nil || asked[2].GetPinned() != 3 || req.GetVersion().GetNewest() == nil {
		t.Errorf("asked for %v, want the newest until one is known, the caller's request left alone", asked)
	}
	// Another content under the same number, as after a restored backup.
	calls = 1
	later.GetHeader().Stamp.Digest = "other"
	if goals, _, err = gather(t.Context(), c, oneToThree()); status.Code(err) != codes.DataLoss || len(goals) != 1 {
		t.Errorf("goals %v, %v; want DATA_LOSS", goals, err)
	}
}

// A loop that is left ends the call; an error that asking again cannot mend comes at once.
func TestManyEnds(t *testing.T) {
	t.Parallel()
	gone := make(chan struct{})
	c := serve(t, &fakeService{planMany: func(r *wideberthv1.PlanManyRequest, s manyStream) error {
		defer close(gone)
		if end, ok := s.Context().Deadline(); !ok || time.Until(end) < 60*time.Second || time.Until(end) > 75*time.Second {
			t.Errorf("deadline %v, want Timeouts.Plan and the default budget, 75 s", end)
		}
		if err := sends(nil, manyHeader(3, 3), summary(0, 2))(r, s); err != nil {
			return err
		}
		<-s.Context().Done()
		return s.Context().Err()
	}})
	for _, err := range c.PlanMany(t.Context(), oneToThree()) {
		if err != nil {
			t.Error(err)
		}
		break
	}
	select {
	case <-gone:
	case <-time.After(10 * time.Second):
		t.Error("the call went on after the loop was left")
	}
	c = serve(t, &fakeService{planMany: sends(statusWith(codes.NotFound), manyHeader(3, 3), summary(0, 2))})
	if goals, _, err := gather(t.Context(), c, oneToThree()); status.Code(err) != codes.NotFound || len(goals) != 1 {
		t.Errorf("goals %v, %v; want one and NOT_FOUND", goals, err)
	}
}

func TestStations(t *testing.T) {
	t.Parallel()
	named := func(names ...string) *part { // all stations but "rack"
		p := features(names...)
		for _, f := range p.GetFeatures().GetFeatures() {
			if f.Name != "rack" {
				f.Kind = &wideberthv1.Feature_Station{Station: &wideberthv1.Station{}}
			}
		}
		return p
	}
	calls := 0
	f := &fakeService{read: func(r *wideberthv1.ReadFloorRequest, s grpc.ServerStreamingServer[part]) error {
		if calls++; !r.GetSkipOccupancy() {
			t.Error("cells were asked for")
		}
		for _, p := range []*part{header(4, 4), named("dock-1", "rack"), named("dock-2")} {
			if err := s.Send(p); err != nil {
				return err
			}
		}
		if calls == 1 {
			return statusWith(codes.Unavailable)
		}
		return s.Send(end(0, int64(1+calls))) // 3 the second time
	}}
	c := serve(t, f)
	stamp, got, err := c.Stations(t.Context(), "hall", nil)
	if err != nil || stamp.GetVersion() != 3 || len(got) != 2 || got[0].GetName() != "dock-1" || got[1].GetName() != "dock-2" {
		t.Errorf("version %v, %v, %v; want dock-1 and dock-2 of version 3", stamp, got, err)
	}
	if _, _, err := c.Stations(t.Context(), "hall", nil); status.Code(err) != codes.DataLoss {
		t.Errorf("a feature was lost: %v, want DATA_LOSS", err)
	}
}
