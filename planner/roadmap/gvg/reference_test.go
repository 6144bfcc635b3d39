package gvg_test

import (
	_ "embed"
	"encoding/json"
	"fmt"
	"math"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/roadmap"
)

//go:embed testdata/posts.json
var posts []byte

// TestPostsAgainstScipy: nodes among posts of one radius, on a floor with an open border,
// against the Voronoi vertices that scipy 1.10 computes; testdata/posts.py makes the values. They
// are rounded to a nanometre; clearances here to a whole micrometre, down.
func TestPostsAgainstScipy(t *testing.T) {
	var ref struct {
		Side   float64 `json:"side_um"`
		Radius int64   `json:"radius_um"`
		Cap    int64   `json:"cap_um"`
		Cases  []struct {
			Posts    [][2]float64
			Vertices [][3]float64
		}
	}
	if err := json.Unmarshal(posts, &ref); err != nil {
		t.Fatal(err)
	}
	n := 0
	for i, c := range ref.Cases {
		m, err := floor.New(floor.Settings{ResolutionUm: 50_000, Columns: int(ref.Side) / 50_000, Rows: int(ref.Side) / 50_000, CapUm: ref.Cap, OpenBorder: true})
		if err != nil {
			t.Fatal(err)
		}
		var edits []floor.Edit
		for k, p := range c.Posts {
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: fmt.Sprintf("post-%d", k), Kind: floor.Solid,
				RadiusUm: ref.Radius, Shape: floor.NewDisc(geom.Point{X: p[0], Y: p[1]}, ref.Radius, 0)}})
		}
		if m, err = m.Apply(edits); err != nil {
			t.Fatal(err)
		}
		d := build(t, field(t, m, nil), roadmap.Need{}).Describe()
		meets := make([]int, len(d.Nodes))
		for _, e := range d.Edges {
			meets[e.A]++
			meets[e.B]++
		}
		found := 0
		for k, v := range d.Nodes {
			inside := v.At.X > 1 && v.At.Y > 1 && v.At.X < ref.Side-1 && v.At.Y < ref.Side-1
			if inside && meets[k] >= 3 && v.ClearanceUm < ref.Cap-1 {
				found++
			}
		}
		if found != len(c.Vertices) {
			t.Errorf("case %d: %d nodes, scipy has %d vertices", i, found, len(c.Vertices))
		}
		for _, v := range c.Vertices {
			near, um := math.Inf(1), 0.0
			for _, o := range d.Nodes {
				if dist := geom.Dist(o.At, geom.Point{X: v[0], Y: v[1]}); dist < near {
					near, um = dist, float64(o.ClearanceUm)
				}
			}
			// 1e-6 of a metre, as wanted of the exact form, and the rounding down.
			if near > 1 || um > v[2]+0.01 || um < v[2]-1.01 {
				t.Errorf("case %d: vertex %v with clearance %v; the nearest node is %.3f µm away and has %v", i, v[:2], v[2], near, um)
			}
			n++
		}
	}
	if n < 150 {
		t.Errorf("only %d vertices compared", n)
	}
	t.Logf("%d vertices", n)
}
