package patchfile

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/testing/protocmp"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func mustPatch(t *testing.T, text string) *wideberthv1.Patch {
	t.Helper()
	p := &wideberthv1.Patch{}
	if err := protojson.Unmarshal([]byte(text), p); err != nil {
		t.Fatal(err)
	}
	return p
}

func TestReadPatchJSON(t *testing.T) {
	t.Parallel()
	const text = `{
	  "base_version": "12", "author": "night shift", "reason": "spill by gate 3",
	  "edits": [
	    {"put_feature": {"feature": {"name": "spill", "solid": {"disc": {"center": {"x_m": 12, "y_m": 8.5}, "radius_m": 0.6}}}}},
	    {"removeFeature": {"name": "cone-1"}}
	  ]
	}`
	for _, bom := range []string{"", "\ufeff"} {
		p, err := Read(strings.NewReader(bom+text), "spill.json")
		if err != nil {
			t.Fatal(err)
		}
		if p.GetBaseVersion() != 12 || p.GetReason() != "spill by gate 3" || len(p.GetEdits()) != 2 ||
			p.GetEdits()[0].GetPutFeature().GetFeature().GetSolid().GetDisc().GetRadiusM() != 0.6 ||
			p.GetEdits()[1].GetRemoveFeature().GetName() != "cone-1" {
			t.Errorf("read %v", p)
		}
	}
}

func TestReadGeoJSON(t *testing.T) {
	t.Parallel()
	got, err := ReadFile(filepath.Join("testdata", "shapes.geojson"))
	if err != nil {
		t.Fatal(err)
	}
	want := mustPatch(t, `{"edits": [
	  {"put_feature": {"feature": {"name": "block", "note": "concrete", "solid": {"survey_tolerance_m": 0.02, "polygon": {
	    "outer": {"points": [{"x_m": 0}, {"x_m": 4}, {"x_m": 4, "y_m": 3}, {"y_m": 3}]},
	    "holes": [{"points": [{"x_m": 1, "y_m": 1}, {"x_m": 1, "y_m": 2}, {"x_m": 2, "y_m": 2}]}]}}}}},
	  {"put_feature": {"feature": {"name": "rail/east", "solid": {"polyline": {"width_m": 0.2,
	    "points": [{"x_m": 5}, {"x_m": 9, "y_m": 0.5}]}}}}},
	  {"put_feature": {"feature": {"name": "column-7", "solid": {"disc": {"center": {"x_m": 6, "y_m": 6}, "radius_m": 0.25}}}}},
	  {"put_feature": {"feature": {"name": "hand-picking", "zone": {"closed": {}, "area": {
	    "outer": {"points": [{"x_m": 10}, {"x_m": 11}, {"x_m": 11, "y_m": 1}]}}}}}},
	  {"put_feature": {"feature": {"name": "slow", "zone": {"speed_limit": {"max_speed_mps": 0.5}, "area": {
	    "outer": {"points": [{"x_m": 10}, {"x_m": 11}, {"x_m": 11, "y_m": 1}]}}}}}},
	  {"put_feature": {"feature": {"name": "ring", "zone": {"one_way": {"heading_rad": -1.5}, "area": {
	    "outer": {"points": [{"x_m": 10}, {"x_m": 11}, {"x_m": 11, "y_m": 1}]}}}}}},
	  {"put_feature": {"feature": {"name": "dock-1", "station": {"pose": {"x_m": 12, "y_m": 8, "heading_rad": 0}}}}}
	]}`)
	if d := cmp.Diff(want, got, protocmp.Transform()); d != "" {
		t.Errorf("shapes.geojson (-want +got):\n%s", d)
	}
}

// collection wraps one feature's members.
func collection(geometry, properties string) string {
	return `{"type": "FeatureCollection", "frame": "floor-metres", "features": [{"type": "Feature", "geometry": ` +
		geometry + `, "properties": ` + properties + `}]}`
}

func TestFaultsNameFileAndPath(t *testing.T) {
	t.Parallel()
	const (
		triangle = `{"type": "Polygon", "coordinates": [[[0,0],[1,0],[1,1],[0,0]]]}`
		point    = `{"type": "Point", "coordinates": [1,2]}`
		line     = `{"type": "LineString", "coordinates": [[1,2],[3,4]]}`
	)
	for _, tc := range []struct{ name, text, path, problem string }{
		{"misspelt member", `{"edits": [{"clear_rect": {}}, {"put_feature": {"feature": {"nmae": "x"}}}]}`, "edits[1].put_feature.feature.nmae", `unknown field "nmae"`},
		{"wrong type", "{\n \"edits\": [\n  {\"clear_rect\": {\"area\": {\"min_x_m\": \"wide\"}}}\n ]\n}", "edits[0].clear_rect.area.min_x_m", "(line 3, column"},
		{"after a text with letters of two bytes", `{"reason": "Straßenbahn über Öl", "edits": [{"bad": 1}]}`, "edits[0].bad", "unknown field"},
		{"a second item", `{"reason": 5}`, "reason", "invalid value"},
		{"two actions", `{"edits": [{"clear_rect": {}, "remove_feature": {"name": "x"}}]}`, "edits[0].remove_feature", "already set"},
		{"not JSON", `{"edits": [}`, "edits", "line 1, column 12"},
		{"cut off", `{"edits": [{"clear_rect": {`, "edits[0].clear_rect", "unexpected"},
		{"a floor description", "format: 1\nfloor: hall\n", "", "not JSON, want a Patch message"},
		{"a journal", "\x00\x00\x00\x00\xed\xda\x0c\xed", "", "not JSON, want a Patch message"},
		{"empty", ``, "", "unexpected"},
		{"an array", `[]`, "", "unexpected"},
		{"nothing to do", `{"author": "me"}`, "edits", "want at least one"},

		{"one feature alone", `{"type": "Feature", "geometry": null}`, "type", `want "FeatureCollection"`},
		{"no frame", `{"type": "FeatureCollection", "features": []}`, "frame", "not degrees"},
		{"another frame", `{"type": "FeatureCollection", "frame": "pixels", "features": []}`, "frame", `"pixels", want "floor-metres"`},
		{"frame in another case", `{"type": "FeatureCollection", "Frame": "floor-metres", "features": []}`, "frame", "missing"},
		{"a crs", `{"type": "FeatureCollection", "frame": "floor-metres", "crs": {}, "features": []}`, "crs", "RFC 7946"},
		{"no features", `{"type": "FeatureCollection", "frame": "floor-metres"}`, "features", "missing"},
		{"none", `{"type": "FeatureCollection", "frame": "floor-metres", "features": []}`, "features", "want at least one"},
		{"null feature", `{"type": "FeatureCollection", "frame": "floor-metres", "features": [null]}`, "features[0]", "not an object"},
		{"no geometry", collection("null", `{"name": "x"}`), "features[0].geometry", "missing"},
		{"a geometry that is not taken", collection(`{"type": "MultiPoint", "coordinates": [[1,2]]}`, `{"name": "x"}`), "features[0].geometry.type", `"MultiPoint", want`},
		{"half a position", collection(`{"type": "Point", "coordinates": [5]}`, `{"name": "x"}`), "features[0].geometry.coordinates", "1 numbers"},
		{"a null in a position", collection(`{"type": "LineString", "coordinates": [[1,2],[null,4]]}`, `{"name": "x"}`), "features[0].geometry.coordinates[1][0]", "not a number"},
		{"four numbers", collection(`{"type": "Point", "coordinates": [1,2,3,4]}`, `{"name": "x"}`), "features[0].geometry.coordinates", "4 numbers"},
		{"beyond float64", collection(`{"type": "Point", "coordinates": [1e999,2]}`, `{"name": "x"}`), "features[0].geometry.coordinates", "out of the range"},
		{"too shallow", collection(`{"type": "Polygon", "coordinates": [[0,0],[1,0],[1,1],[0,0]]}`, `{"name": "x"}`), "features[0].geometry.coordinates[0][0]", "not an array"},
		{"no ring", collection(`{"type": "Polygon", "coordinates": []}`, `{"name": "x"}`), "features[0].geometry.coordinates", "no ring"},
		{"an open ring", collection(`{"type": "Polygon", "coordinates": [[[0,0],[1,0],[1,1],[0,1]]]}`, `{"name": "x"}`), "features[0].geometry.coordinates[0]", "not the first again"},
		{"a short ring", collection(`{"type": "Polygon", "coordinates": [[[0,0],[1,0],[0,0]]]}`, `{"name": "x"}`), "features[0].geometry.coordinates[0]", "want at least 4"},
		{"no name", collection(triangle, `null`), "features[0].properties.name", "missing"},
		{"a name that is a number", collection(triangle, `{"name": 7}`), "features[0].properties.name", "7, want text"},
		{"an unknown kind", collection(triangle, `{"name": "x", "kind": "restricted"}`), "features[0].properties.kind", "want solid, closed"},
		{"a kind of another geometry", collection(point, `{"name": "x", "kind": "closed"}`), "features[0].geometry.type", `Point does not go with kind "closed"`},
		{"a station without a heading", collection(point, `{"name": "x", "kind": "station"}`), "features[0].properties.heading_rad", "missing"},
		{"a disc without a radius", collection(point, `{"name": "x"}`), "features[0].properties.radius_m", "missing"},
		{"a line without a width", collection(line, `{"name": "x", "width_m": null}`), "features[0].properties.width_m", "missing"},
		{"a width that is text", collection(line, `{"name": "x", "width_m": "0.2"}`), "features[0].properties.width_m", `"0.2", want a number`},
		{"a misspelt property", collection(triangle, `{"name": "x", "survey_tolerence_m": 0.1}`), "features[0].properties.survey_tolerence_m", "want among name, note, kind, survey_tolerance_m"},
		{"a property of another kind", collection(triangle, `{"name": "x", "kind": "closed", "max_speed_mps": 1}`), "features[0].properties.max_speed_mps", "unknown here"},
	} {
		_, err := Read(strings.NewReader(tc.text), "the-file")
		var e *Error
		if !errors.As(err, &e) {
			t.Errorf("%s: %v, want an *Error", tc.name, err)
			continue
		}
		if e.File != "the-file" || e.Path != tc.path || !strings.Contains(e.Problem, tc.problem) {
			t.Errorf("%s: path %q, problem %q; want %q, %q", tc.name, e.Path, e.Problem, tc.path, tc.problem)
		}
		if want := "the-file: "; !strings.HasPrefix(err.Error(), want) || !strings.Contains(err.Error(), tc.path) {
			t.Errorf("%s: message %q, want file and path in it", tc.name, err)
		}
	}
}

func TestReadIsBounded(t *testing.T) {
	t.Parallel()
	r := &endless{}
	_, err := Read(r, "endless")
	if err == nil || !strings.Contains(err.Error(), "larger than 16777216 bytes") {
		t.Errorf("got %v, want it refused for its size", err)
	}
	if r.read > 2*MaxBytes {
		t.Errorf("%d bytes were read of a file that may have %d", r.read, MaxBytes)
	}
}

type endless struct{ read int }

func (e *endless) Read(b []byte) (int, error) {
	for i := range b {
		b[i] = ' '
	}
	e.read += len(b)
	return len(b), nil
}

func TestMissingFile(t *testing.T) {
	t.Parallel()
	if _, err := ReadFile(filepath.Join(t.TempDir(), "none.json")); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("got %v, want that there is no such file", err)
	}
}

// FuzzRead looks for input that panics, a patch without edits, faults that are
// not *Error, and patches that do not survive being written and read again.
func FuzzRead(f *testing.F) {
	shapes, err := os.ReadFile(filepath.Join("testdata", "shapes.geojson"))
	if err != nil {
		f.Fatal(err)
	}
	f.Add(shapes)
	f.Add([]byte(`{"base_version": "1", "author": "a", "reason": "b", "edits": [{"clear_rect": {"area": {"max_x_m": 1, "max_y_m": 1e3}}}]}`))
	f.Add([]byte(`{"edits": [{"put_feature": {"feature": {"nmae": "x"}}}]}`))
	f.Add([]byte(`{"edits": [}`))
	f.Add([]byte(collection(`{"type": "Point", "coordinates": [1]}`, `{"name": "x"}`)))
	f.Fuzz(func(t *testing.T, data []byte) {
		p, err := Read(strings.NewReader(string(data)), "fuzz")
		var e *Error
		if err != nil && !errors.As(err, &e) {
			t.Fatalf("%v is a %T, want *Error", err, err)
		}
		if err != nil {
			return
		}
		if len(p.GetEdits()) == 0 {
			t.Fatal("a patch without edits")
		}
		text, err := protojson.Marshal(p)
		if err != nil {
			t.Fatal(err)
		}
		again, err := Read(strings.NewReader(string(text)), "again")
		if err != nil {
			t.Fatalf("what was read cannot be read again: %v\n%s", err, text)
		}
		if !proto.Equal(p, again) {
			t.Fatalf("read %v, then %v", p, again)
		}
	})
}
