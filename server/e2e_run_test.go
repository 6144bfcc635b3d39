package server

import (
	"context"
	"encoding/json"
	"io"
	"net"
	"strings"
	"testing"
	"time"

	"github.com/rs/zerolog"
	"golang.org/x/net/http2"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	healthpb "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/metadata"
	reflectpb "google.golang.org/grpc/reflection/grpc_reflection_v1"
	"google.golang.org/grpc/status"
	"google.golang.org/grpc/test/bufconn"

	pb "example.com/wideberth/proto/wideberth/v1"
)

func unaryInfo(method string) *grpc.UnaryServerInfo {
	return &grpc.UnaryServerInfo{FullMethod: "/wideberth.v1.FloorService/" + method}
}

// Health names every service; an unknown one is NOT_FOUND.
func TestHealth(t *testing.T) {
	r := start(t)
	h := healthpb.NewHealthClient(r.conn)
	for _, name := range []string{"", "wideberth.v1.FloorService", "wideberth.v1.RouteService", "wideberth.v1.GuideService"} {
		got, err := h.Check(r.ctx(), &healthpb.HealthCheckRequest{Service: name})
		if err != nil || got.Status != healthpb.HealthCheckResponse_SERVING {
			t.Errorf("%q: %v, %v", name, got, err)
		}
	}
	if _, err := h.Check(r.ctx(), &healthpb.HealthCheckRequest{Service: "wideberth.v1.Other"}); status.Code(err) != codes.NotFound {
		t.Errorf("an unknown service: %v", err)
	}
}

// untilWaiting returns once a plan waits for a planner.
func (r *running) untilWaiting(planned <-chan error) {
	r.t.Helper()
	for r.s.lanes.waiting.Load() == 0 {
		select {
		case err := <-planned:
			r.t.Fatalf("the plan did not wait: %v", err)
		case <-time.After(time.Millisecond):
		}
	}
}

// Draining: health says NOT_SERVING, streams end with SHUTTING_DOWN, a plan under
// way is finished, and Serve returns nil, whoever sits on a stream.
func TestDrain(t *testing.T) {
	r := start(t, func(c *Config) { c.Planners, c.PlanWait = 1, 20*time.Second })
	r.hall()
	ctx := r.ctx()
	watch, err := r.floors.WatchVersions(ctx, &pb.WatchVersionsRequest{Floor: "hall"})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := watch.Recv(); err != nil {
		t.Fatal(err)
	}
	guide, err := r.guides.Guide(ctx)
	if err != nil {
		t.Fatal(err)
	}
	if err := guide.Send(&pb.GuideRequest{Message: &pb.GuideRequest_Setup{Setup: &pb.GuideSetup{Route: r.route(toBench())}}}); err != nil {
		t.Fatal(err)
	}
	health, err := healthpb.NewHealthClient(r.conn).Watch(ctx, &healthpb.HealthCheckRequest{})
	if err != nil {
		t.Fatal(err)
	}
	if m, err := health.Recv(); err != nil || m.Status != healthpb.HealthCheckResponse_SERVING {
		t.Fatalf("%v, %v", m, err)
	}
	reflect, err := reflectpb.NewServerReflectionClient(r.conn).ServerReflectionInfo(ctx)
	if err != nil {
		t.Fatal(err)
	}
	if err := reflect.Send(&reflectpb.ServerReflectionRequest{MessageRequest: &reflectpb.ServerReflectionRequest_ListServices{}}); err != nil {
		t.Fatal(err)
	}
	if m, err := reflect.Recv(); err != nil || len(m.GetListServicesResponse().GetService()) < 3 {
		t.Fatalf("%v, %v; wanted the services listed", m, err)
	}
	leave, err := r.s.lanes.enter(ctx)
	if err != nil {
		t.Fatal(err)
	}
	planned := make(chan error, 1)
	go func() {
		_, err := r.routes.Plan(ctx, toBench())
		planned <- err
	}()
	r.untilWaiting(planned)

	r.drain()
	_, err = watch.Recv()
	wantStatus(t, err, codes.Unavailable, "SHUTTING_DOWN")
	_, err = guide.Recv()
	wantStatus(t, err, codes.Unavailable, "SHUTTING_DOWN")
	if m, err := health.Recv(); err == nil && m.Status != healthpb.HealthCheckResponse_NOT_SERVING {
		t.Errorf("health %v while draining", m)
	}
	leave()
	if err := <-planned; err != nil {
		t.Errorf("the plan under way: %v", err)
	}
	r.stop()
}

// A call that does not end is cut after the drain timeout, and Serve says so.
func TestDrainIsBounded(t *testing.T) {
	r := start(t, func(c *Config) { c.Planners, c.PlanWait, c.DrainTimeout = 1, 30*time.Second, 50*time.Millisecond })
	r.hall()
	leave, err := r.s.lanes.enter(r.ctx())
	if err != nil {
		t.Fatal(err)
	}
	defer leave()
	planned := make(chan error, 1)
	go func() {
		_, err := r.routes.Plan(r.ctx(), toBench())
		planned <- err
	}()
	r.untilWaiting(planned)
	r.drain()
	if err := <-r.ended; err == nil || !strings.Contains(err.Error(), "cut after 50ms") {
		t.Errorf("Serve: %v, wanted the cut reported", err)
	}
	if err := <-planned; status.Code(err) != codes.Unavailable {
		t.Errorf("the plan that was cut: %v, wanted UNAVAILABLE", err)
	}
	r.ended <- nil
}

// A handler that panics answers INTERNAL without a word of why; the log has it all
// under the call's id, and the server goes on.
func TestPanicIsContained(t *testing.T) {
	r := start(t)
	ctx := metadata.NewIncomingContext(r.ctx(), metadata.Pairs(requestIDHeader, "night-7"))
	ctx = grpc.NewContextWithServerTransportStream(ctx, headerSink{})
	_, err := r.s.unary(ctx, &pb.GetFloorRequest{Floor: "hall"}, unaryInfo("GetFloor"), func(context.Context, any) (any, error) {
		panic("secret shelf")
	})
	wantStatus(t, err, codes.Internal, "INTERNAL")
	if strings.Contains(err.Error(), "secret") {
		t.Errorf("leaks: %v", err)
	}
	err = r.s.stream(nil, &fakeStream{ctx: ctx}, &grpc.StreamServerInfo{FullMethod: "/wideberth.v1.FloorService/WatchVersions"}, func(any, grpc.ServerStream) error {
		panic("secret shelf")
	})
	wantStatus(t, err, codes.Internal, "INTERNAL")
	log := r.log.String()
	if strings.Count(log, `"panic":"secret shelf"`) != 2 || !strings.Contains(log, `"request_id":"night-7"`) {
		t.Errorf("the log lacks the panics or the id:\n%s", log)
	}
	r.hall()
}

type headerSink struct{}

func (headerSink) Method() string               { return "" }
func (headerSink) SetHeader(metadata.MD) error  { return nil }
func (headerSink) SendHeader(metadata.MD) error { return nil }
func (headerSink) SetTrailer(metadata.MD) error { return nil }

type fakeStream struct {
	grpc.ServerStream
	ctx context.Context
}

func (f *fakeStream) Context() context.Context    { return f.ctx }
func (f *fakeStream) SetHeader(metadata.MD) error { return nil }

// Every call has one access line with the fields dashboards look for, and gives
// its id back.
func TestAccessLine(t *testing.T) {
	r := start(t)
	r.hall()
	var header metadata.MD
	ctx := metadata.AppendToOutgoingContext(r.ctx(), requestIDHeader, "robot-7-0214")
	if _, err := r.routes.Plan(ctx, toBench(), grpc.Header(&header)); err != nil {
		t.Fatal(err)
	}
	if got := header.Get(requestIDHeader); len(got) != 1 || got[0] != "robot-7-0214" {
		t.Errorf("header %v, wanted the id back", got)
	}
	var line map[string]any
	for text := range strings.Lines(r.log.String()) {
		if strings.Contains(text, "robot-7-0214") {
			if err := json.Unmarshal([]byte(text), &line); err != nil {
				t.Fatal(err)
			}
		}
	}
	for k, want := range map[string]any{
		"level": "info", "grpc.service": "wideberth.v1.RouteService", "grpc.method": "Plan", "grpc.code": "OK",
		"peer.address": "bufconn", "request_id": "robot-7-0214", "floor": "hall", "map_version": 2.0,
	} {
		if line[k] != want {
			t.Errorf("%s: %v, wanted %v", k, line[k], want)
		}
	}
	if ms, ok := line["grpc.time_ms"].(float64); !ok || ms <= 0 {
		t.Errorf("grpc.time_ms: %v", line["grpc.time_ms"])
	}
	if _, err := r.floors.GetFloor(r.ctx(), &pb.GetFloorRequest{Floor: "hall"}, grpc.Header(&header)); err != nil || len(header.Get(requestIDHeader)) != 1 {
		t.Errorf("a call without an id: %v, header %v; wanted one made", err, header)
	}
}

// A message beyond the bound is refused before it is read.
func TestMessageBound(t *testing.T) {
	r := start(t, func(c *Config) { c.MaxMessageBytes = 2 << 20 })
	r.hall()
	q := push(put(solidPolygon("x", polygon(1, 2, 2, 2, 2, 3))))
	for len(q.Patch.Edits) < 1000 {
		q.Patch.Edits = append(q.Patch.Edits, paintCells(&pb.CellBlock{Cells: make([]byte, 4<<10)}))
	}
	if _, err := r.floors.PushPatch(r.ctx(), q); status.Code(err) != codes.ResourceExhausted {
		t.Errorf("got %v, wanted RESOURCE_EXHAUSTED", err)
	}
}

// A client that pings far more often than allowed is sent away; one that pings now
// and then is not.
func TestKeepaliveEnforcement(t *testing.T) {
	r := start(t)
	pings := func(n int) (goaway bool) {
		conn, err := r.lis.DialContext(r.ctx())
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		return pingRaw(t, conn, n)
	}
	if pings(1) {
		t.Error("one ping without a stream was too many")
	}
	if !pings(8) {
		t.Error("eight pings at once were not too many")
	}
}

// pingRaw speaks just enough HTTP/2 to send n pings and says whether the server
// answered with GOAWAY.
func pingRaw(t *testing.T, conn net.Conn, n int) bool {
	t.Helper()
	if _, err := io.WriteString(conn, http2.ClientPreface); err != nil {
		t.Fatal(err)
	}
	f := http2.NewFramer(conn, conn)
	if err := f.WriteSettings(); err != nil {
		t.Fatal(err)
	}
	go func() {
		for i := range n {
			if f.WritePing(false, [8]byte{byte(i)}) != nil {
				return // the server has hung up
			}
		}
	}()
	acks := 0
	for {
		frame, err := f.ReadFrame()
		if err != nil {
			return acks < n
		}
		switch m := frame.(type) {
		case *http2.GoAwayFrame:
			return true
		case *http2.PingFrame:
			if m.IsAck() {
				if acks++; acks == n {
					return false
				}
			}
		}
	}
}

// Serving without TLS where others can reach it is said loudly; on loopback it is not.
func TestPlainTextBeyondLoopbackWarns(t *testing.T) {
	for addr, want := range map[string]bool{"0.0.0.0:0": true, "127.0.0.1:0": false} {
		lis, err := net.Listen("tcp", addr)
		if err != nil {
			t.Fatal(err)
		}
		log := &logBuffer{}
		s, err := New(t.Context(), DefaultConfig(), zerolog.New(log))
		if err != nil {
			t.Fatal(err)
		}
		ctx, stop := context.WithCancel(t.Context())
		served := make(chan error, 1)
		go func() { served <- s.Serve(ctx, lis) }()
		for !strings.Contains(log.String(), `"message":"serving"`) {
			time.Sleep(time.Millisecond)
		}
		stop()
		if err := <-served; err != nil {
			t.Error(err)
		}
		if warned := strings.Contains(log.String(), "without TLS"); warned != want {
			t.Errorf("%s: warned %v, wanted %v", addr, warned, want)
		}
	}
}

// A server that is told to stop before it began to serve has drained cleanly.
func TestStoppedBeforeItBegan(t *testing.T) {
	for range 20 {
		s, err := New(t.Context(), DefaultConfig(), zerolog.Nop())
		if err != nil {
			t.Fatal(err)
		}
		ctx, stop := context.WithCancel(t.Context())
		stop()
		if err := s.Serve(ctx, bufconn.Listen(1)); err != nil {
			t.Fatal(err)
		}
	}
}

// Clients may compress what they send, and are answered alike.
func TestGzip(t *testing.T) {
	r := start(t)
	r.hall()
	got, err := r.routes.Plan(r.ctx(), toBench(), grpc.UseCompressor("gzip"))
	if err != nil || got.GetRoute() == nil {
		t.Errorf("%v, %v", got, err)
	}
}

// Two servers on one journal file would each think they own the head: the second is
// refused.
func TestOneServerForAFile(t *testing.T) {
	r := start(t)
	cfg := DefaultConfig()
	cfg.Data = r.s.cfg.Data
	if s, err := New(t.Context(), cfg, zerolog.Nop()); err == nil {
		t.Errorf("a second server took %s (%v)", cfg.Data, s.Close())
	} else if !strings.Contains(err.Error(), "test.db") {
		t.Errorf("%v does not name the file", err)
	}
}
