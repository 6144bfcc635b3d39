package patchfile

import (
	"encoding/json"
	"fmt"
	"slices"
	"strings"

	"github.com/paulmach/orb"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Frame is what a GeoJSON file's member "frame" must say.
const Frame = "floor-metres"

type object = map[string]json.RawMessage

func readGeoJSON(data []byte, fault faultFunc) (*wideberthv1.Patch, error) {
	var top object
	if err := json.Unmarshal(data, &top); err != nil {
		return nil, fault("", "%v", err)
	}
	if t := text(top["type"]); t != "FeatureCollection" {
		return nil, fault("type", "%s, want \"FeatureCollection\"", top["type"])
	}
	if top["crs"] != nil {
		return nil, fault("crs", "RFC 7946 has no such member; the frame is %q", Frame)
	}
	if f := text(top["frame"]); f != Frame {
		if top["frame"] == nil {
			return nil, fault("frame", "missing, want %q: coordinates must be metres of the floor frame, not degrees", Frame)
		}
		return nil, fault("frame", "%s, want %q", top["frame"], Frame)
	}
	var features []json.RawMessage
	if err := json.Unmarshal(top["features"], &features); top["features"] == nil || err != nil {
		return nil, fault("features", "missing or not an array")
	}
	if len(features) == 0 {
		return nil, fault("features", "empty, want at least one")
	}
	patch := &wideberthv1.Patch{}
	for i, raw := range features {
		path := fmt.Sprintf("features[%d]", i)
		r := featureReader{path: path, fault: fault}
		f, err := r.read(raw)
		if err != nil {
			return nil, err
		}
		patch.Edits = append(patch.Edits, &wideberthv1.Edit{Action: &wideberthv1.Edit_PutFeature{
			PutFeature: &wideberthv1.PutFeature{Feature: f},
		}})
	}
	return patch, nil
}

// featureReader reads one GeoJSON feature.
type featureReader struct {
	path       string
	fault      faultFunc
	properties object
	known      []string // properties that were asked for
}

func (r *featureReader) read(raw json.RawMessage) (*wideberthv1.Feature, error) {
	var f object
	if err := json.Unmarshal(raw, &f); err != nil || f == nil {
		return nil, r.fault(r.path, "not an object")
	}
	if text(f["type"]) != "Feature" {
		return nil, r.fault(r.path+".type", "%s, want \"Feature\"", orMissing(f["type"]))
	}
	if err := json.Unmarshal(f["properties"], &r.properties); f["properties"] != nil && err != nil {
		return nil, r.fault(r.path+".properties", "not an object")
	}
	geometry, err := r.geometry(f["geometry"])
	if err != nil {
		return nil, err
	}
	name, err := r.text("name")
	if err != nil {
		return nil, err
	}
	if name == "" {
		name = text(f["id"])
	}
	if name == "" {
		return nil, r.fault(r.path+".properties.name", "missing, and the feature has no id that is text")
	}
	note, err := r.text("note")
	if err != nil {
		return nil, err
	}
	out := &wideberthv1.Feature{Name: name, Note: note}
	if err := r.kind(out, geometry); err != nil {
		return nil, err
	}
	for p, v := range r.sorted() {
		if !slices.Contains(r.known, p) {
			return nil, r.fault(r.path+".properties."+p, "%s: unknown here, want among %s", v, strings.Join(r.known, ", "))
		}
	}
	return out, nil
}

// kind fills in what the feature is.
func (r *featureReader) kind(out *wideberthv1.Feature, g orb.Geometry) error {
	kind, err := r.text("kind")
	if err != nil {
		return err
	}
	if kind == "" {
		kind = "solid"
	}
	switch what := kind + " " + g.GeoJSONType(); what {
	case "solid Polygon", "solid LineString", "solid Point":
		solid, err := r.solid(g)
		out.Kind = &wideberthv1.Feature_Solid{Solid: solid}
		return err
	case "closed Polygon", "speed_limit Polygon", "one_way Polygon":
		zone, err := r.zone(kind, g.(orb.Polygon))
		out.Kind = &wideberthv1.Feature_Zone{Zone: zone}
		return err
	case "station Point":
		heading, err := r.number("heading_rad", true)
		at := g.(orb.Point)
		out.Kind = &wideberthv1.Feature_Station{Station: &wideberthv1.Station{
			Pose: &wideberthv1.Pose{XM: at[0], YM: at[1], HeadingRad: heading},
		}}
		return err
	}
	switch kind {
	case "solid", "closed", "speed_limit", "one_way", "station":
		return r.fault(r.path+".geometry.type", "%s does not go with kind %q", g.GeoJSONType(), kind)
	}
	return r.fault(r.path+".properties.kind", "%q, want solid, closed, speed_limit, one_way or station", kind)
}

func (r *featureReader) solid(g orb.Geometry) (*wideberthv1.Solid, error) {
	s := &wideberthv1.Solid{}
	var err error
	if s.SurveyToleranceM, err = r.number("survey_tolerance_m", false); err != nil {
		return nil, err
	}
	switch g := g.(type) {
	case orb.Polygon:
		s.Shape = &wideberthv1.Solid_Polygon{Polygon: polygon(g)}
	case orb.LineString:
		width, err := r.number("width_m", true)
		if err != nil {
			return nil, err
		}
		s.Shape = &wideberthv1.Solid_Polyline{Polyline: &wideberthv1.Polyline{Points: points(g), WidthM: width}}
	case orb.Point:
		radius, err := r.number("radius_m", true)
		if err != nil {
			return nil, err
		}
		s.Shape = &wideberthv1.Solid_Disc{Disc: &wideberthv1.Disc{Center: &wideberthv1.Point{XM: g[0], YM: g[1]}, RadiusM: radius}}
	}
	return s, nil
}

func (r *featureReader) zone(kind string, g orb.Polygon) (*wideberthv1.Zone, error) {
	z := &wideberthv1.Zone{Area: polygon(g)}
	switch kind {
	case "closed":
		z.Rule = &wideberthv1.Zone_Closed{Closed: &wideberthv1.ClosedRule{}}
	case "speed_limit":
		speed, err := r.number("max_speed_mps", true)
		if err != nil {
			return nil, err
		}
		z.Rule = &wideberthv1.Zone_SpeedLimit{SpeedLimit: &wideberthv1.SpeedLimitRule{MaxSpeedMps: speed}}
	case "one_way":
		heading, err := r.number("heading_rad", true)
		if err != nil {
			return nil, err
		}
		z.Rule = &wideberthv1.Zone_OneWay{OneWay: &wideberthv1.OneWayRule{HeadingRad: heading}}
	}
	return z, nil
}

// polygon takes off each ring's last position, which repeats its first.
func polygon(g orb.Polygon) *wideberthv1.Polygon {
	ring := func(r orb.Ring) *wideberthv1.Ring {
		return &wideberthv1.Ring{Points: points(orb.LineString(r[:len(r)-1]))}
	}
	p := &wideberthv1.Polygon{Outer: ring(g[0])}
	for _, hole := range g[1:] {
		p.Holes = append(p.Holes, ring(hole))
	}
	return p
}

func points(l orb.LineString) []*wideberthv1.Point {
	out := make([]*wideberthv1.Point, len(l))
	for i, p := range l {
		out[i] = &wideberthv1.Point{XM: p[0], YM: p[1]}
	}
	return out
}

// geometry reads a Point, a LineString or a Polygon into orb's types. (orb's own
// reader would link a database driver's encoding, and takes [5] for (5, 0).)
func (r *featureReader) geometry(raw json.RawMessage) (orb.Geometry, error) {
	path := r.path + ".geometry"
	var g object
	if err := json.Unmarshal(raw, &g); raw == nil || err != nil || g == nil {
		return nil, r.fault(path, "missing or not an object")
	}
	depth, ok := map[string]int{"Point": 0, "LineString": 1, "Polygon": 2}[text(g["type"])]
	if !ok {
		return nil, r.fault(path+".type", "%s, want \"Point\", \"LineString\" or \"Polygon\"", orMissing(g["type"]))
	}
	var coordinates any
	if err := json.Unmarshal(g["coordinates"], &coordinates); g["coordinates"] == nil || err != nil {
		return nil, r.fault(path+".coordinates", "missing or out of the range of numbers")
	}
	if err := r.positions(coordinates, depth, path+".coordinates"); err != nil {
		return nil, err
	}
	switch depth {
	case 0:
		return decode[orb.Point](g["coordinates"])
	case 1:
		return decode[orb.LineString](g["coordinates"])
	}
	poly, err := decode[orb.Polygon](g["coordinates"])
	if err != nil {
		return nil, err
	}
	return poly, r.rings(poly, path+".coordinates")
}

// decode reads coordinates whose positions were checked.
func decode[G orb.Geometry](raw json.RawMessage) (G, error) {
	var g G
	err := json.Unmarshal(raw, &g)
	return g, err
}

// positions checks arrays of arrays, depth of them, down to positions.
func (r *featureReader) positions(v any, depth int, path string) error {
	list, ok := v.([]any)
	if !ok {
		return r.fault(path, "not an array")
	}
	if depth > 0 {
		for i, e := range list {
			if err := r.positions(e, depth-1, fmt.Sprintf("%s[%d]", path, i)); err != nil {
				return err
			}
		}
		return nil
	}
	if len(list) < 2 || len(list) > 3 { // RFC 7946 §3.1.1
		return r.fault(path, "%d numbers, want x and y, or x, y and a height", len(list))
	}
	for i, e := range list {
		if _, ok := e.(float64); !ok {
			return r.fault(fmt.Sprintf("%s[%d]", path, i), "not a number")
		}
	}
	return nil
}

// rings checks RFC 7946 §3.1.6: four positions or more, the last equal to the first.
// Either winding is accepted, as it asks.
func (r *featureReader) rings(g orb.Polygon, path string) error {
	if len(g) == 0 {
		return r.fault(path, "no ring")
	}
	for i, ring := range g {
		if len(ring) < 4 {
			return r.fault(fmt.Sprintf("%s[%d]", path, i), "%d positions, want at least 4", len(ring))
		}
		if ring[0] != ring[len(ring)-1] {
			return r.fault(fmt.Sprintf("%s[%d]", path, i), "the last position is not the first again")
		}
	}
	return nil
}

// text reads a property that is text; empty when it is absent.
func (r *featureReader) text(name string) (string, error) {
	r.known = append(r.known, name)
	raw := r.properties[name]
	if isNull(raw) {
		return "", nil
	}
	var s string
	if err := json.Unmarshal(raw, &s); err != nil {
		return "", r.fault(r.path+".properties."+name, "%s, want text", raw)
	}
	return s, nil
}

// number reads a property that is a number; 0 when it is absent.
func (r *featureReader) number(name string, required bool) (float64, error) {
	r.known = append(r.known, name)
	raw := r.properties[name]
	if isNull(raw) {
		if required {
			return 0, r.fault(r.path+".properties."+name, "missing, want a number")
		}
		return 0, nil
	}
	var v float64
	if err := json.Unmarshal(raw, &v); err != nil {
		return 0, r.fault(r.path+".properties."+name, "%s, want a number", raw)
	}
	return v, nil
}

// sorted yields the properties that are there, by name.
func (r *featureReader) sorted() func(func(string, json.RawMessage) bool) {
	names := make([]string, 0, len(r.properties))
	for n, v := range r.properties {
		if !isNull(v) {
			names = append(names, n)
		}
	}
	slices.Sort(names)
	return func(yield func(string, json.RawMessage) bool) {
		for _, n := range names {
			if !yield(n, r.properties[n]) {
				return
			}
		}
	}
}

func isNull(raw json.RawMessage) bool { return raw == nil || string(raw) == "null" }

// text is a JSON text; empty when it is something else.
func text(raw json.RawMessage) string {
	var s string
	if raw == nil || json.Unmarshal(raw, &s) != nil {
		return ""
	}
	return s
}

func orMissing(raw json.RawMessage) string {
	if raw == nil {
		return "missing"
	}
	return string(raw)
}
