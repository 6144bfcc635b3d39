package main

import (
	"math"
	"strings"
	"testing"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Each preference is asked for by its name and by a flag of its own, and the answer
// names it. From beside the wall, clearest goes by the middle of the door (half of
// 1.2 m on either side), shortest past its corner.
func TestPreferences(t *testing.T) {
	t.Parallel()
	x := hall(t)
	for _, name := range []string{"shortest", "balanced", "clearest"} {
		args := []string{"plan", "hall", "--from", "3,1", "--to", "5,1", "--radius", "0.4"}
		long := message(x, &wideberthv1.PlanResponse{}, append(args, "--preference", name)...).GetRoute()
		short := message(x, &wideberthv1.PlanResponse{}, append(args, "--"+name)...).GetRoute()
		if got := word(long.GetOptions().GetPreference(), "PREFERENCE_"); got != name || long.GetRouteId() != short.GetRouteId() {
			t.Errorf("--preference %s gives route %s, %s; --%s gives %s", name, long.GetRouteId(), got, name, short.GetRouteId())
		}
		want := 0.4
		if name == "clearest" {
			want = 0.6
		}
		// The bound is how far what is said may be short of the truth.
		if s := long.GetSmallestClearanceM(); math.Abs(s-want) > 0.002+long.GetBound().GetClearanceShortM() && name != "balanced" {
			t.Errorf("%s: smallest clearance %v m, want %v m", name, s, want)
		}
	}
	for _, flag := range []string{"--roadmap=grid8", "--keep-roadmap-path"} {
		code, _, errs := x.run("plan", "hall", "--from", "3,1", "--to", "5,1", "--radius", "0.4", "--clearest", flag)
		if code != exitRejected || !strings.Contains(errs, "options."+strings.SplitN(strings.ReplaceAll(strings.TrimPrefix(flag, "--"), "-", "_"), "=", 2)[0]) {
			t.Errorf("clearest with %s: exit code %d, %s; want %d and the option named", flag, code, errs, exitRejected)
		}
	}
	out := x.ok("reach", "hall", "--from", "3,1", "--to", "5,1", "--radius", "0.4", "--clearest")
	if !strings.Contains(out, "1 of 1") {
		t.Errorf("reach --clearest:\n%s", out)
	}
}
