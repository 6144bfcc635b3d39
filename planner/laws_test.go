package planner_test

import (
	"context"
	"math"
	"reflect"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// bruteDist is the distance from p to the nearest solid, by looking at everything.
func bruteDist(f *floor.Map, p geom.Point) float64 {
	s := f.Settings()
	best := float64(s.CapUm)
	h := float64(s.ResolutionUm)
	for r := range s.Rows {
		for c := range s.Columns {
			if f.Solid(c, r) {
				x, y := float64(s.OriginX)+float64(c)*h, float64(s.OriginY)+float64(r)*h
				best = min(best, math.Hypot(max(x-p.X, 0, p.X-x-h), max(y-p.Y, 0, p.Y-y-h)))
			}
		}
	}
	for ft := range f.Features() {
		if ft.Kind == floor.Solid {
			d, _ := ft.Shape.Dist(p)
			best = min(best, d)
		}
	}
	if b := f.Bounds(); !s.OpenBorder {
		best = min(best, p.X-b.Min.X, b.Max.X-p.X, p.Y-b.Min.Y, b.Max.Y-p.Y)
	}
	return best
}

// slackUm is float64's rounding in the brute-force distances, generously: 1 nm.
const slackUm = 1e-3

func TestLaw5ClearanceNeverOverstated(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		a := plan(t, sc.w, sc.q)
		if a.Route == nil {
			return
		}
		need := float64(sc.q.Body.Required())
		for _, l := range a.Route.Legs {
			for i, p := range l.Points {
				d := bruteDist(sc.m, p.At)
				if float64(p.ClearanceUm) > d+slackUm || float64(p.ClearanceUm) < d-1-slackUm {
					t.Fatalf("clearance at %v said to be %d, is %f", p.At, p.ClearanceUm, d)
				}
				if i == 0 {
					continue
				}
				a := l.Points[i-1].At
				for k := range 5 {
					at := geom.Point{X: a.X + float64(k)/4*(p.At.X-a.X), Y: a.Y + float64(k)/4*(p.At.Y-a.Y)}
					d := bruteDist(sc.m, at)
					if d < need-slackUm || d < float64(l.SmallestUm)-slackUm {
						t.Fatalf("clearance %f at %v: need %f, leg says %d", d, at, need, l.SmallestUm)
					}
					if !l.Tight && d < float64(sc.q.Options.TightBelowUm)-slackUm {
						t.Fatalf("open leg has %f at %v, threshold %d", d, at, sc.q.Options.TightBelowUm)
					}
				}
			}
			d := bruteDist(sc.m, l.SmallestAt)
			if math.Abs(d-float64(l.SmallestUm)) > 4 { // rounded down, and the last of places alike but for 3 µm
				t.Fatalf("smallest of leg said to be %d, is %f at its place", l.SmallestUm, d)
			}
			if l.Tight && l.SmallestUm >= sc.q.Options.TightBelowUm {
				t.Fatalf("tight leg keeps %d, threshold %d", l.SmallestUm, sc.q.Options.TightBelowUm)
			}
		}
	})
}

func TestLaw8SameQuestionSameAnswer(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		want := plan(t, sc.w, sc.q)
		got := make(chan planner.Answer, 4)
		for range 4 {
			go func() {
				a, _ := sc.w.Plan(context.Background(), sc.q)
				got <- a
			}()
		}
		for range 4 {
			if a := <-got; !reflect.DeepEqual(a, want) {
				t.Fatalf("answers differ:\n%+v\n%+v", a, want)
			}
		}
		if a := plan(t, newWorld(t, sc.m), sc.q); !reflect.DeepEqual(a, want) {
			t.Fatalf("a fresh world answers otherwise:\n%+v\n%+v", a, want)
		}
	})
}
