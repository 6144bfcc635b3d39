package server

import (
	"context"
	"fmt"
	"math"
	"testing"
	"time"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// A robot on a grid's route gets it mended; who asks without the kept search, as after a
// restart, gets the same route as a new one.
func TestMendedIsTheSameRoute(t *testing.T) {
	r := start(t)
	r.hall()
	q := toBench()
	q.Options = &pb.PlanOptions{Roadmap: pb.Roadmap_ROADMAP_GRID8}
	route := r.route(q)
	on := route.Legs[0].Points[0]
	ask := func(previous *pb.Route) *pb.ReplanResponse {
		t.Helper()
		got, err := r.routes.Replan(r.ctx(), &pb.ReplanRequest{Previous: previous, Pose: &pb.Pose{XM: on.XM, YM: on.YM, HeadingRad: route.Start.HeadingRad}})
		if err != nil {
			t.Fatal(err)
		}
		return got
	}
	// 1 m ahead of the robot.
	bend := route.Legs[0].Points[1]
	share := 1 / math.Hypot(bend.XM-on.XM, bend.YM-on.YM)
	x, y := on.XM+share*(bend.XM-on.XM), on.YM+share*(bend.YM-on.YM)
	r.push(put(solidPolygon("crate", polygon(x-0.1, y-0.1, x+0.1, y-0.1, x+0.1, y+0.1, x-0.1, y+0.1))))
	mended := ask(route)
	if mended.Result != pb.ReplanResult_REPLAN_RESULT_MENDED || mended.Cause != pb.ReplanCause_REPLAN_CAUSE_CUT || mended.Counters.Expanded == 0 {
		t.Fatalf("%v because of %v, %v", mended.Result, mended.Cause, mended.Counters)
	}
	fresh := ask(route) // the search goes with the route that it found last
	if fresh.Result != pb.ReplanResult_REPLAN_RESULT_NEW || !proto.Equal(fresh.GetRoute(), mended.GetRoute()) {
		t.Fatalf("%v:\n%v\nmended:\n%v", fresh.Result, fresh.GetRoute(), mended.GetRoute())
	}
	r.push(&pb.Edit{Action: &pb.Edit_RemoveFeature{RemoveFeature: &pb.RemoveFeature{Name: "crate"}}})
	if back := ask(mended.GetRoute()); back.Result != pb.ReplanResult_REPLAN_RESULT_MENDED || back.GetRoute().LengthM != route.LengthM {
		t.Fatalf("the crate is gone: %v, %v m, wanted %v m", back.Result, back.GetRoute().GetLengthM(), route.LengthM)
	}
	auto := toBench()
	plain := r.route(auto)
	r.push(put(solidPolygon("crate", polygon(4.9, 3, 5.1, 3, 5.1, 3.2, 4.9, 3.2))))
	if got := ask(plain); got.Result == pb.ReplanResult_REPLAN_RESULT_MENDED {
		t.Fatal("mended without a grid asked for")
	}
}

// A robot whose route still stands gets the rest of it, the same whether the service remembers
// the route or not, as after a restart.
func TestKeptIsTheSameRoute(t *testing.T) {
	r := start(t)
	r.hall()
	route := r.route(toBench())
	points := route.Legs[len(route.Legs)-1].Points
	a, b := points[len(points)-2], points[len(points)-1]
	q := &pb.ReplanRequest{Previous: route, Pose: &pb.Pose{XM: (a.XM + b.XM) / 2, YM: (a.YM + b.YM) / 2}}
	r.push(put(solidPolygon("crate", polygon(0.1, 0.1, 0.2, 0.1, 0.2, 0.2, 0.1, 0.2))))
	var got [2]*pb.ReplanResponse
	for i := range got {
		var err error
		if got[i], err = r.routes.Replan(r.ctx(), q); err != nil {
			t.Fatal(err)
		}
		if got[i].Result != pb.ReplanResult_REPLAN_RESULT_KEPT {
			t.Fatalf("%v because of %v", got[i].Result, got[i].Cause)
		}
	}
	if !proto.Equal(got[0].GetRoute(), got[1].GetRoute()) {
		t.Fatalf("%v\nremembered, and not:\n%v", got[0].GetRoute(), got[1].GetRoute())
	}
}

// Kept searches are bounded: the one used longest ago goes first, idle ones go too.
func TestSessionsAreBounded(t *testing.T) {
	now := time.Unix(0, 0)
	c := newSessions(func() time.Time { return now })
	m, err := floor.New(floor.Settings{ResolutionUm: 50_000, Columns: 60, Rows: 60, CapUm: 1_000_000})
	if err != nil {
		t.Fatal(err)
	}
	w, err := planner.NewWorld(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	o := planner.Options{Preference: planner.Shortest, Roadmap: planner.Grid8, KeepRoadmapPath: true}
	session := func() *planner.Session {
		s := new(planner.Session)
		body := planner.Body{RadiusUm: 100_000, PreferredUm: 100_000, MaxSpeed: 1, Braking: 1, Reaction: 1}
		at := func(um float64) planner.Pose { return planner.Pose{At: geom.Point{X: um, Y: um}} }
		if a, err := w.PlanIn(context.Background(), s, planner.Request{Body: body, Start: at(500_000), Goal: at(2_000_000), Options: o}); err != nil || a.Route == nil {
			t.Fatal(a, err)
		}
		return s
	}
	held := func(id string) bool { // and lets go of it
		return c.take(id).Bytes() > 0
	}
	c.most = 5 * session().Bytes() / 2 // two of them
	for i := range 3 {
		c.keep(fmt.Sprint(i), session())
	}
	if c.order.Len() != 2 || c.bytes > c.most || held("0") || !held("1") {
		t.Fatalf("%d kept of %d bytes", c.order.Len(), c.bytes)
	}
	now = now.Add(sessionIdle)
	c.keep("3", session())
	if held("2") || !held("3") || c.bytes != 0 || len(c.by) != 0 {
		t.Fatalf("an idle search is kept, %d bytes", c.bytes)
	}
	c.keep("4", new(planner.Session))
	if c.order.Len() != 0 {
		t.Fatal("an empty session is kept")
	}
}
