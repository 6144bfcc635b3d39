package trapezoid

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner/internal/plainfloor"
	"example.com/wideberth/planner/internal/testfloor"
	"example.com/wideberth/planner/roadmap"
)

// BenchmarkPatchVsRebuild patches a square metre, on the demonstration floor and on halls of
// racks; rebuild/patch is the ratio of total times in one run.
func BenchmarkPatchVsRebuild(b *testing.B) {
	for _, c := range []struct {
		name string
		um   int64
		make func() (*floor.Map, error)
	}{
		{"demo", 450_000, func() (*floor.Map, error) { return testfloor.Hall(b), nil }},
		{"racks1024", 450_000, func() (*floor.Map, error) { return plainfloor.RackHall(1024, 0, false) }},
		{"racks1024turned", 450_000, func() (*floor.Map, error) { return plainfloor.RackHall(1024, 7*math.Pi/180, false) }},
		{"racks4096", 450_000, func() (*floor.Map, error) { return plainfloor.RackHall(4096, 0, false) }},
		{"random512", 0, func() (*floor.Map, error) {
			return plainfloor.Random(rand.New(rand.NewPCG(1, 1)), 512, 512, 0.2).Floor()
		}},
	} {
		b.Run(c.name, func(b *testing.B) {
			m, err := c.make()
			if err != nil {
				b.Fatal(err)
			}
			ctx := context.Background()
			field := testfloor.Field(b, m)
			need := roadmap.Need{ClearanceUm: c.um, Zones: true, ZoneUm: c.um}
			st := m.Settings()
			next := testfloor.Apply(b, m, testfloor.Paint(st.Columns/2, st.Rows/2, st.Columns/2+20, st.Rows/2+20, floor.Occupied))
			change := floor.Diff(m, next)
			after, err := field.Advance(ctx, next, change)
			if err != nil {
				b.Fatal(err)
			}
			var build, patch time.Duration
			var r *Roadmap
			for b.Loop() {
				t0 := time.Now()
				if r, err = Build(ctx, field, need); err != nil {
					b.Fatal(err)
				}
				t1 := time.Now()
				if _, err := r.Advance(ctx, after, change); err != nil {
					b.Fatal(err)
				}
				build, patch = build+t1.Sub(t0), patch+time.Since(t1)
			}
			b.ReportMetric(float64(build)/float64(patch), "rebuild/patch")
			b.ReportMetric(float64(patch.Microseconds())/float64(b.N), "µs/patch")
			b.ReportMetric(float64(len(r.s.Cells)), "cells")
			b.ReportMetric(float64(r.s.Bytes()), "bytes")
		})
	}
}
