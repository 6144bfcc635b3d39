package planner

import (
	"context"
	"fmt"
	"slices"
	"sync"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/anyangle"
)

const (
	// MeshLimit is how many meshes a World keeps: one for each of a dozen kinds of
	// body. One more drops the one asked for longest ago, which costs the time to make
	// it when it is asked for again and changes no answer.
	MeshLimit = 12
	// meshIdle is for how many versions a mesh is brought up to date without being
	// asked for.
	meshIdle = 64
)

// meshKey is what a mesh is made for: the required clearance, and the radius kept from
// closed zones.
type meshKey struct{ um, radiusUm int64 }

func (k meshKey) need() anyangle.Need {
	return anyangle.Need{ClearanceUm: k.um, Zones: true, ZoneUm: k.radiusUm}
}

// meshes are the meshes of one version, each made when it is first asked for. It is safe
// for any number of callers: two that ask for one mesh at once wait for one making of
// it, others do not wait.
type meshes struct {
	m    *floor.Map
	mu   sync.Mutex  // held to look at or change the fields of this and of its keptMesh
	kept []*keptMesh // at most MeshLimit; the one asked for last is last
}

// keptMesh is a mesh, or one in the making.
type keptMesh struct {
	key     meshKey
	idle    int // versions since it was asked for
	waiters int
	cancel  context.CancelFunc
	done    chan struct{} // closed once mesh and err are set
	mesh    *anyangle.Mesh
	err     error
}

func newMeshes(m *floor.Map) *meshes { return &meshes{m: m} }

// get is the mesh for a body. A making that nobody waits for any more is given up.
// The error is ctx's cause, or an *anyangle.NeedError.
func (s *meshes) get(ctx context.Context, k meshKey) (*anyangle.Mesh, error) {
	if ctx.Err() != nil {
		return nil, context.Cause(ctx)
	}
	e := s.find(k)
	select {
	case <-e.done:
		return e.mesh, e.err
	case <-ctx.Done():
		s.mu.Lock()
		defer s.mu.Unlock()
		if e.waiters--; e.waiters == 0 {
			e.cancel()
			s.drop(e)
		}
		return nil, context.Cause(ctx)
	}
}

// find is the kept mesh for k, its making begun if need be; the caller counts as a waiter.
func (s *meshes) find(k meshKey) *keptMesh {
	s.mu.Lock()
	defer s.mu.Unlock()
	if i := slices.IndexFunc(s.kept, func(e *keptMesh) bool { return e.key == k }); i >= 0 {
		e := s.kept[i]
		copy(s.kept[i:], s.kept[i+1:])
		s.kept[len(s.kept)-1] = e
		e.idle = 0
		e.waiters++
		return e
	}
	ctx, cancel := context.WithCancel(context.Background())
	e := &keptMesh{key: k, waiters: 1, cancel: cancel, done: make(chan struct{})}
	if len(s.kept) == MeshLimit {
		s.kept = slices.Delete(s.kept, 0, 1) // whoever waits for it has it still
	}
	s.kept = append(s.kept, e)
	go func() {
		defer cancel()
		g, err := build(ctx, s.m, k.need())
		s.mu.Lock()
		defer s.mu.Unlock()
		if e.mesh, e.err = g, err; err != nil {
			s.drop(e)
		}
		close(e.done)
	}()
	return e
}

// build makes a mesh. It runs apart from any call, so a panic, a fault of this
// program, becomes an error for those who wait rather than the process's end.
func build(ctx context.Context, m *floor.Map, need anyangle.Need) (g *anyangle.Mesh, err error) {
	defer func() {
		if p := recover(); p != nil {
			g, err = nil, fmt.Errorf("planner: making convex cells: %v", p)
		}
	}()
	return anyangle.Build(ctx, m, need)
}

// drop forgets e; s.mu is held.
func (s *meshes) drop(e *keptMesh) {
	s.kept = slices.DeleteFunc(s.kept, func(o *keptMesh) bool { return o == e })
}

// carry makes the meshes of another version of the same floor from those that are
// made and in use. The error is ctx's.
func (s *meshes) carry(ctx context.Context, m *floor.Map, change floor.Change) (*meshes, error) {
	n := newMeshes(m)
	done := make(chan struct{})
	close(done)
	s.mu.Lock()
	for _, e := range s.kept {
		if e.mesh != nil && e.idle < meshIdle {
			n.kept = append(n.kept, &keptMesh{key: e.key, idle: e.idle + 1, cancel: func() {}, done: done, mesh: e.mesh})
		}
	}
	s.mu.Unlock()
	for _, e := range n.kept {
		var err error
		if e.mesh, err = e.mesh.Advance(ctx, m, change); err != nil {
			return nil, err
		}
	}
	return n, nil
}
