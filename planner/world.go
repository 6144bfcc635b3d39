package planner

import (
	"context"
	"errors"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/mask"
	"example.com/wideberth/planner/internal/roadmap"
	"example.com/wideberth/planner/internal/rules"
	roadmaps "example.com/wideberth/planner/roadmap"
)

// World is one version made ready for planning: its clearance field, its zones, and
// the free cells, meshes and Voronoi edges for the bodies that were planned for. What it answers never
// changes; it is safe for any number of readers.
type World struct {
	m     *floor.Map
	field *clearance.Field
	rules *rules.Rules
	check *check.Index // for routes found; the search has no part in it
	masks *mask.Set
	ways  *ways
	// classics are the roadmaps that engineers asked for by name.
	classics *shelf[classicKey, roadmaps.Roadmap]
	// turn is held while one of classics is brought up to date, one at a time in all versions
	// of a floor: plans come first.
	turn    chan struct{}
	frame   roadmap.Frame
	changes changes
}

// ErrTimeBudget is the cause to set on a context whose deadline is the request's own
// time budget (context.WithTimeoutCause).
var ErrTimeBudget = errors.New("planner: time budget spent")

// NewWorld makes a version ready from scratch, in time linear in its cells. The error
// is ctx's, or says which of the floor's settings is out of range.
func NewWorld(ctx context.Context, m *floor.Map) (*World, error) {
	f, err := clearance.Build(ctx, m)
	if err != nil {
		return nil, err
	}
	r := rules.Of(m)
	return &World{m: m, field: f, rules: r, check: check.Of(m), masks: mask.NewSet(f, r), ways: newWays(f, newMeshes(m)), classics: newClassics(f), turn: make(chan struct{}, 1), frame: roadmap.FrameOf(m.Settings())}, nil
}

// Advance makes m ready from the world of an earlier (or later) version of the
// same floor, with work proportional to what differs, plus the number of features
// and of blocks of 64x64 cells. The result answers as NewWorld's would, bit for bit.
func (w *World) Advance(ctx context.Context, m *floor.Map) (*World, error) {
	if m.Settings() != w.m.Settings() {
		return NewWorld(ctx, m)
	}
	change := floor.Diff(w.m, m)
	f, err := w.field.Advance(ctx, m, change)
	if err != nil {
		return nil, err
	}
	g, err := w.ways.carry(ctx, f, change)
	if err != nil {
		return nil, err
	}
	classics := newClassics(f)
	err = w.classics.carry(ctx, classics, func(ctx context.Context, _ classicKey, r roadmaps.Roadmap) (roadmaps.Roadmap, error) {
		select {
		case w.turn <- struct{}{}:
			defer func() { <-w.turn }()
			return r.Advance(ctx, f, change)
		case <-ctx.Done():
			return nil, ctx.Err()
		}
	})
	if err != nil {
		return nil, err
	}
	r := rules.Of(m)
	n := &World{m: m, field: f, rules: r, check: check.Of(m), masks: w.masks.Carry(f, r, rules.ClosedChanges(change)), ways: g, classics: classics, turn: w.turn, frame: w.frame}
	n.changes.put(nil, sinceOf(w.m, m, change))
	return n, nil
}

// Map is the version the world was made from.
func (w *World) Map() *floor.Map { return w.m }
