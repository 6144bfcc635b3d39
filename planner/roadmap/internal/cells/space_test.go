package cells

import (
	"context"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/roadmap"
)

var radii = []int64{0, 1, 40, 3_000, 50_000, 150_000, 217_345, 333_333, 800_000}

// TestLaw5NoCellOverstatesClearance checks that every place of a cell has the clearance, and
// that every place with the clearance and a chord is in one. The outside check is the
// clearance field, which knows nothing of outlines.
func TestLaw5NoCellOverstatesClearance(t *testing.T) {
	const seed = 21
	t.Logf("seed %d", seed)
	cases := 120
	if slow() {
		cases = 3000
	}
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 20+rng.IntN(180), 20+rng.IntN(90))
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
	if slow() {
		sequences = 500
	}
	for k := range sequences {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := randomFloor(t, rng, 100+rng.IntN(300), 50+rng.IntN(150))
		need := roadmap.Need{ClearanceUm: radii[rng.IntN(len(radii))], Zones: k%2 == 0, ZoneUm: 200_000 * int64(k%4/2)}
		field := fieldOf(t, m)
		s, err := Build(context.Background(), field, need, 990)
		if err != nil {
			t.Fatal(err)
		}
		for step := range 10 {
			next, err := m.Apply(randomEdits(rng, m))
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
