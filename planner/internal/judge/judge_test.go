package judge_test

import (
	"context"
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/rules"
)

func drawFloor(t *rapid.T) *floor.Map {
	s := floor.Settings{ResolutionUm: 50_000, Columns: 100, Rows: 80, CapUm: 2_500_000, OpenBorder: rapid.Bool().Draw(t, "open")}
	m, err := floor.New(s)
	if err != nil {
		t.Fatal(err)
	}
	p := func() geom.Point {
		return geom.Point{X: float64(rapid.Int64Range(0, 5_000_000).Draw(t, "x")), Y: float64(rapid.Int64Range(0, 4_000_000).Draw(t, "y"))}
	}
	var es []floor.Edit
	c, r := rapid.IntRange(0, 90).Draw(t, "c"), rapid.IntRange(0, 70).Draw(t, "r")
	es = append(es, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: c, Y0: r, X1: c + rapid.IntRange(1, 10).Draw(t, "w"), Y1: r + rapid.IntRange(1, 10).Draw(t, "h")}})
	a, b := p(), p()
	if a != b {
		es = append(es, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "rail", Kind: floor.Solid, WidthUm: 80_000, Shape: floor.NewPolyline([]geom.Point{a, b, p()}, 80_000, 0)}})
	}
	es = append(es, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "drum", Kind: floor.Solid, RadiusUm: 200_000, Shape: floor.NewDisc(p(), 200_000, 0)}})
	if m, err = m.Apply(es); err != nil {
		t.Skip(err)
	}
	return m
}

// Tight against sampling: outside its spans clearance never falls below the
// threshold; inside them it does, but for judge.TightResolution at their ends.
func TestTightAgainstSamples(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		m := drawFloor(t)
		f, err := clearance.Build(context.Background(), m)
		if err != nil {
			t.Fatal(err)
		}
		j := judge.New(f, rules.Of(m), 0, 0)
		in := func(label string) geom.Point {
			return geom.Point{X: float64(rapid.Int64Range(0, 5_000_000).Draw(t, label)), Y: float64(rapid.Int64Range(0, 4_000_000).Draw(t, label))}
		}
		a, b := in("a"), in("b")
		if rapid.Bool().Draw(t, "level") {
			b.Y = a.Y
		}
		if f.Segment(a, b).Um == 0 {
			return // nothing is driven that meets a solid
		}
		um := float64(rapid.Int64Range(1, 2_500_000).Draw(t, "threshold"))
		if rapid.Bool().Draw(t, "grazing") {
			um = math.Floor(f.At(a).Um) + float64(rapid.IntRange(-1, 1).Draw(t, "by"))
		}
		spans := j.Tight(a, b, um)
		long := geom.Dist(a, b)
		if j.Exacts > 5000 {
			t.Fatalf("%d distances evaluated", j.Exacts)
		}
		const samples = 400
		for k := range samples + 1 {
			s := float64(k) / samples
			in, edge := false, math.Inf(1)
			for _, sp := range spans {
				in = in || sp.From <= s && s <= sp.To
				edge = min(edge, math.Abs(s-sp.From)*long, math.Abs(s-sp.To)*long)
			}
			d := f.At(judge.Along(a, b, s)).Um
			switch {
			case !in && d < um-1e-3:
				t.Fatalf("clearance %f below %f at share %f, outside %v", d, um, s, spans)
			case in && d >= um+1e-3 && edge > judge.TightResolution:
				t.Fatalf("clearance %f at share %f, inside %v for %f", d, s, spans, um)
			}
		}
	})
}

// What a piece costs against sampling: whether clearance is below the preferred one, at the
// middle of many equal parts.
func TestWeighAgainstSamples(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		m := drawFloor(t)
		f, err := clearance.Build(context.Background(), m)
		if err != nil {
			t.Fatal(err)
		}
		j := judge.New(f, rules.Of(m), rapid.Int64Range(0, 300_000).Draw(t, "need"), 0)
		j.Weight, j.WideUm = rapid.Float64Range(0.5, 4).Draw(t, "weight"), rapid.Int64Range(300_000, 2_500_000).Draw(t, "wide")
		in := func(label string) geom.Point {
			return geom.Point{X: float64(rapid.Int64Range(0, 5_000_000).Draw(t, label)), Y: float64(rapid.Int64Range(0, 4_000_000).Draw(t, label))}
		}
		a, b := in("a"), in("b")
		if f.Segment(a, b).Um < float64(j.NeedUm) {
			return
		}
		got, least := j.Weigh(a, b)
		long := geom.Dist(a, b)
		const samples = 2000
		want, changes, last := long, 0, -1
		for k := range samples {
			below := 0
			if f.At(judge.Along(a, b, (float64(k)+0.5)/samples)).Um < float64(j.WideUm) {
				below = 1
			}
			want += j.Weight * float64(below) * long / samples
			if below != last {
				changes, last = changes+max(below-last, last-below), below
			}
		}
		// Each change is off by half a sample and by the resolution; two changes
		// may hide between two samples.
		each := j.Weight * (long/samples + judge.TightResolution)
		if got < want-float64(changes+4)*each || got > want+float64(changes+4)*each {
			t.Fatalf("costs %f, sampled %f, %d changes", got, want, changes)
		}
		if low := min(f.Segment(a, b).Um, j.Open()); least < low-1e-3 || least > f.Segment(a, b).Um+1e-3 {
			t.Fatalf("smallest clearance %f, is %f", least, low)
		}
	})
}
