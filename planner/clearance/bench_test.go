package clearance

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

const (
	benchSide = 4096
	benchRes  = 50_000
)

func benchSettings() floor.Settings {
	return floor.Settings{ResolutionUm: benchRes, Columns: benchSide, Rows: benchSide, CapUm: 5_000_000, Initial: floor.Free}
}

// benchHall is a rack hall of 205 m a side: rows of racks 1.2 m deep with 3 m aisles and
// cross aisles, painted into the raster or kept as rectangles with exact outlines.
func benchHall(tb testing.TB, vector bool) *floor.Map {
	return mustMap(tb, benchSettings(), rackEdits(vector)...)
}

func rackEdits(vector bool) []floor.Edit {
	var edits []floor.Edit
	for y := 40; y+24 < benchSide; y += 84 {
		for x := 60; x+400 < benchSide; x += 460 {
			r := floor.CellRect{X0: x, Y0: y, X1: x + 400, Y1: y + 24}
			if !vector {
				edits = append(edits, floor.Edit{Kind: floor.PaintRect, Rect: r, Fill: floor.Occupied})
				continue
			}
			at := func(c, r int) geom.Point {
				return geom.Point{X: float64(c*benchRes + 13_000), Y: float64(r*benchRes + 7_000)}
			}
			ft := floor.Feature{
				Name: fmt.Sprintf("rack-%d-%d", x, y), Kind: floor.Solid,
				Shape: floor.NewPolygon([][]geom.Point{{at(r.X0, r.Y0), at(r.X1, r.Y0), at(r.X1, r.Y1), at(r.X0, r.Y1)}}, 0),
			}
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &ft})
		}
	}
	return edits
}

// benchClutter has single solid cells strewn at random.
func benchClutter(tb testing.TB, share float64) *floor.Map {
	rng := rand.New(rand.NewPCG(7, 1))
	cells := make([]byte, benchSide*benchSide/4)
	for range int(share * benchSide * benchSide) {
		k := rng.IntN(benchSide * benchSide)
		cells[k>>2] |= byte(floor.Occupied) << (k & 3 * 2)
	}
	for k, b := range cells { // drawn twice: still occupied
		cells[k] = b & 0x55
	}
	return mustMap(tb, benchSettings(), floor.Edit{Kind: floor.PaintCells, Rect: floor.CellRect{X1: benchSide, Y1: benchSide}, Cells: cells})
}

// benchColumns is a hall with many small outlines, oblique ones among them.
func benchColumns(tb testing.TB, n int) *floor.Map {
	rng := rand.New(rand.NewPCG(7, 2))
	at := func() float64 { return float64(rng.IntN(benchSide*benchRes - 6_000_000)) }
	var edits []floor.Edit
	for k := range n {
		p := geom.Point{X: at(), Y: at()}
		ft := floor.Feature{Name: fmt.Sprintf("c-%d", k), Kind: floor.Solid}
		if k%2 == 0 {
			ft.RadiusUm = 300_000
			ft.Shape = floor.NewDisc(p, ft.RadiusUm, 0)
		} else {
			ft.WidthUm = 100_000
			q := geom.Point{X: p.X + float64(rng.IntN(6_000_000)), Y: p.Y + float64(rng.IntN(6_000_000))}
			ft.Shape = floor.NewPolyline([]geom.Point{p, q}, ft.WidthUm, 0)
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &ft})
	}
	return mustMap(tb, benchSettings(), edits...)
}

// BenchmarkFieldBuild builds 4096x4096 cells with a cap of 5 m. ns/cell is per cell of the
// floor; twin/build is how many times longer the textbook transform takes for the
// distances alone.
func BenchmarkFieldBuild(b *testing.B) {
	for _, c := range []struct {
		name string
		m    func() *floor.Map
	}{
		{"racks-raster", func() *floor.Map { return benchHall(b, false) }},
		{"racks-vector", func() *floor.Map { return benchHall(b, true) }},
		{"clutter-0.1%", func() *floor.Map { return benchClutter(b, 0.001) }},
		{"clutter-5%", func() *floor.Map { return benchClutter(b, 0.05) }},
		{"columns-4000", func() *floor.Map { return benchColumns(b, 4000) }},
	} {
		b.Run(c.name, func(b *testing.B) {
			m := c.m()
			start := time.Now()
			textbook[float32](m)
			twin := time.Since(start)
			for b.Loop() {
				mustBuild(b, m)
			}
			per := b.Elapsed() / time.Duration(b.N)
			b.ReportMetric(float64(per.Nanoseconds())/(benchSide*benchSide), "ns/cell")
			b.ReportMetric(float64(twin)/float64(per), "twin/build")
		})
	}
}

// textbook is the two-pass transform as printed (Felzenszwalb & Huttenlocher 2012,
// algorithm 1, on columns then rows, in float32 when timed), on the same sites.
func textbook[T float32 | float64](m *floor.Map) []T {
	s := m.Settings()
	w, h := s.Columns+1, s.Rows+1
	g := make([]T, w*h)
	for k := range g {
		g[k] = 1e20
	}
	for r := range s.Rows {
		for c := range s.Columns {
			if m.Solid(c, r) {
				g[r*w+c], g[r*w+c+1], g[(r+1)*w+c], g[(r+1)*w+c+1] = 0, 0, 0, 0
			}
		}
	}
	n := max(w, h)
	in, out, v, z := make([]T, n), make([]T, n), make([]int, n), make([]T, n+1)
	for x := range w {
		for y := range h {
			in[y] = g[y*w+x]
		}
		textbookRow(in[:h], out, v, z)
		for y := range h {
			g[y*w+x] = out[y]
		}
	}
	for y := range h {
		copy(in, g[y*w:(y+1)*w])
		textbookRow(in[:w], g[y*w:], v, z)
	}
	return g
}

func textbookRow[T float32 | float64](f, d []T, v []int, z []T) {
	k := 0
	v[0], z[0], z[1] = 0, T(math.Inf(-1)), T(math.Inf(1))
	for q := 1; q < len(f); q++ {
		s := ((f[q] + T(q*q)) - (f[v[k]] + T(v[k]*v[k]))) / T(2*q-2*v[k])
		for s <= z[k] {
			k--
			s = ((f[q] + T(q*q)) - (f[v[k]] + T(v[k]*v[k]))) / T(2*q-2*v[k])
		}
		k++
		v[k], z[k], z[k+1] = q, s, T(math.Inf(1))
	}
	k = 0
	for q := range f {
		for z[k+1] < T(q) {
			k++
		}
		d[q] = T((q-v[k])*(q-v[k])) + f[v[k]]
	}
}

// BenchmarkPatchVsRebuild puts 1 m² at many places of a floor of 4096x4096 cells and takes
// it away again, as cells and as outlines. rebuild/patch is how many times longer Build
// takes, the mean of a few builds among the patches; finding what differs is part of
// a patch. On the empty floor, where most of what lies within the cap of a patch
// changes, there is the least to save.
func BenchmarkPatchVsRebuild(b *testing.B) {
	for _, c := range []struct {
		name   string
		racks  bool
		vector bool
		capUm  int64
	}{
		{"racks/cells/cap-5m", true, false, 5_000_000},
		{"racks/outlines/cap-5m", true, true, 5_000_000},
		{"racks/cells/cap-2m", true, false, 2_000_000},
		{"racks/outlines/cap-2m", true, true, 2_000_000},
		{"empty/cells/cap-5m", false, false, 5_000_000},
		{"empty/outlines/cap-5m", false, true, 5_000_000},
	} {
		// Floors are made once a case, not once a trial of its length.
		m := benchFloor(b, c.racks, c.vector, c.capUm)
		var maps []*floor.Map
		rng := rand.New(rand.NewPCG(7, 3))
		for range 64 {
			maps = append(maps, mustApply(b, m, squareMetre(rng, c.vector)))
		}
		f := mustBuild(b, m)
		b.Run(c.name, func(b *testing.B) {
			var put, take, rebuild time.Duration
			k, builds := 0, 0
			for b.Loop() {
				if k%256 == 0 {
					start := time.Now()
					mustBuild(b, m)
					rebuild += time.Since(start)
					builds++
				}
				start := time.Now()
				g := mustAdvance(b, f, maps[k%len(maps)])
				half := time.Now()
				mustAdvance(b, g, m)
				put += half.Sub(start)
				take += time.Since(half)
				k++
			}
			per := float64(rebuild) / float64(builds) * float64(k)
			b.ReportMetric(float64((put+take).Nanoseconds())/float64(2*k)/1e3, "µs/patch")
			b.ReportMetric(2*per/float64(put+take), "rebuild/patch")
			b.ReportMetric(per/float64(put), "rebuild/put")
			b.ReportMetric(per/float64(take), "rebuild/take")
			b.ReportMetric(0, "ns/op") // a build now and then is part of it
		})
	}
}

func benchFloor(tb testing.TB, racks, vector bool, capUm int64) *floor.Map {
	s := benchSettings()
	s.CapUm = capUm
	if !racks {
		return mustMap(tb, s)
	}
	return mustMap(tb, s, rackEdits(vector)...)
}

func squareMetre(rng *rand.Rand, vector bool) floor.Edit {
	x, y := rng.IntN(benchSide-20), rng.IntN(benchSide-20)
	if !vector {
		return floor.Edit{Kind: floor.PaintRect, Rect: floor.CellRect{X0: x, Y0: y, X1: x + 20, Y1: y + 20}, Fill: floor.Occupied}
	}
	at := func(dx, dy int) geom.Point {
		return geom.Point{X: float64((x+dx)*benchRes + 1234), Y: float64((y+dy)*benchRes + 4321)}
	}
	return floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "spill", Kind: floor.Solid,
		Shape: floor.NewPolygon([][]geom.Point{{at(0, 0), at(20, 0), at(20, 20), at(0, 20)}}, 0)}}
}

// BenchmarkQueries times single questions along the aisles of the hall, outlines exact.
func BenchmarkQueries(b *testing.B) {
	f := mustBuild(b, benchHall(b, true))
	rng := rand.New(rand.NewPCG(7, 4))
	pts := make([]geom.Point, 1024)
	for k := range pts {
		pts[k] = geom.Point{X: float64(rng.IntN(benchSide * benchRes)), Y: float64(rng.IntN(benchSide * benchRes))}
	}
	aisle := func(k int) (geom.Point, geom.Point) {
		y := float64((40+24+30+84*(k%40))*benchRes + 7_000)
		return geom.Point{X: 3_500_000, Y: y}, geom.Point{X: 22_000_000, Y: y + 200_000}
	}
	var words [blockSize]uint64
	for _, c := range []struct {
		name string
		run  func(k int)
	}{
		{"At", func(k int) { f.At(pts[k&1023]) }},
		{"Segment-aisle-18m", func(k int) { a, b := aisle(k); f.Segment(a, b) }},
		{"SegmentClear-aisle-18m", func(k int) { a, b := aisle(k); f.SegmentClear(a, b, 900_000) }},
		{"SegmentClear-random-5m", func(k int) {
			a, b := pts[k&1023], pts[(k+1)&1023]
			f.SegmentClear(a, along(a, b, min(1, 5e6/geom.Dist(a, b))), 500_000)
		}},
		{"Travel", func(k int) { f.Travel(pts[k&1023], float64(k), 400_000, 5_000_000) }},
		{"ClearBits", func(k int) { f.ClearBits(k&63, k>>6&63, 900_000, &words) }},
	} {
		b.Run(c.name, func(b *testing.B) {
			for k := 0; b.Loop(); k++ {
				c.run(k)
			}
		})
	}
}
