package picture

import (
	"bytes"
	"math"
	"strings"
	"testing"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func at(x, y float64) *wideberthv1.Point { return &wideberthv1.Point{XM: x, YM: y} }

// lattice is a roadmap of nodes step metres apart with edges to the right, over an area.
func lattice(step, x0, y0, x1, y1, clearance float64) *client.Roadmap {
	r := &client.Roadmap{Header: &wideberthv1.RoadmapHeader{
		Stamp: &wideberthv1.VersionStamp{}, Roadmap: wideberthv1.Roadmap_ROADMAP_GRID4,
		Body: &wideberthv1.Body{RadiusM: 0.4, MarginM: 0.1, PreferredClearanceM: 1},
	}}
	for y := y0; y <= y1; y += step {
		for x := x0; x <= x1; x += step {
			n := int32(len(r.Nodes))
			r.Nodes = append(r.Nodes, &wideberthv1.RoadmapNode{At: at(x, y), ClearanceM: clearance})
			if x > x0 {
				r.Edges = append(r.Edges, &wideberthv1.RoadmapEdge{FromNode: n - 1, ToNode: n, Points: []*wideberthv1.Point{at(x-step, y), at(x, y)}, LengthM: step, SmallestClearanceM: clearance})
			}
		}
	}
	r.Header.NodeCount, r.Header.EdgeCount = int64(len(r.Nodes)), int64(len(r.Edges))
	return r
}

// count is how many sub-paths the elements of a class have.
func count(es []element, class string) int {
	n := 0
	for _, e := range es {
		if e.name == "path" && e.attr["class"] == class && e.group == "plan" {
			n += strings.Count(e.attr["d"], "M")
		}
	}
	return n
}

func TestStepsAreAsManyAsTheBodyTellsApart(t *testing.T) {
	steps := Steps(&wideberthv1.Body{RadiusM: 0.4, MarginM: 0.1, PreferredClearanceM: 1})
	for i, c := range []struct{ below, from float64 }{{0.5, 0.5}, {0.749, 0.75}, {0.999, 1}, {1.999, 2}} {
		if got := StepOf(steps, c.from); len(steps) != 4 || got != i {
			t.Errorf("%v m is in step %d of %d, want %d of 4", c.from, got, len(steps), i)
		}
		if got := StepOf(steps, c.below); i > 0 && got != i-1 {
			t.Errorf("%v m is in step %d, want %d", c.below, got, i-1)
		}
	}
	// Preferring no more than what is required, or with no width at all, there are fewer.
	for _, b := range []*wideberthv1.Body{{RadiusM: 0.5, PreferredClearanceM: 0.5}, {}} {
		if steps := Steps(b); len(steps) == 0 || len(steps) > 3 || StepOf(steps, 9) != len(steps)-1 || StepOf(steps, 0) != 0 {
			t.Errorf("steps %+v for %v", steps, b)
		}
	}
}

// All of a small roadmap is drawn, each edge in its step, and those beyond sensing marked.
func TestRoadmapIsDrawn(t *testing.T) {
	_, hall, _ := hall(t)
	r := lattice(4, 10, 10, 90, 70, 0.6)
	for i, e := range r.Edges {
		if i%2 == 0 {
			e.SmallestClearanceM, e.LargestClearanceM, e.BeyondSensing = 3, 4, true
		}
	}
	r.Cells = []*wideberthv1.RoadmapCell{{Ring: &wideberthv1.Ring{Points: []*wideberthv1.Point{at(1, 1), at(9, 1), at(9, 9)}}}}
	r.Header.CellCount = 1
	es := read(t, draw(t, Scene{Floor: hall, Roadmap: r}))
	half := (len(r.Edges) + 1) / 2
	for class, want := range map[string]int{"step-0": len(r.Edges) - half, "step-1": 0, "step-3": half, "blind": half, "roadmap-node": len(r.Nodes), "roadmap-cell": 1} {
		if got := count(es, class); got != want {
			t.Errorf("%d of class %s, want %d", got, class, want)
		}
	}
	said := texts(es)
	if !strings.Contains(said, "Grid4: 336 nodes, 320 edges, 1 cells") || strings.Contains(said, "Not drawn") || strings.Contains(said, "clearance 0.75 to 1 m") {
		t.Errorf("the words are\n%s", said)
	}
}

// What is too fine becomes areas, with a part enlarged; what is too much is thinned out. The
// sheet says so and stays small.
func TestRoadmapIsThinnedOut(t *testing.T) {
	_, hall, _ := hall(t)
	fine := lattice(0.3, 10, 10, 110, 70, 0.6)
	svg := draw(t, Scene{Floor: hall, Roadmap: fine})
	es := read(t, svg)
	if count(es, "step-0") != 0 || count(es, "step-0-area") == 0 || !strings.Contains(texts(es), "too close to be drawn apart") {
		t.Errorf("%d edges and %d areas of %d nodes 3 units apart", count(es, "step-0"), count(es, "step-0-area"), len(fine.Nodes))
	}
	enlarged := 0
	for _, e := range es {
		if e.group == "detail" && e.attr["class"] == "step-0" {
			enlarged += strings.Count(e.attr["d"], "M")
		}
	}
	if enlarged < 100 {
		t.Errorf("%d edges enlarged, want them to be seen there", enlarged)
	}
	if len(svg) > 1_500_000 {
		t.Errorf("%d bytes", len(svg))
	}
	star := lattice(2, 10, 10, 90, 70, 0.6)
	n := len(star.Nodes)
	for i := range 4000 {
		a, b := star.Nodes[i%n].At, star.Nodes[(i*37+11)%n].At
		star.Edges = append(star.Edges, &wideberthv1.RoadmapEdge{Points: []*wideberthv1.Point{a, b}, LengthM: math.Hypot(a.XM-b.XM, a.YM-b.YM), SmallestClearanceM: 0.6})
	}
	es = read(t, draw(t, Scene{Floor: hall, Roadmap: star}))
	drawn := count(es, "step-0")
	if drawn < 1000 || drawn >= len(star.Edges) || !strings.Contains(texts(es), "Not drawn, so that the rest can be read") {
		t.Errorf("%d of %d edges drawn, want the short ones, and that it is said", drawn, len(star.Edges))
	}
}

// A grown disc and square: arcs turn the way the floor's y says, by less than a half circle
// where the solid's do.
func TestGrownIsDrawn(t *testing.T) {
	_, hall, _ := hall(t)
	piece := func(x, y, cx, cy, r float64) *wideberthv1.GrownPiece {
		return &wideberthv1.GrownPiece{From: at(x, y), Center: at(cx, cy), RadiusM: r}
	}
	straight := func(x, y float64) *wideberthv1.GrownPiece { return &wideberthv1.GrownPiece{From: at(x, y)} }
	g := &client.Grown{Summary: &wideberthv1.GrownSummary{AreaM2: 12.5, PerimeterM: 7.25, OutlineCount: 2, Body: &wideberthv1.Body{RadiusM: 0.5}}, Outlines: []*wideberthv1.GrownOutline{
		{Pieces: []*wideberthv1.GrownPiece{piece(12, 10, 11, 10, 1)}},
		{Pieces: []*wideberthv1.GrownPiece{straight(20, 9), piece(22, 9, 22, 10, 1), straight(22, 11), piece(20, 11, 20, 10, 1)}},
	}}
	es := read(t, draw(t, Scene{Floor: hall, Grown: g}))
	for _, e := range es {
		if e.attr["class"] != "grown" || e.name != "path" {
			continue
		}
		// The border, the circle of two halves, the two half circles' ends of the slot.
		if d := e.attr["d"]; strings.Count(d, "M") != 3 || strings.Count(d, "A") != 4 || strings.Contains(d, " 0 1 ") || strings.Contains(d, " 0 0 1 ") {
			t.Errorf("drawn as %s", d)
		}
	}
	if said := texts(es); !strings.Contains(said, "12.50 m2") || !strings.Contains(said, "7.25 m of outline") {
		t.Errorf("the words are\n%s", said)
	}
}

func TestComparisonHasAPanelForEach(t *testing.T) {
	l, before, _ := hall(t)
	tug, _ := l.Body("tug")
	c := Comparison{Title: "dock to cold", Floor: before, Body: tug, OptimumM: 81.5, Panels: []Panel{
		{Name: "first", Route: routeOver(before, tug, toColdRoom...), Figures: []string{"81.6 m", "fast"}},
		{Name: "second", Missing: "unfit: too large for <this> floor"},
		{Name: "third", Missing: "no passage", Refusal: &wideberthv1.Refusal{Bottleneck: &wideberthv1.Bottleneck{Exists: true, At: at(60, 50), WidthM: 0.9}}},
	}, Start: &wideberthv1.Pose{XM: 40, YM: 10}, Goal: &wideberthv1.Pose{XM: 70, YM: 70}}
	var b bytes.Buffer
	if err := DrawComparison(&b, c); err != nil {
		t.Fatal(err)
	}
	es := read(t, b.Bytes())
	said := texts(es)
	for _, want := range []string{"dock to cold", "first", "81.6 m", "second", "too large for <this>", "81.500 m", "not a safety function"} {
		if !strings.Contains(said, want) {
			t.Errorf("no %q in\n%s", want, said)
		}
	}
	lines, ends, marks := map[string]int{}, map[string]int{}, map[string]int{}
	for _, e := range es {
		if e.attr["data-leg"] != "" {
			lines[e.group]++
		}
		switch e.attr["class"] {
		case "end", "goal":
			ends[e.group]++
		case "smallest":
			marks[e.group]++
		}
	}
	if lines["panel-0"] == 0 || lines["panel-1"] != 0 {
		t.Errorf("legs by panel: %v", lines)
	}
	for _, p := range []string{"panel-0", "panel-1", "panel-2"} {
		if ends[p] != 2 {
			t.Errorf("%s: %d ends drawn", p, ends[p])
		}
	}
	if marks["panel-2"] != 1 || marks["panel-1"] != 0 {
		t.Errorf("places that do not fit, by panel: %v", marks)
	}
	for _, bad := range []Comparison{{Floor: before}, {Panels: c.Panels}, {Floor: before, Panels: make([]Panel, MaxPanels+1)}} {
		if err := DrawComparison(&b, bad); err == nil {
			t.Errorf("%d panels, floor %v: drawn", len(bad.Panels), bad.Floor != nil)
		}
	}
	nan := lattice(4, 10, 10, 20, 20, 1)
	nan.Edges[1].Points[0].XM = math.NaN()
	if err := Draw(&b, Scene{Floor: before, Roadmap: nan}); err == nil || !strings.Contains(err.Error(), "roadmap.") {
		t.Errorf("a place that is no number: %v", err)
	}
}
