package planner

import (
	"context"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/anyangle"
)

// MeshLimit is how many meshes a World keeps: three for each of a dozen kinds of body, at
// the required clearance, the preferred one and the cap. One more drops the one asked for
// longest ago, which costs the time to make it when it is asked for again and changes no
// answer. A mesh takes up to a few megabytes for a hall of ten million cells, and about
// anyangle.MaxBytes at most.
const MeshLimit = 36

// meshKey is what a mesh is made for: a clearance, and what is kept from closed zones
// where they count.
type meshKey struct {
	um, zoneUm int64
	zones      bool
}

func (k meshKey) need() anyangle.Need {
	return anyangle.Need{ClearanceUm: k.um, Zones: k.zones, ZoneUm: k.zoneUm}
}

// meshes are the meshes of one version.
type meshes = shelf[meshKey, *anyangle.Mesh]

func newMeshes(m *floor.Map) *meshes {
	return &meshes{limit: MeshLimit, make: func(ctx context.Context, k meshKey) (*anyangle.Mesh, error) {
		return anyangle.Build(ctx, m, k.need())
	}}
}

// carryMeshes makes the meshes of another version of the same floor from those that are
// made and in use. The error is ctx's.
func carryMeshes(ctx context.Context, s *meshes, m *floor.Map, change floor.Change) (*meshes, error) {
	n := newMeshes(m)
	return n, s.carry(ctx, n, func(ctx context.Context, _ meshKey, g *anyangle.Mesh) (*anyangle.Mesh, error) {
		return g.Advance(ctx, m, change)
	})
}

// needed is the mesh of what keeps the required clearance.
func (t *task) needed() meshKey { return meshKey{t.j.NeedUm, t.j.RadiusUm, true} }
