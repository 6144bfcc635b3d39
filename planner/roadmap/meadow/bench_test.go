package meadow

import (
	"context"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/internal/testfloor"
	"example.com/wideberth/planner/roadmap"
)

const benchUm = 450_000

// BenchmarkPatchVsRebuild patches a square metre of the demonstration floor.
func BenchmarkPatchVsRebuild(b *testing.B) {
	ctx := context.Background()
	m := testfloor.Hall(b)
	field := testfloor.Field(b, m)
	next := testfloor.Apply(b, m, testfloor.Paint(1200, 800, 1220, 820, floor.Occupied))
	change := floor.Diff(m, next)
	after, err := field.Advance(ctx, next, change)
	if err != nil {
		b.Fatal(err)
	}
	var build, patch time.Duration
	var r *Roadmap
	for b.Loop() {
		t0 := time.Now()
		if r, err = Build(ctx, field, roadmap.Need{ClearanceUm: benchUm, Zones: true, ZoneUm: benchUm}); err != nil {
			b.Fatal(err)
		}
		t1 := time.Now()
		if _, err := r.Advance(ctx, after, change); err != nil {
			b.Fatal(err)
		}
		build, patch = build+t1.Sub(t0), patch+time.Since(t1)
	}
	b.ReportMetric(float64(build)/float64(patch), "rebuild/patch")
	b.ReportMetric(float64(len(r.regions)), "regions")
	b.ReportMetric(float64(len(r.s.Cells)), "trapezoids")
}

// BenchmarkSearchVsOptimum goes between all stations of the demonstration floor: the ratio of
// times to the any-angle search's, and of lengths.
func BenchmarkSearchVsOptimum(b *testing.B) {
	ctx := context.Background()
	m := testfloor.Hall(b)
	r, err := Build(ctx, testfloor.Field(b, m), roadmap.Need{ClearanceUm: benchUm, Zones: true, ZoneUm: benchUm})
	if err != nil {
		b.Fatal(err)
	}
	g, err := anyangle.Build(ctx, m, anyangle.Need{ClearanceUm: benchUm, Zones: true, ZoneUm: benchUm})
	if err != nil {
		b.Fatal(err)
	}
	var at []geom.Point
	for f := range m.Features() {
		if f.Kind == floor.Station {
			at = append(at, f.At)
		}
	}
	var own, twin time.Duration
	ratio, n := 0.0, 0
	for b.Loop() {
		for i, s := range at {
			for _, t := range at[i+1:] {
				t0 := time.Now()
				w, ok, err := r.Search(ctx, s, t)
				t1 := time.Now()
				best, okBest, errBest := g.Shortest(ctx, s, t)
				t2 := time.Now()
				if !ok || !okBest || err != nil || errBest != nil {
					b.Fatalf("%v to %v: %v %v, %v %v", s, t, ok, err, okBest, errBest)
				}
				own, twin = own+t1.Sub(t0), twin+t2.Sub(t1)
				ratio += w.LengthUm / best.LengthUm
				n++
			}
		}
	}
	b.ReportMetric(float64(own)/float64(twin), "time/any-angle")
	b.ReportMetric(ratio/float64(n), "length/optimum")
	b.ReportMetric(float64(own.Microseconds())/float64(n), "µs/search")
}
