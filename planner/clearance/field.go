package clearance

import (
	"math"
	"slices"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Distances along a column are kept in bytes, 255 standing for none.
const _ = uint8(254 - floor.MaxCapCells)

// MaxCapUm is the largest cap in micrometres (2147 m): values fit 32 bits. A floor
// whose cap is larger gets a field capped here.
const MaxCapUm = math.MaxInt32

type (
	vertexBlock [blockSize * blockSize]int32
	cellBits    [blockSize]uint64
)

// Field is the exact clearance of one version of a floor, with everything that is
// derived from it. It is immutable and safe for any number of readers.
type Field struct {
	m          *floor.Map
	h          float64 // side of a cell
	ox, oy     float64 // lower left corner
	bounds     geom.Rect
	cols, rows int
	cap        int64
	open       bool
	lad        ladder
	capBlock   *vertexBlock

	bits     table[*cellBits]    // solid cells by block; nil: none
	values   table[*vertexBlock] // clearance by block of vertices
	buckets  table[bucket]       // vector solids by block of cells
	barred   table[*cellBits]    // cells that are not free at clearance 0; nil: none
	sums     table[*summary]     // smallest and largest value by square of cells
	pyramid  []table[span]       // the same above blocks; the last level is one entry
	allCap   *summary            // shared by blocks that are nowhere below the cap
	allClose *summary            // shared by blocks that are 0 throughout
}

var (
	zeroBlock = new(vertexBlock)
	fullBits  = func() *cellBits {
		b := new(cellBits)
		fill(b[:], allBytes)
		return b
	}()
)

// frame makes the field's fixed parts.
func frame(m *floor.Map) *Field {
	s := m.Settings()
	f := &Field{
		m: m, h: float64(s.ResolutionUm), ox: float64(s.OriginX), oy: float64(s.OriginY),
		bounds: m.Bounds(), cols: s.Columns, rows: s.Rows, open: s.OpenBorder,
		cap: min(s.CapUm, MaxCapUm),
	}
	f.lad = newLadder(s.ResolutionUm, f.cap)
	f.capBlock = new(vertexBlock)
	fill(f.capBlock[:], int32(f.cap))
	f.allCap, f.allClose = uniformSummary(int32(f.cap)), uniformSummary(0)
	return f
}

// Map is the version the field was made from.
func (f *Field) Map() *floor.Map { return f.m }

// Cap is the largest clearance told apart, in micrometres: the floor's setting, at
// most MaxCapUm.
func (f *Field) Cap() int64 { return f.cap }

// Bounds is the floor's rectangle.
func (f *Field) Bounds() geom.Rect { return f.bounds }

// Vertex is the clearance at lattice vertex (i, j), 0 <= i <= Columns and 0 <= j <=
// Rows, in micrometres, rounded down, at most the cap; 0 off the lattice. Since
// floor(x) >= n exactly when x >= n for whole n, comparing it with a whole
// number of micrometres compares the clearance itself.
func (f *Field) Vertex(i, j int) int32 {
	if i < 0 || j < 0 || i > f.cols || j > f.rows {
		return 0
	}
	return f.values.rows[j>>blockShift][i>>blockShift][(j&blockMask)<<blockShift|i&blockMask]
}

// point is where a lattice vertex lies.
func (f *Field) point(i, j int) geom.Point {
	return geom.Point{X: f.ox + float64(i)*f.h, Y: f.oy + float64(j)*f.h}
}

// cellRect is the closed square of a cell.
func (f *Field) cellRect(c, r int) geom.Rect {
	return geom.Rect{Min: f.point(c, r), Max: f.point(c+1, r+1)}
}

// Equal says whether two fields agree bit for bit in everything they hold.
func (f *Field) Equal(o *Field) bool {
	if f.bounds != o.bounds || f.cols != o.cols || f.rows != o.rows || f.cap != o.cap || f.open != o.open || f.h != o.h {
		return false
	}
	if !sameTable(&f.bits, &o.bits, sameBits) || !sameTable(&f.barred, &o.barred, sameBits) ||
		!sameTable(&f.values, &o.values, same[vertexBlock]) || !sameTable(&f.sums, &o.sums, same[summary]) ||
		!sameTable(&f.buckets, &o.buckets, sameBucket) || len(f.pyramid) != len(o.pyramid) {
		return false
	}
	for k := range f.pyramid {
		if !sameTable(&f.pyramid[k], &o.pyramid[k], func(a, b span) bool { return a == b }) {
			return false
		}
	}
	return true
}

func sameTable[T any](a, b *table[T], eq func(T, T) bool) bool {
	if a.nx != b.nx || a.ny != b.ny {
		return false
	}
	for y := range a.rows {
		if a.nx > 0 && &a.rows[y][0] == &b.rows[y][0] {
			continue
		}
		if !slices.EqualFunc(a.rows[y], b.rows[y], eq) {
			return false
		}
	}
	return true
}

func same[T comparable](a, b *T) bool { return a == b || *a == *b }

// sameBits compares blocks of bits; nil stands for none set.
func sameBits(a, b *cellBits) bool {
	if a == nil || b == nil {
		return a == b
	}
	return same(a, b)
}

func sameBucket(a, b bucket) bool {
	if len(a) > 0 && len(b) > 0 && &a[0] == &b[0] && len(a) == len(b) {
		return true
	}
	return slices.EqualFunc(a, b, func(x, y entry) bool {
		return x.area == y.area && slices.Equal(x.pieces, y.pieces) && sameSolid(x.s, y.s)
	})
}

func sameSolid(a, b *solid) bool {
	return a == b || a.feature.Name == b.feature.Name && sameShape(&a.feature.Shape, &b.feature.Shape)
}

func sameShape(a, b *floor.Shape) bool {
	return a.Kind == b.Kind && a.Grow == b.Grow &&
		slices.EqualFunc(a.Chains, b.Chains, func(x, y []geom.Point) bool { return slices.Equal(x, y) })
}
