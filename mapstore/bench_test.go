package mapstore_test

import (
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/journal/memjournal"
)

// grown makes a floor of n versions.
func grown(b *testing.B, n int, o mapstore.Options) *memjournal.Storage {
	b.Helper()
	s, disk := memory(b, o)
	grow(b, s, "hall", rand.New(rand.NewPCG(1, 2)), n-1)
	return disk
}

// ratio reports how many times as long the plain twin takes, over the same count.
func ratio(b *testing.B, clever time.Duration, plain func()) {
	b.StopTimer()
	began := time.Now()
	plain()
	b.ReportMetric(float64(time.Since(began))/float64(max(clever, 1)), "plain/this")
}

// BenchmarkPush pushes onto a floor of 2048 x 2048 cells with a journal in memory. The
// plain twin keeps versions by writing the whole content each time.
func BenchmarkPush(b *testing.B) {
	s := openStore(b, new(memjournal.Storage).Open(), mapstore.Options{})
	large := floor.Settings{ResolutionUm: 50_000, Columns: 2048, Rows: 2048, CapUm: 5_000_000}
	_, err := s.CreateFloor(b.Context(), "hall", large, "surveyor", "")
	must(b, err)
	r := rand.New(rand.NewPCG(1, 2))
	var walls []floor.Edit
	for range 3_000 { // something to keep
		x, y := r.IntN(2000), r.IntN(2000)
		walls = append(walls, paint(x, y, x+1+r.IntN(40), y+1+r.IntN(3), floor.Occupied))
	}
	push(b, s, "hall", walls...)
	n := 0
	for b.Loop() {
		push(b, s, "hall", trolley("t", 1_000_000+int64(n)*1_000%90_000_000, 1_000_000), paint(n%2000, n%1999, n%2000+3, n%1999+3, floor.Occupied))
		n++
	}
	ratio(b, b.Elapsed(), func() {
		for i := range n {
			m, err := head(b, s, "hall").Map.Apply([]floor.Edit{trolley("t", 1_000_000+int64(i), 1_000_000)})
			must(b, err)
			if len(m.Encode()) == 0 {
				b.Fatal("empty")
			}
		}
	})
}

// BenchmarkOpen recovers a floor of 5,000 versions from a snapshot. The plain twin
// carries out every record.
func BenchmarkOpen(b *testing.B) {
	disk := grown(b, 5_000, mapstore.Options{})
	n := 0
	for b.Loop() {
		must(b, openStore(b, disk.Open(), mapstore.Options{}).Close())
		n++
	}
	ratio(b, b.Elapsed(), func() {
		for range n {
			must(b, openStore(b, noSnapshots{disk.Open()}, mapstore.Options{}).Close())
		}
	})
}

// BenchmarkRebuild gives versions that have left memory, at random. The plain twin
// carries out every record up to each.
func BenchmarkRebuild(b *testing.B) {
	disk := grown(b, 2_000, mapstore.Options{})
	run := func(s *mapstore.Store, n int) {
		r := rand.New(rand.NewPCG(3, 4))
		for range n {
			_, err := s.At(b.Context(), "hall", 1+r.Int64N(2_000))
			must(b, err)
		}
	}
	s := openStore(b, disk.Open(), mapstore.Options{KeepVersions: 1})
	n := 0
	r := rand.New(rand.NewPCG(3, 4))
	for b.Loop() {
		_, err := s.At(b.Context(), "hall", 1+r.Int64N(2_000))
		must(b, err)
		n++
	}
	ratio(b, b.Elapsed(), func() { run(openStore(b, noSnapshots{disk.Open()}, mapstore.Options{KeepVersions: 1}), n) })
}

// BenchmarkDurablePush pushes with a journal on disk. The plain twin appends as many
// bytes to a file and syncs it once: what a push cannot be cheaper than.
func BenchmarkDurablePush(b *testing.B) {
	path := boltPath(b)
	s := openStore(b, openBolt(b, path), mapstore.Options{})
	create(b, s, "hall")
	n := 0
	for b.Loop() {
		push(b, s, "hall", trolley(fmt.Sprintf("t%d", n%50), 1_000_000, 1_000_000))
		n++
	}
	ratio(b, b.Elapsed(), func() {
		f, err := os.Create(filepath.Join(b.TempDir(), "plain"))
		must(b, err)
		defer f.Close()
		for range n {
			_, err := f.Write(make([]byte, 300))
			must(b, err)
			must(b, f.Sync())
		}
	})
}
