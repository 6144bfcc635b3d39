package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// lines reads one message a line.
func lines[M proto.Message](t *testing.T, out string, one func() M) (all []M) {
	t.Helper()
	for _, line := range strings.Split(strings.TrimSpace(out), "\n") {
		m := one()
		if err := protojson.Unmarshal([]byte(line), m); err != nil {
			t.Fatalf("%v in %q", err, line)
		}
		all = append(all, m)
	}
	return all
}

// svg reads a picture that a command drew.
func (x *tool) svg(name string) string {
	x.t.Helper()
	b, err := os.ReadFile(filepath.Join(x.dir, name))
	if err != nil {
		x.t.Fatal(err)
	}
	return string(b)
}

func TestRoadmapAsTableJSONAndPicture(t *testing.T) {
	t.Parallel()
	x := hall(t)
	for _, kind := range []string{"grid4", "grid8", "quadtree", "visibility-graph", "meadow-map", "voronoi-graph", "exact-cells"} {
		file := filepath.Join(x.dir, kind+".svg")
		code, out, errs := x.run("roadmap", "hall", "--roadmap", kind, "--radius", "0.4", "--picture", file)
		if code != exitOK || !strings.Contains(out, "hall, version 2") || !strings.Contains(out, kind) || !strings.Contains(out, "SMALLEST CLEARANCE") {
			t.Errorf("%s: exit code %d, %s\n%s", kind, code, errs, out)
		}
		if !strings.Contains(errs, "no safety function") {
			t.Errorf("%s without its caution: %q", kind, errs)
		}
		if svg := x.svg(kind + ".svg"); !strings.Contains(svg, "not a safety function") || !strings.Contains(svg, ">hall: "+kind+"<") || !strings.Contains(svg, `class="step-`) {
			t.Errorf("%s: the picture has no caution, no title or no edge", kind)
		}
		all := lines(t, x.ok("roadmap", "hall", "--roadmap", kind, "--radius", "0.4", "--area", "1,1,3,3", "--output", "json"),
			func() *wideberthv1.ShowRoadmapResponse { return &wideberthv1.ShowRoadmapResponse{} })
		nodes, edges := 0, 0
		for _, m := range all {
			nodes += len(m.GetPart().GetNodes())
			edges += len(m.GetPart().GetEdges())
		}
		end := all[len(all)-1].GetEnd()
		if all[0].GetHeader().GetStamp().GetVersion() != 2 || end.GetNodeCount() != int64(nodes) || end.GetEdgeCount() != int64(edges) {
			t.Errorf("%s: first %v, last %v, %d nodes and %d edges between", kind, all[0], end, nodes, edges)
		}
	}
}

// What is beyond the sensing range is said in the table and drawn.
func TestRoadmapBeyondSensing(t *testing.T) {
	t.Parallel()
	x := hall(t)
	args := []string{"roadmap", "hall", "--roadmap", "voronoi-graph", "--radius", "0.4", "--picture", filepath.Join(x.dir, "v.svg")}
	if out := x.ok(args...); strings.Contains(out, "beyond sensing") || strings.Contains(x.svg("v.svg"), `class="blind"`) {
		t.Errorf("no range is known:\n%s", out)
	}
	if out := x.ok(append(args, "--sensing", "1")...); !strings.Contains(out, "beyond sensing") || !strings.Contains(x.svg("v.svg"), `class="blind"`) {
		t.Errorf("the hall's middle is 2 m from its walls:\n%s", out)
	}
}

// Through a door of 1.2 m, 0.2 m thick and in the middle, from 1,2 to 7,2: 6 m straight on.
func TestCompareRoadmapsAsTableJSONAndPicture(t *testing.T) {
	t.Parallel()
	x := hall(t)
	file := filepath.Join(x.dir, "ways.svg")
	code, out, errs := x.run("compare-roadmaps", "hall", "dock-1", "dock-2", "--radius", "0.4", "--picture", file)
	if code != exitOK || !strings.Contains(out, "6.000 m") || strings.Count(out, "\n") != 3+1+7 || !strings.Contains(errs, "no safety function") {
		t.Errorf("exit code %d, %s\n%s", code, errs, out)
	}
	svg := x.svg("ways.svg")
	for _, kind := range []string{"grid4", "grid8", "quadtree", "visibility-graph", "meadow-map", "voronoi-graph", "exact-cells"} {
		if !strings.Contains(out, kind) || !strings.Contains(svg, ">"+kind+"<") {
			t.Errorf("%s is not in the table, or not in the picture", kind)
		}
	}
	if !strings.Contains(svg, "not a safety function") {
		t.Error("the picture has no caution")
	}
	resp := message(x, &wideberthv1.CompareRoadmapsResponse{}, "compare-roadmaps", "hall", "1,2", "7,2", "--radius", "0.4", "--roadmap", "exact-cells", "--roadmap", "grid8")
	if len(resp.GetRows()) != 2 || resp.GetRows()[0].GetRoadmap() != wideberthv1.Roadmap_ROADMAP_EXACT_CELLS || resp.GetRows()[1].GetRoute() == nil {
		t.Errorf("answer %v, want exact cells, then the grid", resp)
	}
	// Nothing fits a door of 1.2 m at 0.7 m.
	code, out, _ = x.run("compare-roadmaps", "hall", "dock-1", "dock-2", "--radius", "0.7", "--picture", file)
	if code != exitRefused || strings.Count(out, "no passage: ") != 7 || strings.Count(x.svg("ways.svg"), "no passage: ") != 7 {
		t.Errorf("exit code %d, want %d and why in each row and panel:\n%s", code, exitRefused, out)
	}
}

// The hall without its wall: a room of 8 m by 4 m leaves 7 m by 3 m to a body of 0.5 m.
func TestGrownAsTableJSONAndPicture(t *testing.T) {
	t.Parallel()
	x := newTool(t)
	x.ok("floors", "create", "hall", "--columns", "160", "--rows", "80", "--initial", "free", "--author", "engineer")
	out := x.ok("grown", "hall", "--radius", "0.4", "--margin", "0.1", "--picture", filepath.Join(x.dir, "g.svg"))
	for _, want := range []string{"hall, version 1", "0.500 m", "11.000 m2", "21.000 m2", "20.000 m"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	if svg := x.svg("g.svg"); !strings.Contains(svg, `class="grown"`) || !strings.Contains(svg, "not a safety function") {
		t.Error("the picture has no grown solids, or no caution")
	}
	all := lines(t, x.ok("grown", "hall", "--radius", "0.5", "--output", "json"),
		func() *wideberthv1.ShowGrownSolidsResponse { return &wideberthv1.ShowGrownSolidsResponse{} })
	if len(all) != 2 || len(all[0].GetOutline().GetPieces()) != 4 || all[1].GetSummary().GetFreeAreaM2() != 21 {
		t.Errorf("got %v, want an outline of four pieces and the summary", all)
	}
}

func TestRoadmapExitCodes(t *testing.T) {
	t.Parallel()
	x := hall(t)
	for _, tc := range []struct {
		code int
		want string // on stderr
		args []string
	}{
		{exitUsage, "--roadmap is missing", []string{"roadmap", "hall", "--radius", "0.4"}},
		{exitUsage, "--roadmap is \"maze\", want grid4", []string{"roadmap", "hall", "--radius", "0.4", "--roadmap", "maze"}},
		{exitUsage, "--roadmap is \"convex-cells\", want grid4", []string{"roadmap", "hall", "--radius", "0.4", "--roadmap", "convex-cells"}},
		{exitUsage, "--radius or --body", []string{"roadmap", "hall", "--roadmap", "grid8"}},
		{exitUsage, "--area is \"1,2,3\"", []string{"roadmap", "hall", "--roadmap", "grid8", "--radius", "0.4", "--area", "1,2,3"}},
		{exitUsage, "--area is \"3,1,2,2\"", []string{"roadmap", "hall", "--roadmap", "grid8", "--radius", "0.4", "--area", "3,1,2,2"}},
		{exitRejected, "area", []string{"roadmap", "hall", "--roadmap", "grid8", "--radius", "0.4", "--area", "30,1,31,2"}},
		{exitRejected, "body.radius_m", []string{"roadmap", "hall", "--roadmap", "grid8", "--radius", "9"}},
		{exitUsage, "FROM is \"1,2,3,4\"", []string{"compare-roadmaps", "hall", "1,2,3,4", "dock-2", "--radius", "0.4"}},
		{exitFailure, "dock-9", []string{"compare-roadmaps", "hall", "dock-1", "dock-9", "--radius", "0.4"}},
		{exitRejected, "roadmaps[1]", []string{"compare-roadmaps", "hall", "dock-1", "dock-2", "--radius", "0.4", "--roadmap", "grid8", "--roadmap", "grid8"}},
		{exitRejected, "time_budget_s", []string{"compare-roadmaps", "hall", "dock-1", "dock-2", "--radius", "0.4", "--time-budget", "601"}},
		{exitUsage, "--radius or --body", []string{"grown", "hall"}},
		{exitFailure, "cellar", []string{"grown", "cellar", "--radius", "0.4"}},
	} {
		code, out, errs := x.run(tc.args...)
		if code != tc.code || out != "" || !strings.Contains(errs, tc.want) {
			t.Errorf("%q: exit code %d, stdout %q, stderr %q; want %d and %q", tc.args, code, out, errs, tc.code, tc.want)
		}
	}
}

// plan takes the classical roadmaps too.
func TestPlanOverEachRoadmap(t *testing.T) {
	t.Parallel()
	x := hall(t)
	for _, kind := range []string{"visibility-graph", "meadow-map", "voronoi-graph", "exact-cells"} {
		resp := message(x, &wideberthv1.PlanResponse{}, "plan", "hall", "--from", "dock-1", "--to", "dock-2", "--radius", "0.4", "--shortest", "--roadmap", kind)
		if got := roadmapWord(resp.GetRoute().GetOptions().GetRoadmap()); got != kind {
			t.Errorf("--roadmap %s planned over %s", kind, got)
		}
	}
}
