package server

import (
	"context"
	"errors"
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// plainLastTouched is lastTouched without its tree: every segment, every piece and
// every change.
func plainLastTouched(from, to *floor.Map, route []geom.Point, reach float64) float64 {
	diff := floor.Diff(from, to)
	var changes []change
	for _, c := range diff.Cells {
		changes = append(changes, change{bounds: to.Settings().CellBounds(c)})
	}
	for _, c := range diff.Features {
		for _, t := range []*floor.Feature{c.Before, c.After} {
			if t != nil && t.Kind != floor.Station && bearsOnRoutes(c) {
				changes = append(changes, change{bounds: t.Shape.Bounds(), shape: &t.Shape})
			}
		}
	}
	touches := func(a, b geom.Point) bool {
		for _, c := range changes {
			if c.touches(a, b, reach) {
				return true
			}
		}
		return false
	}
	last, s := -1.0, 0.0
	for i := 1; i < len(route); i++ {
		a, b := route[i-1], route[i]
		length := geom.Dist(a, b)
		if touches(a, b) {
			n := max(1, math.Ceil(length/touchStep))
			k := n
			at := func(k float64) geom.Point {
				return geom.Point{X: a.X + (b.X-a.X)*k/n, Y: a.Y + (b.Y-a.Y)*k/n}
			}
			for k > 1 && !touches(at(k-1), at(k)) {
				k--
			}
			last = s + length*k/n
		}
		s += length
	}
	return last
}

// The tree finds what looking at everything finds, to the last bit.
func TestLastTouchedIsThePlainAnswer(t *testing.T) {
	const side = 400 // cells of 0.05 m: 20 m
	set := floor.Settings{ResolutionUm: 50_000, Columns: side, Rows: side, CapUm: 5_000_000, Initial: floor.Free}
	empty, err := floor.New(set)
	if err != nil {
		t.Fatal(err)
	}
	touched := 0
	rapid.Check(t, func(t *rapid.T) {
		coordinate := rapid.Float64Range(0, side*50_000)
		point := rapid.Custom(func(t *rapid.T) geom.Point {
			return geom.Point{X: math.Round(coordinate.Draw(t, "x")), Y: math.Round(coordinate.Draw(t, "y"))}
		})
		edit := rapid.Custom(func(t *rapid.T) floor.Edit {
			if rapid.Bool().Draw(t, "cells") {
				x, y := rapid.IntRange(0, side-1).Draw(t, "column"), rapid.IntRange(0, side-1).Draw(t, "row")
				return floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: x, Y0: y, X1: min(side, x+30), Y1: min(side, y+3)}}
			}
			name := rapid.SampledFrom([]string{"a", "b", "c"}).Draw(t, "name")
			r := rapid.Int64Range(1, 800_000).Draw(t, "radius")
			return floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: name, Kind: floor.Solid, RadiusUm: r, Shape: floor.NewDisc(point.Draw(t, "centre"), r, 0)}}
		})
		apply := func(m *floor.Map, label string) *floor.Map {
			m, err := m.Apply(rapid.SliceOfN(edit, 0, 4).Draw(t, label))
			if err != nil {
				t.Fatal(err)
			}
			return m
		}
		from := apply(empty, "before")
		to := apply(from, "after")
		route := rapid.SliceOfN(point, 2, 12).Draw(t, "route")
		reach := float64(rapid.Int64Range(0, 3_000_000).Draw(t, "reach"))
		got, err := lastTouched(context.Background(), from, to, route, reach)
		if want := plainLastTouched(from, to, route, reach); err != nil || got != want {
			t.Fatalf("touched up to %v (%v), plainly %v", got, err, want)
		}
		if got >= 0 {
			touched++
		}
	})
	if touched == 0 {
		t.Error("no route was touched at all")
	}
}

// A look at many changes ends when nobody waits for it any more.
func TestLastTouchedEndsWithItsCaller(t *testing.T) {
	set := floor.Settings{ResolutionUm: 50_000, Columns: 64, Rows: 64, CapUm: 5_000_000}
	from, err := floor.New(set)
	if err != nil {
		t.Fatal(err)
	}
	to, err := from.Apply([]floor.Edit{{Kind: floor.PaintRect, Rect: set.AllCells(), Fill: floor.Occupied}})
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, err := lastTouched(ctx, from, to, []geom.Point{{X: 1}, {X: 2}}, 1); !errors.Is(err, context.Canceled) {
		t.Errorf("got %v, wanted the caller's own end", err)
	}
}
