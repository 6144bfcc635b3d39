package anyangle

import (
	"bufio"
	"context"
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"
)

// TestPublishedLengths compares with published any-angle optima when WIDEBERTH_GRID_BENCHMARK
// names a folder with the map and the lengths: N. Sturtevant, "Benchmarks for
// Grid-Based Pathfinding", IEEE TCIAIG 4(2), 2012, map AR0500SR; lengths on which two published
// algorithms agree. Tolerance: the lengths are right to 1e-12, this package to 1e-9.
func TestPublishedLengths(t *testing.T) {
	dir := os.Getenv("WIDEBERTH_GRID_BENCHMARK")
	if dir == "" {
		t.Skip("set WIDEBERTH_GRID_BENCHMARK to a folder with office-like.map and optimum.csv")
	}
	m := readMask(t, filepath.Join(dir, "office-like.map"))
	g, err := Build(context.Background(), m.floor(t, false), Need{})
	if err != nil {
		t.Fatal(err)
	}
	f, err := os.Open(filepath.Join(dir, "optimum.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	lines, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	worst, n := 0.0, 0
	var took []time.Duration
	for _, l := range lines[1:] {
		var v [7]float64
		for i := range v {
			if v[i], err = strconv.ParseFloat(l[i], 64); err != nil {
				t.Fatal(err)
			}
		}
		// The files count rows from the top.
		s, e := at50(int(v[1]), m.h-int(v[2])), at50(int(v[3]), m.h-int(v[4]))
		began := time.Now()
		way, ok, err := g.Shortest(context.Background(), s, e)
		took = append(took, time.Since(began))
		if err != nil || !ok {
			t.Fatalf("task %s: ok %v, error %v", l[0], ok, err)
		}
		off := math.Abs(way.LengthUm/50_000-v[6]) / v[6]
		worst = max(worst, off)
		n++
		if off > 1e-9 {
			t.Errorf("task %s: %v, wanted %v", l[0], way.LengthUm/50_000, v[6])
		}
	}
	slices.Sort(took)
	t.Logf("%d tasks, worst relative difference %.2g, median %v", n, worst, took[len(took)/2])
	if n < 200 {
		t.Errorf("%d tasks, wanted 200", n)
	}
}

// readMask reads a map of that collection; see its README for the format.
func readMask(t *testing.T, name string) *mask {
	t.Helper()
	f, err := os.Open(name)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	var lines []string
	sc := bufio.NewScanner(f)
	for i := 0; sc.Scan(); i++ {
		if i >= 4 {
			lines = append(lines, sc.Text())
		}
	}
	m := newMask(len(lines[0]), len(lines))
	for y, l := range lines {
		for x := range m.w {
			m.solid[(m.h-1-y)*m.w+x] = !strings.ContainsRune(".GS", rune(l[x]))
		}
	}
	return m
}
