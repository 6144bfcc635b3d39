package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"go.uber.org/goleak"
	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	"example.com/wideberth/client/trial"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// tool runs command lines against a server of its own.
type tool struct {
	t      *testing.T
	addr   string
	dir    string
	author string // of the variable
}

func newTool(t *testing.T) *tool {
	t.Helper()
	addr, stop, err := trial.Embedded(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := stop(); err != nil {
			t.Errorf("the server ended with %v", err)
		}
	})
	return &tool{t: t, addr: addr, dir: t.TempDir()}
}

// run gives exit code, stdout and stderr of a command line; the server comes from
// the variable.
func (x *tool) run(args ...string) (code int, stdout, stderr string) {
	return x.runCtx(x.t.Context(), args...)
}

func (x *tool) runCtx(ctx context.Context, args ...string) (code int, stdout, stderr string) {
	var out, errs bytes.Buffer
	getenv := func(name string) string {
		return map[string]string{serverVariable: x.addr, authorVariable: x.author}[name]
	}
	code = run(ctx, args, getenv, &out, &errs)
	return code, out.String(), errs.String()
}

// ok runs a command line that must succeed and gives its stdout.
func (x *tool) ok(args ...string) string {
	x.t.Helper()
	code, out, errs := x.run(args...)
	if code != exitOK {
		x.t.Fatalf("wideberth %s: exit code %d, stderr:\n%s", strings.Join(args, " "), code, errs)
	}
	return out
}

// message runs a command line that must succeed and reads its JSON.
func message[M proto.Message](x *tool, into M, args ...string) M {
	x.t.Helper()
	out := x.ok(append(args, "--output", "json")...)
	if err := protojson.Unmarshal([]byte(out), into); err != nil {
		x.t.Fatalf("wideberth %s: %v in\n%s", strings.Join(args, " "), err, out)
	}
	return into
}

// file writes a file for a command line to read.
func (x *tool) file(name, text string) string {
	x.t.Helper()
	path := filepath.Join(x.dir, name)
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		x.t.Fatal(err)
	}
	return path
}

// A wall across a hall of 8 x 4 m, with a door of 1.2 m.
const wall = `{"type": "FeatureCollection", "frame": "floor-metres", "features": [
  {"type": "Feature", "geometry": {"type": "Polygon", "coordinates": [[[3.9,0],[4.1,0],[4.1,1.4],[3.9,1.4],[3.9,0]]]}, "properties": {"name": "wall/south"}},
  {"type": "Feature", "geometry": {"type": "Polygon", "coordinates": [[[3.9,2.6],[4.1,2.6],[4.1,4],[3.9,4],[3.9,2.6]]]}, "properties": {"name": "wall/north"}},
  {"type": "Feature", "geometry": {"type": "Point", "coordinates": [1, 2]}, "properties": {"name": "dock-1", "kind": "station", "heading_rad": 0}},
  {"type": "Feature", "geometry": {"type": "Point", "coordinates": [7, 2]}, "properties": {"name": "dock-2", "kind": "station", "heading_rad": 0}}
]}`

// hall makes a floor with the wall, at version 2.
func hall(t *testing.T) *tool {
	x := newTool(t)
	x.ok("floors", "create", "hall", "--columns", "160", "--rows", "80", "--initial", "free", "--author", "engineer")
	x.ok("push", "hall", x.file("wall.geojson", wall), "--author", "engineer", "--reason", "the wall")
	return x
}

func TestFromFloorToRoute(t *testing.T) {
	t.Parallel()
	x := hall(t)

	floors := message(x, &wideberthv1.ListFloorsResponse{}, "floors")
	if len(floors.GetFloors()) != 1 || floors.GetFloors()[0].GetId() != "hall" || floors.GetFloors()[0].GetHead().GetVersion() != 2 {
		t.Errorf("floors %v, want hall at version 2", floors)
	}
	if out := x.ok("floors"); !strings.Contains(out, "8.000 x 4.000 m") {
		t.Errorf("floors table without the size:\n%s", out)
	}
	if out := x.ok("floors", "show", "hall"); !strings.Contains(out, "160 x 80 of 0.050 m") || !strings.Contains(out, floors.GetFloors()[0].GetHead().GetDigest()) {
		t.Errorf("floors show without cells or digest:\n%s", out)
	}

	picture := filepath.Join(x.dir, "route.svg")
	plan := message(x, &wideberthv1.PlanResponse{}, "plan", "hall", "--from", "dock-1", "--to", "dock-2", "--radius", "0.4", "--picture", picture)
	r := plan.GetRoute()
	// Straight through the door's middle: 6 m, with half of 1.2 m beside it.
	if r.GetLengthM() < 6-1e-6 || r.GetLengthM() > 6.2 {
		t.Errorf("length %v, want 6 m or little more", r.GetLengthM())
	}
	if s := r.GetSmallestClearanceM(); s < 0.4 || s > 0.6 {
		t.Errorf("smallest clearance %v, want 0.4 to 0.6", s)
	}
	if svg, err := os.ReadFile(picture); err != nil || !bytes.Contains(svg, []byte("<svg")) {
		t.Errorf("picture: %v, %.40q", err, svg)
	}
	code, out, errs := x.run("plan", "hall", "--from", "1,2", "--to", "7,2,0", "--radius", "0.4", "--shortest")
	if code != exitOK || !strings.Contains(out, "hall, version 2") || !strings.Contains(out, "LEG") {
		t.Errorf("plan: code %d\n%s", code, out)
	}
	if !strings.Contains(errs, "no safety function") || !strings.Contains(errs, "checked against version 2") {
		t.Errorf("plan without its caution on stderr: %q", errs)
	}
}

func TestPlanRefusedExits6AndSaysWhy(t *testing.T) {
	t.Parallel()
	x := hall(t)
	// 0.65 m does not fit a door of 1.2 m.
	code, out, errs := x.run("plan", "hall", "--from", "dock-1", "--to", "dock-2", "--radius", "0.65", "--picture", filepath.Join(x.dir, "no.svg"))
	if code != exitRefused {
		t.Errorf("exit code %d, want %d", code, exitRefused)
	}
	if !strings.Contains(errs, "no safety function") {
		t.Errorf("refusal without its caution on stderr: %q", errs)
	}
	for _, want := range []string{"no passage", "width needed", "1.300 m"} {
		if !strings.Contains(out, want) {
			t.Errorf("refusal without %q:\n%s", want, out)
		}
	}
	if _, err := os.Stat(filepath.Join(x.dir, "no.svg")); err != nil {
		t.Errorf("the refusal was not drawn: %v", err)
	}
	code, out, _ = x.run("plan", "hall", "--from", "4,0.5", "--to", "dock-2", "--radius", "0.3", "--output", "json")
	refused := &wideberthv1.PlanResponse{}
	if err := protojson.Unmarshal([]byte(out), refused); err != nil || code != exitRefused {
		t.Fatalf("exit code %d, %v in %s", code, err, out)
	}
	if got := refused.GetRefusal().GetReason(); got != wideberthv1.RefusalReason_REFUSAL_REASON_START_BLOCKED {
		t.Errorf("reason %v, want the start blocked", got)
	}
}

// An answer that the time budget cut short says so beside its figures, and is a route.
func TestCutShortIsSaid(t *testing.T) {
	t.Parallel()
	var out bytes.Buffer
	a := &app{stdout: &out}
	cut := &wideberthv1.Bound{CutShort: true, GapShare: 0.12301}
	for name, print := range map[string]func() error{
		"plan": func() error {
			return a.printPlan(&wideberthv1.PlanResponse{Outcome: &wideberthv1.PlanResponse_Route{Route: &wideberthv1.Route{Bound: cut}}})
		},
		"reach": func() error {
			r := reached{app: a, flags: &reachFlags{from: []string{"dock-1"}, to: []string{"dock-2"}}, ways: []way{{summary: &wideberthv1.RouteSummary{Bound: cut}}}}
			return r.finish()
		},
	} {
		out.Reset()
		if err := print(); err != nil || !strings.Contains(out.String(), "time ran out; at most 12.4 % dearer than the best") {
			t.Errorf("%s (%v) does not say that it was cut short:\n%s", name, err, &out)
		}
	}
	if words := cutShort(&wideberthv1.Bound{}); words != "" {
		t.Errorf("a search that ended: %q", words)
	}
}

func TestVersionsCompareRestore(t *testing.T) {
	t.Parallel()
	x := hall(t)
	spill := x.file("spill.json", `{"base_version": "2", "author": "night shift", "reason": "spill",
	  "edits": [{"put_feature": {"feature": {"name": "spill", "solid": {"disc": {"center": {"x_m": 4, "y_m": 2}, "radius_m": 0.5}}}}}]}`)

	dry := message(x, &wideberthv1.PushPatchResponse{}, "push", "hall", spill, "--dry-run")
	if n := dry.GetVersion().GetStamp().GetVersion(); n != 3 {
		t.Errorf("the dry run would be version %d, want 3", n)
	}
	if n := message(x, &wideberthv1.Floor{}, "floors", "show", "hall").GetHead().GetVersion(); n != 2 {
		t.Errorf("after a dry run the head is %d, want 2", n)
	}
	pushed := message(x, &wideberthv1.PushPatchResponse{}, "push", "hall", spill, "--reason", "spill by the door")
	if v := pushed.GetVersion(); v.GetStamp().GetDigest() != dry.GetVersion().GetStamp().GetDigest() || v.GetReason() != "spill by the door" {
		t.Errorf("pushed %v, want the digest the dry run gave and the reason from the flag", v)
	}

	versions := message(x, &wideberthv1.ListVersionsResponse{}, "versions", "hall", "--limit", "2")
	if len(versions.GetVersions()) != 2 || versions.GetVersions()[0].GetStamp().GetVersion() != 3 {
		t.Errorf("versions %v, want 3 and 2", versions)
	}
	diff := message(x, &wideberthv1.CompareVersionsResponse{}, "compare", "hall", "2")
	if len(diff.GetFeatures()) != 1 || diff.GetFeatures()[0].GetName() != "spill" || diff.GetFeatures()[0].GetBefore() != nil {
		t.Errorf("difference %v, want the spill added", diff)
	}
	if out := x.ok("compare", "hall", "3", "2"); !strings.Contains(out, "feature removed") || !strings.Contains(out, "3 to 2") {
		t.Errorf("compare backwards:\n%s", out)
	}
	back := message(x, &wideberthv1.RestoreVersionResponse{}, "restore", "hall", "2", "--author", "night shift", "--reason", "dried")
	if v := back.GetVersion(); v.GetStamp().GetVersion() != 4 || v.GetRestoredVersion() != 2 {
		t.Errorf("restored %v, want version 4 from 2", v)
	}
	if out := x.ok("versions", "hall"); !strings.Contains(out, "restored 2") || !strings.Contains(out, "spill by the door") {
		t.Errorf("versions table:\n%s", out)
	}
}

func TestWhoPushedIt(t *testing.T) {
	t.Parallel()
	x := hall(t)
	x.author = "terminal 2"
	anonymous := `{"reason": "cone", "edits": [{"put_feature": {"feature": {"name": "cone", "solid": {"disc": {"center": {"x_m": 1, "y_m": 3}, "radius_m": 0.1}}}}}]}`
	named := `{"author": "survey", ` + anonymous[1:]
	for _, tc := range []struct {
		text, flag, want string
	}{
		{anonymous, "", "terminal 2"},
		{named, "", "survey"},
		{named, "night shift", "night shift"},
	} {
		args := []string{"push", "hall", x.file("who.json", tc.text)}
		if tc.flag != "" {
			args = append(args, "--author", tc.flag)
		}
		if got := message(x, &wideberthv1.PushPatchResponse{}, args...).GetVersion().GetAuthor(); got != tc.want {
			t.Errorf("flag %q, file %.24s: pushed by %q, want %q", tc.flag, tc.text, got, tc.want)
		}
	}
}

func TestStaleBaseExits4(t *testing.T) {
	t.Parallel()
	x := hall(t)
	patch := func(name string, at float64) string {
		return x.file(name+".json", fmt.Sprintf(`{"edits": [{"put_feature": {"feature": {"name": %q,
		  "solid": {"disc": {"center": {"x_m": %v, "y_m": 2}, "radius_m": 0.2}}}}}]}`, name, at))
	}
	by := []string{"--author", "night shift", "--reason", "cones"}
	code, _, errs := x.run(append([]string{"push", "hall", patch("cone-1", 2)}, by...)...)
	if code != exitOK || !strings.Contains(errs, "base: the head, version 2") || !strings.Contains(errs, "wideberth restore hall 2 ") {
		t.Fatalf("exit code %d, %s; want the default base said, and the way back", code, errs)
	}
	stale := append([]string{"push", "hall", patch("cone-1", 2.1), "--base", "2"}, by...)
	code, out, errs := x.run(stale...)
	if code != exitConflict || out != "" || !strings.Contains(errs, "push again on the new head") ||
		!strings.Contains(errs, "wideberth compare hall 2\n") || strings.Contains(errs, "rpc error") {
		t.Errorf("stale base: exit code %d, stdout %q, stderr %q", code, out, errs)
	}
	// Elsewhere it may be rebased, where it was touched it may not.
	if code, _, errs = x.run(append([]string{"push", "hall", patch("cone-2", 6), "--base", "2", "--allow-rebase"}, by...)...); code != exitOK || strings.Contains(errs, "restore") {
		t.Errorf("rebase of what does not overlap: exit code %d, %s; want no way back that undoes cone-1 too", code, errs)
	}
	if code, _, _ = x.run(append(stale, "--allow-rebase")...); code != exitConflict {
		t.Errorf("rebase of what overlaps: exit code %d, want %d", code, exitConflict)
	}
}

func TestRejectedExits3(t *testing.T) {
	t.Parallel()
	x := hall(t)
	by := []string{"--author", "night shift", "--reason", "test"}
	for _, tc := range []struct {
		name string
		args []string
		want string // in stderr
	}{
		{"a misspelt member", []string{"push", "hall", x.file("a.json", `{"edits": [{"put_feature": {"featur": {}}}]}`)}, "a.json: edits[0].put_feature.featur"},
		{"GeoJSON without a frame", []string{"push", "hall", x.file("b.json", `{"type": "FeatureCollection", "features": []}`)}, "b.json: frame"},
		{"a field the service refuses", []string{"push", "hall", x.file("c.json", `{"edits": [{"put_feature": {"feature": {"name": "x", "solid": {"disc": {"center": {}, "radius_m": -1}}}}}]}`)}, "patch.edits[0].put_feature.feature.solid.disc.radius_m"},
		{"a base that is not there", []string{"push", "hall", x.file("d.json", `{"edits": [{"remove_feature": {"name": "dock-1"}}]}`), "--base", "99"}, "99"},
		{"a floor that is there otherwise", []string{"floors", "create", "hall", "--columns", "3", "--rows", "3", "--author", "x"}, "hall"},
		{"a description that is none", []string{"floors", "create", "--from", x.file("e.yaml", "format: 99\n"), "--author", "x"}, "e.yaml"},
		{"a body with a misspelt member", []string{"plan", "hall", "--from", "1,1", "--to", "2,2", "--body", x.file("f.json", `{"radius": 1}`)}, "f.json"},
		{"a radius out of range", []string{"plan", "hall", "--from", "1,1", "--to", "2,2", "--radius", "-1"}, "body.radius_m"},
		{"a map that is none", []string{"trial", "--map", x.file("g.map", "type tile\n"), "--scen", "none"}, "g.map:1"},
	} {
		args := tc.args
		if args[0] == "push" {
			args = append(args, by...)
		}
		code, out, errs := x.run(args...)
		if code != exitRejected || out != "" || !strings.Contains(errs, tc.want) {
			t.Errorf("%s: exit code %d, stdout %q, stderr %q; want %d and %q", tc.name, code, out, errs, exitRejected, tc.want)
		}
	}
}

func TestUsageExits2(t *testing.T) {
	t.Parallel()
	x := &tool{t: t, addr: "127.0.0.1:1", dir: t.TempDir()} // never called
	patch := x.file("p.json", `{"edits": [{"remove_feature": {"name": "x"}}]}`)
	for _, args := range [][]string{
		{},
		{"fly"},
		{"floors", "--colour"},
		{"floors", "--output", "xml"},
		{"floors", "--timeout", "-1s"},
		{"floors", "show"},
		{"floors", "create", "hall", "--columns", "3", "--rows", "3"},
		{"floors", "create", "--author", "x"},
		{"floors", "create", "hall", "--author", "x", "--origin", "1"},
		{"floors", "create", "hall", "--author", "x", "--initial", "full"},
		{"floors", "create", "--from", "x.yaml", "--columns", "3", "--author", "x"},
		{"push", "hall"},
		{"push", "hall", "hall.yaml", "--author", "y", "--reason", "z"},
		{"push", "hall", patch, "--reason", "y"},
		{"push", "hall", patch, "--author", "y"},
		{"push", "hall", patch, "--author", "y", "--reason", "z", "--base", "0"},
		{"versions", "hall", "--limit", "-1"},
		{"compare", "hall", "one", "two"},
		{"restore", "hall", "1"},
		{"plan", "hall", "--to", "1,1", "--radius", "1"},
		{"plan", "hall", "--from", "0,0", "--to", "1,1"},
		{"plan", "hall", "--from", "0,nan", "--to", "1,1", "--radius", "1"},
		{"plan", "hall", "--from", "0,0,0,0", "--to", "1,1", "--radius", "1"},
		{"plan", "hall", "--from", "0,0", "--to", "1,1", "--radius", "1", "--roadmap", "grid6"},
		{"plan", "hall", "--from", "0,0", "--to", "1,1", "--radius", "1", "--preference", "scenic"},
		{"plan", "hall", "--from", "0,0", "--to", "1,1", "--radius", "1", "--shortest", "--balanced"},
		{"plan", "hall", "--from", "0,0", "--to", "1,1", "--radius", "1", "--clearest", "--preference", "clearest"},
		{"trial", "--map", "x"},
		{"floors", "--server", "no-port"},
		{"floors", "--server", "192.0.2.1:7443"},
		{"floors", "--plaintext", "--ca", "x"},
	} {
		code, out, errs := x.run(args...)
		if code != exitUsage || out != "" || !strings.HasPrefix(errs, "wideberth: ") {
			t.Errorf("wideberth %s: exit code %d, stdout %q, stderr %q; want %d", strings.Join(args, " "), code, out, errs, exitUsage)
		}
	}
}

func TestUnreachableExits5(t *testing.T) {
	t.Parallel()
	x := &tool{t: t, addr: "127.0.0.1:1"}
	for _, command := range [][]string{{"floors"}, {"watch", "hall"}} {
		code, out, errs := x.run(command...)
		if code != exitUnreachable || out != "" || !strings.Contains(errs, "127.0.0.1:1") {
			t.Errorf("%q: exit code %d, stdout %q, stderr %q; want %d and the address", command, code, out, errs, exitUnreachable)
		}
	}
	// One that takes connections and says nothing.
	lis, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer func() { _ = lis.Close() }()
	if code, _, errs := x.run("floors", "--server", lis.Addr().String(), "--timeout", "200ms"); code != exitUnreachable {
		t.Errorf("a silent server: exit code %d, stderr %q; want %d", code, errs, exitUnreachable)
	}
}

func TestNotFoundExits1(t *testing.T) {
	t.Parallel()
	x := newTool(t)
	for _, args := range [][]string{{"floors", "show", "cellar"}, {"watch", "cellar"}, {"push", "cellar", filepath.Join(x.dir, "none.json"), "--author", "x", "--reason", "y"}} {
		if code, out, errs := x.run(args...); code != exitFailure || out != "" || errs == "" {
			t.Errorf("wideberth %s: exit code %d, stdout %q, stderr %q; want %d", strings.Join(args, " "), code, out, errs, exitFailure)
		}
	}
}

func TestWatchPrintsVersionsAndEndsWhenInterrupted(t *testing.T) {
	t.Parallel()
	x := hall(t)
	out := x.ok("watch", "hall", "--after", "1", "--count", "1")
	if !strings.HasPrefix(out, "2 ") || !strings.Contains(out, "the wall") {
		t.Errorf("watch printed %q, want version 2", out)
	}
	ctx, cancel := context.WithTimeout(t.Context(), 3*time.Second)
	defer cancel()
	code, out, errs := x.runCtx(ctx, "watch", "hall", "--output", "json", "--heartbeats")
	lines := strings.Split(strings.TrimSpace(out), "\n")
	var first, last wideberthv1.WatchVersionsResponse
	for line, into := range map[string]*wideberthv1.WatchVersionsResponse{lines[0]: &first, lines[len(lines)-1]: &last} {
		if err := protojson.Unmarshal([]byte(line), into); err != nil {
			t.Fatalf("%v in %q", err, line)
		}
	}
	if code != exitOK || first.GetVersion().GetVersion().GetStamp().GetVersion() != 2 || last.GetHeartbeat().GetHead().GetVersion() != 2 {
		t.Errorf("exit code %d, stderr %q, lines %q; want the head, then heartbeats", code, errs, lines)
	}
}

func TestTrialPrintsOneObject(t *testing.T) {
	t.Parallel()
	x := &tool{t: t, addr: "127.0.0.1:1", dir: t.TempDir()} // the variable does not count here
	data := filepath.Join("..", "..", "trial", "testdata")
	csv := filepath.Join(x.dir, "per-query.csv")
	out := x.ok("trial", "--map", filepath.Join(data, "yard.map"), "--scen", filepath.Join(data, "yard.scen"),
		"--roadmap", "grid8", "--limit", "4", "--per-query", csv, "--output", "json")
	var got map[string]float64
	if err := json.Unmarshal([]byte(out), &got); err != nil {
		t.Fatalf("%v in %q", err, out)
	}
	for _, k := range []string{"queries", "solved", "max_abs_error", "max_rel_error", "mean_ratio", "p50_us", "p95_us", "expanded_p50"} {
		if _, ok := got[k]; !ok {
			t.Errorf("no %q in %s", k, out)
		}
	}
	// The scenario gives eight decimals.
	if len(got) != 8 || got["queries"] != 4 || got["solved"] != 4 || got["max_abs_error"] > 1e-8 {
		t.Errorf("printed %s, want eight members and four of four solved exactly", out)
	}
	rows, err := os.ReadFile(csv)
	if lines := strings.Split(string(rows), "\n"); err != nil || lines[0] != "index,length,us,expanded" || len(lines) != 6 || !strings.HasPrefix(lines[1], "0,2,") {
		t.Errorf("per query: %v\n%s", err, rows)
	}
	out = x.ok("trial", "--map", filepath.Join(data, "yard.map"), "--scen", filepath.Join(data, "yard.scen"),
		"--roadmap", "shortest", "--points", "vertex", "--optimum", filepath.Join(data, "yard.csv"), "--output", "json")
	clear(got)
	if err := json.Unmarshal([]byte(out), &got); err != nil || got["solved"] != 5 || got["max_rel_error"] > 1e-9 {
		t.Errorf("any-angle: %v, printed %s, want five of five within 1e-9", err, out)
	}
	for _, args := range [][]string{{"--points", "middle"}, {"--roadmap", "longest"}} {
		code, _, errs := x.run(append([]string{"trial", "--map", filepath.Join(data, "yard.map"), "--scen", filepath.Join(data, "yard.scen")}, args...)...)
		if code != exitUsage || !strings.Contains(errs, args[0]) {
			t.Errorf("%v: exit code %d, stderr %q; want a usage error naming the flag", args, code, errs)
		}
	}
}

func TestCreateFromADescriptionAndPushItsChange(t *testing.T) {
	t.Parallel()
	x := newTool(t)
	description := x.file("yard.yaml", `format: 1
floor: yard
width_m: 6
height_m: 4
initial: free
items:
  - column: post
    at: [3, 2]
    radius_m: 0.2
changes:
  - name: spill
    reason: Spill by the post
    items:
      - cells: occupied
        rect: [1, 1, 2, 2]
`)
	f := message(x, &wideberthv1.Floor{}, "floors", "create", "--from", description, "--author", "engineer")
	if f.GetId() != "yard" || f.GetHead().GetVersion() != 2 {
		t.Errorf("made %v, want yard at version 2", f)
	}
	pushed := message(x, &wideberthv1.PushPatchResponse{}, "push", "yard", description, "--change", "spill", "--author", "night shift")
	if v := pushed.GetVersion(); v.GetStamp().GetVersion() != 3 || v.GetReason() != "Spill by the post" {
		t.Errorf("pushed %v, want version 3 for the change's own reason", v)
	}
	if code, _, errs := x.run("push", "yard", description, "--change", "flood", "--author", "x"); code != exitUsage || !strings.Contains(errs, "flood") {
		t.Errorf("an unknown change: exit code %d, %q", code, errs)
	}
	// Again: the floor is there, its layout is not pushed twice.
	if again := message(x, &wideberthv1.Floor{}, "floors", "create", "--from", description, "--author", "engineer"); again.GetHead().GetVersion() != 3 {
		t.Errorf("created again: %v, want it left at version 3", again)
	}
}

// A layout that the service refuses leaves a floor that the mended description can
// still be put on; so does one that was taken back.
func TestARefusedLayoutCanBeMended(t *testing.T) {
	t.Parallel()
	x := newTool(t)
	describe := func(name, corner string) string {
		return x.file(name, "format: 1\nfloor: yard\nwidth_m: 6\nheight_m: 4\nitems:\n  - block: crate\n    polygon: [[1, 1], ["+corner+"], [2, 1], [1, 2]]\n")
	}
	code, _, errs := x.run("floors", "create", "--from", describe("bow.yaml", "2, 2"), "--author", "engineer")
	if code != exitRejected || !strings.Contains(errs, "solid.polygon.outer.points") || !strings.Contains(errs, "run this again") {
		t.Fatalf("a polygon that crosses itself: exit code %d, %q", code, errs)
	}
	mended := describe("mended.yaml", "1.5, 0.5")
	if f := message(x, &wideberthv1.Floor{}, "floors", "create", "--from", mended, "--author", "engineer"); f.GetHead().GetVersion() != 2 {
		t.Errorf("mended: %v, want the layout as version 2", f)
	}
	x.ok("restore", "yard", "1", "--author", "engineer", "--reason", "begin anew")
	if f := message(x, &wideberthv1.Floor{}, "floors", "create", "--from", mended, "--author", "engineer"); f.GetHead().GetVersion() != 4 {
		t.Errorf("after a restore of version 1: %v, want the layout as version 4", f)
	}
}

func TestVersionSaysTheBuild(t *testing.T) {
	t.Parallel()
	x := &tool{t: t}
	var b build
	if err := json.Unmarshal([]byte(x.ok("version", "--output", "json")), &b); err != nil || !strings.HasPrefix(b.Go, "go1.") {
		t.Errorf("build %+v, %v", b, err)
	}
	if out := x.ok("version"); !strings.HasPrefix(out, "wideberth") {
		t.Errorf("printed %q", out)
	}
}

// What is printed of a clearance or a width is never more than what was answered.
func TestClearancesAreRoundedDown(t *testing.T) {
	t.Parallel()
	for in, want := range map[float64]string{0.45: "0.450", 0.449999: "0.449", 0.4499999999: "0.450", 1.2345: "1.234", 0: "0.000", 0.0009: "0.000", 0.29: "0.290"} {
		if got := down(in); got != want {
			t.Errorf("down(%v) = %s, want %s", in, got, want)
		}
	}
	for in, want := range map[float64]string{0.45: "0.450", 0.450001: "0.451", 0.4500000001: "0.450", 1.2345: "1.235", 0: "0.000", 0.29: "0.290"} {
		if got := up(in); got != want {
			t.Errorf("up(%v) = %s, want %s", in, got, want)
		}
	}
}

func TestOthersTextStaysOnItsLine(t *testing.T) {
	t.Parallel()
	if got := plain("spill\n99 2026\x1b[31m"); got != "spill 99 2026 [31m" {
		t.Errorf("plain = %q", got)
	}
}
