package cells

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/testfloor"
	"example.com/wideberth/planner/roadmap"
)

func build(t testing.TB, m *floor.Map, need roadmap.Need, chord float64) *Space {
	t.Helper()
	s, err := Build(context.Background(), testfloor.Field(t, m), need, chord)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

var radii = []int64{0, 1, 40, 3_000, 50_000, 150_000, 217_345, 333_333, 800_000}

// TestLaw5NoCellOverstatesClearance checks that every place of a cell has the clearance, and
// that every place with the clearance and a chord is in one. The outside check is the
// clearance field, which knows nothing of outlines.
func TestLaw5NoCellOverstatesClearance(t *testing.T) {
	const seed = 21
	t.Logf("seed %d", seed)
	cases := 120
	if testfloor.Slow() {
		cases = 3000
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := testfloor.Random(t, rng, 20+rng.IntN(180), 20+rng.IntN(90))
		r := radii[rng.IntN(len(radii))]
		chord := []float64{990, 25_000}[k%2]
		s := build(t, m, roadmap.Need{ClearanceUm: r}, chord)
		f := s.Field()
		for i := range s.Cells {
			ring := s.Ring(int32(i))
			for j, p := range ring {
				q := ring[(j+1)%len(ring)]
				// 1e-6 µm: rounding of a distance. At 0 sides are those of the solids.
				if d := f.Segment(p, q).Um; d < float64(r)-1e-6 {
					t.Fatalf("case %d: side %v %v of cell %d has clearance %v, wanted %d µm", k, p, q, i, d, r)
				}
			}
			if p := s.Centroid(int32(i)); f.At(p).Um < float64(r)-1e-6 {
				t.Fatalf("case %d: middle %v of cell %d has clearance %v, wanted %d µm", k, p, i, f.At(p).Um, r)
			}
		}
		b := m.Bounds()
		for range 300 {
			p := geom.Point{X: math.Floor(b.Min.X + rng.Float64()*b.Width()), Y: math.Floor(b.Min.Y + rng.Float64()*b.Height())}
			d, in := f.At(p).Um, len(s.Locate(p)) > 0
			if in && d < float64(r)-1e-6 || !in && d >= float64(r)+chord+10 {
				t.Fatalf("case %d: clearance %v at %v, in a cell for %d µm: %v", k, d, p, r, in)
			}
		}
	}
}

// TestLaw4PatchedEqualsRebuilt applies random patches one after another.
func TestLaw4PatchedEqualsRebuilt(t *testing.T) {
	const seed = 44
	t.Logf("seed %d", seed)
	sequences, shared, fresh := 12, 0, 0
	if testfloor.Slow() {
		sequences = 500
	}
	for k := range sequences {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := testfloor.Random(t, rng, 100+rng.IntN(300), 50+rng.IntN(150))
		need := roadmap.Need{ClearanceUm: radii[rng.IntN(len(radii))], Zones: k%2 == 0, ZoneUm: 200_000 * int64(k%4/2)}
		field := testfloor.Field(t, m)
		s, err := Build(context.Background(), field, need, 990)
		if err != nil {
			t.Fatal(err)
		}
		for step := range 10 {
			next, err := m.Apply(testfloor.Edits(rng, m))
			if err != nil {
				t.Fatal(err)
			}
			change := floor.Diff(m, next)
			if field, err = field.Advance(context.Background(), next, change); err != nil {
				t.Fatal(err)
			}
			a, err := s.Advance(context.Background(), field, change)
			if err != nil {
				t.Fatal(err)
			}
			b, err := Build(context.Background(), field, need, 990)
			if err != nil {
				t.Fatal(err)
			}
			if !reflect.DeepEqual(a.Cells, b.Cells) || !reflect.DeepEqual(a.Walls, b.Walls) || !reflect.DeepEqual(a.of, b.of) {
				t.Fatalf("sequence %d, step %d: cells or walls differ", k, step)
			}
			for i := range b.strips {
				if !reflect.DeepEqual(a.strips[i], b.strips[i]) {
					t.Fatalf("sequence %d, step %d: strip %d differs", k, step, i)
				}
			}
			shared += a.Shared(s)
			fresh += a.Strips() - a.Shared(s)
			m, s = next, a
		}
	}
	if shared == 0 || fresh == 0 {
		t.Errorf("%d strips shared, %d swept again", shared, fresh)
	}
}

func TestTooManyCellsAreRefused(t *testing.T) {
	m := testfloor.New(t, 200, 100, false, testfloor.Paint(50, 20, 60, 30, floor.Occupied), testfloor.Paint(150, 20, 160, 30, floor.Occupied))
	for _, c := range []struct {
		most int
		ok   bool
	}{{10, true}, {9, false}, {3, false}} {
		// In the strips: 4 about the first square, 1, 4 about the second, 1.
		s := newSpace(testfloor.Field(t, m), Need{}, 990)
		s.most = c.most
		err := s.fill(context.Background(), []int{0, 1, 2, 3})
		if c.ok != (err == nil) || err != nil && !errors.Is(err, roadmap.ErrTooLarge) {
			t.Errorf("at most %d cells: %d cells, error %v", c.most, len(s.Cells), err)
		}
	}
}

func TestBadNeedIsRefused(t *testing.T) {
	f := testfloor.Field(t, testfloor.New(t, 10, 10, false))
	for want, n := range map[string]roadmap.Need{
		"clearance: -1 µm":      {ClearanceUm: -1},
		"clearance: 1000000":    {ClearanceUm: MaxClearanceUm * 10_000},
		"zone clearance: -5 µm": {Zones: true, ZoneUm: -5},
	} {
		if _, err := Build(context.Background(), f, n, 990); err == nil || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%+v: error %v, wanted %s...", n, err, want)
		}
	}
}

func TestCancelledBuildStops(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	f := testfloor.Field(t, testfloor.New(t, 10, 10, false))
	if _, err := Build(ctx, f, roadmap.Need{}, 990); !errors.Is(err, context.Canceled) {
		t.Errorf("error %v, wanted %v", err, context.Canceled)
	}
}

// TestPassageInsideASlabIsFound has a pocket that both opens and shuts between two corners'
// upright lines: three bars cross, and no corner lies above or below the triangle between them.
func TestPassageInsideASlabIsFound(t *testing.T) {
	m := testfloor.New(t, 60, 60, false)
	m = testfloor.Apply(t, m,
		// Each is wider than the floor is high at its ends, so that only the pocket is free.
		testfloor.Solid(m, "a", [2]float64{0, 0}, [2]float64{3e6, 0}, [2]float64{3e6, 1e6}, [2]float64{0, 1e6}),
		testfloor.Solid(m, "b", [2]float64{0, 1e5}, [2]float64{0, 3e6}, [2]float64{3e6, 3e6}),
		testfloor.Solid(m, "c", [2]float64{3e6, 0}, [2]float64{3e6, 3e6}, [2]float64{0, 3e6}))
	s := build(t, m, roadmap.Need{}, 990)
	// b lies above y = 1e5 + 2.9/3 x, c above y = 3e6 - x, a below 1e6: the sides of a and b
	// meet at x = 931,034, of a and c at 2e6, of b and c at 1,474,576 and y = 1,525,424.
	want := (2e6 - 931_034) * (1_525_424 - 1e6) / 2
	area := 0.0
	for i := range s.Cells {
		area += s.Cells[i].Area()
	}
	if math.Abs(area-want) > 3e6 { // a micrometre along 3 m
		t.Errorf("area %v µm², wanted %v", area, want)
	}
}
