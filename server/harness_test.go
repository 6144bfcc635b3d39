package server

import (
	"bytes"
	"context"
	"net"
	"path/filepath"
	"sync"
	"testing"
	"time"

	"github.com/rs/zerolog"
	"go.uber.org/goleak"
	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/status"
	"google.golang.org/grpc/test/bufconn"

	pb "example.com/wideberth/proto/wideberth/v1"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// logBuffer is a log that tests may read while it is written.
type logBuffer struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *logBuffer) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.Write(p)
}

func (l *logBuffer) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.String()
}

// running is a server over an in-memory connection, with a real journal file.
type running struct {
	t      *testing.T
	s      *Server
	lis    *bufconn.Listener
	conn   *grpc.ClientConn
	log    *logBuffer
	floors pb.FloorServiceClient
	routes pb.RouteServiceClient
	guides pb.GuideServiceClient

	drain context.CancelFunc
	ended chan error
}

// start runs a server until the test ends; edit changes its configuration.
func start(t *testing.T, edit ...func(*Config)) *running {
	t.Helper()
	cfg := DefaultConfig()
	cfg.Data = filepath.Join(t.TempDir(), "test.db")
	cfg.LogLevel = "debug"
	for _, e := range edit {
		e(&cfg)
	}
	r := &running{t: t, log: &logBuffer{}, lis: bufconn.Listen(1 << 20), ended: make(chan error, 1)}
	s, err := New(context.Background(), cfg, zerolog.New(r.log))
	if err != nil {
		t.Fatal(err)
	}
	r.s = s
	ctx, drain := context.WithCancel(context.Background())
	r.drain = drain
	go func() { r.ended <- s.Serve(ctx, r.lis) }()
	r.conn = r.dial()
	r.floors = pb.NewFloorServiceClient(r.conn)
	r.routes = pb.NewRouteServiceClient(r.conn)
	r.guides = pb.NewGuideServiceClient(r.conn)
	t.Cleanup(func() {
		r.stop()
		if t.Failed() {
			t.Logf("the server's log:\n%s", r.log)
		}
	})
	return r
}

func (r *running) dial() *grpc.ClientConn {
	r.t.Helper()
	conn, err := grpc.NewClient("passthrough:///bufconn",
		grpc.WithTransportCredentials(insecure.NewCredentials()),
		grpc.WithContextDialer(func(ctx context.Context, _ string) (net.Conn, error) { return r.lis.DialContext(ctx) }))
	if err != nil {
		r.t.Fatal(err)
	}
	r.t.Cleanup(func() { conn.Close() })
	return conn
}

// stop drains the server and fails the test when that does not end cleanly.
func (r *running) stop() {
	r.drain()
	select {
	case err := <-r.ended:
		if err != nil {
			r.t.Errorf("Serve: %v", err)
		}
		r.ended <- nil // for a second call
	case <-time.After(20 * time.Second):
		r.t.Error("Serve did not return")
	}
}

// ctx is a context that ends well after any test should.
func (r *running) ctx() context.Context {
	ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
	r.t.Cleanup(cancel)
	return ctx
}

// hall makes a free floor of 10 by 5 m with two stations and a wall that leaves a
// gap of 2 m at the top, at version 2.
func (r *running) hall() *pb.VersionStamp {
	r.t.Helper()
	req := create()
	req.Settings.InitialOccupancy = pb.Occupancy_OCCUPANCY_FREE
	if _, err := r.floors.CreateFloor(r.ctx(), req); err != nil {
		r.t.Fatal(err)
	}
	return r.push(
		put(solidPolygon("wall", polygon(4.9, 0, 5.1, 0, 5.1, 3, 4.9, 3))),
		put(station("dock", 1, 1)), put(station("bench", 9, 1)),
	)
}

func station(name string, x, y float64) *pb.Feature {
	return &pb.Feature{Name: name, Kind: &pb.Feature_Station{Station: &pb.Station{Pose: &pb.Pose{XM: x, YM: y}}}}
}

// push pushes edits on the head and gives the new version's stamp.
func (r *running) push(edits ...*pb.Edit) *pb.VersionStamp {
	r.t.Helper()
	req := push(edits...)
	req.Patch.BaseVersion = r.head().Version
	got, err := r.floors.PushPatch(r.ctx(), req)
	if err != nil {
		r.t.Fatal(err)
	}
	return got.Version.Stamp
}

func (r *running) head() *pb.VersionStamp {
	r.t.Helper()
	got, err := r.floors.GetFloor(r.ctx(), &pb.GetFloorRequest{Floor: "hall"})
	if err != nil {
		r.t.Fatal(err)
	}
	return got.Floor.Head
}

// toBench asks for the way from dock to bench.
func toBench() *pb.PlanRequest {
	return &pb.PlanRequest{
		Floor: "hall", Body: &pb.Body{RadiusM: 0.3, MarginM: 0.1, PreferredClearanceM: 0.5},
		Start: atStation("dock"), Goal: atStation("bench"),
	}
}

// route plans and wants a route.
func (r *running) route(q *pb.PlanRequest) *pb.Route {
	r.t.Helper()
	got, err := r.routes.Plan(r.ctx(), q)
	if err != nil {
		r.t.Fatal(err)
	}
	if got.GetRoute() == nil {
		r.t.Fatalf("refused: %v", got.GetRefusal())
	}
	return got.GetRoute()
}

// wantStatus fails unless err has that code and reason.
func wantStatus(t *testing.T, err error, code codes.Code, why string) {
	t.Helper()
	if status.Code(err) != code || reason(err) != why {
		t.Errorf("got %v (%s), wanted %s %s", err, reason(err), code, why)
	}
}

// metaOf is a failure's ErrorInfo metadata.
func metaOf(err error) map[string]string { return detail[*errdetails.ErrorInfo](err).GetMetadata() }
