package gvg_test

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/plainfloor"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/gvg"
)

func field(t testing.TB, m *floor.Map, err error) *clearance.Field {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func build(t testing.TB, f *clearance.Field, need roadmap.Need) *gvg.Graph {
	t.Helper()
	g, err := gvg.Build(context.Background(), f, need)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

func room(t testing.TB, w, h int) *floor.Map {
	t.Helper()
	m, err := plainfloor.NewCells(w, h).Floor()
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// TestRectangle: the medial axis of a room of 6 by 2 is W - H + 2·sqrt 2·H long and
// has its largest clearance, H/2, between two branch points (worked out from the definition).
func TestRectangle(t *testing.T) {
	g := build(t, field(t, room(t, 120, 40), nil), roadmap.Need{})
	d := g.Describe()
	long, widest, branches := 0.0, int64(0), 0
	for _, e := range d.Edges {
		long += e.LengthUm
		widest = max(widest, e.WidestUm)
	}
	for _, n := range d.Nodes {
		if n.ClearanceUm == 1_000_000 {
			branches++
		}
	}
	// Edges begin where clearance is 1 µm, sqrt 2 µm from each corner, and ends within a tenth
	// of a micrometre are one.
	if want := 9.656854249e6; math.Abs(long-want) > 4*math.Sqrt2+1 {
		t.Errorf("length %.1f µm, want %.1f", long, want)
	}
	if widest != 1_000_000 || branches != 2 || len(d.Edges) != 5 {
		t.Errorf("widest %d µm, %d branch points, %d edges; want 1 m, 2 and 5", widest, branches, len(d.Edges))
	}
}

// TestRasterAndVectorAlike: the same columns as cells and as polygons have the same
// graph: both are exact.
func TestRasterAndVectorAlike(t *testing.T) {
	cells := plainfloor.NewCells(160, 160)
	var edits []floor.Edit
	for i, r := range [][4]int{{30, 40, 60, 60}, {90, 20, 100, 90}, {40, 100, 80, 110}, {120, 110, 130, 140}} {
		cells.Fill(r[0], r[1], r[2], r[3], true)
		at := func(x, y int) geom.Point {
			return geom.Point{X: float64(x) * plainfloor.CellUm, Y: float64(y) * plainfloor.CellUm}
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: fmt.Sprintf("column-%d", i), Kind: floor.Solid,
			Shape: floor.NewPolygon([][]geom.Point{{at(r[0], r[1]), at(r[2], r[1]), at(r[2], r[3]), at(r[0], r[3])}}, 0)}})
	}
	a, err := cells.Floor()
	if err != nil {
		t.Fatal(err)
	}
	b, err := room(t, 160, 160).Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	da, db := build(t, field(t, a, nil), roadmap.Need{ClearanceUm: 300_000}).Describe(), build(t, field(t, b, nil), roadmap.Need{ClearanceUm: 300_000}).Describe()
	if len(da.Nodes) != len(db.Nodes) || len(da.Edges) != len(db.Edges) || len(da.Nodes) < 6 {
		t.Fatalf("%d nodes, %d edges as cells; %d, %d as polygons", len(da.Nodes), len(da.Edges), len(db.Nodes), len(db.Edges))
	}
	for _, n := range da.Nodes {
		near := math.Inf(1)
		for _, o := range db.Nodes {
			near = min(near, geom.Dist(n.At, o.At))
		}
		if near > 1 {
			t.Errorf("node %v as cells; the nearest as polygons is %v µm away", n.At, near)
		}
	}
}

// TestLawPatchedEqualsRebuilt, and every way passes the independent checker.
func TestLawPatchedEqualsRebuilt(t *testing.T) {
	ctx := context.Background()
	rng := rand.New(rand.NewPCG(2, 6))
	found := 0
	for range 5 {
		m, err := plainfloor.Random(rng, 140, 100, 0.004).Floor()
		r := 100_000 + rng.Int64N(200_000)
		need := roadmap.Need{ClearanceUm: r, Zones: true, ZoneUm: r - 50_000}
		f := field(t, m, err)
		var own roadmap.Roadmap = build(t, f, need)
		s := m.Settings()
		for n := range 3 {
			x, y := rng.IntN(120), rng.IntN(80)
			next, err := m.Apply([]floor.Edit{
				{Kind: floor.PaintRect, Fill: floor.Occupancy(rng.IntN(2)), Rect: floor.CellRect{X0: x, Y0: y, X1: x + 1 + rng.IntN(20), Y1: y + 1 + rng.IntN(20)}},
				{Kind: floor.PutFeature, Feature: &floor.Feature{Name: fmt.Sprintf("drum-%d", n%2), Kind: floor.Solid, RadiusUm: 300_000,
					Shape: floor.NewDisc(s.Vertex(rng.IntN(140), rng.IntN(100)), 300_000, 0)}},
			})
			if err != nil {
				t.Fatal(err)
			}
			g := field(t, next, nil)
			if own, err = own.Advance(ctx, g, floor.Diff(m, next)); err != nil {
				t.Fatal(err)
			}
			m = next
			fresh := build(t, g, need)
			if !reflect.DeepEqual(own.Describe(), fresh.Describe()) {
				t.Fatal("patched differs from rebuilt")
			}
			for range 4 {
				a, b := s.Vertex(rng.IntN(140), rng.IntN(100)), s.Vertex(rng.IntN(140), rng.IntN(100))
				w, ok, err := own.Search(ctx, a, b)
				w2, ok2, err2 := fresh.Search(ctx, a, b)
				if err != nil || err2 != nil || ok != ok2 || !reflect.DeepEqual(w.Points, w2.Points) {
					t.Fatalf("%v %v %v, rebuilt %v %v %v", w, ok, err, w2, ok2, err2)
				}
				if ok {
					found++
					if c := check.Way(m, w.Points, r, r-50_000); c.Problem != "" {
						t.Error(c.Problem)
					}
				}
			}
		}
	}
	if found < 20 {
		t.Errorf("only %d ways found", found)
	}
}

// TestWindow: what is described of an area is what of the whole meets it, as it is there, and the
// size counts the whole.
func TestWindow(t *testing.T) {
	const seed = 11
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 1))
	m, err := plainfloor.Random(rng, 300, 260, 0.004).Floor()
	g := build(t, field(t, m, err), roadmap.Need{ClearanceUm: 100_000})
	all := g.Describe()
	if s := g.Size(); s.Nodes != int64(len(all.Nodes)) || s.Edges != int64(len(all.Edges)) || s.Cells != 0 || s.Bytes <= 0 {
		t.Errorf("size %+v of %d nodes and %d edges", s, len(all.Nodes), len(all.Edges))
	}
	text := func(e roadmap.Edge) string {
		return fmt.Sprint(e.Points, e.LengthUm, e.ClearanceUm, e.WidestUm)
	}
	b := m.Bounds()
	for range 50 {
		area := geom.Rect{Min: geom.Point{X: b.Min.X + rng.Float64()*(b.Max.X-b.Min.X), Y: b.Min.Y + rng.Float64()*(b.Max.Y-b.Min.Y)}}
		area.Max = geom.Point{X: area.Min.X + rng.Float64()*5e6, Y: area.Min.Y + rng.Float64()*5e6}
		d, err := g.DescribeIn(context.Background(), area)
		if err != nil {
			t.Fatal(err)
		}
		want := map[string]int{}
		for _, e := range all.Edges {
			for i := 1; i < len(e.Points); i++ {
				if geom.BoundsOf(e.Points[i-1], e.Points[i]).Intersects(area) {
					want[text(e)]++
					break
				}
			}
		}
		got := map[string]int{}
		for _, e := range d.Edges {
			got[text(e)]++
			// Nodes are placed by the first of their edges, give or take rounding.
			n := len(e.Points) - 1
			if geom.Dist(d.Nodes[e.A].At, e.Points[0]) > 0.1 || geom.Dist(d.Nodes[e.B].At, e.Points[n]) > 0.1 {
				t.Fatalf("area %v: edge %+v from %v to %v", area, e, d.Nodes[e.A], d.Nodes[e.B])
			}
		}
		if !maps.Equal(got, want) {
			t.Fatalf("area %v: %d edges, wanted %d", area, len(got), len(want))
		}
	}
	ctx, stop := context.WithCancel(context.Background())
	stop()
	if _, err := g.DescribeIn(ctx, b); len(all.Edges) > 256 && !errors.Is(err, context.Canceled) {
		t.Errorf("ended: %v", err)
	}
}
