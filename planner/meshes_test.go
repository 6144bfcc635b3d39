package planner

import (
	"context"
	"errors"
	"sync"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/plainfloor"
)

// mazeMeshes are the meshes of a maze, and must gets one of them.
func mazeMeshes(t *testing.T, n int) (*floor.Map, *meshes) {
	t.Helper()
	m, err := plainfloor.Maze(n, 4).Floor()
	if err != nil {
		t.Fatal(err)
	}
	return m, newMeshes(m)
}

func must(t *testing.T, s *meshes, um int64) *anyangle.Mesh {
	t.Helper()
	g, err := s.get(context.Background(), meshKey{um: um})
	if err != nil {
		t.Fatal(err)
	}
	return g
}

func TestMeshesAreBoundedAndTheUsedOnesStay(t *testing.T) {
	_, s := mazeMeshes(t, 40)
	first := must(t, s, 1)
	for k := range int64(MeshLimit + 5) {
		must(t, s, 10+k)
		if must(t, s, 1) != first {
			t.Fatalf("dropped after %d others although it was in use", k+1)
		}
		if n := len(s.kept); n > MeshLimit {
			t.Fatalf("%d meshes kept, want at most %d", n, MeshLimit)
		}
	}
	if n := must(t, s, 10).Need().ClearanceUm; n != 10 {
		t.Errorf("asked for 10 µm once more and got %d", n)
	}
	if _, err := s.get(context.Background(), meshKey{um: anyangle.MaxClearanceUm + 1}); err == nil || len(s.kept) > MeshLimit {
		t.Error("a mesh that cannot be made is kept")
	}
}

func TestOneMeshIsMadeForAllWhoAskAtOnce(t *testing.T) {
	_, s := mazeMeshes(t, 200)
	var wg sync.WaitGroup
	got := make([]*anyangle.Mesh, 8)
	for i := range got {
		wg.Go(func() { got[i], _ = s.get(context.Background(), meshKey{um: 5}) })
	}
	wg.Wait()
	for _, g := range got {
		if g == nil || g != got[0] {
			t.Fatalf("meshes %p and %p", g, got[0])
		}
	}
}

// Whoever waits may leave: the others get the mesh, and so does the next one.
func TestWaitingForAMeshEndsWithItsContext(t *testing.T) {
	_, s := mazeMeshes(t, 500)
	spent := errors.New("spent")
	for range 20 {
		ctx, cancel := context.WithCancelCause(context.Background())
		go cancel(spent)
		if g, err := s.get(ctx, meshKey{um: 7}); (g == nil) != (err != nil) || err != nil && !errors.Is(err, spent) {
			t.Fatalf("%p, error %v", g, err)
		}
	}
	if g := must(t, s, 7); g == nil {
		t.Fatal("no mesh")
	}
}

func TestMeshesInUseAreCarriedOn(t *testing.T) {
	at, s := mazeMeshes(t, 60)
	must(t, s, 3)
	must(t, s, 4)
	for k := range shelfIdle + 2 {
		m, err := at.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupancy(k % 2), Rect: floor.CellRect{X0: 2, Y0: 2, X1: 4, Y1: 4}}})
		if err != nil {
			t.Fatal(err)
		}
		n, err := carryMeshes(context.Background(), s, m, floor.Diff(at, m))
		if err != nil {
			t.Fatal(err)
		}
		if s, at = n, m; len(s.kept) > 0 && s.kept[0].val.Map() != m {
			t.Fatal("a mesh of another version")
		}
		must(t, s, 4)
	}
	if len(s.kept) != 1 || s.kept[0].key.um != 4 {
		t.Errorf("%d meshes are carried, want the one in use", len(s.kept))
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	m, err := at.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: 8, Y0: 2, X1: 9, Y1: 4}}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := carryMeshes(ctx, s, m, floor.Diff(at, m)); !errors.Is(err, context.Canceled) {
		t.Errorf("error %v, want the context's", err)
	}
}

// A structure that is in the making when the version changes is made and carried on.
func TestWhatIsInTheMakingIsCarriedOn(t *testing.T) {
	type pair struct{ made, advanced int }
	release := make(chan struct{})
	s := &shelf[int, pair]{limit: 4, make: func(_ context.Context, k int) (pair, error) { <-release; return pair{made: k}, nil }}
	n := &shelf[int, pair]{limit: 4, make: func(context.Context, int) (pair, error) { return pair{}, errors.New("made afresh") }}
	s.find(5)
	err := s.carry(context.Background(), n, func(_ context.Context, _ int, p pair) (pair, error) { p.advanced++; return p, nil })
	if err != nil {
		t.Fatal(err)
	}
	close(release)
	if got, err := n.get(context.Background(), 5); err != nil || got != (pair{5, 1}) {
		t.Errorf("%+v, %v", got, err)
	}
}

// What could not be made of one version says nothing of the next: whoever asks for it there
// is answered as on a version that nothing was asked of before.
func TestWhatFailsInTheMakingIsNotCarriedOn(t *testing.T) {
	release := make(chan struct{})
	s := &shelf[int, int]{limit: 4, make: func(context.Context, int) (int, error) { <-release; return 0, errors.New("too large") }}
	n := &shelf[int, int]{limit: 4, make: func(context.Context, int) (int, error) { return 7, nil }}
	s.find(5)
	if err := s.carry(context.Background(), n, func(context.Context, int, int) (int, error) { return 8, nil }); err != nil {
		t.Fatal(err)
	}
	close(release)
	if got, err := n.get(context.Background(), 5); err != nil || got != 7 {
		t.Errorf("%d, %v", got, err)
	}
}

// Bodies of more margins than there is room for graphs do not make versions slow to get
// ready: roads whose graph was dropped are made when they are asked for, not with the version.
func TestRoadsWithoutTheirGraphAreNotCarriedOn(t *testing.T) {
	ctx := context.Background()
	m, err := plainfloor.Maze(20, 4).Floor()
	if err != nil {
		t.Fatal(err)
	}
	w, err := NewWorld(ctx, m)
	if err != nil {
		t.Fatal(err)
	}
	for k := range int64(GraphLimit + 3) {
		if _, err := w.ways.roads.get(ctx, roadKey{60_000, graphKey{k, true}}); err != nil {
			t.Fatal(err)
		}
	}
	next, err := m.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: 10, Y0: 10, X1: 11, Y1: 11}}})
	if err != nil {
		t.Fatal(err)
	}
	v, err := w.Advance(ctx, next)
	if err != nil {
		t.Fatal(err)
	}
	for k := range int64(GraphLimit + 3) {
		key := graphKey{k, true}
		if got, want := v.ways.roads.has(roadKey{60_000, key}), k >= 3; got != want || v.ways.graphs.has(key) != want {
			t.Errorf("margin %d: roads %v, graph %v; want %v", k, got, v.ways.graphs.has(key), want)
		}
	}
}

// Makings go on when nobody waits any more, but not any number of them.
func TestMakingsThatNobodyWaitsForAreBounded(t *testing.T) {
	ended := make(chan int, 10)
	s := &shelf[int, int]{limit: 10, make: func(ctx context.Context, k int) (int, error) {
		<-ctx.Done()
		ended <- k
		return 0, ctx.Err()
	}}
	for k := range 5 {
		ctx, cancel := context.WithCancel(context.Background())
		e := s.find(k)
		cancel()
		if _, err := s.wait(ctx, e); !errors.Is(err, context.Canceled) {
			t.Fatal(err)
		}
	}
	got := map[int]bool{<-ended: true, <-ended: true, <-ended: true}
	if !got[0] || !got[1] || !got[2] {
		t.Errorf("ended %v, want the oldest", got)
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if len(s.making) > 2+3 || len(s.kept) != unattendedLimit {
		t.Errorf("%d kept", len(s.kept))
	}
}

// A world advanced from one that was planned on has all that the next plan asks for.
func TestAdvancedWorldIsReadyForEveryPreference(t *testing.T) {
	ctx := context.Background()
	m, err := plainfloor.Maze(60, 4).Floor()
	if err != nil {
		t.Fatal(err)
	}
	w, err := NewWorld(ctx, m)
	if err != nil {
		t.Fatal(err)
	}
	b := Body{RadiusUm: 2_000, PreferredUm: 60_000, MaxSpeed: 1, Braking: 1, Reaction: 1}
	for pref := range Clearest + 1 {
		q := Request{Body: b, Options: Options{Preference: pref, TightWeight: 1}}
		s := m.Settings()
		in := 0
		for r := range s.Rows { // the first free cells far apart
			for c := range s.Columns {
				mid := geom.Point{X: float64(s.OriginX) + (float64(c)+0.5)*float64(s.ResolutionUm), Y: float64(s.OriginY) + (float64(r)+0.5)*float64(s.ResolutionUm)}
				if !m.Solid(c, r) && w.field.At(mid).Um > 2_000 {
					if in++; in == 1 {
						q.Start.At = mid
					}
					q.Goal.At = mid
				}
			}
		}
		if a, err := w.Plan(ctx, q); err != nil || a.Route == nil {
			t.Fatal(a, err)
		}
		next, err := m.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: 30, Y0: 30, X1: 31, Y1: 31}}})
		if err != nil {
			t.Fatal(err)
		}
		v, err := w.Advance(ctx, next)
		if err != nil {
			t.Fatal(err)
		}
		k := &task{w: v, q: q, j: judge.New(v.field, v.rules, b.Required(), b.RadiusUm)}
		k.j.WideUm = b.PreferredUm
		if pref == Clearest {
			k.j.WideUm = v.field.Cap()
		}
		_, mesh := v.ways.meshes.peek(k.needed())
		_, roads := v.ways.roads.peek(k.roadsFor())
		if pref == Shortest && !mesh || pref != Shortest && !roads {
			t.Errorf("preference %d: mesh %v, roads %v", pref, mesh, roads)
		}
	}
}
