package server

import (
	"context"
	"net"
	"slices"
	"testing"
	"time"

	"github.com/rs/zerolog"
	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"

	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/testdata"
)

// echo answers every plan with one answer made before.
type echo struct {
	pb.UnimplementedRouteServiceServer
	answer *pb.PlanResponse
}

func (e *echo) Plan(context.Context, *pb.PlanRequest) (*pb.PlanResponse, error) { return e.answer, nil }

func onLoopback(b *testing.B) (net.Listener, *grpc.ClientConn) {
	lis, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		b.Fatal(err)
	}
	c, err := grpc.NewClient(lis.Addr().String(), grpc.WithTransportCredentials(insecure.NewCredentials()))
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() { _ = c.Close() })
	return lis, c
}

// BenchmarkPlanServed plans from station to station in the demonstration hall over a loopback
// connection, and reports the median time of a call over that of an echo of the same
// messages by a bare server (plan/echo), and its percentiles.
func BenchmarkPlanServed(b *testing.B) {
	for _, c := range []struct {
		name string
		pref pb.Preference
	}{{"shortest", pb.Preference_PREFERENCE_SHORTEST}, {"balanced", pb.Preference_PREFERENCE_BALANCED}} {
		b.Run(c.name, func(b *testing.B) { planServed(b, c.pref) })
	}
}

func planServed(b *testing.B, pref pb.Preference) {
	hall, err := testdata.Hall()
	if err != nil {
		b.Fatal(err)
	}
	ctx, stop := context.WithCancel(context.Background())
	s, err := New(ctx, DefaultConfig(), zerolog.Nop())
	if err != nil {
		b.Fatal(err)
	}
	lis, conn := onLoopback(b)
	served := make(chan error, 1)
	go func() { served <- s.Serve(ctx, lis) }()
	b.Cleanup(func() {
		stop()
		if err := <-served; err != nil {
			b.Error(err)
		}
	})
	floors, routes := pb.NewFloorServiceClient(conn), pb.NewRouteServiceClient(conn)
	if _, err := floors.CreateFloor(ctx, &pb.CreateFloorRequest{Floor: "hall", Settings: hall.Settings, Author: "bench"}); err != nil {
		b.Fatal(err)
	}
	if _, err := floors.PushPatch(ctx, &pb.PushPatchRequest{Floor: "hall", RequestId: "all", Patch: &pb.Patch{BaseVersion: 1, Author: "bench", Reason: "layout", Edits: hall.Edits}}); err != nil {
		b.Fatal(err)
	}
	body, ok := hall.Body("tug")
	if !ok {
		b.Fatal("no tug")
	}
	station := func(name string) *pb.Place { return &pb.Place{Where: &pb.Place_Station{Station: name}} }
	ask := &pb.PlanRequest{Floor: "hall", Body: body, Start: station("dock-3"), Goal: station("cold-3"), Options: &pb.PlanOptions{Preference: pref}}
	answer, err := routes.Plan(ctx, ask)
	if err != nil || answer.GetRoute() == nil {
		b.Fatal(answer, err)
	}

	bare := grpc.NewServer()
	pb.RegisterRouteServiceServer(bare, &echo{answer: answer})
	bareLis, bareConn := onLoopback(b)
	done := make(chan error, 1)
	go func() { done <- bare.Serve(bareLis) }()
	b.Cleanup(func() { bare.Stop(); <-done })
	echoes := pb.NewRouteServiceClient(bareConn)

	timed := func(c pb.RouteServiceClient) time.Duration {
		t0 := time.Now()
		if _, err := c.Plan(ctx, ask); err != nil {
			b.Fatal(err)
		}
		return time.Since(t0)
	}
	var plans, plain []time.Duration
	for b.Loop() {
		plans, plain = append(plans, timed(routes)), append(plain, timed(echoes))
	}
	slices.Sort(plans)
	slices.Sort(plain)
	p50 := plans[len(plans)/2]
	b.ReportMetric(float64(p50)/float64(plain[len(plain)/2]), "plan/echo")
	b.ReportMetric(float64(p50.Nanoseconds())/1e3, "p50_us")
	b.ReportMetric(float64(plans[len(plans)*99/100].Nanoseconds())/1e3, "p99_us")
}
