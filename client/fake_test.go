package client

import (
	"context"
	"net"
	"testing"
	"time"

	"go.uber.org/goleak"
	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/protoadapt"
	"google.golang.org/protobuf/types/known/durationpb"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// fakeService answers by functions, so that a test can drop, delay and garble what
// a real server never would on demand.
type fakeService struct {
	wideberthv1.UnimplementedFloorServiceServer
	wideberthv1.UnimplementedRouteServiceServer
	wideberthv1.UnimplementedGuideServiceServer
	wideberthv1.UnimplementedRoadmapServiceServer

	getFloor        func(context.Context, *wideberthv1.GetFloorRequest) (*wideberthv1.GetFloorResponse, error)
	push            func(context.Context, *wideberthv1.PushPatchRequest) (*wideberthv1.PushPatchResponse, error)
	list            func(context.Context, *wideberthv1.ListFloorsRequest) (*wideberthv1.ListFloorsResponse, error)
	plan            func(context.Context, *wideberthv1.PlanRequest) (*wideberthv1.PlanResponse, error)
	planMany        func(*wideberthv1.PlanManyRequest, grpc.ServerStreamingServer[wideberthv1.PlanManyResponse]) error
	read            func(*wideberthv1.ReadFloorRequest, grpc.ServerStreamingServer[wideberthv1.ReadFloorResponse]) error
	watch           func(*wideberthv1.WatchVersionsRequest, grpc.ServerStreamingServer[wideberthv1.WatchVersionsResponse]) error
	showRoadmap     func(*wideberthv1.ShowRoadmapRequest, grpc.ServerStreamingServer[wideberthv1.ShowRoadmapResponse]) error
	showGrown       func(*wideberthv1.ShowGrownSolidsRequest, grpc.ServerStreamingServer[wideberthv1.ShowGrownSolidsResponse]) error
	compareRoadmaps func(context.Context, *wideberthv1.CompareRoadmapsRequest) (*wideberthv1.CompareRoadmapsResponse, error)
	guide           func(grpc.BidiStreamingServer[wideberthv1.GuideRequest, wideberthv1.GuideResponse]) error
}

func (f *fakeService) GetFloor(ctx context.Context, r *wideberthv1.GetFloorRequest) (*wideberthv1.GetFloorResponse, error) {
	return f.getFloor(ctx, r)
}

func (f *fakeService) PushPatch(ctx context.Context, r *wideberthv1.PushPatchRequest) (*wideberthv1.PushPatchResponse, error) {
	return f.push(ctx, r)
}

func (f *fakeService) ListFloors(ctx context.Context, r *wideberthv1.ListFloorsRequest) (*wideberthv1.ListFloorsResponse, error) {
	return f.list(ctx, r)
}

func (f *fakeService) Plan(ctx context.Context, r *wideberthv1.PlanRequest) (*wideberthv1.PlanResponse, error) {
	return f.plan(ctx, r)
}

func (f *fakeService) PlanMany(r *wideberthv1.PlanManyRequest, s grpc.ServerStreamingServer[wideberthv1.PlanManyResponse]) error {
	return f.planMany(r, s)
}

func (f *fakeService) ReadFloor(r *wideberthv1.ReadFloorRequest, s grpc.ServerStreamingServer[wideberthv1.ReadFloorResponse]) error {
	return f.read(r, s)
}

func (f *fakeService) WatchVersions(r *wideberthv1.WatchVersionsRequest, s grpc.ServerStreamingServer[wideberthv1.WatchVersionsResponse]) error {
	return f.watch(r, s)
}

func (f *fakeService) Guide(s grpc.BidiStreamingServer[wideberthv1.GuideRequest, wideberthv1.GuideResponse]) error {
	return f.guide(s)
}

func (f *fakeService) ShowRoadmap(r *wideberthv1.ShowRoadmapRequest, s grpc.ServerStreamingServer[wideberthv1.ShowRoadmapResponse]) error {
	return f.showRoadmap(r, s)
}

func (f *fakeService) ShowGrownSolids(r *wideberthv1.ShowGrownSolidsRequest, s grpc.ServerStreamingServer[wideberthv1.ShowGrownSolidsResponse]) error {
	return f.showGrown(r, s)
}

func (f *fakeService) CompareRoadmaps(ctx context.Context, r *wideberthv1.CompareRoadmapsRequest) (*wideberthv1.CompareRoadmapsResponse, error) {
	return f.compareRoadmaps(ctx, r)
}

// serve runs the fake on loopback and gives a client with short waits. Both go when
// the test ends.
func serve(t *testing.T, f *fakeService, opts ...Option) *Client {
	t.Helper()
	lis, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	s := grpc.NewServer()
	wideberthv1.RegisterFloorServiceServer(s, f)
	wideberthv1.RegisterRouteServiceServer(s, f)
	wideberthv1.RegisterGuideServiceServer(s, f)
	wideberthv1.RegisterRoadmapServiceServer(s, f)
	served := make(chan struct{})
	go func() { defer close(served); _ = s.Serve(lis) }()
	t.Cleanup(func() { s.Stop(); <-served })
	c, err := Dial(lis.Addr().String(), append([]Option{WithBackoff(time.Millisecond, 4*time.Millisecond)}, opts...)...)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = c.Close() })
	return c
}

func statusWith(code codes.Code, details ...protoadapt.MessageV1) error {
	st, err := status.New(code, "as the test wants").WithDetails(details...)
	if err != nil {
		panic(err)
	}
	return st.Err()
}

func comeBackIn(d time.Duration) *errdetails.RetryInfo {
	return &errdetails.RetryInfo{RetryDelay: durationpb.New(d)}
}

func versionAt(n int64) *wideberthv1.Version {
	return &wideberthv1.Version{Stamp: stampAt(n)}
}

func stampAt(n int64) *wideberthv1.VersionStamp {
	return &wideberthv1.VersionStamp{Floor: "hall", Version: n, Digest: "d"}
}

func versionEvent(n, skipped int64) *wideberthv1.WatchVersionsResponse {
	return &wideberthv1.WatchVersionsResponse{Event: &wideberthv1.WatchVersionsResponse_Version{
		Version: &wideberthv1.VersionEvent{Version: versionAt(n), Skipped: skipped},
	}}
}

func heartbeat(n int64) *wideberthv1.WatchVersionsResponse {
	return &wideberthv1.WatchVersionsResponse{Event: &wideberthv1.WatchVersionsResponse_Heartbeat{
		Heartbeat: &wideberthv1.Heartbeat{Head: stampAt(n)},
	}}
}
