package visibility

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/testfloor"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/gen"
)

// hallPairs are places in the hall with room for a body of that clearance.
func hallPairs(f *clearance.Field, n int, um float64) (out [][2]geom.Point) {
	rng := rand.New(rand.NewPCG(31, 0))
	var p []geom.Point
	for len(p) < 2*n {
		if q := gen.Within(rng, f.Bounds()); f.At(q).Um >= um {
			p = append(p, q)
		}
	}
	for i := range n {
		out = append(out, [2]geom.Point{p[2*i], p[2*i+1]})
	}
	return out
}

// TestDemoHall: on the demonstration floor ways are those of the any-angle optimum, but for
// the arcs, and the graph stays small enough to look at.
func TestDemoHall(t *testing.T) {
	const r = 650_000
	f := testfloor.Hall(t)
	fd := field(t, f)
	g := build(t, f, r)
	mesh, err := anyangle.Build(context.Background(), f, anyangle.Need{ClearanceUm: r, Zones: true, ZoneUm: r})
	if err != nil {
		t.Fatal(err)
	}
	found := 0
	for _, p := range hallPairs(fd, 12, r+g.OutlineErrorUm()) {
		w, ok := find(t, g, p[0], p[1])
		m, had, err := mesh.Shortest(context.Background(), p[0], p[1])
		if err != nil || ok != had {
			t.Fatalf("%v to %v: %v, the mesh %v, %v", p[0], p[1], ok, had, err)
		}
		if !ok {
			continue
		}
		found++
		if v := check.Way(f, w.Points, r, r); v.Problem != "" {
			t.Error(v.Problem)
		}
		// The mesh has DeltaUm less room, the graph arcs that stand off by ArcErrorUm.
		if w.LengthUm > m.LengthUm+20*ArcErrorUm || w.LengthUm < m.LengthUm-20*anyangle.DeltaUm {
			t.Errorf("%v to %v: %v m, the mesh %v", p[0], p[1], w.LengthUm/1e6, m.LengthUm/1e6)
		}
	}
	if found < 8 {
		t.Errorf("only %d ways", found)
	}
	d := g.Describe()
	if len(d.Nodes) > 600 || len(d.Edges) > 10_000 || len(d.Edges) < len(d.Nodes) {
		t.Errorf("%d nodes, %d edges", len(d.Nodes), len(d.Edges))
	}
	aboutZone := func(p geom.Point) bool {
		for z := range f.Features() {
			if d, _ := z.Shape.Dist(p); z.Kind == floor.ClosedZone && math.Abs(d-r) < 1 {
				return true
			}
		}
		return false
	}
	for _, n := range d.Nodes { // every arc is about a solid or a closed zone
		if n.ClearanceUm != r && !aboutZone(n.At) {
			t.Errorf("node %v has %d µm", n.At, n.ClearanceUm)
		}
	}
	for _, e := range d.Edges {
		if !fd.SegmentClear(e.Points[0], e.Points[1], e.ClearanceUm) {
			t.Errorf("edge %v has less than %d µm", e.Points, e.ClearanceUm)
		}
	}
}

// BenchmarkAdvanceVsRebuild changes a square metre of the hall: rebuild/advance is for
// all tangents, kept against found from scratch.
func BenchmarkAdvanceVsRebuild(b *testing.B) {
	f := testfloor.Hall(b)
	fd := field(b, f)
	need := roadmap.Need{ClearanceUm: 650_000, Zones: true, ZoneUm: 580_000}
	ctx := context.Background()
	g, err := Build(ctx, fd, need)
	if err != nil {
		b.Fatal(err)
	}
	if err := g.Complete(ctx); err != nil {
		b.Fatal(err)
	}
	next := gen.Apply(b, f, gen.Paint(1340, 1000, 1360, 1020))
	change := floor.Diff(f, next)
	if fd, err = fd.Advance(ctx, next, change); err != nil {
		b.Fatal(err)
	}
	var kept, outline, rebuilt time.Duration
	for b.Loop() {
		start := time.Now()
		if _, err := g.Advance(ctx, fd, change); err != nil {
			b.Fatal(err)
		}
		kept += time.Since(start)
		start = time.Now()
		n, err := Build(ctx, fd, need)
		if err != nil {
			b.Fatal(err)
		}
		outline += time.Since(start)
		if err := n.Complete(ctx); err != nil {
			b.Fatal(err)
		}
		rebuilt += time.Since(start)
	}
	b.ReportMetric(rebuilt.Seconds()/kept.Seconds(), "rebuild/advance")
	b.ReportMetric(outline.Seconds()/kept.Seconds(), "outline/advance")
}

// BenchmarkSearchVsMesh is a search over tangents already found against the any-angle mesh.
func BenchmarkSearchVsMesh(b *testing.B) {
	f := testfloor.Hall(b)
	g := build(b, f, 650_000)
	mesh, err := anyangle.Build(context.Background(), f, anyangle.Need(g.Need()))
	if err != nil {
		b.Fatal(err)
	}
	pairs := hallPairs(g.field, 10, 800_000)
	if err := g.Complete(context.Background()); err != nil {
		b.Fatal(err)
	}
	var graph, cells time.Duration
	for b.Loop() {
		for _, p := range pairs {
			start := time.Now()
			find(b, g, p[0], p[1])
			graph += time.Since(start)
			start = time.Now()
			if _, _, err := mesh.Shortest(context.Background(), p[0], p[1]); err != nil {
				b.Fatal(err)
			}
			cells += time.Since(start)
		}
	}
	b.ReportMetric(graph.Seconds()/cells.Seconds(), "visibility/anyangle")
}
