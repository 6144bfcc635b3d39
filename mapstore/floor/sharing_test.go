package floor

import (
	"bytes"
	"encoding/hex"
	"fmt"
	"math"
	"math/rand/v2"
	"runtime"
	"sync"
	"testing"
	"time"

	"example.com/wideberth/mapstore/geom"
)

// count is how many nodes a tree has; nil kids lie beyond the floor.
func (n *node) count() int {
	total := 1
	if n.kids != nil {
		for _, k := range n.kids {
			if k != nil {
				total += k.count()
			}
		}
	}
	return total
}

// fresh is how many nodes of n are not in seen, and adds them.
func (n *node) fresh(seen map[*node]bool) int {
	if n == nil || seen[n] {
		return 0
	}
	seen[n] = true
	total := 1
	if n.kids != nil {
		for _, k := range n.kids {
			total += k.fresh(seen)
		}
	}
	return total
}

// The region quadtree's published node counts, with a block for a pixel: Samet,
// Foundations of Multidimensional and Metric Data Structures, 2006, exercises on
// region quadtrees (the single square); the others follow by the same counting.
func TestQuadtreeNodeCounts(t *testing.T) {
	block := func(x, y, w, h int) Edit {
		return Edit{Kind: PaintRect, Rect: CellRect{x * BlockSize, y * BlockSize, (x + w) * BlockSize, (y + h) * BlockSize}, Fill: Occupied}
	}
	for q := 2; q <= 5; q++ {
		n := 1 << q
		m := mustNew(t, Settings{ResolutionUm: 1000, Columns: n * BlockSize, Rows: n * BlockSize, CapUm: 1000})
		check := func(name string, want int, edits ...Edit) {
			t.Helper()
			if got := mustApply(t, m, edits...).tree.root.count(); got != want {
				t.Errorf("q = %d, %s: %d nodes, wanted %d", q, name, got, want)
			}
		}
		check("nothing", 1)
		check("one block", 4*q+1, block(1, n-2, 1, 1))
		check("a wall one block thick, from bottom to top", 1<<(q+2)-3, block(n/2, 0, 1, n))
		check("a wall round the border", 1<<(q+4)-16*q-11,
			block(0, 0, n, 1), block(0, n-1, n, 1), block(0, 0, 1, n), block(n-1, 0, 1, n))
		var diagonal, checkerboard []Edit
		for y := range n {
			diagonal = append(diagonal, block(y, y, 1, 1))
			for x := y % 2; x < n; x += 2 {
				checkerboard = append(checkerboard, block(x, y, 1, 1))
			}
		}
		check("the main diagonal", 1<<(q+2)-3, diagonal...)
		check("a checkerboard", (1<<(2*(q+1))-1)/3, checkerboard...)
		check("everything, block by block, becomes one node", 1, append(checkerboard, block(0, 0, n, n))...)
	}
}

// survey is a 4096 by 4096 floor (205 m square) on which no block is uniform.
func survey(t testing.TB) *Map {
	m := mustNew(t, Settings{ResolutionUm: 50_000, Columns: 4096, Rows: 4096, CapUm: 5_000_000, Initial: Free})
	r := rand.New(rand.NewPCG(1, 2))
	cells := make([]byte, 4096*4096/4)
	for i := range cells {
		if v := r.Uint32(); v%64 == 0 {
			cells[i] = byte(Occupied) << (v >> 8 % 4 * 2)
		}
	}
	return mustApply(t, m, Edit{Kind: PaintCells, Rect: m.settings.AllCells(), Cells: cells})
}

// squareMetre paints 20 by 20 cells somewhere.
func squareMetre(r *rand.Rand) Edit {
	x, y := r.IntN(4096-20), r.IntN(4096-20)
	return Edit{Kind: PaintRect, Rect: CellRect{x, y, x + 20, y + 20}, Fill: Occupancy(r.IntN(3))}
}

func heap() uint64 {
	var s runtime.MemStats
	runtime.GC()
	runtime.GC()
	runtime.ReadMemStats(&s)
	return s.HeapAlloc
}

// versionsMemory is what one version of a surveyed floor with 2,000 racks takes in bytes,
// and that version with n more, each a patch of 1 m²: every other paints cells, every
// other puts a feature, moves it or takes it away.
func versionsMemory(t testing.TB, n int) (one, all uint64, versions []*Map) {
	before := heap()
	var racks []Edit
	for k := range 2000 {
		racks = append(racks, put(solidSquare(fmt.Sprintf("rack-%d", k), float64(k%50), float64(k/50))))
	}
	m := mustApply(t, survey(t), racks...)
	racks = nil
	one = heap() - before
	r := rand.New(rand.NewPCG(3, 4))
	versions = append(versions, m)
	for k := range n {
		edit := squareMetre(r)
		switch {
		case k%10 == 9:
			edit = Edit{Kind: RemoveFeature, Name: fmt.Sprint("box-", k/10)}
		case k%2 == 1:
			edit = put(solidSquare(fmt.Sprint("box-", k/10), 200*r.Float64(), 200*r.Float64()))
		}
		m = mustApply(t, m, edit)
		versions = append(versions, m)
	}
	return one, heap() - before, versions
}

// solidSquare is 1 m² with its lower left corner at (x, y) metres.
func solidSquare(name string, x, y float64) *Feature {
	x, y = math.Round(x*geom.UmPerMetre), math.Round(y*geom.UmPerMetre)
	return &Feature{Name: name, Kind: Solid, Shape: NewPolygon([][]geom.Point{pts(x, y, x+1e6, y, x+1e6, y+1e6, x, y+1e6)}, 0)}
}

// BenchmarkVersionMemory reports what each of 1,000 versions takes beyond the first, and
// how many times the memory of one all of them take.
func BenchmarkVersionMemory(b *testing.B) {
	const n = 1000
	for b.Loop() {
		one, all, versions := versionsMemory(b, n)
		b.ReportMetric(float64(all-one)/n, "bytes/version")
		b.ReportMetric(float64(all)/float64(one), "all/one")
		b.ReportMetric(0, "ns/op")
		runtime.KeepAlive(versions)
	}
}

// A thousand versions, each a patch of a square metre, take less than twice the
// memory of one; a patch within one block makes one node a level and no more.
func TestAVersionCostsWhatItsPatchTouched(t *testing.T) {
	one, all, versions := versionsMemory(t, 1000)
	t.Logf("one version %d KiB, 1,001 versions %d KiB, %d bytes a version", one>>10, all>>10, (all-one)/1000)
	if all >= 2*one {
		t.Errorf("1,001 versions take %d bytes, one takes %d", all, one)
	}
	seen := map[*node]bool{}
	versions[0].tree.root.fresh(seen)
	next := mustApply(t, versions[0], Edit{Kind: PaintRect, Rect: CellRect{70, 70, 90, 90}, Fill: Occupied})
	if n := next.tree.root.fresh(seen); n > next.tree.level+1 {
		t.Errorf("a patch in one block made %d nodes, the tree has %d levels", n, next.tree.level+1)
	}
	runtime.KeepAlive(versions)
}

// Features share in the same way: a version costs the path to its name.
func TestFeaturesAreShared(t *testing.T) {
	m := mustNew(t, hall)
	var edits []Edit
	for i := range 5000 {
		edits = append(edits, put(disc(fmt.Sprintf("rack-%02d/%02d", i/100, i%100), 1e6, 1e6, 5)))
	}
	m = mustApply(t, m, edits...)
	var nodes func(n *nameNode, seen map[*nameNode]bool) int
	nodes = func(n *nameNode, seen map[*nameNode]bool) int {
		if seen[n] {
			return 0
		}
		seen[n] = true
		total := 1
		for _, k := range n.kids {
			total += nodes(k, seen)
		}
		return total
	}
	seen := map[*nameNode]bool{}
	before := nodes(m.names, seen)
	next := mustApply(t, m, put(disc("rack-17/42", 2e6, 2e6, 5)), Edit{Kind: RemoveFeature, Name: "rack-30/00"})
	if n := nodes(next.names, seen); n > 2*len("rack-17/42") {
		t.Errorf("two names changed made %d nodes of %d", n, before)
	}
	if d := Diff(m, next); len(d.Features) != 2 || d.CellCount != 0 {
		t.Errorf("difference %+v", d)
	}
}

// Law 1, for readers of one version while others are made from it. Run with -race.
func TestLaw1AVersionNeverChanges(t *testing.T) {
	base := mustApply(t, mustNew(t, hall), put(disc("a", 1e6, 1e6, 5)), Edit{Kind: PaintRect, Rect: CellRect{3, 3, 90, 90}, Fill: Occupied})
	digest, content := base.Digest(), base.ReadCells(nil, hall.AllCells())
	var wg sync.WaitGroup
	for g := range 4 {
		wg.Go(func() {
			m := base
			for i := range 25 {
				next, err := m.Apply([]Edit{
					{Kind: PaintRect, Rect: CellRect{g, i, g + 100, i + 50}, Fill: Occupancy(i % 3)},
					put(disc(fmt.Sprintf("b%d", i), 2e6, 2e6, int64(i+1))),
					put(disc("a", float64(i), 1e6, 5)),
				})
				if err != nil {
					t.Error(err)
					return
				}
				m = next
				if base.FeatureCount() != 1 || base.At(3, 3) != Occupied || base.At(2, 2) != Free || string(base.ReadCells(nil, hall.AllCells())) != string(content) {
					t.Error("a reader sees a change")
				}
			}
		})
	}
	wg.Wait()
	back, err := Decode(base.Encode())
	if err != nil || back.Digest() != digest {
		t.Errorf("content changed: %v", err)
	}
}

// Law 2: the digest of a given content is the same on any machine and in any later
// build. A changed value here means that journals written before no longer
// check; it needs a new format and a way to read the old one.
func TestLaw2DigestsAreFixed(t *testing.T) {
	m := mustApply(t, mustNew(t, Settings{ResolutionUm: 50_000, Columns: 150, Rows: 70, OriginX: -1_000_000, CapUm: 5_000_000, Initial: Unknown}),
		Edit{Kind: ClearRect, Rect: CellRect{0, 0, 140, 60}},
		Edit{Kind: PaintPolygon, Fill: Occupied, Shape: NewPolygon([][]geom.Point{pts(0, 0, 1_234_567, 0, 0, 765_432)}, 0)},
		put(&Feature{Name: "column/a", Kind: Solid, RadiusUm: 250_000, ToleranceUm: 5_000, Shape: NewDisc(geom.Point{X: 3_000_000, Y: 1_000_000}, 250_000, 5_000)}),
		put(&Feature{Name: "cold-store", Note: "two lanes", Kind: OneWayZone, Heading: 1.5, Shape: NewPolygon([][]geom.Point{pts(0, 0, 9, 0, 9, 9)}, 0)}),
		put(&Feature{Name: "gate-1", Kind: Station, At: geom.Point{X: 100_000, Y: 100_000}, Heading: -0.5}),
	)
	d := m.Digest()
	const want = "b8db93ce423663f04d73a396c568c65487092ce74691527b46deeaebb717dba4"
	if got := hex.EncodeToString(d[:]); got != want {
		t.Errorf("digest %s, wanted %s", got, want)
	}
}

// Reports how many times longer it takes to copy the whole raster, two bits a
// cell, as a version without sharing would have to.
func BenchmarkApplySquareMetre(b *testing.B) {
	m := survey(b)
	r := rand.New(rand.NewPCG(5, 6))
	whole := m.ReadCells(nil, m.settings.AllCells())
	const copies = 20
	start := time.Now()
	for range copies {
		whole = bytes.Clone(whole)
	}
	plain := time.Since(start) / copies
	for b.Loop() {
		m = mustApply(b, m, squareMetre(r))
	}
	b.ReportMetric(float64(plain)/(float64(b.Elapsed())/float64(b.N)), "x-raster-copy")
}

// Reports how many times longer it takes to compare two whole rasters.
func BenchmarkDiffSquareMetre(b *testing.B) {
	m := survey(b)
	next := mustApply(b, m, squareMetre(rand.New(rand.NewPCG(5, 6))))
	p, q := m.ReadCells(nil, m.settings.AllCells()), next.ReadCells(nil, m.settings.AllCells())
	start, differ := time.Now(), 0
	for i := range p {
		if p[i] != q[i] {
			differ++
		}
	}
	plain := time.Since(start)
	for b.Loop() {
		if c := Diff(m, next); c.CellCount < int64(differ) {
			b.Fatal("cells missed")
		}
	}
	b.ReportMetric(float64(plain)/(float64(b.Elapsed())/float64(b.N)), "x-raster-compare")
}

func BenchmarkEncode(b *testing.B) {
	m := survey(b)
	for b.Loop() {
		b.ReportMetric(float64(len(m.Encode())), "bytes")
	}
}

func BenchmarkDecode(b *testing.B) {
	data := survey(b).Encode()
	for b.Loop() {
		if _, err := Decode(data); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkSolidBits(b *testing.B) {
	m := survey(b)
	var words [BlockSize]uint64
	for b.Loop() {
		for by := range 64 {
			for bx := range 64 {
				m.SolidBits(bx, by, &words)
			}
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/4096, "ns/block")
}
