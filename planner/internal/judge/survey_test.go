package judge_test

import (
	"context"
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/rules"
)

// A judge that has looked at the floor about a way answers as one that has not, bit for bit.
func TestSurveyChangesNoAnswer(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		m := drawFloor(t)
		f, err := clearance.Build(context.Background(), m)
		if err != nil {
			t.Fatal(err)
		}
		const need, below, ahead = 150_000, 400_000, 700_000
		plain, j := judge.New(f, rules.Of(m), need, need), judge.New(f, rules.Of(m), need, need)
		defer j.Release()
		pts := []geom.Point{{X: float64(rapid.IntRange(0, 5_000_000).Draw(t, "x")), Y: float64(rapid.IntRange(0, 4_000_000).Draw(t, "y"))}}
		for range rapid.IntRange(2, 8).Draw(t, "points") {
			p, most := pts[len(pts)-1], rapid.SampledFrom([]int{60_000, 300_000, 3_000_000}).Draw(t, "most")
			pts = append(pts, geom.Point{
				X: max(0, min(5_000_000, p.X+float64(rapid.IntRange(-most, most).Draw(t, "dx")))),
				Y: max(0, min(4_000_000, p.Y+float64(rapid.IntRange(-most, most).Draw(t, "dy")))),
			})
		}
		j.Forget(len(pts))
		j.Survey(pts, ahead)
		for i := 1; i < len(pts); i++ {
			a, b := pts[i-1], pts[i]
			if i%2 == 0 {
				j.Focus(a, b, below)
			}
			got, ok := j.Drive(a, b)
			if want, wok := plain.Drive(a, b); got != want || ok != wok {
				t.Fatalf("%v to %v: %+v, %v; without a look %+v, %v", a, b, got, ok, want, wok)
			}
			if got, want := j.Tight(a, b, below), plain.Tight(a, b, below); !slices.Equal(got, want) {
				t.Fatalf("%v to %v: tight %v, without a look %v", a, b, got, want)
			}
			heading := math.Atan2(b.Y-a.Y, b.X-a.X)
			if got, want := j.Travel(b, heading, need, ahead), plain.Travel(b, heading, need, ahead); got != want {
				t.Fatalf("from %v along %v: %v, without a look %v", b, heading, got, want)
			}
		}
	})
}
