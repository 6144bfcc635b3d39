package planner

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"sync"
	"testing"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/internal/plainfloor"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/voronoi"
)

// What is too large is found out once for a version, and does not keep the next from getting ready.
func TestWhatIsTooLargeIsTriedOnceAVersion(t *testing.T) {
	ctx := context.Background()
	for _, large := range []error{voronoi.ErrTooLarge, anyangle.ErrTooLarge, roadmap.ErrTooLarge} {
		tried := 0
		s := &shelf[int, *int]{limit: 4, make: func(_ context.Context, k int) (*int, error) {
			if k == 1 {
				tried++
				return nil, fmt.Errorf("clutter: %w", large)
			}
			return &k, nil
		}}
		for range 3 {
			if _, err := s.get(ctx, 1); !errors.Is(err, large) {
				t.Fatal(err)
			}
		}
		if _, err := s.get(ctx, 2); err != nil || tried != 1 {
			t.Errorf("%v: tried %d times", large, tried)
		}
		if _, ok := s.peek(1); ok {
			t.Error("there is one")
		}
		n := &shelf[int, *int]{limit: 4, make: s.make}
		// 2 gets too large with the change.
		err := s.carry(ctx, n, func(_ context.Context, k int, v *int) (*int, error) { return nil, large })
		if err != nil || len(n.kept) != 0 {
			t.Errorf("%v: %d carried, error %v", large, len(n.kept), err)
		}
		if v, err := n.get(ctx, 2); err != nil || *v != 2 {
			t.Error(err)
		}
	}
}

// Whoever asks gets what was made for what they asked, while others have it dropped and
// versions come and go; and what was asked for last stays.
func TestShelfUnderManyCallers(t *testing.T) {
	ctx := context.Background()
	s := &shelf[int, *int]{limit: 4, make: func(_ context.Context, k int) (*int, error) { return &k, nil }}
	for range 20 {
		var wg sync.WaitGroup
		for g := range 4 {
			wg.Go(func() {
				for i := range 200 {
					k := (i*(g+1) + g) % 7
					if v, err := s.get(ctx, k); err != nil || *v != k {
						t.Errorf("asked for %d and got %v, %v", k, v, err)
					}
					if v, ok := s.peek(k); ok && *v != k {
						t.Errorf("there is %d for %d", *v, k)
					}
				}
			})
		}
		n := &shelf[int, *int]{limit: 4, make: s.make}
		if err := s.carry(ctx, n, func(_ context.Context, _ int, v *int) (*int, error) { return v, nil }); err != nil {
			t.Fatal(err)
		}
		wg.Wait()
		if len(s.kept) > 4 || len(n.kept) > 4 {
			t.Fatalf("%d and %d kept", len(s.kept), len(n.kept))
		}
		last, err := n.get(ctx, 9)
		if err != nil {
			t.Fatal(err)
		}
		for k := range 3 {
			if _, err := n.get(ctx, k); err != nil {
				t.Fatal(err)
			}
		}
		if v, ok := n.peek(9); !ok || v != last {
			t.Fatal("dropped before those asked for longer ago")
		}
		s = n
	}
}

// A fault in the making of a structure says where it was, for the log of whoever asked.
func TestAFaultInTheMakingSaysWhere(t *testing.T) {
	s := &shelf[int, int]{limit: 4, make: func(context.Context, int) (int, error) { return faultyMaker(nil), nil }}
	_, err := s.get(context.Background(), 1)
	if err == nil || !strings.Contains(err.Error(), "nil pointer") || !strings.Contains(err.Error(), "faultyMaker") {
		t.Errorf("%v, wanted the fault and its stack", err)
	}
}

//go:noinline
func faultyMaker(p *int) int { return *p }

// Where clutter leaves neither a mesh nor edges, every preference is answered over cells.
func TestClutterIsPlannedOverCells(t *testing.T) {
	ctx := context.Background()
	m, err := plainfloor.NewCells(80, 60).Floor()
	if err != nil {
		t.Fatal(err)
	}
	w, err := NewWorld(ctx, m)
	if err != nil {
		t.Fatal(err)
	}
	w.ways.graphs.make = func(context.Context, graphKey) (*voronoi.Graph, error) {
		return nil, fmt.Errorf("%w: noise", voronoi.ErrTooLarge)
	}
	w.ways.meshes.make = func(context.Context, meshKey) (*anyangle.Mesh, error) {
		return nil, fmt.Errorf("%w: noise", anyangle.ErrTooLarge)
	}
	b := m.Bounds()
	q := Request{
		Body:    Body{RadiusUm: 200_000, PreferredUm: 400_000, MaxSpeed: 1, Braking: 1, Reaction: 1},
		Start:   Pose{At: geom.Point{X: b.Min.X + 600_000, Y: b.Min.Y + 600_000}},
		Goal:    Pose{At: geom.Point{X: b.Max.X - 600_000, Y: b.Max.Y - 600_000}},
		Options: Options{TightWeight: 1},
	}
	for pref := range Clearest + 1 {
		q.Options.Preference = pref
		a, err := w.Plan(ctx, q)
		if err != nil || a.Route == nil {
			t.Errorf("preference %d: %+v, %v", pref, a, err)
		}
	}
}
