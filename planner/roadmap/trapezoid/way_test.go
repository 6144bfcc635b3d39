package trapezoid

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/check"
	"example.com/wideberth/planner/internal/testfloor"
	"example.com/wideberth/planner/roadmap"
)

// TestWaysKeepTheirClearance has the independent checker go over the ways of Search and of
// WallFollowing on random floors. Whether there is a way at all is compared with the
// any-angle mesh: one at 2 mm more must be found, and none where the mesh has none.
func TestWaysKeepTheirClearance(t *testing.T) {
	const seed = 12
	t.Logf("seed %d", seed)
	cases, found, none := 50, 0, 0
	if testfloor.Slow() {
		cases = 3000
	}
	ctx := context.Background()
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := testfloor.Random(t, rng, 30+rng.IntN(180), 30+rng.IntN(80))
		need := roadmap.Need{ClearanceUm: []int64{0, 1, 50_000, 123_457, 300_000}[k%5]}
		r := build(t, m, need)
		f := r.s.Field()
		mesh := func(um int64) *anyangle.Mesh {
			g, err := anyangle.Build(ctx, m, anyangle.Need{ClearanceUm: um})
			if err != nil {
				t.Fatal(err)
			}
			return g
		}
		exact, wide := mesh(max(0, need.ClearanceUm-anyangle.DeltaUm)), mesh(need.ClearanceUm+2*anyangle.DeltaUm)
		for range 6 {
			s, g := testfloor.Point(rng, m.Bounds()), testfloor.Point(rng, m.Bounds())
			if f.At(s).Um < float64(need.ClearanceUm)+1 || f.At(g).Um < float64(need.ClearanceUm)+1 {
				continue
			}
			w, ok, err := r.Search(ctx, s, g)
			if err != nil {
				t.Fatal(err)
			}
			steps, follow, okFollow, err := r.WallFollowing(ctx, s, g)
			if err != nil || ok != okFollow {
				t.Fatalf("case %d: %v to %v: a way %v, following walls %v (%v)", k, s, g, ok, okFollow, err)
			}
			if !ok {
				none++
				if wide.Contains(s) && wide.Contains(g) && wide.Connected(s, g) {
					t.Fatalf("case %d: %v to %v: no way, the mesh has one at 2 mm more", k, s, g)
				}
				continue
			}
			found++
			if need.ClearanceUm > 0 && exact.Contains(s) && exact.Contains(g) && !exact.Connected(s, g) {
				t.Fatalf("case %d: %v to %v: a way, the mesh has none", k, s, g)
			}
			for _, pts := range [][]geom.Point{w.Points, follow.Points} {
				if pts[0] != s || pts[len(pts)-1] != g {
					t.Fatalf("case %d: a way from %v to %v, wanted from %v to %v", k, pts[0], pts[len(pts)-1], s, g)
				}
				if c := check.Way(m, pts, need.ClearanceUm, 0); c.Problem != "" {
					t.Fatalf("case %d, clearance %d µm, %v: %s", k, need.ClearanceUm, pts, c.Problem)
				}
			}
			checkSteps(t, m, need.ClearanceUm, steps)
		}
	}
	if found < cases || none == 0 {
		t.Errorf("%d ways found, %d times none", found, none)
	}
}

// checkSteps checks that what a step follows is where it says: its places between the first and
// the last are at the clearance from the solid, but for the outline's error.
func checkSteps(t *testing.T, m *floor.Map, um int64, steps []Step) {
	t.Helper()
	for _, s := range steps {
		if s.On.Kind != Named || len(s.Points) != 4 {
			continue
		}
		f, ok := m.Feature(s.On.Name)
		if !ok {
			t.Fatalf("a step along %q, which is not on the floor", s.On.Name)
		}
		near := 0
		for i := 1; i < len(s.Points); i++ {
			if d, _ := f.Shape.SegmentDist(s.Points[i-1], s.Points[i]); d <= float64(um)+OutlineErrorUm+3 {
				near++
			}
		}
		if near == 0 {
			t.Fatalf("no piece of %+v is at %d µm from %s", s, um, s.On.Name)
		}
	}
}

// TestWallFollowingRoundABox leads from the left to the right of a box near the lower wall:
//
//	+----------------+   It leaves no room below. With the right hand: along the lower wall,
//	|   |      |     |   over the box, along the lower wall.
//	| s |======|  t  |
//	|   |======|     |
//	+----------------+
func TestWallFollowingRoundABox(t *testing.T) {
	m := testfloor.New(t, 200, 80, false)
	m = testfloor.Apply(t, m, testfloor.Solid(m, "box", [2]float64{4e6, 3e5}, [2]float64{6e6, 3e5}, [2]float64{6e6, 1.2e6}, [2]float64{4e6, 1.2e6}))
	r := build(t, m, roadmap.Need{ClearanceUm: 300_000})
	o := m.Settings().Vertex(0, 0)
	s, g := geom.Point{X: o.X + 3e6, Y: o.Y + 1e6}, geom.Point{X: o.X + 7e6, Y: o.Y + 1e6}
	steps, w, ok, err := r.WallFollowing(context.Background(), s, g)
	if err != nil || !ok {
		t.Fatal(ok, err)
	}
	over := false
	for _, k := range steps {
		over = over || k.Hand == Right && k.On == Solid{Kind: Named, Name: "box"}
		if k.Hand == Left && k.On.Kind == Named {
			t.Errorf("the left hand on %v: the box is on the right", k.On)
		}
	}
	if !over {
		t.Errorf("steps %+v, wanted the right hand on the box", steps)
	}
	// By hand: down to the lower wall 0.7, along it 0.7, up the box's side 0.9, round its
	// corner 0.3·pi/2, along its top 2 m, and the same down again. Chords add 2 mm.
	if want := 2*(0.7+0.7+0.9+0.3*math.Pi/2) + 2; math.Abs(w.LengthUm/1e6-want) > 0.002 {
		t.Errorf("%v µm along walls, wanted %v m", w.LengthUm, want)
	}
}

// TestPassageAsWideAsTheBody checks that a passage of exactly 2r between sides along an axis is
// one, also on the line between two strips, and none at 1 µm more.
func TestPassageAsWideAsTheBody(t *testing.T) {
	const seed = 6
	t.Logf("seed %d", seed)
	for k := range 36 {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		const side = 150 * testfloor.CellUm
		r := int64(1 + rng.IntN(700_000))
		y := side/4 + rng.Int64N(side/2)
		x0 := int64(side/4) + rng.Int64N(side/4)
		x1 := x0 + 1 + rng.Int64N(side/4)
		if k%3 == 0 {
			y = 64 * testfloor.CellUm * (1 + rng.Int64N(2))
		}
		if y-r < testfloor.CellUm || y+r > side-testfloor.CellUm || x0 < 2*r+2 || side-x1 < 2*r+2 {
			continue
		}
		rects := [][4]int64{{x0, 0, x1, y - r}, {x0, y + r, x1, side}}
		m := testfloor.New(t, 150, 150, false)
		for i, q := range rects {
			if k%2 == 0 { // upright
				q = [4]int64{q[1], q[0], q[3], q[2]}
			}
			a, b, c, d := float64(q[0]), float64(q[1]), float64(q[2]), float64(q[3])
			m = testfloor.Apply(t, m, testfloor.Solid(m, string(rune('a'+i)), [2]float64{a, b}, [2]float64{c, b}, [2]float64{c, d}, [2]float64{a, d}))
		}
		o := m.Settings().Vertex(0, 0)
		d := float64(r) + 1
		s, g := geom.Point{X: o.X + d, Y: o.Y + d}, geom.Point{X: o.X + side - d, Y: o.Y + side - d}
		w, ok, err := build(t, m, roadmap.Need{ClearanceUm: r}).Search(context.Background(), s, g)
		if !ok || err != nil {
			t.Fatalf("case %d: no way through %d µm at clearance %d µm (%v)", k, 2*r, r, err)
		}
		if c := check.Way(m, w.Points, r, 0); c.Problem != "" {
			t.Fatalf("case %d: %s", k, c.Problem)
		}
		if _, ok, _ := build(t, m, roadmap.Need{ClearanceUm: r + 1}).Search(context.Background(), s, g); ok {
			t.Fatalf("case %d: a way through %d µm at clearance %d µm", k, 2*r, r+1)
		}
	}
}

// TestLaw4PatchedEqualsRebuilt compares descriptions; package cells compares all that is kept.
func TestLaw4PatchedEqualsRebuilt(t *testing.T) {
	const seed = 4
	t.Logf("seed %d", seed)
	sequences := 3
	if testfloor.Slow() {
		sequences = 100
	}
	ctx := context.Background()
	for k := range sequences {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := testfloor.Random(t, rng, 100+rng.IntN(150), 50+rng.IntN(100))
		field := testfloor.Field(t, m)
		var r roadmap.Roadmap = build(t, m, roadmap.Need{ClearanceUm: 150_000, Zones: true, ZoneUm: 80_000})
		for step := range 5 {
			next := testfloor.Apply(t, m, testfloor.Edits(rng, m)...)
			change := floor.Diff(m, next)
			var err error
			if field, err = field.Advance(ctx, next, change); err != nil {
				t.Fatal(err)
			}
			if r, err = r.Advance(ctx, field, change); err != nil {
				t.Fatal(err)
			}
			a, b := r.Describe(), build(t, next, r.Need()).Describe()
			a.Bytes, b.Bytes = 0, 0 // slices may have room to spare
			if !reflect.DeepEqual(a, b) {
				t.Fatalf("sequence %d, step %d: patched differs from rebuilt", k, step)
			}
			m = next
		}
	}
}

func TestEndOutsideHasNoWay(t *testing.T) {
	m := testfloor.New(t, 100, 100, false, testfloor.Paint(40, 40, 60, 60, floor.Occupied))
	r := build(t, m, roadmap.Need{ClearanceUm: 200_000})
	o := m.Settings().Vertex(0, 0)
	at := func(x, y float64) geom.Point { return geom.Point{X: o.X + x*1e6, Y: o.Y + y*1e6} }
	for _, p := range []geom.Point{at(2.5, 2.5), at(1.9, 2.5), at(-1, 1), at(0.1, 1)} {
		if _, ok, err := r.Search(context.Background(), p, at(1, 1)); ok || err != nil {
			t.Errorf("a way from %v: %v, %v", p, ok, err)
		}
	}
	// On the clearance itself, at a corner where chords stand off from the arc.
	p := at(3+0.2*0.8, 3+0.2*0.6)
	if _, ok, err := r.Search(context.Background(), p, at(1, 1)); !ok || err != nil {
		t.Errorf("no way from %v: %v, %v", p, ok, err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, _, err := r.Search(ctx, at(1, 1), at(4, 4)); !errors.Is(err, context.Canceled) {
		t.Errorf("error %v, wanted %v", err, context.Canceled)
	}
}
