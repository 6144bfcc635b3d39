package trial

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestReadGridFile(t *testing.T) {
	t.Parallel()
	g, err := ReadGridFile(filepath.Join("testdata", "yard.map"))
	if err != nil {
		t.Fatal(err)
	}
	// Every character of the format once: . G S are free, @ O T W are not.
	want := []string{
		"#......",
		".##.##.",
		".#...#.",
		"...#..#",
		".......",
		".......",
	}
	if g.Width != 7 || g.Height != 6 {
		t.Fatalf("%d x %d cells, want 7 x 6", g.Width, g.Height)
	}
	for y, row := range want {
		for x, c := range row {
			if g.Free(x, y) != (c == '.') {
				t.Errorf("cell %d,%d free is %v, want %v", x, y, g.Free(x, y), c == '.')
			}
		}
	}
	for _, c := range [][2]int{{-1, 0}, {7, 0}, {0, 6}, {0, -1}} {
		if g.Free(c[0], c[1]) {
			t.Errorf("cell %v is off the grid and free", c)
		}
	}
	// The file's first row is the floor's largest y.
	if p := g.Centre(0, 0); p.GetXM() != 0.5 || p.GetYM() != 5.5 {
		t.Errorf("the top left cell's middle is %v, want 0.5, 5.5", p)
	}
	// So the floor's two lowest rows are the file's last, all free, and then comes
	// "...#..#": cells 14 to 20 at two bits each, and 22 of the row above.
	if c := g.cells(); c[0]|c[1]|c[2] != 0 || c[3] != 0 || c[4] != 1<<2 || c[5] != 1<<0|1<<4 {
		t.Errorf("the lowest rows' cells are %08b", c)
	}
}

func TestReadProblemsFile(t *testing.T) {
	t.Parallel()
	g, err := ReadGridFile(filepath.Join("testdata", "yard.map"))
	if err != nil {
		t.Fatal(err)
	}
	p, err := ReadProblemsFile(filepath.Join("testdata", "yard.scen"), g)
	if err != nil {
		t.Fatal(err)
	}
	if want := (Problem{Line: 2, StartX: 0, StartY: 1, GoalX: 0, GoalY: 3, Length: 2}); p[0] != want {
		t.Errorf("first problem %+v, want %+v", p[0], want)
	}
}

func TestFaultsNameFileAndLine(t *testing.T) {
	t.Parallel()
	const head = "type octile\nheight 2\nwidth 3\nmap\n"
	for _, tc := range []struct{ name, text, want string }{
		{"empty", "", "f:1: the file ends too soon"},
		{"another type", "type tile\n", `f:1: type "tile", want octile`},
		{"another order", "type octile\nwidth 3\n", `f:2: "width", want "height"`},
		{"no height", "type octile\nheight\n", `f:2: height ""`},
		{"a huge height", "type octile\nheight 65537\n", "f:2: height"},
		{"a negative width", "type octile\nheight 2\nwidth -3\n", "f:3: width"},
		{"too many cells", "type octile\nheight 65536\nwidth 65536\nmap\n", "f:4: 65536 x 65536 cells"},
		{"a short row", head + "...\n..\n", "f:6: a row of 2 characters, want 3"},
		{"a row is missing", head + "...\n", "f:6: the file ends too soon"},
		{"a row too many", head + "...\n...\n...\n", "f:7: \"...\" after the last row"},
		{"a line without end", head + strings.Repeat(".", 70_000), "f:5: a line of more than"},
	} {
		_, err := ReadGrid(strings.NewReader(tc.text), "f")
		var fe *FileError
		if !errors.As(err, &fe) || !strings.HasPrefix(err.Error(), tc.want) {
			t.Errorf("map, %s: %v, want %q", tc.name, err, tc.want)
		}
	}
	if _, err := ReadGrid(strings.NewReader("type octile\r\nheight 1\r\nwidth 2\r\nmap\r\n.@\r\n\r\n"), "f"); err != nil {
		t.Errorf("a map with other line ends: %v", err)
	}
	g, err := ReadGrid(strings.NewReader(head+"...\n...\n"), "f")
	if err != nil {
		t.Fatal(err)
	}
	line := func(f string) string { return "version 1\n" + f + "\n" }
	for _, tc := range []struct{ name, text, want string }{
		{"empty", "", "f:1: the file ends too soon"},
		{"another version", "version 2\n", `f:1: "version 2"`},
		{"nothing in it", "version 1\n\n", "f:3: no problem in it"},
		{"eight fields", line("0 m 3 2 0 0 2 1"), "f:2: 8 fields, want 9"},
		{"another map's", line("0 m 4 2 0 0 2 1 2.5"), `f:2: width "4", the map's is 3`},
		{"a start off the map", line("0 m 3 2 0 2 2 1 2.5"), `f:2: start y "2", want a whole number from 0 to 1`},
		{"a goal off the map", line("0 m 3 2 0 0 -1 1 2.5"), `f:2: goal x "-1"`},
		{"no length", line("0 m 3 2 0 0 2 1 far"), `f:2: optimal length "far"`},
		{"not a number", line("0 m 3 2 0 0 2 1 NaN"), `f:2: optimal length "NaN"`},
		{"negative", line("0 m 3 2 0 0 2 1 -1"), "f:2: optimal length"},
	} {
		_, err := ReadProblems(strings.NewReader(tc.text), "f", g)
		var fe *FileError
		if !errors.As(err, &fe) || !strings.HasPrefix(err.Error(), tc.want) {
			t.Errorf("scenario, %s: %v, want %q", tc.name, err, tc.want)
		}
	}
	for _, good := range []string{"version 1.0\n0\ta map.map\t3\t2\t0\t0\t2\t1\t2.41421356\n", "version 1\r\n0 m 3 2 0 0 2 1 2.5\r\n"} {
		if p, err := ReadProblems(strings.NewReader(good), "f", g); err != nil || len(p) != 1 {
			t.Errorf("%q: %v, %v; want one problem", good, p, err)
		}
	}
}

func TestMissingFiles(t *testing.T) {
	t.Parallel()
	none := filepath.Join(t.TempDir(), "none")
	if _, err := ReadGridFile(none); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("map: %v, want that there is no such file", err)
	}
	if _, err := ReadProblemsFile(none, &Grid{}); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("scenario: %v, want that there is no such file", err)
	}
}

func FuzzReadGrid(f *testing.F) {
	yard, err := os.ReadFile(filepath.Join("testdata", "yard.map"))
	if err != nil {
		f.Fatal(err)
	}
	f.Add(yard)
	f.Add([]byte("type octile\nheight 65536\nwidth 1024\nmap\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		g, err := ReadGrid(strings.NewReader(string(data)), "f")
		if err != nil {
			checkFault(t, err)
			return
		}
		if g.Width < 1 || g.Height < 1 || len(g.free) != g.Width*g.Height || len(data) < len(g.free) {
			t.Fatalf("%d x %d cells, %d kept, of %d bytes", g.Width, g.Height, len(g.free), len(data))
		}
		// Written anew it reads the same.
		var b strings.Builder
		fmt.Fprintf(&b, "type octile\nheight %d\nwidth %d\nmap\n", g.Height, g.Width)
		for y := range g.Height {
			for x := range g.Width {
				b.WriteByte("@."[map[bool]int{true: 1}[g.Free(x, y)]])
			}
			b.WriteByte('\n')
		}
		again, err := ReadGrid(strings.NewReader(b.String()), "again")
		if err != nil || string(again.cells()) != string(g.cells()) {
			t.Fatalf("written anew: %v, or other cells", err)
		}
	})
}

func FuzzReadProblems(f *testing.F) {
	yard, err := os.ReadFile(filepath.Join("testdata", "yard.scen"))
	if err != nil {
		f.Fatal(err)
	}
	f.Add(yard)
	f.Add([]byte("version 1\n0\ta b\t7\t6\t0\t0\t6\t3\t1e300\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		g := &Grid{Width: 7, Height: 6}
		problems, err := ReadProblems(strings.NewReader(string(data)), "f", g)
		if err != nil {
			checkFault(t, err)
			return
		}
		for _, p := range problems {
			for _, c := range [][2]int{{p.StartX, p.StartY}, {p.GoalX, p.GoalY}} {
				if m := g.Centre(c[0], c[1]); m.GetXM() < 0 || m.GetXM() > 7 || m.GetYM() < 0 || m.GetYM() > 6 {
					t.Fatalf("%+v leaves the floor", p)
				}
			}
			if !(p.Length >= 0) {
				t.Fatalf("%+v: no length", p)
			}
		}
	})
}

func checkFault(t *testing.T, err error) {
	var fe *FileError
	if !errors.As(err, &fe) || fe.Line < 1 {
		t.Fatalf("%v is no fault with a line", err)
	}
}
