package judge_test

import (
	"context"
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/rules"
)

// circle is what a plain look at the solids about a place finds: on a circle of a
// micrometre, which runs of many directions are free. Lattice directions of the floors drawn
// here are four or more apart.
type circle [rays]int // number of the free run that a direction is in; 0: not free

const rays = 2880

func look(m *floor.Map, at geom.Point) (c circle) {
	s := m.Settings()
	solid := func(p geom.Point) bool {
		if !s.OpenBorder && !m.Bounds().Contains(p) {
			return true
		}
		x, y := int(math.Floor(p.X/float64(s.ResolutionUm))), int(math.Floor(p.Y/float64(s.ResolutionUm)))
		if x >= 0 && y >= 0 && x < s.Columns && y < s.Rows && m.Solid(x, y) {
			return true
		}
		for f := range m.Features() {
			if d, _ := f.Shape.Dist(p); d == 0 {
				return true
			}
		}
		return false
	}
	run := 0
	for k := range c {
		a := (float64(k) + 0.5) * 2 * math.Pi / rays
		if solid(geom.Point{X: at.X + math.Cos(a), Y: at.Y + math.Sin(a)}) {
			continue
		}
		if k == 0 || c[k-1] == 0 {
			run++
		}
		c[k] = run
	}
	if first, last := c[0], c[rays-1]; first != 0 && last != 0 {
		for k := range c {
			if c[k] == last {
				c[k] = first
			}
		}
	}
	return c
}

// beside are the runs just to either side of direction u.
func (c *circle) beside(u geom.Point) [2]int {
	k := math.Atan2(u.Y, u.X) / (2 * math.Pi) * rays
	at := func(k float64) int { return c[(int(math.Floor(k))%rays+rays)%rays] }
	return [2]int{at(k + 0.6), at(k - 0.6)}
}

// passes says whether a way may come from direction u and leave in direction v.
func (c *circle) passes(u, v geom.Point) bool {
	for _, from := range c.beside(u) {
		for _, to := range c.beside(v) {
			if from == to && from != 0 {
				return true
			}
		}
	}
	return false
}

func minus(p, q geom.Point) geom.Point { return geom.Point{X: p.X - q.X, Y: p.Y - q.Y} }

// straight says whether a point may go from a to b, place by place.
func straight(m *floor.Map, a, b geom.Point) bool {
	d, back := minus(b, a), minus(a, b)
	if c := look(m, a); c.beside(d) == [2]int{} {
		return false
	}
	if c := look(m, b); c.beside(back) == [2]int{} {
		return false
	}
	// Where lattice lines or edges are met and between those.
	ts := []float64{0, 1}
	for f := range m.Features() {
		for p, q := range f.Shape.Edges {
			e := minus(q, p)
			if den := d.X*e.Y - d.Y*e.X; den != 0 {
				w := minus(p, a)
				if t := (w.X*e.Y - w.Y*e.X) / den; t > 0 && t < 1 {
					ts = append(ts, t)
				}
			}
		}
	}
	for _, n := range [2]float64{math.Abs(d.X) / 1680, math.Abs(d.Y) / 1680} {
		for k := 1.0; k < n; k++ {
			ts = append(ts, k/n)
		}
	}
	slices.Sort(ts)
	for i := 1; i < len(ts); i++ {
		if ts[i]-ts[i-1] < 1e-9 {
			continue
		}
		for _, t := range [2]float64{(ts[i-1] + ts[i]) / 2, ts[i]} {
			if t == 1 {
				continue
			}
			if c := look(m, judge.Along(a, b, t)); !c.passes(back, d) {
				return false
			}
		}
	}
	return true
}

// drawLattice draws a floor of 8x8 cells of 1680 µm and solids with corners on the lattice.
func drawLattice(t *rapid.T) *floor.Map {
	s := floor.Settings{ResolutionUm: 1680, Columns: 8, Rows: 8, CapUm: 3360, OpenBorder: rapid.Bool().Draw(t, "open")}
	m, err := floor.New(s)
	if err != nil {
		t.Fatal(err)
	}
	var es []floor.Edit
	for range rapid.IntRange(0, 14).Draw(t, "cells") {
		c, r := rapid.IntRange(0, 7).Draw(t, "c"), rapid.IntRange(0, 7).Draw(t, "r")
		es = append(es, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: c, Y0: r, X1: c + 1, Y1: r + 1}})
	}
	for i := range rapid.IntRange(0, 3).Draw(t, "triangles") {
		var ps []geom.Point
		for range 3 {
			ps = append(ps, drawVertex(t))
		}
		if geom.Orient(ps[0], ps[1], ps[2]) != 0 {
			es = append(es, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: string(rune('a' + i)), Kind: floor.Solid, Shape: floor.NewPolygon([][]geom.Point{ps}, 0)}})
		}
	}
	if m, err = m.Apply(es); err != nil {
		t.Fatal(err)
	}
	return m
}

func drawVertex(t *rapid.T) geom.Point {
	return geom.Point{X: 1680 * float64(rapid.IntRange(0, 8).Draw(t, "x")), Y: 1680 * float64(rapid.IntRange(0, 8).Draw(t, "y"))}
}

// A point body's lines of sight, and its routes in the check, against a plain look at
// the directions about each place of the way.
func TestPointAgainstDirections(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		m := drawLattice(t)
		f, err := clearance.Build(context.Background(), m)
		if err != nil {
			t.Fatal(err)
		}
		j := judge.New(f, rules.Of(m), 0, 0)
		for range 3 {
			a, b, c := drawVertex(t), drawVertex(t), drawVertex(t)
			if a == b || b == c {
				continue
			}
			j.Ends = [2]geom.Point{a, b}
			want := straight(m, a, b)
			if got := j.Sight(a, b); got != want {
				t.Fatalf("from %v to %v: sight %t, want %t", a, b, got, want)
			}
			if p := check.Way(m, []geom.Point{a, b}, 0, 0).Problem; (p == "") != want {
				t.Fatalf("from %v to %v: the check says %q, want %t", a, b, p, want)
			}
			at := look(m, b)
			bend := want && straight(m, b, c) && at.passes(minus(a, b), minus(c, b))
			if p := check.Way(m, []geom.Point{a, b, c}, 0, 0).Problem; (p == "") != bend {
				t.Fatalf("from %v by %v to %v: the check says %q, want %t", a, b, c, p, bend)
			}
			j.Ends = [2]geom.Point{a, c}
			if j.Sight(a, b) && j.Sight(b, c) && !bend {
				t.Fatalf("from %v by %v to %v: sight, but no way through", a, b, c)
			}
			free := look(m, a) != circle{}
			if ok, _ := j.Stands(a); ok != free {
				t.Fatalf("at %v: stands %t, want %t", a, ok, free)
			}
		}
	})
}
