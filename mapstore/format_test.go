package mapstore_test

import (
	"encoding/hex"
	"errors"
	"flag"
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

var rewrite = flag.Bool("rewrite", false, "write the journal file of the current format anew")

// TestReleasedFormats opens a journal file of every format there has been: each
// version has the digest that it had when it was written. A new format adds a file;
// the old ones stay as they are.
func TestReleasedFormats(t *testing.T) {
	const folder = "testdata"
	if *rewrite {
		writeFormat(t, filepath.Join(folder, "format1"))
	}
	files, err := filepath.Glob(filepath.Join(folder, "format*.journal"))
	must(t, err)
	if len(files) == 0 {
		t.Fatal("there are no journal files")
	}
	for _, file := range files {
		b, err := os.ReadFile(file)
		must(t, err)
		path := filepath.Join(t.TempDir(), "copy.journal")
		must(t, os.WriteFile(path, b, 0o600))
		list, err := os.ReadFile(strings.TrimSuffix(file, ".journal") + ".digests")
		must(t, err)
		j := openBolt(t, path)
		s := openStore(t, j, mapstore.Options{SnapshotEvery: 1 << 30})
		replayed := openStore(t, noSnapshots{j}, mapstore.Options{SnapshotEvery: 1 << 30})
		n := int64(0)
		for line := range strings.Lines(string(list)) {
			n++
			for _, s := range []*mapstore.Store{s, replayed} {
				snap, err := s.At(t.Context(), "hall", n)
				must(t, err)
				if d := snap.Map.Digest(); hex.EncodeToString(d[:]) != strings.TrimSpace(line) {
					t.Errorf("%s: version %d has digest %x, want %s", file, n, d, line)
				}
			}
		}
		if h := head(t, s, "hall"); n < 10 || h.Info.Version != n {
			t.Errorf("%s: head is %d, want %d", file, h.Info.Version, n)
		}
	}
}

// writeFormat writes a journal file with every kind of edit and of record, and a
// snapshot.
func writeFormat(t *testing.T, name string) {
	t.Helper()
	if err := os.Remove(name + ".journal"); err != nil && !errors.Is(err, fs.ErrNotExist) {
		t.Fatal(err)
	}
	r := rand.New(rand.NewPCG(1, 1))
	j := openBolt(t, name+".journal")
	s := openStore(t, j, mapstore.Options{SnapshotEvery: 6, Now: func() time.Time { return time.Unix(1_700_000_000, 0) }})
	create(t, s, "hall")
	square := [][]geom.Point{{{X: 500_000, Y: 500_000}, {X: 900_000, Y: 500_000}, {X: 900_000, Y: 900_000}, {X: 500_000, Y: 900_000}}}
	zone := func(name string, kind floor.FeatureKind, speed, heading float64) floor.Edit {
		return floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{
			Name: name, Note: "tulips", Kind: kind, Shape: floor.NewPolygon(square, 0), SpeedMps: speed, Heading: heading}}
	}
	push(t, s, "hall",
		floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "rail", Kind: floor.Solid, WidthUm: 80_001, ToleranceUm: 10_000,
			Shape: floor.NewPolyline(square[0], 80_001, 10_000)}},
		floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "rack", Kind: floor.Solid, Shape: floor.NewPolygon(square, 0)}},
		zone("clock", floor.ClosedZone, 0, 0), zone("slow", floor.SpeedLimitZone, 0.5, 0), zone("lane", floor.OneWayZone, 0, 1.5),
		floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "dock-1", Kind: floor.Station, At: geom.Point{X: 1, Y: 2}, Heading: -0.25}},
		trolley("t", 1_000_000, 1_000_000))
	push(t, s, "hall", remove("rack"), paint(3, 4, 150, 140, floor.Unknown),
		floor.Edit{Kind: floor.PaintPolygon, Shape: floor.NewPolygon(square, 0), Fill: floor.Occupied},
		floor.Edit{Kind: floor.PaintCells, Rect: floor.CellRect{X0: 1, Y0: 1, X1: 4, Y1: 3}, Cells: []byte{0x24, 0x09}},
		floor.Edit{Kind: floor.ClearRect, Rect: floor.CellRect{X0: 10, Y0: 10, X1: 20, Y1: 12}})
	grow(t, s, "hall", r, 12)
	for { // the snapshot is written beside
		if snap, ok, err := j.Latest(t.Context(), "hall", 1<<30); err == nil && ok && snap.Version > 1 {
			break
		}
		time.Sleep(time.Millisecond)
	}
	var list strings.Builder
	for v := int64(1); v <= head(t, s, "hall").Info.Version; v++ {
		snap, err := s.At(t.Context(), "hall", v)
		must(t, err)
		fmt.Fprintf(&list, "%x\n", snap.Info.Digest)
	}
	must(t, os.WriteFile(name+".digests", []byte(list.String()), 0o644))
	must(t, s.Close())
	must(t, j.Close())
}
