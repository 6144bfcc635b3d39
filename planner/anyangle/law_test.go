package anyangle

import (
	"context"
	"errors"
	"math/rand/v2"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/plainfloor"
)

func build(t testing.TB, f *floor.Map, r int64) *Mesh {
	t.Helper()
	g, err := Build(context.Background(), f, Need{ClearanceUm: r})
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// corners yields the corners and middles of all cells of a mesh.
func (g *Mesh) corners(yield func(p geom.Point) bool) {
	for i, b := range g.blocks {
		o := g.corner(i)
		at := func(x, y float64) geom.Point {
			if b.turned {
				x, y = y, x
			}
			return geom.Point{X: g.o.X + float64(o.x) + x, Y: g.o.Y + float64(o.y) + y}
		}
		for c := range b.cells {
			if t := b.triangleOf(int32(c)); t != nil {
				var mid geom.Point
				for _, v := range t {
					p := geom.Point{X: g.o.X + float64(o.x) + float64(v.x), Y: g.o.Y + float64(o.y) + float64(v.y)}
					mid = geom.Point{X: mid.X + p.X/3, Y: mid.Y + p.Y/3}
					if !yield(p) {
						return
					}
				}
				if !yield(mid) {
					return
				}
				continue
			}
			var mx, my, n float64
			for _, r := range b.rowsOf(int32(c)) {
				l, rr, y := float64(r.l), float64(r.r), float64(r.y)
				if !yield(at(l, y)) || !yield(at(rr, y)) || !yield(at((l+rr)/2, y)) {
					return
				}
				mx, my, n = mx+(l+rr)/2, my+y, n+1
			}
			if !yield(at(mx/n, my/n)) {
				return
			}
		}
	}
}

// TestLaw5ClearanceIsNeverOverstated checks that every place of a mesh has the
// clearance, and that every place with the clearance and DeltaUm is in it.
func TestLaw5ClearanceIsNeverOverstated(t *testing.T) {
	const seed = 21
	t.Logf("seed %d", seed)
	cases := 60
	if slow() {
		cases = 1000
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := randomFloor(t, rng, 20+rng.IntN(90), 20+rng.IntN(90))
		r := []int64{1, 40, 3_000, 50_000, 150_000, 217_345, 333_333, 800_000}[rng.IntN(8)]
		if k%5 == 4 { // lone cells and cells that touch in a corner
			f = randomMask(rng, 20+rng.IntN(90), 20+rng.IntN(90), 0.01+0.02*rng.Float64()).floor(t, rng.IntN(2) == 0)
			r = int64(1+rng.IntN(8)) * 25_000
		}
		g, cores := build(t, f, r), coresOf(f)
		for p := range g.corners {
			// 1e-6 µm: rounding of a distance.
			if d := trueClearance(f, cores, p); d < float64(r)-1e-6 {
				t.Fatalf("case %d: %v of the mesh has clearance %v, wanted %d µm", k, p, d, r)
			}
		}
		for range 300 {
			p := randomPoint(rng, f.Bounds())
			d, in := trueClearance(f, cores, p), g.Contains(p)
			if in && d < float64(r)-1e-6 || !in && d >= float64(r)+DeltaUm {
				t.Fatalf("case %d: clearance %v at %v, in the mesh for %d µm: %v", k, d, p, r, in)
			}
		}
	}
}

// TestLaw4PatchedEqualsRebuilt applies random patches one after another.
func TestLaw4PatchedEqualsRebuilt(t *testing.T) {
	const seed = 44
	t.Logf("seed %d", seed)
	shared := 0
	for k := range plainfloor.Sequences() {
		s := plainfloor.NewSequence(seed, uint64(k))
		res := s.Map.Settings().ResolutionUm
		n := Need{ClearanceUm: []int64{0, 1, 2 * res, 9*res + res/3, 66 * res}[k%5], Zones: k%2 == 0, ZoneUm: 4 * res}
		g, err := Build(context.Background(), s.Map, n)
		if err != nil {
			t.Fatal(err)
		}
		for step := range 2 {
			change := s.Next()
			a, err := g.Advance(context.Background(), s.Map, change)
			if err != nil {
				t.Fatal(err)
			}
			b, err := Build(context.Background(), s.Map, n)
			if err != nil {
				t.Fatal(err)
			}
			for i := range b.blocks {
				if !reflect.DeepEqual(a.blocks[i], b.blocks[i]) || !reflect.DeepEqual(a.lean.blocks[i], b.lean.blocks[i]) {
					t.Fatalf("sequence %d, step %d: block %d differs", k, step, i)
				}
				if a.blocks[i] == g.blocks[i] {
					shared++
				}
			}
			if !reflect.DeepEqual(a.comp, b.comp) || !reflect.DeepEqual(a.base, b.base) || !reflect.DeepEqual(a.lean.comp, b.lean.comp) {
				t.Fatalf("sequence %d, step %d: components differ", k, step)
			}
			g = a
		}
	}
	if shared == 0 {
		t.Error("no block was shared")
	}
}

// TestLaw4CornersJustBeyondABlock: a corner that only a way's bend, not an outline, reaches
// from over a block's border.
func TestLaw4CornersJustBeyondABlock(t *testing.T) {
	const radius = 499
	before, err := floor.New(floor.Settings{ResolutionUm: 1000, Columns: 2 * blockCells, Rows: 3, CapUm: 5000, OpenBorder: true})
	if err != nil {
		t.Fatal(err)
	}
	border := blockCells * 1000.0
	for _, beyond := range []float64{DeltaUm, DeltaUm + 1, DeltaUm + snapUm, DeltaUm + snapUm + 1} {
		after, err := before.Apply([]floor.Edit{{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "post", Kind: floor.Solid, RadiusUm: radius,
			Shape: floor.NewDisc(geom.Point{X: border + beyond + radius, Y: 1500}, radius, 0)}}})
		if err != nil {
			t.Fatal(err)
		}
		a, err := build(t, before, 0).Advance(context.Background(), after, floor.Diff(before, after))
		if err != nil {
			t.Fatal(err)
		}
		if b := build(t, after, 0); !reflect.DeepEqual(a.blocks, b.blocks) {
			t.Errorf("%v µm beyond the border: patched differs from rebuilt", beyond)
		}
	}
}

// TestLaw4RunsThatGrowBeyondReach: cells far from a block lengthen a run of cells that ends in
// it.
func TestLaw4RunsThatGrowBeyondReach(t *testing.T) {
	at := func(x0, y0, x1, y1 int) floor.Edit {
		return floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}}
	}
	before := newMask(2*blockCells, 30).floor(t, true)
	before, err := before.Apply([]floor.Edit{at(blockCells-17, 0, blockCells+9, 20)})
	if err != nil {
		t.Fatal(err)
	}
	after, err := before.Apply([]floor.Edit{at(blockCells-20, 1, blockCells-17, 7)})
	if err != nil {
		t.Fatal(err)
	}
	a, err := build(t, before, 0).Advance(context.Background(), after, floor.Diff(before, after))
	if err != nil {
		t.Fatal(err)
	}
	if b := build(t, after, 0); !reflect.DeepEqual(a.blocks, b.blocks) {
		t.Error("patched differs from rebuilt")
	}
}

func randomEdits(rng *rand.Rand, f *floor.Map) []floor.Edit {
	s := f.Settings()
	var out []floor.Edit
	for range 1 + rng.IntN(3) {
		switch rng.IntN(4) {
		case 0, 1:
			x, y := rng.IntN(s.Columns), rng.IntN(s.Rows)
			out = append(out, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupancy(rng.IntN(3)),
				Rect: floor.CellRect{X0: x, Y0: y, X1: min(s.Columns, x+1+rng.IntN(8)), Y1: min(s.Rows, y+1+rng.IntN(8))}})
		default:
			ft := randomSolid(rng, string(rune('a'+rng.IntN(5))), f.Bounds())
			if rng.IntN(3) == 0 && ft.Shape.Kind == floor.Polygon {
				ft.Kind, ft.ToleranceUm, ft.Shape.Grow = floor.ClosedZone, 0, 0
			}
			out = append(out, floor.Edit{Kind: floor.PutFeature, Feature: ft})
		}
	}
	return out
}

// TestClosedZoneIsKeptAtItsOwnDistance checks that zones are grown by ZoneUm, not by the clearance.
func TestClosedZoneIsKeptAtItsOwnDistance(t *testing.T) {
	f, err := newMask(100, 100).floor(t, false).Apply([]floor.Edit{{Kind: floor.PutFeature, Feature: &floor.Feature{
		Name: "z", Kind: floor.ClosedZone,
		Shape: floor.NewPolygon([][]geom.Point{{{X: 2e6, Y: 0}, {X: 3e6, Y: 0}, {X: 3e6, Y: 4e6}, {X: 2e6, Y: 4e6}}}, 0)}}})
	if err != nil {
		t.Fatal(err)
	}
	g, err := Build(context.Background(), f, Need{ClearanceUm: 300_000, Zones: true, ZoneUm: 100_000})
	if err != nil {
		t.Fatal(err)
	}
	for x, want := range map[float64]bool{1_900_000: true, 1_900_001: false, 2.5e6: false, 3_100_000: true, 300_000: true, 299_999: false} {
		if got := g.Contains(geom.Point{X: x, Y: 2e6}); got != want {
			t.Errorf("x = %v in the mesh: %v, wanted %v", x, got, want)
		}
	}
}

func TestBadNeedIsRefused(t *testing.T) {
	f := newMask(10, 10).floor(t, false)
	for _, n := range []Need{{ClearanceUm: -1}, {ClearanceUm: MaxClearanceUm + 1}, {Zones: true, ZoneUm: -1}} {
		var ne *NeedError
		if _, err := Build(context.Background(), f, n); !errors.As(err, &ne) {
			t.Errorf("%+v: error %v, wanted a *NeedError", n, err)
		}
	}
}

func TestCancelledSearchStops(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	g := build(t, newMask(10, 10).floor(t, false), 0)
	if _, _, err := g.Shortest(ctx, at50(1, 1), at50(9, 9)); !errors.Is(err, context.Canceled) {
		t.Errorf("error %v, wanted %v", err, context.Canceled)
	}
	if _, err := Build(ctx, g.Map(), Need{}); !errors.Is(err, context.Canceled) {
		t.Errorf("error %v, wanted %v", err, context.Canceled)
	}
}

// TestLargestFloorKeepsItsClearance plans on the largest cells, far from the frame's
// origin, among solids as long as the floor.
func TestLargestFloorKeepsItsClearance(t *testing.T) {
	f, err := floor.New(floor.Settings{ResolutionUm: floor.MaxResolutionUm, Columns: 65_536, Rows: 130,
		OriginX: -floor.MaxOriginUm, OriginY: floor.MaxOriginUm - 2e9, CapUm: floor.MaxResolutionUm})
	if err != nil {
		t.Fatal(err)
	}
	b := f.Bounds()
	at := func(x, y float64) geom.Point { return geom.Point{X: b.Min.X + x, Y: b.Min.Y + y} }
	line := floor.NewPolyline([]geom.Point{at(0, 6e8), at(6.5e11, 6e8+1)}, 1_000_000, 0)
	f, err = f.Apply([]floor.Edit{{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "a", Kind: floor.Solid, WidthUm: 1_000_000, Shape: line}}})
	if err != nil {
		t.Fatal(err)
	}
	const r = 5_000_000
	way, ok, err := build(t, f, r).Shortest(context.Background(), at(1e7, 1e7), at(1e7, 1.2e9))
	if err != nil || !ok || len(way.Points) < 4 {
		t.Fatalf("%v, %v, %v", way, ok, err)
	}
	for i := 1; i < len(way.Points); i++ {
		// 1 µm: coordinates of 1e15 µm are whole multiples of an eighth.
		if d, _ := line.SegmentDist(way.Points[i-1], way.Points[i]); d < r-1 {
			t.Errorf("clearance %v between %v and %v", d, way.Points[i-1], way.Points[i])
		}
	}
}
