package picture

import (
	"bytes"
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// element is what these tests look for in a sheet.
type element struct {
	name  string
	attr  map[string]string
	text  string
	group string // id of the innermost g with one
}

func (e element) num(t *testing.T, name string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(e.attr[name], 64)
	if err != nil {
		t.Fatalf("%s of %s: %v", name, e.name, err)
	}
	return v
}

// read decodes a sheet with a decoder that is not the writer's.
func read(t *testing.T, svg []byte) []element {
	t.Helper()
	dec := xml.NewDecoder(bytes.NewReader(svg))
	var out []element
	var open []int
	var groups []string
	for {
		tok, err := dec.Token()
		if errors.Is(err, io.EOF) {
			return out
		}
		if err != nil {
			t.Fatalf("not well-formed: %v", err)
		}
		switch tok := tok.(type) {
		case xml.StartElement:
			e := element{name: tok.Name.Local, attr: map[string]string{}}
			for _, a := range tok.Attr {
				e.attr[a.Name.Local] = a.Value
			}
			if e.name == "g" {
				groups = append(groups, e.attr["id"])
			}
			if len(groups) > 0 {
				e.group = groups[len(groups)-1]
			}
			open = append(open, len(out))
			out = append(out, e)
		case xml.EndElement:
			open = open[:len(open)-1]
			if tok.Name.Local == "g" {
				groups = groups[:len(groups)-1]
			}
		case xml.CharData:
			if len(open) > 0 {
				out[open[len(open)-1]].text += string(tok)
			}
		}
	}
}

func draw(t *testing.T, s Scene) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := Draw(&b, s); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func texts(es []element) string {
	var all []string
	for _, e := range es {
		if e.name == "text" {
			all = append(all, e.text)
		}
	}
	return strings.Join(all, "\n")
}

// scenes are the sheets the demonstration draws, and a bare floor.
func scenes(t *testing.T) map[string]Scene {
	l, before, after := hall(t)
	tug, _ := l.Body("tug")
	r := routeOver(before, tug, toColdRoom...)
	return map[string]Scene{
		"floor":  {Floor: before},
		"route":  {Title: "To cold room 3", Caption: "on the night's layout", Floor: before, Route: r},
		"change": {Title: "After the change", Floor: after, Before: before, Route: r, Previous: r},
		"part":   {Floor: before, Route: r, Part: &wideberthv1.Area{MinXM: 30, MinYM: 20, MaxXM: 60, MaxYM: 70}},
		"refused": {Floor: before, Body: tug, Start: &wideberthv1.Pose{XM: 98.2, YM: 55.7}, Goal: &wideberthv1.Pose{XM: 14, YM: 71},
			Refusal: &wideberthv1.Refusal{
				Reason: wideberthv1.RefusalReason_REFUSAL_REASON_NO_PASSAGE,
				Bottleneck: &wideberthv1.Bottleneck{Exists: true, At: &wideberthv1.Point{XM: 14.03, YM: 66}, WidthM: 0.9, WidthNeededM: 1.3,
					Features: []string{"cold-1/door-east", "cold-1/door-west"}},
			}},
	}
}

func TestSheetsAreWellFormedSmallAndAlwaysTheSame(t *testing.T) {
	const most = 1_500_000 // bytes: what a mail program and a browser take without complaint
	for name, s := range scenes(t) {
		svg := draw(t, s)
		es := read(t, svg)
		if es[0].name != "svg" || es[0].attr["viewBox"] == "" {
			t.Errorf("%s: begins with %s", name, es[0].name)
		}
		if len(svg) > most {
			t.Errorf("%s: %d bytes, more than %d", name, len(svg), most)
		}
		if !bytes.Equal(svg, draw(t, s)) {
			t.Errorf("%s: drawn again, the bytes differ", name)
		}
		t.Logf("%s: %d bytes", name, len(svg))
	}
}

func TestEverySheetCautionsAndNamesItsVersion(t *testing.T) {
	for name, s := range scenes(t) {
		said := texts(read(t, draw(t, s)))
		v := s.Floor.Stamp.GetVersion()
		if s.Route != nil {
			v = s.Route.CheckedAgainst.GetVersion()
		}
		for _, want := range []string{
			fmt.Sprintf("checked against version %d; not a safety function", v),
			"People and loose loads are not on the map",
			fmt.Sprintf("version %d, digest 00ff", s.Floor.Stamp.GetVersion()),
		} {
			if !strings.Contains(said, want) {
				t.Errorf("%s: does not say %q", name, want)
			}
		}
	}
}

func TestScaleBarIsAsLongAsItSays(t *testing.T) {
	for name, s := range scenes(t) {
		es := read(t, draw(t, s))
		area := floorBox(s.Floor.Settings)
		if p := s.Part; p != nil {
			area = box{p.MinXM, p.MinYM, p.MaxXM, p.MaxYM}
		}
		var frameWidth, lengthM, barWidth float64
		for _, e := range es {
			switch {
			case e.group == "plan" && e.name == "rect" && e.attr["class"] == "floor" && frameWidth == 0:
				frameWidth = e.num(t, "width")
			case e.name == "g" && e.attr["id"] == "scale-bar":
				lengthM = e.num(t, "data-length-m")
			case e.group == "scale-bar" && e.name == "rect" && e.attr["class"] == "scale" && e.attr["height"] == "4":
				barWidth = e.num(t, "width")
			}
		}
		want := lengthM * frameWidth / area.width()
		if lengthM <= 0 || math.Abs(barWidth-want) > 0.02 { // two roundings to a hundredth of a unit
			t.Errorf("%s: a bar of %v m is %v units long, want %v", name, lengthM, barWidth, want)
		}
	}
}

func TestRouteShowsTightLegsApartAndItsSmallestClearance(t *testing.T) {
	s := scenes(t)["route"]
	es := read(t, draw(t, s))
	var tight, open []element
	for _, e := range es {
		if e.group != "plan" {
			continue
		}
		switch e.attr["data-leg"] {
		case "tight":
			tight = append(tight, e)
		case "open":
			open = append(open, e)
		}
	}
	want := 0
	for _, l := range s.Route.Legs {
		if l.Kind == wideberthv1.LegKind_LEG_KIND_TIGHT {
			want++
		}
	}
	if want == 0 || len(tight) != want || len(open) != len(s.Route.Legs)-want {
		t.Fatalf("%d tight and %d open legs drawn, want %d and %d", len(tight), len(open), want, len(s.Route.Legs)-want)
	}
	if tight[0].num(t, "stroke-width") <= open[0].num(t, "stroke-width") {
		t.Error("a tight leg is not drawn thicker than an open one")
	}
	bars := 0
	for _, e := range es {
		if e.group == "plan" && e.attr["class"] == "bars" && e.attr["stroke-dasharray"] != "" {
			bars++
		}
	}
	if bars != want {
		t.Errorf("%d barred lines for %d tight legs", bars, want)
	}
	figure := metres(s.Route.SmallestClearanceM)
	if n := strings.Count("\n"+texts(es)+"\n", "\n"+figure+"\n"); n != 1 || !strings.Contains(texts(es), "smallest clearance "+figure) {
		t.Errorf("the smallest clearance, %s, is not on the plan, or %d times enlarged, want once", figure, n)
	}
	for _, f := range s.Floor.Features {
		if f.GetStation() != nil && !strings.Contains(texts(es), f.GetName()) {
			t.Errorf("station %s is not named", f.GetName())
		}
	}
}

func TestRefusalShowsWidthFoundAndNeeded(t *testing.T) {
	said := texts(read(t, draw(t, scenes(t)["refused"])))
	for _, want := range []string{"0.90 m wide, 1.30 m needed", "every way is too narrow or closed", "cold-1/door-east, cold-1/door-west"} {
		if !strings.Contains(said, want) {
			t.Errorf("does not say %q", want)
		}
	}
}

func TestChangeIsHatchedAndCounted(t *testing.T) {
	s := scenes(t)["change"]
	es := read(t, draw(t, s))
	hatched := map[string]int{}
	for _, e := range es {
		if e.group == "plan" {
			hatched[e.attr["data-change"]]++
		}
	}
	// Came: the parked row's cells, the stillage, the station's ring. Went: the
	// cleared rows' cells, the stillage where it was.
	if hatched["added"] < 3 || hatched["removed"] < 2 {
		t.Errorf("hatched %d added, %d removed", hatched["added"], hatched["removed"])
	}
	said := texts(es)
	// Nine trolleys of 0.55 m by 1.35 m.
	for _, want := range []string{"6.7 m\u00b2 of raster became solid", "Moved or altered: buffer-2, buffer-2/stillage", "Changed since version 2"} {
		if !strings.Contains(said, want) {
			t.Errorf("does not say %q in\n%s", want, said)
		}
	}
	s.Before = s.Floor
	if said := texts(read(t, draw(t, s))); !strings.Contains(said, "Nothing that is drawn differs") {
		t.Error("the same version twice is not said to be the same")
	}
}

func TestTextIsEscaped(t *testing.T) {
	const nasty = `</text><script>alert("1")</script> & 'x' ]]> ` + "\x00\x1b"
	s := scenes(t)["refused"]
	s.Title, s.Caption = nasty, nasty
	s.Refusal = proto.CloneOf(s.Refusal)
	s.Refusal.Explanation = nasty
	s.Floor = &client.FloorContent{
		Stamp:    &wideberthv1.VersionStamp{Floor: nasty, Version: 2, Digest: nasty},
		Settings: s.Floor.Settings, Cells: s.Floor.Cells,
		Features: []*wideberthv1.Feature{{Name: nasty, Kind: &wideberthv1.Feature_Station{Station: &wideberthv1.Station{Pose: &wideberthv1.Pose{XM: 20, YM: 20}}}}},
	}
	found := 0
	for _, e := range read(t, draw(t, s)) {
		if e.name == "script" {
			t.Fatal("text became an element")
		}
		if e.name == "text" && strings.Contains(e.text, `<script>alert("1")</script> & 'x'`) {
			found++
		}
	}
	if found < 3 { // title, caption, station
		t.Errorf("the text came through whole %d times, want 3 or more", found)
	}
}

func TestUndrawableScenesNameTheField(t *testing.T) {
	ok := scenes(t)["route"]
	spoil := func(change func(s *Scene)) Scene {
		s := ok
		s.Route = proto.CloneOf(ok.Route)
		change(&s)
		return s
	}
	small := &client.FloorContent{Settings: &wideberthv1.FloorSettings{Columns: 4, Rows: 4}, Cells: make([]byte, 4)}
	for _, c := range []struct {
		want  string
		scene Scene
	}{
		{"floor", spoil(func(s *Scene) { s.Floor = nil })},
		{"floor", spoil(func(s *Scene) { s.Floor = &client.FloorContent{Settings: ok.Floor.Settings} })},
		{"before", spoil(func(s *Scene) { s.Before = small })},
		{"route.legs[1].points[0]", spoil(func(s *Scene) { s.Route.Legs[1].Points[0].XM = math.NaN() })},
		{"part", spoil(func(s *Scene) { s.Part = &wideberthv1.Area{MinXM: 3, MaxXM: 2, MaxYM: 1} })},
	} {
		var b bytes.Buffer
		err := Draw(&b, c.scene)
		if err == nil || !strings.Contains(err.Error(), "picture: "+c.want) {
			t.Errorf("error %v, want one about %s", err, c.want)
		}
		if b.Len() > 0 {
			t.Errorf("%s: %d bytes were written before the fault was found", c.want, b.Len())
		}
	}
}

func TestStationNamesDoNotOverlap(t *testing.T) {
	for name, s := range scenes(t) {
		if name == "part" {
			continue // there, marks at the edge may crowd
		}
		d := newDrawing(s)
		p := d.labelsOf(planFrame(d.area))
		p.settle()
		for i, a := range p.labels {
			for _, b := range p.labels[:i] {
				if a.class == "label" && b.class == "label" && a.box.overlap(b.box) > 0 {
					t.Errorf("%s: %v and %v overlap", name, a.lines, b.lines)
				}
			}
		}
	}
}
