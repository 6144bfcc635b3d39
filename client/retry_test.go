package client

import (
	"context"
	"encoding/json"
	"errors"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/reflect/protoreflect"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func TestPushIsSentAgainAsTheSameRequest(t *testing.T) {
	t.Parallel()
	const fail = 8
	var mu sync.Mutex
	var ids, headers []string
	c := serve(t, &fakeService{push: func(ctx context.Context, r *wideberthv1.PushPatchRequest) (*wideberthv1.PushPatchResponse, error) {
		mu.Lock()
		defer mu.Unlock()
		ids = append(ids, r.GetRequestId())
		md, _ := metadata.FromIncomingContext(ctx)
		headers = append(headers, md.Get("x-request-id")...)
		if len(ids) <= fail {
			return nil, status.Error(codes.Unavailable, "restarting")
		}
		return &wideberthv1.PushPatchResponse{Version: versionAt(2)}, nil
	}})
	req := &wideberthv1.PushPatchRequest{Floor: "hall", Patch: &wideberthv1.Patch{Author: "night shift"}}
	resp, err := c.PushPatch(t.Context(), req)
	if err != nil || resp.GetVersion().GetStamp().GetVersion() != 2 {
		t.Fatalf("PushPatch = %v, %v; want version 2", resp, err)
	}
	if len(ids) != fail+1 {
		t.Errorf("sent %d times, want %d", len(ids), fail+1)
	}
	if len(slices.Compact(slices.Concat(ids, headers))) != 1 || ids[0] == "" || len(headers) != len(ids) {
		t.Errorf("request ids %q and headers %q, want one id throughout", ids, headers)
	}
	if req.GetRequestId() != "" {
		t.Errorf("the caller's message now has request id %q", req.GetRequestId())
	}
}

func TestTheCallersOwnRequestIDIsKept(t *testing.T) {
	t.Parallel()
	var id, header string
	c := serve(t, &fakeService{push: func(ctx context.Context, r *wideberthv1.PushPatchRequest) (*wideberthv1.PushPatchResponse, error) {
		md, _ := metadata.FromIncomingContext(ctx)
		id, header = r.GetRequestId(), strings.Join(md.Get("x-request-id"), ",")
		return &wideberthv1.PushPatchResponse{}, nil
	}})
	if _, err := c.PushPatch(t.Context(), &wideberthv1.PushPatchRequest{RequestId: "spill-17"}); err != nil {
		t.Fatal(err)
	}
	if id != "spill-17" || header != "spill-17" {
		t.Errorf("request id %q, header %q, want spill-17 in both", id, header)
	}
	ctx := metadata.AppendToOutgoingContext(t.Context(), "x-request-id", "from-the-gateway")
	if _, err := c.PushPatch(ctx, &wideberthv1.PushPatchRequest{RequestId: "spill-18"}); err != nil {
		t.Fatal(err)
	}
	if header != "from-the-gateway" {
		t.Errorf("header %q, want the caller's", header)
	}
}

func TestWhatIsSentAgain(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		name  string
		err   error
		again bool
	}{
		{"unavailable", statusWith(codes.Unavailable), true},
		{"unavailable until the version is there", statusWith(codes.Unavailable, comeBackIn(time.Millisecond)), true},
		{"shedding load with a time to come back", statusWith(codes.ResourceExhausted, comeBackIn(time.Millisecond)), true},
		{"shedding load without one", statusWith(codes.ResourceExhausted), false},
		{"malformed", statusWith(codes.InvalidArgument), false},
		{"stale base", statusWith(codes.Aborted), false},
		{"stale base with a stray retry info", statusWith(codes.Aborted, comeBackIn(time.Millisecond)), false},
		{"a fault of the server's", statusWith(codes.Internal), false},
	} {
		t.Run(tc.name, func(t *testing.T) {
			t.Parallel()
			calls := 0
			c := serve(t, &fakeService{getFloor: func(context.Context, *wideberthv1.GetFloorRequest) (*wideberthv1.GetFloorResponse, error) {
				if calls++; calls <= 4 {
					return nil, tc.err
				}
				return &wideberthv1.GetFloorResponse{Floor: &wideberthv1.Floor{Id: "hall"}}, nil
			}})
			floor, err := c.GetFloor(t.Context(), "hall")
			if tc.again && (err != nil || floor.GetId() != "hall" || calls != 5) {
				t.Errorf("got %v, %v after %d calls, want the floor after 5", floor, err, calls)
			}
			if !tc.again && (status.Code(err) != status.Code(tc.err) || calls != 1) {
				t.Errorf("got %v after %d calls, want its code %v after 1", err, calls, status.Code(tc.err))
			}
		})
	}
}

// The server keeps the cause of an internal error to its log: the caller needs the id.
func TestInternalErrorsNameTheirRequest(t *testing.T) {
	t.Parallel()
	var header string
	c := serve(t, &fakeService{getFloor: func(ctx context.Context, _ *wideberthv1.GetFloorRequest) (*wideberthv1.GetFloorResponse, error) {
		md, _ := metadata.FromIncomingContext(ctx)
		header = strings.Join(md.Get("x-request-id"), ",")
		return nil, status.Error(codes.Internal, "see the log")
	}})
	_, err := c.GetFloor(t.Context(), "hall")
	if header == "" || status.Code(err) != codes.Internal || !strings.Contains(err.Error(), header) {
		t.Errorf("got %v, want INTERNAL and the request id %q", err, header)
	}
}

func TestRetryInfoIsWaitedFor(t *testing.T) {
	t.Parallel()
	const ask = 60 * time.Millisecond
	var at []time.Time
	c := serve(t, &fakeService{getFloor: func(context.Context, *wideberthv1.GetFloorRequest) (*wideberthv1.GetFloorResponse, error) {
		if at = append(at, time.Now()); len(at) == 1 {
			return nil, statusWith(codes.ResourceExhausted, comeBackIn(ask))
		}
		return &wideberthv1.GetFloorResponse{}, nil
	}})
	if _, err := c.GetFloor(t.Context(), "hall"); err != nil {
		t.Fatal(err)
	}
	if gap := at[1].Sub(at[0]); gap < ask {
		t.Errorf("came back after %v, the server asked for %v", gap, ask)
	}
}

func TestGivingUpSaysWhy(t *testing.T) {
	t.Parallel()
	c := serve(t, &fakeService{getFloor: func(context.Context, *wideberthv1.GetFloorRequest) (*wideberthv1.GetFloorResponse, error) {
		return nil, statusWith(codes.Unavailable, &errdetails.ErrorInfo{Reason: "DRAINING", Domain: "wideberth", Metadata: map[string]string{"since": "02:14"}})
	}}, WithTimeouts(Timeouts{Read: 50 * time.Millisecond}))
	_, err := c.GetFloor(t.Context(), "hall")
	if status.Code(err) != codes.Unavailable || !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("got %v, want UNAVAILABLE at the end of the deadline", err)
	}
	if reason, md := ReasonOf(err); reason != "DRAINING" || md["since"] != "02:14" {
		t.Errorf("ReasonOf = %q, %v; want the server's reason through the wrapping", reason, md)
	}
	// A server that asks for more time than there is: no use waiting for it.
	slow := serve(t, &fakeService{getFloor: func(context.Context, *wideberthv1.GetFloorRequest) (*wideberthv1.GetFloorResponse, error) {
		return nil, statusWith(codes.ResourceExhausted, comeBackIn(time.Hour))
	}})
	start := time.Now()
	if _, err := slow.GetFloor(t.Context(), "hall"); status.Code(err) != codes.ResourceExhausted {
		t.Errorf("got %v, want RESOURCE_EXHAUSTED", err)
	}
	if took := time.Since(start); took > 5*time.Second {
		t.Errorf("waited %v of a 10 s deadline for a server that asked for an hour", took)
	}
}

func TestMaxTries(t *testing.T) {
	t.Parallel()
	c, err := Dial("127.0.0.1:1", WithBackoff(time.Millisecond, time.Millisecond), WithMaxTries(3))
	if err != nil {
		t.Fatal(err)
	}
	defer func() { _ = c.Close() }()
	_, err = c.GetFloor(t.Context(), "hall")
	if status.Code(err) != codes.Unavailable || !strings.Contains(err.Error(), "given up after 3 tries") {
		t.Errorf("got %v, want UNAVAILABLE after 3 tries", err)
	}
}

func TestCallsWithoutADeadlineGetOne(t *testing.T) {
	t.Parallel()
	var left time.Duration
	c := serve(t, &fakeService{plan: func(ctx context.Context, _ *wideberthv1.PlanRequest) (*wideberthv1.PlanResponse, error) {
		end, ok := ctx.Deadline()
		if !ok {
			t.Error("no deadline reached the server")
		}
		left = time.Until(end)
		return &wideberthv1.PlanResponse{}, nil
	}}, WithTimeouts(Timeouts{Plan: 20 * time.Second}))
	for _, tc := range []struct {
		req  *wideberthv1.PlanRequest
		want time.Duration
	}{
		{&wideberthv1.PlanRequest{}, 20 * time.Second},
		{&wideberthv1.PlanRequest{
			Options: &wideberthv1.PlanOptions{TimeBudgetS: 30},
			Version: &wideberthv1.VersionSelector{MaxWaitS: 10},
		}, time.Minute},
	} {
		if _, err := c.Plan(t.Context(), tc.req); err != nil {
			t.Fatal(err)
		}
		if left > tc.want || left < tc.want-5*time.Second {
			t.Errorf("Plan(%v) had %v left at the server, want just under %v", tc.req, left, tc.want)
		}
	}
	ctx, cancel := context.WithTimeout(t.Context(), 3*time.Second)
	defer cancel()
	if _, err := c.Plan(ctx, &wideberthv1.PlanRequest{}); err != nil {
		t.Fatal(err)
	}
	if left > 3*time.Second {
		t.Errorf("the caller's own deadline of 3 s became %v", left)
	}
}

// Every method is in the service config, but for the streams that Watch and Guide
// take up again with what is known by then.
func TestServiceConfigNamesEveryMethodThatMayBeSentAgain(t *testing.T) {
	t.Parallel()
	var cfg struct {
		MethodConfig []struct {
			Name        []struct{ Service, Method string }
			RetryPolicy struct{ RetryableStatusCodes []string }
		}
	}
	if err := json.Unmarshal([]byte(ServiceConfig), &cfg); err != nil {
		t.Fatal(err)
	}
	if got := cfg.MethodConfig[0].RetryPolicy.RetryableStatusCodes; !slices.Equal(got, []string{"UNAVAILABLE"}) {
		t.Errorf("retryable codes %v, want UNAVAILABLE alone", got)
	}
	named := map[string]bool{}
	for _, n := range cfg.MethodConfig[0].Name {
		named[n.Service+"/"+n.Method] = true
	}
	own := map[string]bool{"wideberth.v1.FloorService/WatchVersions": true, "wideberth.v1.GuideService/Guide": true}
	for _, file := range []protoreflect.FileDescriptor{
		wideberthv1.File_wideberth_v1_floor_service_proto,
		wideberthv1.File_wideberth_v1_route_service_proto,
		wideberthv1.File_wideberth_v1_guide_service_proto,
		wideberthv1.File_wideberth_v1_roadmap_service_proto,
	} {
		for i := range file.Services().Len() {
			svc := file.Services().Get(i)
			for j := range svc.Methods().Len() {
				name := string(svc.FullName()) + "/" + string(svc.Methods().Get(j).Name())
				if named[name] == own[name] {
					t.Errorf("%s: in the service config %v, taken up again otherwise %v: want exactly one", name, named[name], own[name])
				}
				delete(named, name)
			}
		}
	}
	if len(named) > 0 {
		t.Errorf("the service config names unknown methods %v", named)
	}
}

func TestDialRefuses(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		addr string
		opts []Option
		want string // "" when it is accepted
	}{
		{"127.0.0.1:7443", nil, ""},
		{"localhost:7443", nil, ""},
		{"[::1]:7443", nil, ""},
		{"unix:/run/wideberth.sock", nil, ""},
		{"192.0.2.7:7443", nil, "not loopback"},
		{"floor-server:7443", nil, "not loopback"},
		{"floor-server:7443", []Option{WithPlaintext()}, ""},
		{"", nil, "want host:port"},
		{"127.0.0.1", nil, "want host:port"},
		{"127.0.0.1:7443", []Option{WithMaxTries(-1), WithBackoff(0, 0)}, "max tries is -1"},
		{"127.0.0.1:7443", []Option{WithTimeouts(Timeouts{Plan: -1})}, "Timeouts.Plan"},
	} {
		c, err := Dial(tc.addr, tc.opts...)
		if (err == nil) != (tc.want == "") || (err != nil && !strings.Contains(err.Error(), tc.want)) {
			t.Errorf("Dial(%q) = %v, want %q", tc.addr, err, tc.want)
		}
		if err == nil {
			_ = c.Close()
		}
	}
}

func TestListFloorsReadsEveryPage(t *testing.T) {
	t.Parallel()
	c := serve(t, &fakeService{list: func(_ context.Context, r *wideberthv1.ListFloorsRequest) (*wideberthv1.ListFloorsResponse, error) {
		switch r.GetPageToken() {
		case "":
			return &wideberthv1.ListFloorsResponse{Floors: []*wideberthv1.Floor{{Id: "a"}, {Id: "b"}}, NextPageToken: "2"}, nil
		case "2":
			return &wideberthv1.ListFloorsResponse{NextPageToken: "3"}, nil // an empty page is not the end
		case "3":
			return &wideberthv1.ListFloorsResponse{Floors: []*wideberthv1.Floor{{Id: "c"}}}, nil
		}
		return nil, status.Error(codes.InvalidArgument, "unknown token")
	}})
	var got []string
	for f, err := range c.ListFloors(t.Context()) {
		if err != nil {
			t.Fatal(err)
		}
		got = append(got, f.GetId())
	}
	if !slices.Equal(got, []string{"a", "b", "c"}) {
		t.Errorf("floors %q, want a b c", got)
	}
}

func TestBackoffGrowsAndIsCapped(t *testing.T) {
	t.Parallel()
	b := backoffRange{first: 100 * time.Millisecond, most: 5 * time.Second}
	for n, want := range map[int]time.Duration{1: 100 * time.Millisecond, 2: 200 * time.Millisecond, 5: 1600 * time.Millisecond, 7: 5 * time.Second, 1000: 5 * time.Second} {
		seen := map[time.Duration]bool{}
		for range 50 {
			d := b.after(n)
			if d < want/2 || d > want {
				t.Fatalf("after %d tries: %v, want within %v to %v", n, d, want/2, want)
			}
			seen[d] = true
		}
		if len(seen) < 2 {
			t.Errorf("after %d tries: always %v, want jitter", n, want)
		}
	}
}
