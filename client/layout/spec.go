package layout

// The file's own words. Pointers tell "not said" from zero where it matters.

type fileSpec struct {
	Format        int          `yaml:"format"`
	Floor         string       `yaml:"floor"`
	Title         string       `yaml:"title"`
	WidthM        float64      `yaml:"width_m"`
	HeightM       float64      `yaml:"height_m"`
	ResolutionM   *float64     `yaml:"resolution_m"`
	OriginM       []float64    `yaml:"origin_m"`
	CapM          float64      `yaml:"clearance_cap_m"`
	Initial       string       `yaml:"initial"`
	UnknownIsFree bool         `yaml:"unknown_is_free"`
	OpenBorder    bool         `yaml:"open_border"`
	Bodies        []bodySpec   `yaml:"bodies"`
	Items         []itemSpec   `yaml:"items"`
	Changes       []changeSpec `yaml:"changes"`
}

type bodySpec struct {
	Name       string  `yaml:"name"`
	RadiusM    float64 `yaml:"radius_m"`
	MarginM    float64 `yaml:"margin_m"`
	PreferredM float64 `yaml:"preferred_clearance_m"`
	SpeedMps   float64 `yaml:"max_speed_mps"`
	BrakingMps float64 `yaml:"braking_mps2"`
	ReactionS  float64 `yaml:"reaction_s"`
	SensingM   float64 `yaml:"sensing_range_m"`
}

type changeSpec struct {
	Name   string     `yaml:"name"`
	Title  string     `yaml:"title"`
	Reason string     `yaml:"reason"`
	Items  []itemSpec `yaml:"items"`
}

type itemSpec struct {
	// What it is: exactly one of these.
	Wall       *string   `yaml:"wall"`
	Block      *string   `yaml:"block"`
	Column     *string   `yaml:"column"`
	Cells      *string   `yaml:"cells"`
	Closed     *string   `yaml:"closed"`
	SpeedLimit *string   `yaml:"speed_limit"`
	OneWay     *string   `yaml:"one_way"`
	Station    *string   `yaml:"station"`
	Remove     *string   `yaml:"remove"`
	Clear      []float64 `yaml:"clear"`

	// Where it is and how it is.
	Points     [][]float64   `yaml:"points"`
	WidthM     *float64      `yaml:"width_m"`
	Rect       []float64     `yaml:"rect"`
	Polygon    [][]float64   `yaml:"polygon"`
	Holes      [][][]float64 `yaml:"holes"`
	At         []float64     `yaml:"at"`
	RadiusM    *float64      `yaml:"radius_m"`
	ToleranceM *float64      `yaml:"tolerance_m"`
	SpeedMps   *float64      `yaml:"max_speed_mps"`
	HeadingDeg *float64      `yaml:"heading_deg"`
	Note       string        `yaml:"note"`
	Repeat     []repeatSpec  `yaml:"repeat"`
}

type repeatSpec struct {
	Count    int       `yaml:"count"`
	StepM    []float64 `yaml:"step_m"`
	GapEvery int       `yaml:"gap_every"`
	GapM     []float64 `yaml:"gap_m"`
}

// The kinds of item and which fields each takes besides its own. A field in
// need must be there, one in may can be; any other is a fault.
type kindSpec struct {
	key       string
	need, may []string
	outline   bool // takes exactly one of rect and polygon
}

var kinds = []kindSpec{
	{key: "wall", need: []string{"points", "width_m"}, may: []string{"tolerance_m", "note", "repeat"}},
	{key: "block", may: []string{"holes", "tolerance_m", "note", "repeat"}, outline: true},
	{key: "column", need: []string{"at", "radius_m"}, may: []string{"tolerance_m", "note", "repeat"}},
	{key: "cells", may: []string{"holes", "repeat"}, outline: true},
	{key: "closed", may: []string{"holes", "note", "repeat"}, outline: true},
	{key: "speed_limit", need: []string{"max_speed_mps"}, may: []string{"holes", "note", "repeat"}, outline: true},
	{key: "one_way", need: []string{"heading_deg"}, may: []string{"holes", "note", "repeat"}, outline: true},
	{key: "station", need: []string{"at", "heading_deg"}, may: []string{"note", "repeat"}},
	{key: "remove", may: []string{"repeat"}},
	{key: "clear", may: []string{"repeat"}},
}

// kindKeys is the list of kinds, for messages.
const kindKeys = "wall, block, column, cells, closed, speed_limit, one_way, station, remove, clear"

// said lists which of an item's fields are there, kinds apart from the rest, in
// the order of the struct.
func (it *itemSpec) said() (kind, other []string) {
	for _, k := range []struct {
		key string
		is  bool
	}{
		{"wall", it.Wall != nil}, {"block", it.Block != nil}, {"column", it.Column != nil},
		{"cells", it.Cells != nil}, {"closed", it.Closed != nil}, {"speed_limit", it.SpeedLimit != nil},
		{"one_way", it.OneWay != nil}, {"station", it.Station != nil}, {"remove", it.Remove != nil},
		{"clear", it.Clear != nil},
	} {
		if k.is {
			kind = append(kind, k.key)
		}
	}
	for _, k := range []struct {
		key string
		is  bool
	}{
		{"points", it.Points != nil}, {"width_m", it.WidthM != nil}, {"rect", it.Rect != nil},
		{"polygon", it.Polygon != nil}, {"holes", it.Holes != nil}, {"at", it.At != nil},
		{"radius_m", it.RadiusM != nil}, {"tolerance_m", it.ToleranceM != nil},
		{"max_speed_mps", it.SpeedMps != nil}, {"heading_deg", it.HeadingDeg != nil},
		{"note", it.Note != ""}, {"repeat", it.Repeat != nil},
	} {
		if k.is {
			other = append(other, k.key)
		}
	}
	return kind, other
}
