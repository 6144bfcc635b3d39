package client

import (
	"context"
	"errors"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

type guideStream = grpc.BidiStreamingServer[wideberthv1.GuideRequest, wideberthv1.GuideResponse]

func setupFor(route string) *wideberthv1.GuideSetup {
	return &wideberthv1.GuideSetup{Route: &wideberthv1.Route{RouteId: route}}
}

func reportNo(n int64) *wideberthv1.GuideReport {
	return &wideberthv1.GuideReport{Sequence: n, StampS: float64(n)}
}

func answerTo(n int64) *wideberthv1.GuideResponse {
	return &wideberthv1.GuideResponse{Hint: &wideberthv1.Hint{Sequence: n, StampS: float64(n)}}
}

// script is what a fake guide service heard, stream by stream.
type script struct {
	mu    sync.Mutex
	heard [][]string
}

func (s *script) open() int {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.heard = append(s.heard, nil)
	return len(s.heard) - 1
}

func (s *script) note(stream int, msg *wideberthv1.GuideRequest) {
	s.mu.Lock()
	defer s.mu.Unlock()
	word := "setup " + msg.GetSetup().GetRoute().GetRouteId()
	if r := msg.GetReport(); r != nil {
		word = "report " + string(rune('0'+r.GetSequence()))
	}
	s.heard[stream] = append(s.heard[stream], word)
}

func next(t *testing.T, g *Guide) *wideberthv1.Hint {
	t.Helper()
	ctx, cancel := context.WithTimeout(t.Context(), 10*time.Second)
	defer cancel()
	h, err := g.Next(ctx)
	if err != nil {
		t.Fatal(err)
	}
	return h
}

func TestGuideSendsItsSetupAgainAfterABreak(t *testing.T) {
	t.Parallel()
	var s script
	c := serve(t, &fakeService{guide: func(st guideStream) error {
		n := s.open()
		for {
			msg, err := st.Recv()
			if err != nil {
				return nil
			}
			s.note(n, msg)
			if r := msg.GetReport(); r != nil {
				if n == 0 && r.GetSequence() == 2 {
					return status.Error(codes.Unavailable, "gone before the answer")
				}
				_ = st.Send(answerTo(r.GetSequence()))
			}
		}
	}})
	g := c.Guide(t.Context(), setupFor("a"))
	defer g.Close()
	for n := int64(1); n <= 3; n++ {
		if err := g.Report(reportNo(n)); err != nil {
			t.Fatal(err)
		}
		if got := next(t, g).GetSequence(); got != n {
			t.Fatalf("hint to report %d, want %d", got, n)
		}
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	want := [][]string{{"setup a", "report 1", "report 2"}, {"setup a", "report 2", "report 3"}}
	if !slices.EqualFunc(s.heard, want, slices.Equal) {
		t.Errorf("the service heard %q, want %q", s.heard, want)
	}
}

func TestGuideTheNewestReportWins(t *testing.T) {
	t.Parallel()
	open := make(chan struct{})
	var s script
	c := serve(t, &fakeService{guide: func(st guideStream) error {
		n := s.open()
		if n == 0 {
			<-open // the line is down while the robot drives on
			return status.Error(codes.Unavailable, "no")
		}
		for {
			msg, err := st.Recv()
			if err != nil {
				return nil
			}
			s.note(n, msg)
			if r := msg.GetReport(); r != nil {
				_ = st.Send(answerTo(r.GetSequence()))
			}
		}
	}})
	g := c.Guide(t.Context(), setupFor("a"))
	defer g.Close()
	for n := int64(1); n <= 5; n++ {
		if err := g.Report(reportNo(n)); err != nil {
			t.Fatal(err)
		}
	}
	close(open)
	if got := next(t, g).GetSequence(); got != 5 {
		t.Errorf("hint to report %d, want the newest, 5", got)
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if want := []string{"setup a", "report 5"}; !slices.Equal(s.heard[1], want) {
		t.Errorf("the service heard %q, want %q", s.heard[1], want)
	}
}

func TestGuideHintsToAnOldSetupAreDropped(t *testing.T) {
	t.Parallel()
	c := serve(t, &fakeService{guide: func(st guideStream) error {
		var held int64 // answer the first report only once the second setup is here
		for {
			msg, err := st.Recv()
			if err != nil {
				return nil
			}
			switch r := msg.GetReport(); {
			case r == nil && held != 0:
				_ = st.Send(answerTo(held))
			case r.GetSequence() == 1:
				held = 1
			case r != nil:
				_ = st.Send(answerTo(r.GetSequence()))
				_ = st.Send(answerTo(1)) // and out of order
			}
		}
	}})
	g := c.Guide(t.Context(), setupFor("a"))
	defer g.Close()
	if err := g.Report(reportNo(1)); err != nil {
		t.Fatal(err)
	}
	g.SetSetup(setupFor("b"))
	short, cancel := context.WithTimeout(t.Context(), 50*time.Millisecond)
	defer cancel()
	if h, err := g.Next(short); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("got %v, %v: a hint about the route before", h, err)
	}
	if err := g.Report(reportNo(2)); err != nil {
		t.Fatal(err)
	}
	if got := next(t, g).GetSequence(); got != 2 {
		t.Errorf("hint to report %d, want 2", got)
	}
}

func TestGuideEndsWhenItIsRefused(t *testing.T) {
	t.Parallel()
	c := serve(t, &fakeService{guide: func(guideStream) error {
		return status.Error(codes.InvalidArgument, "setup.route.body: missing")
	}})
	g := c.Guide(t.Context(), setupFor(""))
	defer g.Close()
	if _, err := g.Next(t.Context()); status.Code(err) != codes.InvalidArgument {
		t.Errorf("Next = %v, want INVALID_ARGUMENT", err)
	}
	if err := g.Report(reportNo(1)); status.Code(err) != codes.InvalidArgument {
		t.Errorf("Report = %v, want INVALID_ARGUMENT", err)
	}
}

func TestGuideSequencesCountUpAndCloseEnds(t *testing.T) {
	t.Parallel()
	c := serve(t, &fakeService{guide: func(st guideStream) error { <-st.Context().Done(); return nil }})
	g := c.Guide(t.Context(), setupFor("a"))
	if err := g.Report(reportNo(0)); err == nil || !strings.Contains(err.Error(), "want above 0") {
		t.Errorf("sequence 0: %v, want refused", err)
	}
	if err := g.Report(reportNo(7)); err != nil {
		t.Fatal(err)
	}
	if err := g.Report(reportNo(7)); err == nil {
		t.Error("the same sequence twice was taken")
	}
	g.Close()
	if _, err := g.Next(t.Context()); !errors.Is(err, errGuideClosed) {
		t.Errorf("Next after Close = %v, want %v", err, errGuideClosed)
	}
	g.Close() // again is harmless
}
