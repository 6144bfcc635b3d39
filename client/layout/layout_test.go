package layout

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"google.golang.org/protobuf/encoding/prototext"
	"google.golang.org/protobuf/testing/protocmp"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// base is the least a description needs; tests add to it. It has six lines.
const base = `format: 1
floor: f
width_m: 20
height_m: 10
initial: free
resolution_m: 0.05
`

func mustRead(t testing.TB, text string) *Layout {
	t.Helper()
	l, err := Read(strings.NewReader(text), "f.yaml")
	if err != nil {
		t.Fatal(err)
	}
	return l
}

func wantEdits(t *testing.T, got []*wideberthv1.Edit, want ...string) {
	t.Helper()
	if len(got) != len(want) {
		t.Fatalf("%d edits, want %d: %v", len(got), len(want), got)
	}
	for i, w := range want {
		var e wideberthv1.Edit
		if err := prototext.Unmarshal([]byte(w), &e); err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(&e, got[i], protocmp.Transform()); d != "" {
			t.Errorf("edit %d (-want +got):\n%s", i, d)
		}
	}
}

func TestEveryKindOfItemBecomesItsEdit(t *testing.T) {
	l := mustRead(t, base+`
bodies:
  - {name: cart, radius_m: 0.4, margin_m: 0.1, preferred_clearance_m: 0.9, max_speed_mps: 1.5, braking_mps2: 0.6, reaction_s: 0.4, sensing_range_m: 8}
items:
  - {wall: w, width_m: 0.2, points: [[1, 2], [3, 4]], tolerance_m: 0.02, note: brick}
  - {block: b, polygon: [[0, 0], [4, 0], [0, 4]], holes: [[[1, 1], [2, 1], [1, 2]]]}
  - {column: c, at: [5, 5], radius_m: 0.3}
  - {cells: occupied, rect: [1, 1, 2, 2]}
  - {cells: unknown, polygon: [[0, 0], [4, 0], [0, 4]]}
  - {closed: z/a, rect: [1, 1, 2, 2]}
  - {speed_limit: z/b, rect: [1, 1, 2, 2], max_speed_mps: 0.5}
  - {one_way: z/c, rect: [1, 1, 2, 2], heading_deg: -180}
  - {station: s, at: [6, 6], heading_deg: 270}
changes:
  - {name: n, title: T, reason: R, items: [{remove: c}, {clear: [0, 0, 1, 1]}]}
`)
	const square = `outer{points{x_m:1 y_m:1}points{x_m:2 y_m:1}points{x_m:2 y_m:2}points{x_m:1 y_m:2}}`
	wantEdits(t, l.Edits,
		`put_feature{feature{name:"w" note:"brick" solid{polyline{points{x_m:1 y_m:2}points{x_m:3 y_m:4} width_m:0.2} survey_tolerance_m:0.02}}}`,
		`put_feature{feature{name:"b" solid{polygon{outer{points{}points{x_m:4}points{y_m:4}} holes{points{x_m:1 y_m:1}points{x_m:2 y_m:1}points{x_m:1 y_m:2}}}}}}`,
		`put_feature{feature{name:"c" solid{disc{center{x_m:5 y_m:5} radius_m:0.3}}}}`,
		`paint_occupancy{rect{rect{column:20 row:20 columns:20 rows:20} occupancy:OCCUPANCY_OCCUPIED}}`,
		`paint_occupancy{polygon{polygon{outer{points{}points{x_m:4}points{y_m:4}}} occupancy:OCCUPANCY_UNKNOWN}}`,
		`put_feature{feature{name:"z/a" zone{area{`+square+`} closed{}}}}`,
		`put_feature{feature{name:"z/b" zone{area{`+square+`} speed_limit{max_speed_mps:0.5}}}}`,
		fmt.Sprintf(`put_feature{feature{name:"z/c" zone{area{%s} one_way{heading_rad:%v}}}}`, square, math.Pi), // within (-pi, pi]
		fmt.Sprintf(`put_feature{feature{name:"s" station{pose{x_m:6 y_m:6 heading_rad:%v}}}}`, -math.Pi/2),
	)
	ch, ok := l.Change("n")
	if !ok || ch.Title != "T" || ch.Reason != "R" {
		t.Fatalf("change is %+v", ch)
	}
	wantEdits(t, ch.Edits, `remove_feature{name:"c"}`, `clear_rect{area{max_x_m:1 max_y_m:1}}`)

	var body wideberthv1.Body
	if err := prototext.Unmarshal([]byte(`name:"cart" radius_m:0.4 margin_m:0.1 preferred_clearance_m:0.9 max_speed_mps:1.5 braking_mps2:0.6 reaction_s:0.4 sensing_range_m:8`), &body); err != nil {
		t.Fatal(err)
	}
	got, _ := l.Body("cart")
	if d := cmp.Diff(&body, got, protocmp.Transform()); d != "" {
		t.Errorf("body (-want +got):\n%s", d)
	}
	var set wideberthv1.FloorSettings
	if err := prototext.Unmarshal([]byte(`resolution_m:0.05 columns:400 rows:200 origin{} initial_occupancy:OCCUPANCY_FREE`), &set); err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(&set, l.Settings, protocmp.Transform()); d != "" {
		t.Errorf("settings (-want +got):\n%s", d)
	}
}

// Rows of rows, with gaps: names number the copies from the outermost directive
// in, and sums of decimal steps come out as the decimals a person would write.
func TestRepeatStepsGapsAndNames(t *testing.T) {
	l := mustRead(t, base+`
items:
  - column: c
    at: [1, 1]
    radius_m: 0.1
    repeat:
      - {count: 2, step_m: [0, 3]}
      - {count: 5, step_m: [0.7, 0], gap_every: 2, gap_m: [0.1, 0]}
`)
	var got []string
	for _, e := range l.Edits {
		f := e.GetPutFeature().GetFeature()
		c := f.GetSolid().GetDisc().GetCenter()
		got = append(got, fmt.Sprint(f.GetName(), " ", c.GetXM(), " ", c.GetYM()))
	}
	want := []string{
		"c-1-1 1 1", "c-1-2 1.7 1", "c-1-3 2.5 1", "c-1-4 3.2 1", "c-1-5 4 1",
		"c-2-1 1 4", "c-2-2 1.7 4", "c-2-3 2.5 4", "c-2-4 3.2 4", "c-2-5 4 4",
	}
	if d := cmp.Diff(want, got); d != "" {
		t.Errorf("copies (-want +got):\n%s", d)
	}
}

// A cells rectangle sets the cells whose open square it meets: on the grid
// exactly its own, off it those it reaches into, whatever float64 makes of 0.15.
func TestCellsRectangle(t *testing.T) {
	for _, c := range []struct {
		rect string
		want string // column row columns rows
	}{
		{"[0.15, 0.1, 0.3, 0.2]", "3 2 3 2"},
		{"[0.16, 0.1, 0.3, 0.2]", "3 2 3 2"},
		{"[0.15, 0.1, 0.300001, 0.2]", "3 2 4 2"},
		{"[0, 0, 20, 10]", "0 0 400 200"},
		{"[0.02, 0.02, 0.03, 0.03]", "0 0 1 1"},
	} {
		l := mustRead(t, base+"items: [{cells: occupied, rect: "+c.rect+"}]\n")
		r := l.Edits[0].GetPaintOccupancy().GetRect().GetRect()
		if got := fmt.Sprint(r.GetColumn(), r.GetRow(), r.GetColumns(), r.GetRows()); got != c.want {
			t.Errorf("%s: cells %s, want %s", c.rect, got, c.want)
		}
	}
	l := mustRead(t, strings.Replace(base, "initial", "origin_m: [-3, -2]\ninitial", 1)+"items: [{cells: occupied, rect: [-3, -2, -2.9, -1.95]}]\n")
	r := l.Edits[0].GetPaintOccupancy().GetRect().GetRect()
	if got := fmt.Sprint(r.GetColumn(), r.GetRow(), r.GetColumns(), r.GetRows()); got != "0 0 2 1" {
		t.Errorf("off the origin: cells %s, want 0 0 2 1", got)
	}
}

func TestFaultsNameFileLineAndField(t *testing.T) {
	many := strings.Repeat("  - {column: c, at: [1], radius_m: 0.3}\n", maxFaults+5)
	for _, c := range []struct{ what, text, want string }{
		{"unknown key", base + "colour: red\n", "f.yaml:7: field colour is not one this file may have"},
		{"doubled key", base + "floor: g\n", `f.yaml:7: mapping key "floor" already defined at line 2`},
		{"wrong type", strings.Replace(base, "20", "wide", 1), "f.yaml:3: cannot read text `wide`; wanted a number"},
		{"not YAML", "format: [1", "f.yaml:1: did not find expected ',' or ']'"},
		{"nothing", "", "f.yaml: nothing in it"},
		{"two documents", base + "---\nformat: 1\n", "a second document begins"},
		{"newer format", "format: 2\n", "f.yaml:1: format: 2; this program reads format 1"},
		{"bad floor id", strings.Replace(base, "floor: f", "floor: F", 1), `f.yaml:2: floor: "F"; wanted 1 to 63`},
		{"part of a cell", strings.Replace(base, "20", "20.03", 1), "f.yaml:3: width_m: 20.03 is not a whole number of cells of 0.05 m"},
		{"too many cells", strings.Replace(strings.Replace(base, "20", "2000", 1), "10", "2000", 1), "f.yaml:3: width_m: 1600000000 cells in all; at most 268435456"},
		{"not a number", strings.Replace(base, "20", ".nan", 1), "f.yaml:3: width_m: NaN; wanted 0.05 to"},
		{"initial", strings.Replace(base, "free", "empty", 1), `f.yaml:5: initial: "empty"; wanted free, occupied or unknown`},
		{"no kind", base + "items:\n  - {note: x}\n", "f.yaml:8: items[0]: 0 kinds []; wanted exactly one of wall,"},
		{"two kinds", base + "items:\n  - {wall: a, block: b}\n", "f.yaml:8: items[0]: 2 kinds [wall block]"},
		{"missing field", base + "items:\n  - wall: a\n    width_m: 1\n", "f.yaml:8: items[0].points: missing; a wall item needs it"},
		{"field of another kind", base + "items:\n  - column: a\n    at: [1, 1]\n    radius_m: 1\n    width_m: 1\n", "f.yaml:11: items[0].width_m: a column item does not take it"},
		{"both outlines", base + "items:\n  - {block: a, rect: [1, 1, 2, 2], polygon: [[1, 1], [2, 1], [2, 2]]}\n", "exactly one of rect and polygon"},
		{"bad name", base + "items:\n  - {column: A B, at: [1, 1], radius_m: 1}\n", `f.yaml:8: items[0].column: "A B"; wanted 1 to 63`},
		{"short point", base + "items:\n  - wall: a\n    width_m: 1\n    points:\n      - [1, 1]\n      - [2]\n", "f.yaml:12: items[0].points[1]: [2]; wanted [x, y] in metres"},
		{"infinite point", base + "items:\n  - {column: a, at: [.inf, 1], radius_m: 1}\n", "items[0].at: [+Inf, 1]; wanted [x, y]"},
		{"inside out", base + "items:\n  - {cells: free, rect: [2, 1, 1, 2]}\n", "items[0].rect: [2, 1, 1, 2]; wanted [min x, min y, max x, max y], max above min"},
		{"cells off the floor", base + "items:\n  - {cells: occupied, rect: [19, 1, 20.05, 2]}\n", "cells off the floor of 400 by 200"},
		{"station off the floor", base + "items:\n  - {station: a, at: [21, 1], heading_deg: 0}\n", "items[0].at: (21, 1) is not on the floor"},
		{"same name twice", base + "items:\n  - {column: a, at: [1, 1], radius_m: 1}\n  - {station: a, at: [1, 1], heading_deg: 0}\n", `f.yaml:9: items[1].station: "a" is named by items[0] already`},
		{"remove in the layout", base + "items:\n  - remove: a\n", "f.yaml:8: items[0].remove: only a change"},
		{"no copies", base + "items:\n  - {column: a, at: [1, 1], radius_m: 1, repeat: [{count: 0, step_m: [1, 0]}]}\n", "items[0].repeat[0].count: 0; wanted 1 to"},
		{"copies of copies", base + "items:\n  - {column: a, at: [1, 1], radius_m: 1, repeat: [{count: 1000, step_m: [1, 0]}, {count: 1000, step_m: [1, 0]}]}\n", "items[0].repeat[1].count: 1000; wanted 1 to 100000 copies, directives multiplied"},
		{"copies far off", base + "items:\n  - {column: a, at: [1, 1], radius_m: 1, repeat: [{count: 3, step_m: [900000, 0]}]}\n", "items[0].at: repeated as far as"},
		{"gap without a count", base + "items:\n  - {column: a, at: [1, 1], radius_m: 1, repeat: [{count: 2, step_m: [1, 0], gap_m: [1, 0]}]}\n", "gap_every: 0; wanted 1 or more"},
		{"body out of range", base + "bodies:\n  - {name: a, radius_m: 11}\n", "f.yaml:8: bodies[0].radius_m: 11; wanted 0 to 10"},
		{"body twice", base + "bodies:\n  - {name: a}\n  - {name: a}\n", `f.yaml:9: bodies[1].name: "a" is the name of an earlier body`},
		{"change of nothing", base + "changes:\n  - {name: a, reason: b}\n", "f.yaml:8: changes[0]: no items"},
		{"change without a reason", base + "changes:\n  - {name: a, items: [{remove: b}]}\n", "changes[0].reason: 0 characters; wanted 1 to 500"},
		{"too large", base + "# " + strings.Repeat("x", MaxFileBytes), "f.yaml: more than 1048576 bytes"},
		{"faults without end", base + "items:\n" + many, "and 5 more"},
	} {
		_, err := Read(strings.NewReader(c.text), "f.yaml")
		var e *Error
		if !errors.As(err, &e) {
			t.Errorf("%s: error is %v, want an *Error", c.what, err)
			continue
		}
		if !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error is\n%v\nwant it to contain\n%s", c.what, err, c.want)
		}
		if len(e.Faults) > maxFaults {
			t.Errorf("%s: %d faults listed, want at most %d", c.what, len(e.Faults), maxFaults)
		}
	}
}

func TestFaultsComeTogether(t *testing.T) {
	_, err := Read(strings.NewReader(base+"items:\n  - {column: a, at: [1], radius_m: 1}\n  - {station: b}\n"), "f.yaml")
	var e *Error
	if !errors.As(err, &e) || len(e.Faults) != 3 {
		t.Fatalf("error is %v, want three faults", err)
	}
	if e.Faults[0].Line != 8 || e.Faults[1].Line != 9 || e.Faults[1].Field != "items[1].at" {
		t.Errorf("faults are %+v", e.Faults)
	}
}

func TestPatchesFitMessagesAndKeepOrder(t *testing.T) {
	text := base + "items:\n" +
		"  - {column: a, at: [1, 1], radius_m: 0.1, repeat: [{count: 12000, step_m: [0.001, 0]}]}\n"
	l := mustRead(t, text)
	ps := l.Patches(7, "who", "why")
	if len(ps) != 2 || len(ps[0].Edits) != patchEdits || len(ps[1].Edits) != 2000 {
		t.Fatalf("%d patches", len(ps))
	}
	if ps[0].BaseVersion != 7 || ps[1].BaseVersion != 8 || ps[1].Author != "who" || ps[1].Reason != "why" {
		t.Errorf("second patch is by %q for %q on %d", ps[1].Author, ps[1].Reason, ps[1].BaseVersion)
	}
	if got := ps[1].Edits[0].GetPutFeature().GetFeature().GetName(); got != "a-10001" {
		t.Errorf("the second patch begins with %s", got)
	}
}
