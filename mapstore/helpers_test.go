package mapstore_test

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/boltjournal"
	"example.com/wideberth/mapstore/journal/memjournal"
	"go.uber.org/goleak"
)

func TestMain(m *testing.M) {
	if job := os.Getenv(childEnv); job != "" {
		os.Exit(child(job))
	}
	goleak.VerifyTestMain(m)
}

// slow says that the long variants of the tests were asked for.
var slow = os.Getenv("WIDEBERTH_SLOW") != ""

// hall is a small floor of 5 by 4 m: four blocks of cells across, three up.
var hall = floor.Settings{ResolutionUm: 25_000, Columns: 200, Rows: 160, CapUm: 1_000_000, Initial: floor.Free}

// seeded gives a generator and logs its seed.
func seeded(t *testing.T) *rand.Rand {
	seed := uint64(time.Now().UnixNano())
	t.Logf("seed %d", seed)
	return rand.New(rand.NewPCG(seed, 0))
}

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func wantErr(t *testing.T, what string, err, want error) {
	t.Helper()
	if !errors.Is(err, want) {
		t.Errorf("%s: error %v, want %v", what, err, want)
	}
}

func openStore(t testing.TB, j journal.Journal, o mapstore.Options) *mapstore.Store {
	t.Helper()
	s, rec, err := mapstore.Open(t.Context(), j, o)
	must(t, err)
	if len(rec.Notes) > 0 {
		t.Fatalf("open found something wrong: %q", rec.Notes)
	}
	t.Cleanup(func() { s.Close() })
	return s
}

// memory is a store on an empty journal in memory, with the floor hall.
func memory(t testing.TB, o mapstore.Options) (*mapstore.Store, *memjournal.Storage) {
	t.Helper()
	disk := new(memjournal.Storage)
	s := openStore(t, disk.Open(), o)
	create(t, s, "hall")
	return s, disk
}

func create(t testing.TB, s *mapstore.Store, id string) {
	t.Helper()
	_, err := s.CreateFloor(t.Context(), id, hall, "surveyor", "")
	must(t, err)
}

func openBolt(t testing.TB, path string) *boltjournal.Journal {
	t.Helper()
	j, err := boltjournal.Open(path, boltjournal.Options{LockTimeout: 10 * time.Second})
	must(t, err)
	t.Cleanup(func() { j.Close() })
	return j
}

func boltPath(t testing.TB) string { return filepath.Join(t.TempDir(), "floors.journal") }

// trolley is an edit that puts a round solid of that name, at a place on the floor.
func trolley(name string, x, y int64) floor.Edit {
	const radius = 200_000
	return floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{
		Name: name, Kind: floor.Solid, RadiusUm: radius,
		Shape: floor.NewDisc(geom.Point{X: float64(x), Y: float64(y)}, radius, 0),
	}}
}

func paint(x0, y0, x1, y1 int, fill floor.Occupancy) floor.Edit {
	return floor.Edit{Kind: floor.PaintRect, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}, Fill: fill}
}

func remove(name string) floor.Edit { return floor.Edit{Kind: floor.RemoveFeature, Name: name} }

func patch(base int64, edits ...floor.Edit) mapstore.Patch {
	return mapstore.Patch{Base: base, Author: "night shift", Reason: "moved", Edits: edits}
}

// push pushes onto the head.
func push(t testing.TB, s *mapstore.Store, id string, edits ...floor.Edit) mapstore.VersionInfo {
	t.Helper()
	v, repeated, err := s.Push(t.Context(), id, patch(head(t, s, id).Info.Version, edits...))
	must(t, err)
	if repeated {
		t.Fatal("a push without a request id was repeated")
	}
	return v
}

func head(t testing.TB, s *mapstore.Store, id string) *mapstore.Snapshot {
	t.Helper()
	h, err := s.Head(id)
	must(t, err)
	return h
}

// randomEdits are one to three edits that can be carried out on m.
func randomEdits(r *rand.Rand, m *floor.Map) []floor.Edit {
	var edits []floor.Edit
	for range 1 + r.IntN(3) {
		x, y := r.IntN(hall.Columns-20), r.IntN(hall.Rows-20)
		switch r.IntN(4) {
		case 0:
			edits = append(edits, paint(x, y, x+1+r.IntN(20), y+1+r.IntN(20), floor.Occupancy(r.IntN(3))))
		case 1:
			name := fmt.Sprintf("trolley-%d", r.IntN(9))
			gone := false
			for _, e := range edits {
				gone = gone || e.Name == name
			}
			if _, ok := m.Feature(name); ok && !gone {
				edits = append(edits, remove(name))
				continue
			}
			fallthrough
		default:
			edits = append(edits, trolley(fmt.Sprintf("trolley-%d", r.IntN(9)), 1_000_000+r.Int64N(3_000_000), 1_000_000+r.Int64N(2_000_000)))
		}
	}
	return edits
}

// grow makes n random versions, a restore now and then.
func grow(t testing.TB, s *mapstore.Store, id string, r *rand.Rand, n int) {
	t.Helper()
	for range n {
		h := head(t, s, id)
		if h.Info.Version > 2 && r.IntN(8) == 0 {
			_, _, err := s.Restore(t.Context(), id, mapstore.Restore{
				Version: 1 + r.Int64N(h.Info.Version), Base: h.Info.Version, Author: "night shift", Reason: "taken back"})
			must(t, err)
			continue
		}
		push(t, s, id, randomEdits(r, h.Map)...)
	}
}

// wantSame compares all versions of a floor in two stores, record and content.
func wantSame(t testing.TB, id string, a, b *mapstore.Store) {
	t.Helper()
	n := head(t, a, id).Info.Version
	if m := head(t, b, id).Info.Version; m != n {
		t.Fatalf("heads of %s are %d and %d", id, n, m)
	}
	for v := int64(1); v <= n; v++ {
		sa, err := a.At(context.Background(), id, v)
		must(t, err)
		sb, err := b.At(context.Background(), id, v)
		must(t, err)
		wantSameVersion(t, sa, sb)
	}
}

func wantSameVersion(t testing.TB, a, b *mapstore.Snapshot) {
	t.Helper()
	if a.Info != b.Info {
		t.Fatalf("records differ: %+v and %+v", a.Info, b.Info)
	}
	if a.Map.Digest() != a.Info.Digest || b.Map.Digest() != b.Info.Digest {
		t.Fatalf("version %d: content does not have the digest of its record", a.Info.Version)
	}
	if c := floor.Diff(a.Map, b.Map); !c.IsEmpty() {
		t.Fatalf("version %d differs: %+v", a.Info.Version, c)
	}
}
