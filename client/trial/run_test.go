package trial

import (
	"errors"
	"math"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"go.uber.org/goleak"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

func embedded(t *testing.T) *client.Client {
	t.Helper()
	addr, stop, err := Embedded(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	c, err := client.Dial(addr)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = c.Close()
		if err := stop(); err != nil {
			t.Errorf("the server ended with %v", err)
		}
	})
	return c
}

// The yard's optima were worked out by hand: an open diagonal, a diagonal that a
// blocked neighbour forbids, a way round, and a problem that starts at its goal.
func TestTrialReachesTheListedOptima(t *testing.T) {
	t.Parallel()
	g, err := ReadGridFile(filepath.Join("testdata", "yard.map"))
	if err != nil {
		t.Fatal(err)
	}
	problems, err := ReadProblemsFile(filepath.Join("testdata", "yard.scen"), g)
	if err != nil {
		t.Fatal(err)
	}
	c := embedded(t)
	answers, err := Run(t.Context(), c, g, problems, Options{Roadmap: wideberthv1.Roadmap_ROADMAP_GRID8})
	if err != nil {
		t.Fatal(err)
	}
	for i, a := range answers {
		// The scenario gives eight decimals.
		if !a.Solved || math.Abs(a.Length-problems[i].Length) > 1e-8 {
			t.Errorf("problem %d: solved %v, length %v, want %v", i, a.Solved, a.Length, problems[i].Length)
		}
		if a.Took <= 0 || a.Expanded < 1 && problems[i].Length > 0 {
			t.Errorf("problem %d: took %v, expanded %d", i, a.Took, a.Expanded)
		}
	}
	// Once more on the same server: the floor is found, and no version is added.
	if _, err := Run(t.Context(), c, g, problems[:1], Options{Roadmap: wideberthv1.Roadmap_ROADMAP_GRID8}); err != nil {
		t.Fatal(err)
	}
	n := 0
	for f, err := range c.ListFloors(t.Context()) {
		if err != nil {
			t.Fatal(err)
		}
		if n++; f.GetHead().GetVersion() != 2 {
			t.Errorf("floor %s is at version %d, want 2: created and painted once", f.GetId(), f.GetHead().GetVersion())
		}
	}
	if n != 1 {
		t.Errorf("%d floors, want 1", n)
	}
}

func TestTrialCountsWhatIsNotSolved(t *testing.T) {
	t.Parallel()
	g, err := ReadGrid(strings.NewReader("type octile\nheight 1\nwidth 3\nmap\n.@.\n"), "cut")
	if err != nil {
		t.Fatal(err)
	}
	problems := []Problem{{GoalX: 2, Length: 2}, {GoalX: 1, Length: 1}, {}}
	answers, err := Run(t.Context(), embedded(t), g, problems, Options{Roadmap: wideberthv1.Roadmap_ROADMAP_GRID8})
	if err != nil {
		t.Fatal(err)
	}
	if s := Summarize(problems, answers); s.Queries != 3 || s.Solved != 1 || *s.MaxAbsError != 0 || s.MeanRatio != nil {
		t.Errorf("summary %+v, want one of three solved, the one without a way", s)
	}
}

func TestSummarize(t *testing.T) {
	t.Parallel()
	us := func(n int) time.Duration { return time.Duration(n) * time.Microsecond }
	problems := []Problem{{Length: 10}, {Length: 4}, {Length: 0}, {Length: 7}}
	answers := []Answer{
		{Solved: true, Length: 10.5, Took: us(40), Expanded: 9},
		{Solved: true, Length: 4, Took: us(10), Expanded: 1},
		{Solved: true, Length: 0, Took: us(20), Expanded: 5},
		{Took: us(30) + 149, Expanded: 7},
	}
	s := Summarize(problems, answers)
	if s.Queries != 4 || s.Solved != 3 || *s.MaxAbsError != 0.5 || math.Abs(*s.MeanRatio-1.025) > 1e-12 {
		t.Errorf("summary %+v", s)
	}
	// Nearest rank: the 2nd and the 4th of 10, 20, 30.1, 40; the 2nd of 1, 5, 7, 9.
	if s.P50Us != 20 || s.P95Us != 40 || s.ExpandedP50 != 5 {
		t.Errorf("percentiles %v, %v and %d, want 20, 40 and 5", s.P50Us, s.P95Us, s.ExpandedP50)
	}
	if none := Summarize(nil, nil); none.MaxAbsError != nil || none.MeanRatio != nil || none.P50Us != 0 {
		t.Errorf("summary of nothing %+v", none)
	}
	var b strings.Builder
	if err := WriteCSV(&b, answers); err != nil {
		t.Fatal(err)
	}
	const want = "index,length,us,expanded\n0,10.5,40.0,9\n1,4,10.0,1\n2,0,20.0,5\n3,,30.1,7\n"
	if b.String() != want {
		t.Errorf("wrote %q, want %q", b.String(), want)
	}
}

// The yard's any-angle optima, from corner to corner, were worked out by hand: straight
// down, straight across, along a wall, round walls (no way leads between a wall and
// the map's edge that touch), and none at all. yard.csv has the published ones' form.
func TestTrialReachesTheAnyAngleOptima(t *testing.T) {
	t.Parallel()
	g, err := ReadGridFile(filepath.Join("testdata", "yard.map"))
	if err != nil {
		t.Fatal(err)
	}
	scen, err := ReadProblemsFile(filepath.Join("testdata", "yard.scen"), g)
	if err != nil {
		t.Fatal(err)
	}
	problems, err := ReadOptimaFile(filepath.Join("testdata", "yard.csv"), scen)
	if err != nil {
		t.Fatal(err)
	}
	c := embedded(t)
	answers, err := Run(t.Context(), c, g, problems, Options{Points: Vertices, Straighten: true})
	if err != nil {
		t.Fatal(err)
	}
	for i, a := range answers {
		// Sums of a few square roots in float64.
		if !a.Solved || math.Abs(a.Length-problems[i].Length) > 1e-12 {
			t.Errorf("problem %d: solved %v, length %v, want %v", i, a.Solved, a.Length, problems[i].Length)
		}
	}
	if s := Summarize(problems, answers); *s.MaxRelError > 1e-12 {
		t.Errorf("relative error %v", *s.MaxRelError)
	}
	// To octile lengths they are shorter, which is no error where those are upper bounds.
	if s := Summarize(scen, answers); *s.MaxRelError < 0.01 {
		t.Errorf("relative error to octile lengths %v, want more", *s.MaxRelError)
	}
	// The scenario rounds to eight decimals.
	if s := Summarize(UpperBounds(scen), answers); *s.MaxRelError > 1e-8 || *s.MeanRatio > 0.99 {
		t.Errorf("relative excess %v, mean ratio %v", *s.MaxRelError, *s.MeanRatio)
	}
}

func TestFaultsOfOptimaNameTheLine(t *testing.T) {
	t.Parallel()
	const head = "index,start_x,start_y,goal_x,goal_y,octile_length,any_angle_length\n"
	problems := []Problem{{GoalX: 2, GoalY: 1, Length: 2.5}}
	for _, tc := range []struct{ name, text, want string }{
		{"empty", "", "f:1: the file ends too soon"},
		{"other columns", "index,length\n", `f:1: "index,length", want`},
		{"too few", head, "f:2: the file ends too soon"},
		{"too many", head + "0,0,0,2,1,2.5,2.4\n1,0,0,2,1,2.5,2.4\n", `f:3: "1,0,0,2,1,2.5,2.4" after`},
		{"six fields", head + "0,0,0,2,1,2.5\n", "f:2: 6 fields, want 7"},
		{"another problem", head + "0,0,0,2,2,2.5,2.4\n", `f:2: goal_y "2", the scenario's is 1`},
		{"no length", head + "0,0,0,2,1,2.5,far\n", `f:2: any_angle_length "far"`},
		{"negative", head + "0,0,0,2,1,2.5,-1\n", `f:2: any_angle_length "-1"`},
	} {
		_, err := ReadOptima(strings.NewReader(tc.text), "f", problems)
		var fe *FileError
		if !errors.As(err, &fe) || !strings.HasPrefix(err.Error(), tc.want) {
			t.Errorf("%s: %v, want %q", tc.name, err, tc.want)
		}
	}
	got, err := ReadOptima(strings.NewReader(head+"0,0,0,2,1,2.5,2.25\n"), "f", problems)
	if err != nil || got[0].Length != 2.25 || problems[0].Length != 2.5 {
		t.Errorf("%v, %v: want a copy with 2.25", got, err)
	}
}
