package layout

import (
	"bytes"
	"errors"
	"math"
	"os"
	"testing"

	"github.com/google/go-cmp/cmp"
	"go.yaml.in/yaml/v3"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/testing/protocmp"
	"pgregory.net/rapid"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// What is read is within the limits and fits the contract's shape; what is not
// read is a list of faults; nothing panics.
func FuzzRead(f *testing.F) {
	if hall, err := os.ReadFile("../../testdata/auction-hall.yaml"); err == nil {
		f.Add(hall)
	} else {
		f.Fatal(err)
	}
	f.Add([]byte(base + "items:\n  - &a {column: c, at: [1, 1], radius_m: 0.3, repeat: [{count: 3, step_m: [1, 0]}]}\n  - *a\n"))
	f.Add([]byte(base + "items: [{clear: []}, {cells: occupied, polygon: []}, {wall: null}]\n"))
	f.Add([]byte("format: 1\nfloor: f\nwidth_m: 1e300\nheight_m: -0\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		l, err := Read(bytes.NewReader(data), "f.yaml")
		if err != nil {
			var e *Error
			if !errors.As(err, &e) || len(e.Faults) == 0 {
				t.Fatalf("error %v is no list of faults", err)
			}
			return
		}
		n := 0
		count := func(edits []*wideberthv1.Edit) {
			n += len(edits)
			for _, e := range edits {
				if e.GetAction() == nil {
					t.Fatal("an edit does nothing")
				}
				if name := e.GetPutFeature().GetFeature().GetName(); e.GetPutFeature() != nil && !featureName.MatchString(name) {
					t.Fatalf("feature name %q", name)
				}
				if h := e.GetPutFeature().GetFeature().GetStation().GetPose().GetHeadingRad(); h <= -math.Pi || h > math.Pi {
					t.Fatalf("heading %v", h)
				}
			}
		}
		count(l.Edits)
		for _, c := range l.Changes {
			count(c.Edits)
		}
		if n > MaxEdits {
			t.Fatalf("%d edits", n)
		}
		sent := 0
		for _, p := range l.Patches(1, "a", "b") {
			sent += len(p.Edits)
			if size := proto.Size(p); size > patchBytes+1<<20 {
				t.Fatalf("a patch of %d bytes", size)
			}
		}
		if sent != len(l.Edits) {
			t.Fatalf("%d edits in patches, %d in all", sent, len(l.Edits))
		}
	})
}

// What is written into a description is what comes out, to the micrometre.
func TestDescriptionRoundTrips(t *testing.T) {
	type item = map[string]any
	rapid.Check(t, func(t *rapid.T) {
		um := rapid.Custom(func(t *rapid.T) float64 { return float64(rapid.Int64Range(0, 20e6).Draw(t, "um")) / 1e6 })
		point := func(label string) []float64 { return []float64{um.Draw(t, label+".x"), um.Draw(t, label+".y")} }
		wire := func(p []float64) *wideberthv1.Point { return &wideberthv1.Point{XM: p[0], YM: p[1]} }
		put := func(f *wideberthv1.Feature) *wideberthv1.Edit {
			return &wideberthv1.Edit{Action: &wideberthv1.Edit_PutFeature{PutFeature: &wideberthv1.PutFeature{Feature: f}}}
		}
		solid := func(name string, s *wideberthv1.Solid) *wideberthv1.Edit {
			return put(&wideberthv1.Feature{Name: name, Kind: &wideberthv1.Feature_Solid{Solid: s}})
		}
		var items []item
		var want []*wideberthv1.Edit
		for i := range rapid.IntRange(0, 6).Draw(t, "items") {
			name := string(rune('a' + i))
			switch rapid.IntRange(0, 2).Draw(t, "kind") {
			case 0:
				at, r := point("at"), rapid.Float64Range(0.01, 5).Draw(t, "r")
				items = append(items, item{"column": name, "at": at, "radius_m": r})
				want = append(want, solid(name, &wideberthv1.Solid{Shape: &wideberthv1.Solid_Disc{Disc: &wideberthv1.Disc{Center: wire(at), RadiusM: r}}}))
			case 1:
				var pts [][]float64
				line := &wideberthv1.Polyline{WidthM: rapid.Float64Range(0.01, 2).Draw(t, "w")}
				for range rapid.IntRange(2, 5).Draw(t, "n") {
					p := point("p")
					pts = append(pts, p)
					line.Points = append(line.Points, wire(p))
				}
				items = append(items, item{"wall": name, "points": pts, "width_m": line.WidthM})
				want = append(want, solid(name, &wideberthv1.Solid{Shape: &wideberthv1.Solid_Polyline{Polyline: line}}))
			default:
				at, deg := point("at"), rapid.Float64Range(-179, 180).Draw(t, "deg")
				items = append(items, item{"station": name, "at": at, "heading_deg": deg})
				want = append(want, put(&wideberthv1.Feature{Name: name, Kind: &wideberthv1.Feature_Station{Station: &wideberthv1.Station{
					Pose: &wideberthv1.Pose{XM: at[0], YM: at[1], HeadingRad: deg*math.Pi/180 + 0}}}}))
			}
		}
		text, err := yaml.Marshal(item{"format": 1, "floor": "f", "width_m": 20, "height_m": 20, "items": items})
		if err != nil {
			t.Fatal(err)
		}
		l, err := Read(bytes.NewReader(text), "f.yaml")
		if err != nil {
			t.Fatalf("%v\n%s", err, text)
		}
		if d := cmp.Diff(want, l.Edits, protocmp.Transform()); d != "" {
			t.Fatalf("edits (-want +got):\n%s\n%s", d, text)
		}
	})
}
