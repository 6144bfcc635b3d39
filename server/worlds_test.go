package server

import (
	"bytes"
	"context"
	"errors"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/rs/zerolog"
	"google.golang.org/grpc/codes"
	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/planner"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// snap is a version straight from the store.
func (r *running) snap(v int64) *mapstore.Snapshot {
	r.t.Helper()
	s, err := r.s.store.At(r.ctx(), "hall", v)
	if err != nil {
		r.t.Fatal(err)
	}
	return s
}

// A head is made ready in the background, without anybody asking.
func TestHeadsAreMadeReady(t *testing.T) {
	r := start(t)
	r.hall()
	head := r.push(put(station("s", 2, 2)))
	for {
		if w, s := r.s.worlds.newest("hall"); s != nil && s.Info.Version == head.Version {
			if w.Map() != s.Map {
				t.Error("the head's world is of another map")
			}
			return
		}
		time.Sleep(time.Millisecond)
	}
}

// Callers that ask at once share one build; a restored version shares the world of
// the one it brought back; old worlds are let go, heads are not.
func TestWorldsAreShared(t *testing.T) {
	r := start(t, func(c *Config) { c.Worlds = 2 })
	r.hall()
	for i := range 5 {
		r.push(put(station("s", 2, 2+float64(i)/10)))
	}
	var wg sync.WaitGroup
	got := make([]*planner.World, 8)
	for i := range got {
		wg.Go(func() {
			w, err := r.s.worlds.get(r.ctx(), r.snap(3))
			if err != nil {
				t.Error(err)
			}
			got[i] = w
		})
	}
	wg.Wait()
	for _, w := range got {
		if w != got[0] || w == nil {
			t.Fatal("the same version was made ready twice")
		}
	}
	if _, err := r.floors.RestoreVersion(r.ctx(), &pb.RestoreVersionRequest{Floor: "hall", RestoredVersion: 3, BaseVersion: 7, Author: "a", Reason: "b"}); err != nil {
		t.Fatal(err)
	}
	if w, err := r.s.worlds.get(r.ctx(), r.snap(8)); err != nil || w != got[0] {
		t.Errorf("the restored version has a world of its own (%v)", err)
	}
	for v := int64(1); v <= 7; v++ {
		if _, err := r.s.worlds.get(r.ctx(), r.snap(v)); err != nil {
			t.Fatal(err)
		}
	}
	r.s.worlds.mu.Lock()
	defer r.s.worlds.mu.Unlock()
	// Two spare ones and the head; right after a change of heads the one before
	// may stay until the next build.
	if n := r.s.worlds.recent.Len(); n > 4 || n != len(r.s.worlds.ready) {
		t.Errorf("%d worlds are kept and %d filed, wanted at most 4", n, len(r.s.worlds.ready))
	}
	if r.s.worlds.ready[keyOf(r.s.worlds.floors["hall"].snap)] == nil {
		t.Error("the head's world was let go")
	}
}

// A build that nobody waits for any more is given up, and the next caller gets a
// new one.
func TestAbandonedBuild(t *testing.T) {
	r := start(t, func(c *Config) { c.Worlds = 1 })
	r.hall()
	r.push(put(station("s", 2, 2)))
	r.push(put(station("s", 2, 3)))
	for v := int64(4); v >= 2; v-- { // the head, and then others, so that 1 is let go
		if _, err := r.s.worlds.get(r.ctx(), r.snap(v)); err != nil {
			t.Fatal(err)
		}
	}
	for range cap(r.s.worlds.turns) {
		r.s.worlds.turns <- struct{}{} // every turn is taken
	}
	old := r.snap(1)
	ctx, cancel := context.WithCancel(r.ctx())
	failed := make(chan error, 1)
	go func() {
		_, err := r.s.worlds.get(ctx, old)
		failed <- err
	}()
	pending := func() int {
		r.s.worlds.mu.Lock()
		defer r.s.worlds.mu.Unlock()
		return len(r.s.worlds.pending)
	}
	for pending() == 0 {
		time.Sleep(time.Millisecond)
	}
	cancel()
	if err := <-failed; !errors.Is(err, context.Canceled) {
		t.Errorf("got %v, wanted the caller's own end", err)
	}
	if n := pending(); n != 0 {
		t.Errorf("%d builds go on for nobody", n)
	}
	for range cap(r.s.worlds.turns) {
		<-r.s.worlds.turns
	}
	if _, err := r.s.worlds.get(r.ctx(), old); err != nil {
		t.Errorf("the next caller: %v", err)
	}
}

// A build goes on for a caller that ran out of time, which finds it when it comes
// back; when it never does, the build is given up all the same.
func TestBuildWaitsForWhoComesBack(t *testing.T) {
	r := start(t, func(c *Config) { c.Worlds = 1 })
	r.hall()
	r.push(put(station("s", 2, 2)))
	r.push(put(station("s", 2, 3)))
	for v := int64(4); v >= 2; v-- { // the head, and then others, so that 1 is let go
		if _, err := r.s.worlds.get(r.ctx(), r.snap(v)); err != nil {
			t.Fatal(err)
		}
	}
	old := r.snap(1)
	pending := func() *build {
		r.s.worlds.mu.Lock()
		defer r.s.worlds.mu.Unlock()
		return r.s.worlds.pending[keyOf(old)]
	}
	runOut := func() {
		t.Helper()
		ctx, cancel := context.WithTimeout(r.ctx(), time.Millisecond)
		defer cancel()
		if _, err := r.s.worlds.get(ctx, old); !errors.Is(err, context.DeadlineExceeded) {
			t.Fatalf("got %v, wanted the caller's own deadline", err)
		}
	}
	for range cap(r.s.worlds.turns) {
		r.s.worlds.turns <- struct{}{} // every turn is taken
	}
	runOut()
	first := pending()
	if first == nil {
		t.Fatal("the build was given up at once")
	}
	runOut()
	if pending() != first {
		t.Fatal("who came back got another build")
	}
	r.s.worlds.comeBack = time.Millisecond
	runOut()
	for pending() != nil {
		time.Sleep(time.Millisecond) // given up in the end
	}
	<-first.done
	if !errors.Is(first.err, context.Canceled) {
		t.Errorf("the build ended with %v", first.err)
	}
	for range cap(r.s.worlds.turns) {
		<-r.s.worlds.turns
	}
	if _, err := r.s.worlds.get(r.ctx(), old); err != nil {
		t.Errorf("the next caller: %v", err)
	}
}

// A version never changes (law 1): plans pinned to a version give the same answer
// while others push.
func TestAVersionNeverChanges(t *testing.T) {
	r := start(t, func(c *Config) { c.Worlds = 1 })
	r.hall()
	q := toBench()
	q.Version = pinned(2)
	want := r.route(q)
	done := make(chan struct{})
	go func() {
		defer close(done)
		for i := range 12 {
			x := 6 + float64(i)/10
			r.push(put(solidPolygon("crate", polygon(x, 2, x+0.5, 2, x+0.5, 3.4, x, 3.4))))
		}
	}()
	var wg sync.WaitGroup
	for range 4 {
		wg.Go(func() {
			for {
				got, err := r.routes.Plan(r.ctx(), q)
				if err != nil {
					t.Error(err)
					return
				}
				if !proto.Equal(got.GetRoute(), want) {
					t.Errorf("version 2 got another answer: %v", got)
					return
				}
				select {
				case <-done:
					return
				default:
				}
			}
		})
	}
	wg.Wait()
	<-done
}

// A version that a route was planned on stays readable after the store let go of
// it, which a version without a route does not cost.
func TestPlannedVersionIsHeld(t *testing.T) {
	r := start(t)
	r.hall()
	route := r.route(toBench())
	held := r.s.holds.get("hall", route.CheckedAgainst.Version)
	if held == nil || digestOut(held.Info.Digest) != route.CheckedAgainst.Digest {
		t.Fatalf("version %v is not held", route.CheckedAgainst)
	}
	if r.s.holds.get("hall", 1) != nil {
		t.Error("version 1 is held without a route")
	}
}

// A search that runs out of its own budget is a refusal that says so; the caller's
// deadline is an error.
func TestTimeBudget(t *testing.T) {
	r := start(t)
	req := create()
	req.Settings.Columns, req.Settings.Rows, req.Settings.InitialOccupancy = 2000, 2000, pb.Occupancy_OCCUPANCY_FREE
	if _, err := r.floors.CreateFloor(r.ctx(), req); err != nil {
		t.Fatal(err)
	}
	// Walls from alternating sides make every cell worth a look.
	var edits []*pb.Edit
	for i := range 12 {
		x, lo, hi := 8*float64(i+1)-1, 0.0, 98.0
		if i%2 == 1 {
			lo, hi = 2, 100
		}
		edits = append(edits, put(solidPolygon("wall-"+string(rune('a'+i)), polygon(x, lo, x+0.1, lo, x+0.1, hi, x, hi))))
	}
	if _, err := r.s.worlds.get(r.ctx(), r.snap(r.push(edits...).Version)); err != nil {
		t.Fatal(err)
	}
	q := plan()
	q.Goal = atPose(98, 50)
	q.Options = &pb.PlanOptions{Roadmap: pb.Roadmap_ROADMAP_GRID8, TimeBudgetS: 0.001}
	got, err := r.routes.Plan(r.ctx(), q)
	if err != nil {
		t.Fatal(err)
	}
	if f := got.GetRefusal(); f.GetReason() != pb.RefusalReason_REFUSAL_REASON_OUT_OF_TIME || f.RetryAfterS <= 0 {
		t.Errorf("got %v, wanted out of time and when to ask again", got)
	}
	q.Options.TimeBudgetS = 30
	ctx, cancel := context.WithCancel(r.ctx())
	defer cancel()
	ended := make(chan error, 1)
	go func() {
		_, err := r.routes.Plan(ctx, q)
		ended <- err
	}()
	plans := func() int { return strings.Count(r.log.String(), `"grpc.method":"Plan"`) }
	for len(r.s.lanes.slots) == 0 && plans() < 2 {
		time.Sleep(100 * time.Microsecond) // until the search is under way
	}
	cancel()
	if err := <-ended; err == nil {
		t.Log("the plan was quicker than its caller")
	} else {
		wantStatus(t, err, codes.Canceled, "")
	}
	for plans() < 2 || len(r.s.lanes.slots) > 0 {
		time.Sleep(time.Millisecond) // the server noticed and freed its planner
	}
	_, err = r.routes.Plan(r.ctx(), edited(q, func(q *pb.PlanRequest) { q.Version = pinned(9) }))
	wantStatus(t, err, codes.NotFound, "VERSION_NOT_FOUND")
}

// TestPanicWhileMakingAVersionReady stands for a fault in the planner: the daemon
// and its other floors must outlive it. A snapshot without content is what panics.
func TestPanicWhileMakingAVersionReady(t *testing.T) {
	var log bytes.Buffer
	w := newWorlds(nil, 1, zerolog.New(&log))
	defer w.close()
	world, err := w.get(t.Context(), &mapstore.Snapshot{Info: mapstore.VersionInfo{Floor: "hall", Version: 7}})
	if world != nil || !errors.Is(err, errPanic) {
		t.Errorf("world %v, error %v; wanted no world and errPanic", world, err)
	}
	for _, want := range []string{`"floor":"hall"`, `"map_version":7`, `"stack":`} {
		if !strings.Contains(log.String(), want) {
			t.Errorf("log lacks %s: %s", want, log.String())
		}
	}
	if code := statusOf(context.Background(), err, subject{}); !strings.Contains(code.Error(), "Internal") {
		t.Errorf("status %v, wanted Internal", code)
	}
}
