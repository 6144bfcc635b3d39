// Package patchfile reads patches from files that people write and drawing tools
// export. Two forms are told apart by their content:
//
// A patch in JSON is the contract's Patch message in protobuf's JSON mapping. A
// member that the contract does not have is an error, so that a misspelt one is
// not lost:
//
//	{
//	  "reason": "spill by gate 3",
//	  "edits": [
//	    {"put_feature": {"feature": {"name": "spill", "solid": {"disc": {"center": {"x_m": 12, "y_m": 8.5}, "radius_m": 0.6}}}}},
//	    {"clear_rect": {"area": {"min_x_m": 1, "min_y_m": 1, "max_x_m": 2, "max_y_m": 2}}}
//	  ]
//	}
//
// A GeoJSON FeatureCollection (RFC 7946) puts one feature for each of its own. Its
// coordinates are not longitude and latitude but metres of the floor frame, x
// then y, which RFC 7946 §4 allows by prior arrangement; the file says that it
// follows it with a foreign member that must be there, "frame": "floor-metres":
//
//	{"type": "FeatureCollection", "frame": "floor-metres", "features": [
//	  {"type": "Feature", "geometry": {"type": "LineString", "coordinates": [[0, 0], [4, 0]]},
//	   "properties": {"name": "rail/east", "width_m": 0.2}}
//	]}
//
// The property kind (default solid) and the geometry decide what a feature
// becomes, and which further properties it has:
//
//	kind         geometry    properties
//	solid        Polygon     survey_tolerance_m
//	solid        LineString  width_m (required), survey_tolerance_m
//	solid        Point       radius_m (required), survey_tolerance_m
//	closed       Polygon
//	speed_limit  Polygon     max_speed_mps (required)
//	one_way      Polygon     heading_rad (required)
//	station      Point       heading_rad (required)
//
// All have name (or else the feature's id, if that is text) and may have note. A
// property that is null counts as absent; one that is not in the table is an
// error. A third number of a position, its height, is left out.
//
// Only the form is checked here. Whether shapes are simple, lengths in range and
// names well-formed is for the service to say.
package patchfile

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"os"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// MaxBytes is the largest file read. A patch that is much larger than a quarter of
// it would not fit the service's messages anyhow.
const MaxBytes = 16 << 20

// Error says what is wrong with a file and where.
type Error struct {
	File    string // as it was named by the caller
	Path    string // of the JSON value, e.g. "edits[3].put_feature"; empty for the file as a whole
	Problem string
}

func (e *Error) Error() string {
	if e.Path == "" {
		return e.File + ": " + e.Problem
	}
	return e.File + ": " + e.Path + ": " + e.Problem
}

// ReadFile reads the patch in a file. A fault in it is an *Error.
func ReadFile(path string) (*wideberthv1.Patch, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer func() { _ = f.Close() }() // it was only read
	return Read(f, path)
}

// Read reads a patch of either form; name is what faults call it. What the file
// does not say (author, reason, base version) is left empty for the caller to
// fill in. A fault is an *Error.
func Read(r io.Reader, name string) (*wideberthv1.Patch, error) {
	data, err := io.ReadAll(io.LimitReader(r, MaxBytes+1))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	fault := func(path, format string, args ...any) error {
		return &Error{File: name, Path: path, Problem: fmt.Sprintf(format, args...)}
	}
	if len(data) > MaxBytes {
		return nil, fault("", "larger than %d bytes", MaxBytes)
	}
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf")) // RFC 8259 §8.1 lets a reader ignore it
	if text := bytes.TrimLeft(data, " \t\r\n"); len(text) > 0 && text[0] != '{' && text[0] != '[' {
		return nil, fault("", "not JSON, want a Patch message or a GeoJSON FeatureCollection")
	}
	// Only GeoJSON objects have a member type; a Patch has none.
	var form struct {
		Type json.RawMessage `json:"type"`
	}
	if json.Unmarshal(data, &form) == nil && form.Type != nil {
		return readGeoJSON(data, fault)
	}
	return readPatch(data, fault)
}

// faultFunc makes an *Error about the file being read.
type faultFunc func(path, format string, args ...any) error
