package anyangle

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// TestMitredCutsCoverWhatPlainOnesDo compares the cut of each block with one of pieces that have
// no mitres: the same area, and the same stretches of the block's border are free.
func TestMitredCutsCoverWhatPlainOnesDo(t *testing.T) {
	const seed = 41
	t.Logf("seed %d", seed)
	cases := 60
	if slow() {
		cases = 2000
	}
	triangles, onBorder := 0, 0
	for k := range cases {
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		f := cornerFloor(t, rng)
		g := newMesh(f, Need{ClearanceUm: []int64{1_000, 60_000, 250_000, 450_000, 1_150_000}[rng.IntN(5)]})
		all := make([]int, len(g.blocks))
		for i := range all {
			all[i] = i
		}
		near, _ := g.pieces(all)
		z := newRasterizer(g.need.ClearanceUm, f.Settings().ResolutionUm)
		c := &cutter{ctx: context.Background()}
		for i := range g.blocks {
			w, h := g.size(i)
			pieces := z.pieces(f, i%g.bx, i/g.bx, pt{}, pt{w, h})
			o := g.corner(i)
			for _, p := range near[i] {
				if p.touches(o.x, o.y, o.x+w, o.y+h) {
					pieces = append(pieces, p.moved(o))
				}
			}
			mitred := c.cut(w, h, pieces, true)
			for k := range pieces {
				pieces[k].mitres = nil
			}
			plain := c.cut(w, h, pieces, true)
			triangles += len(mitred.fan)
			if len(plain.fan) > 0 {
				t.Fatal("triangles without a mitre")
			}
			a, long := areaOf(mitred)
			b, _ := areaOf(plain)
			// Each cell's sides may be off by snapUm.
			if math.Abs(a-b) > snapUm*long {
				t.Fatalf("case %d block %d: %.0f µm² mitred, %.0f plain, sides of %.0f µm", k, i, a, b, long)
			}
			for side := range mitred.contact {
				p, q := freeOn(mitred.contact[side]), freeOn(plain.contact[side])
				if fmt.Sprint(p) != fmt.Sprint(q) {
					t.Fatalf("case %d block %d side %d: free %v mitred, %v plain", k, i, side, p, q)
				}
				for _, s := range mitred.contact[side] {
					if mitred.triangleOf(s.cell) != nil {
						onBorder++
					}
				}
			}
		}
	}
	t.Logf("%d triangles, %d of them on a border", triangles, onBorder)
	if triangles < 20*cases || onBorder < cases/2 {
		t.Errorf("%d triangles, %d of them on a border", triangles, onBorder)
	}
}

// TestSidesNearlyAlongAnAxisKeepTheClearance has a solid with a side along an axis next to one
// that is half a hundredth of a radian off it, across a block's border, all ways round.
func TestSidesNearlyAlongAnAxisKeepTheClearance(t *testing.T) {
	ring := points(-500_000, -1_400_000, 495_000, -1_400_000, 500_000, -400_000, 500_000, 1_100_000, -500_000, 1_100_000)
	for k := range 8 {
		v := slices.Clone(ring)
		for i, p := range v {
			if k&1 != 0 {
				p.X = -p.X
			}
			if k&2 != 0 {
				p.Y = -p.Y
			}
			if k&4 != 0 {
				p.X, p.Y = p.Y, p.X
			}
			v[i] = geom.Point{X: p.X + blockCells*benchCell, Y: p.Y + blockCells*benchCell}
		}
		f := solids(t, 2*blockCells, 2*blockCells, nil, floor.NewPolygon([][]geom.Point{v}, 0))
		g, cores := build(t, f, 450_000), coresOf(f)
		for p := range g.corners {
			// 1e-6 µm: rounding of a distance.
			if d := trueClearance(f, cores, p); d < 450_000-1e-6 {
				t.Fatalf("way round %d: %v of the mesh has clearance %v, wanted 450000 µm", k, p, d)
			}
		}
	}
}

// cornerFloor has boxes of cells and solids along the axes, discs among them, and some that
// slant.
func cornerFloor(t *testing.T, rng *rand.Rand) *floor.Map {
	m := newMask(60+rng.IntN(240), 60+rng.IntN(240))
	for range 1 + rng.IntN(12) {
		x, y := rng.IntN(m.w), rng.IntN(m.h)
		m.fill(x, y, min(m.w, x+1+rng.IntN(40)), min(m.h, y+1+rng.IntN(40)), true)
	}
	f := m.floor(t, rng.IntN(2) == 0)
	var edits []floor.Edit
	for i := range rng.IntN(6) {
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: randomSolid(rng, fmt.Sprintf("s%d", i), f.Bounds())})
	}
	for i := range rng.IntN(6) {
		p := randomPoint(rng, f.Bounds())
		p = geom.Point{X: math.Round(p.X), Y: math.Round(p.Y)}
		x, y := min(p.X+math.Round(rng.Float64()*2e6), f.Bounds().Max.X), min(p.Y+math.Round(rng.Float64()*2e6), f.Bounds().Max.Y)
		s := floor.NewPolygon([][]geom.Point{{p, {X: x, Y: p.Y}, {X: x, Y: y}, {X: p.X, Y: y}}}, 0)
		if x > p.X && y > p.Y {
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: fmt.Sprintf("b%d", i), Kind: floor.Solid, Shape: s}})
		}
	}
	f, err := f.Apply(edits)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// areaOf is the area of all cells and the length of all their sides.
func areaOf(c *cut) (area, long float64) {
	for i := range c.cells {
		ring := c.outline(nil, int32(i), geom.Point{})
		area += math.Abs(geom.Ring(ring).SignedArea())
		for k, p := range ring {
			long += geom.Dist(p, ring[(k+1)%len(ring)])
		}
	}
	return area, long
}

// freeOn is the union of contacts, those of one point left out.
func freeOn(all []contact) (out [][2]int32) {
	for _, k := range all { // in order of lo
		switch n := len(out) - 1; {
		case k.lo == k.hi:
		case n >= 0 && k.lo <= out[n][1]:
			out[n][1] = max(out[n][1], k.hi)
		default:
			out = append(out, [2]int32{k.lo, k.hi})
		}
	}
	return out
}
