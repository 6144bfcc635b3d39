package client

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

type watchStream = grpc.ServerStreamingServer[wideberthv1.WatchVersionsResponse]

// follow runs a watch until it has written enough, or ended, as one word an event.
func follow(ctx context.Context, c *Client, after int64, enough func([]string) bool) (words []string, last error) {
	for ev, err := range c.Watch(ctx, "hall", after) {
		switch {
		case err != nil:
			return words, err
		case ev.Version != nil:
			words = append(words, fmt.Sprintf("v%d+%d", ev.Version.GetStamp().GetVersion(), ev.Skipped))
		case ev.Broken != nil:
			words = append(words, "broken")
		default:
			words = append(words, fmt.Sprintf("beat%d", ev.Head.GetVersion()))
		}
		if enough(words) {
			return words, nil
		}
	}
	return words, errors.New("the watch ended without an error")
}

func count(n int) func([]string) bool {
	return func(w []string) bool { return len(w) == n }
}

func TestWatchIsTakenUpWhereItBroke(t *testing.T) {
	t.Parallel()
	var mu sync.Mutex
	var after []int64
	c := serve(t, &fakeService{watch: func(r *wideberthv1.WatchVersionsRequest, s watchStream) error {
		mu.Lock()
		after = append(after, r.GetAfterVersion())
		n := len(after)
		mu.Unlock()
		send := func(m ...*wideberthv1.WatchVersionsResponse) {
			for _, m := range m {
				_ = s.Send(m)
			}
		}
		switch n {
		case 1:
			send(versionEvent(4, 0), heartbeat(4))
			return status.Error(codes.Unavailable, "going down")
		case 2, 3:
			return status.Error(codes.Unavailable, "still down")
		case 4:
			send(versionEvent(4, 0), versionEvent(5, 0)) // 4 again: at least once is not twice
			return nil                                   // ended without a fault: drained
		}
		send(versionEvent(9, 0), heartbeat(9))
		<-s.Context().Done()
		return nil
	}})
	got, err := follow(t.Context(), c, 0, count(7))
	if err != nil {
		t.Fatal(err)
	}
	// 6 to 8 were skipped, whatever the server said.
	if want := []string{"v4+0", "beat4", "broken", "v5+0", "broken", "v9+3", "beat9"}; !slices.Equal(got, want) {
		t.Errorf("events %v, want %v", got, want)
	}
	if want := []int64{0, 4, 4, 4, 5}; !slices.Equal(after, want) {
		t.Errorf("asked for what follows %v, want %v", after, want)
	}
}

func TestWatchWithoutAWordIsDead(t *testing.T) {
	t.Parallel()
	var streams int
	var mu sync.Mutex
	c := serve(t, &fakeService{watch: func(_ *wideberthv1.WatchVersionsRequest, s watchStream) error {
		mu.Lock()
		streams++
		first := streams == 1
		mu.Unlock()
		_ = s.Send(versionEvent(3, 0))
		if !first {
			_ = s.Send(versionEvent(4, 0))
		}
		<-s.Context().Done() // open, and silent
		return nil
	}})
	c.cfg.quiet = 80 * time.Millisecond
	var cause error
	for ev, err := range c.Watch(t.Context(), "hall", 2) {
		if err != nil {
			t.Fatal(err)
		}
		if ev.Broken != nil {
			cause = ev.Broken
		}
		if ev.Head.GetVersion() == 4 {
			break
		}
		// A slow reader is not a silent server: the time does not run meanwhile.
		time.Sleep(120 * time.Millisecond)
		if ev.Version != nil && cause != nil {
			t.Errorf("version %d came after a break that was the reader's own", ev.Version.GetStamp().GetVersion())
		}
	}
	if !errors.Is(cause, errQuiet) {
		t.Errorf("broken by %v, want %v", cause, errQuiet)
	}
}

func TestContractHeartbeatTimes(t *testing.T) {
	t.Parallel()
	// WatchVersions promises a heartbeat every two seconds; more than three missed is dead.
	if got := defaultConfig().quiet; got <= 6*time.Second || got > 8*time.Second {
		t.Errorf("a stream is dead after %v, want just over three heartbeats of 2 s", got)
	}
}

func TestWatchEndsWhenItIsRefused(t *testing.T) {
	t.Parallel()
	for _, code := range []codes.Code{codes.NotFound, codes.PermissionDenied, codes.InvalidArgument, codes.Unimplemented} {
		c := serve(t, &fakeService{watch: func(*wideberthv1.WatchVersionsRequest, watchStream) error {
			return status.Error(code, "no")
		}})
		got, err := follow(t.Context(), c, 0, count(1))
		if status.Code(err) != code || len(got) != 0 {
			t.Errorf("%v: events %v, error %v; want none and that code", code, got, err)
		}
	}
}

func TestWatchEndsWithItsContext(t *testing.T) {
	t.Parallel()
	c := serve(t, &fakeService{watch: func(_ *wideberthv1.WatchVersionsRequest, s watchStream) error {
		_ = s.Send(heartbeat(1))
		<-s.Context().Done()
		return nil
	}})
	ctx, cancel := context.WithCancel(t.Context())
	_, err := follow(ctx, c, 1, func([]string) bool { cancel(); return false })
	if !errors.Is(err, context.Canceled) {
		t.Errorf("ended with %v, want the context's error", err)
	}
}

func TestWatchOfAnUnreachableServerGoesOn(t *testing.T) {
	t.Parallel()
	c, err := Dial("127.0.0.1:1", WithBackoff(time.Millisecond, time.Millisecond))
	if err != nil {
		t.Fatal(err)
	}
	defer func() { _ = c.Close() }()
	ctx, cancel := context.WithTimeout(t.Context(), 50*time.Millisecond)
	defer cancel()
	got, err := follow(ctx, c, 1, func([]string) bool { return false })
	if !slices.Equal(got, []string{"broken"}) || !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("events %v, error %v; want one break, then the context's end", got, err)
	}
}
