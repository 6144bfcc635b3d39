package main

import (
	"regexp"
	"slices"
	"strings"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// firstColumns gives the first two words of each line below the table's head.
func firstColumns(t *testing.T, out string) (pairs []string) {
	t.Helper()
	_, body, ok := strings.Cut(out, "FROM ")
	if !ok {
		t.Fatalf("no table in:\n%s", out)
	}
	for _, line := range strings.Split(strings.TrimSpace(body), "\n")[1:] {
		words := strings.Fields(line)
		pairs = append(pairs, words[0]+" "+words[1])
	}
	return pairs
}

func TestReachSortsByCostAndSaysWhyNot(t *testing.T) {
	t.Parallel()
	x := hall(t)
	code, out, errs := x.run("reach", "hall", "--from", "dock-1", "--to", "dock-2", "--to", "4,0.5", "--to", "1,3", "--to", "5,2", "--radius", "0.4")
	if code != exitRefused || !strings.Contains(out, "hall, version 2") || !strings.Contains(out, "3 of 4") {
		t.Errorf("exit code %d, want %d and 3 of 4 routes:\n%s", code, exitRefused, out)
	}
	// 1 m up, 4 m and 6 m through the door, and one in the wall.
	if got, want := firstColumns(t, out), []string{"dock-1 1,3", "dock-1 5,2", "dock-1 dock-2", "dock-1 4,0.5"}; !slices.Equal(got, want) {
		t.Errorf("rows %q, want %q", got, want)
	}
	if !regexp.MustCompile(`dock-1  4,0.5 .*goal blocked: .*wall/south`).MatchString(out) {
		t.Errorf("the refusal does not say why:\n%s", out)
	}
	if !strings.Contains(errs, "no safety function") || !strings.Contains(errs, "checked against version 2") {
		t.Errorf("reach without its caution on stderr: %q", errs)
	}
	if out = x.ok("reach", "hall", "--from", "1,2", "--from", "6,2", "--to", "dock-2", "--radius", "0.4"); !strings.Contains(out, "2 of 2") {
		t.Errorf("from two places:\n%s", out)
	} else if got, want := firstColumns(t, out), []string{"6,2 dock-2", "1,2 dock-2"}; !slices.Equal(got, want) {
		t.Errorf("rows %q, want the nearer first, %q", got, want)
	}
}

func TestReachAllStations(t *testing.T) {
	t.Parallel()
	x := hall(t)
	x.ok("push", "hall", x.file("third.geojson", `{"type": "FeatureCollection", "frame": "floor-metres", "features": [
	  {"type": "Feature", "geometry": {"type": "Point", "coordinates": [7, 3]}, "properties": {"name": "dock-3", "kind": "station", "heading_rad": 0}}]}`),
		"--author", "engineer", "--reason", "a third dock")
	out := x.ok("reach", "hall", "--from", "dock-1", "--to", "all", "--radius", "0.4")
	if got, want := firstColumns(t, out), []string{"dock-1 dock-2", "dock-1 dock-3"}; !slices.Equal(got, want) {
		t.Errorf("rows %q, want all stations but the start, %q", got, want)
	}
	out = x.ok("reach", "hall", "--from", "dock-1", "--to", "all", "--radius", "0.4", "--version", "2")
	if got, want := firstColumns(t, out), []string{"dock-1 dock-2"}; !slices.Equal(got, want) || !strings.Contains(out, "version 2") {
		t.Errorf("on version 2 rows %q, want its stations, %q", got, want)
	}
	if code, _, errs := x.run("reach", "hall", "--from", "dock-1", "--to", "all", "--radius", "0.4", "--version", "1"); code != exitFailure || !strings.Contains(errs, "no station") {
		t.Errorf("without stations: exit code %d, %s", code, errs)
	}
}

// One message a line, the pairs between header and end mark.
func TestReachInJSON(t *testing.T) {
	t.Parallel()
	x := hall(t)
	code, out, _ := x.run("reach", "hall", "--from", "dock-1", "--to", "dock-2", "--to", "4,0.5", "--radius", "0.4", "--output", "json", "--routes")
	var got []*wideberthv1.PlanManyResponse
	for _, line := range strings.Split(strings.TrimSpace(out), "\n") {
		m := &wideberthv1.PlanManyResponse{}
		if err := protojson.Unmarshal([]byte(line), m); err != nil {
			t.Fatalf("%v in %q", err, line)
		}
		got = append(got, m)
	}
	if code != exitRefused || len(got) != 4 || got[0].GetHeader().GetPairCount() != 2 || got[3].GetEnd().GetRouteCount() != 1 || got[3].GetEnd().GetRefusalCount() != 1 {
		t.Fatalf("exit code %d, %v; want header, two answers, end mark", code, got)
	}
	for _, m := range got[1:3] {
		if a := m.GetAnswer(); a.GetGoalIndex() == 0 && len(a.GetRoute().GetLegs()) == 0 || a.GetGoalIndex() == 1 && a.GetRefusal() == nil {
			t.Errorf("answer %v, want the whole route to dock-2 and a refusal in the wall", a)
		}
	}
}

func TestReachExitCodes(t *testing.T) {
	t.Parallel()
	x := hall(t)
	for _, tc := range []struct {
		code int
		want string // on stderr
		args []string
	}{
		{exitUsage, "--from is missing", []string{"--to", "dock-2", "--radius", "1"}},
		{exitUsage, "--to is missing", []string{"--from", "dock-1", "--radius", "1"}},
		{exitUsage, "--radius or --body", []string{"--from", "dock-1", "--to", "dock-2"}},
		{exitUsage, "--to all", []string{"--from", "dock-1", "--to", "dock-2", "--to", "all", "--radius", "1"}},
		{exitUsage, "--to is \"1,2,3,4\"", []string{"--from", "dock-1", "--to", "1,2,3,4", "--radius", "1"}},
		{exitUsage, "--routes is for --output json", []string{"--from", "dock-1", "--to", "dock-2", "--radius", "1", "--routes"}},
		{exitFailure, "goals[1].station: \"dock-9\"", []string{"--from", "dock-1", "--to", "dock-2", "--to", "dock-9", "--radius", "0.4"}},
		{exitRejected, "time_budget_s", []string{"--from", "dock-1", "--to", "dock-2", "--radius", "0.4", "--total-budget", "601"}},
		{exitRejected, "goals[0].pose.x_m", []string{"--from", "dock-1", "--to", "99,2", "--radius", "0.4"}},
	} {
		code, out, errs := x.run(append([]string{"reach", "hall"}, tc.args...)...)
		if code != tc.code || out != "" || !strings.Contains(errs, tc.want) {
			t.Errorf("reach %q: exit code %d, stdout %q, stderr %q; want %d and %q", tc.args, code, out, errs, tc.code, tc.want)
		}
	}
}
