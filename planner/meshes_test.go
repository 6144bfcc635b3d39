package planner

import (
	"context"
	"errors"
	"sync"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/internal/plainfloor"
)

func mazeMeshes(t *testing.T, n int) *meshes {
	t.Helper()
	m, err := plainfloor.Maze(n, 4).Floor()
	if err != nil {
		t.Fatal(err)
	}
	return newMeshes(m)
}

func (s *meshes) must(t *testing.T, um int64) *anyangle.Mesh {
	t.Helper()
	g, err := s.get(context.Background(), meshKey{um: um})
	if err != nil {
		t.Fatal(err)
	}
	return g
}

func TestMeshesAreBoundedAndTheUsedOnesStay(t *testing.T) {
	s := mazeMeshes(t, 40)
	first := s.must(t, 1)
	for k := range int64(MeshLimit + 5) {
		s.must(t, 10+k)
		if s.must(t, 1) != first {
			t.Fatalf("dropped after %d others although it was in use", k+1)
		}
		if n := len(s.kept); n > MeshLimit {
			t.Fatalf("%d meshes kept, want at most %d", n, MeshLimit)
		}
	}
	if n := s.must(t, 10).Need().ClearanceUm; n != 10 {
		t.Errorf("asked for 10 µm once more and got %d", n)
	}
	if _, err := s.get(context.Background(), meshKey{um: anyangle.MaxClearanceUm + 1}); err == nil || len(s.kept) > MeshLimit {
		t.Error("a mesh that cannot be made is kept")
	}
}

func TestOneMeshIsMadeForAllWhoAskAtOnce(t *testing.T) {
	s := mazeMeshes(t, 200)
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

// Whoever waits may leave: the others get the mesh, and the next one does once all left.
func TestWaitingForAMeshEndsWithItsContext(t *testing.T) {
	s := mazeMeshes(t, 500)
	spent := errors.New("spent")
	for range 20 {
		ctx, cancel := context.WithCancelCause(context.Background())
		go cancel(spent)
		if g, err := s.get(ctx, meshKey{um: 7}); (g == nil) != (err != nil) || err != nil && !errors.Is(err, spent) {
			t.Fatalf("%p, error %v", g, err)
		}
	}
	if g := s.must(t, 7); g == nil {
		t.Fatal("no mesh")
	}
}

func TestMeshesInUseAreCarriedOn(t *testing.T) {
	s := mazeMeshes(t, 60)
	s.must(t, 3)
	s.must(t, 4)
	old := s.m
	for k := range meshIdle + 2 {
		m, err := s.m.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupancy(k % 2), Rect: floor.CellRect{X0: 2, Y0: 2, X1: 4, Y1: 4}}})
		if err != nil {
			t.Fatal(err)
		}
		n, err := s.carry(context.Background(), m, floor.Diff(s.m, m))
		if err != nil {
			t.Fatal(err)
		}
		if s = n; len(s.kept) > 0 && s.kept[0].mesh.Map() != m {
			t.Fatal("a mesh of another version")
		}
		s.must(t, 4)
	}
	if len(s.kept) != 1 || s.kept[0].key.um != 4 || s.m == old {
		t.Errorf("%d meshes are carried, want the one in use", len(s.kept))
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	m, err := s.m.Apply([]floor.Edit{{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: 8, Y0: 2, X1: 9, Y1: 4}}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.carry(ctx, m, floor.Diff(s.m, m)); !errors.Is(err, context.Canceled) {
		t.Errorf("error %v, want the context's", err)
	}
}
