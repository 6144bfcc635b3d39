package floor

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"

	"example.com/wideberth/mapstore/geom"
)

// The encodings are made of: unsigned and zig-zag variable-length integers in
// their shortest form, float64 as eight bytes little-endian with -0 written as 0,
// byte strings after their length, points as whole micrometres, each as the
// difference to the point before.

// ErrEncoding is wrapped by every error about bytes that are not what this package
// writes.
var ErrEncoding = errors.New("floor: damaged or foreign encoding")

func appendFloat(b []byte, v float64) []byte {
	return binary.LittleEndian.AppendUint64(b, math.Float64bits(v+0))
}

func appendBytes[T string | []byte](b []byte, v T) []byte {
	b = binary.AppendUvarint(b, uint64(len(v)))
	return append(b, v...)
}

func appendPoints(b []byte, points []geom.Point) []byte {
	var x, y int64
	for _, p := range points {
		px, py := int64(p.X), int64(p.Y)
		b = binary.AppendVarint(b, px-x)
		b = binary.AppendVarint(b, py-y)
		x, y = px, py
	}
	return b
}

func appendChains(b []byte, chains [][]geom.Point) []byte {
	b = binary.AppendUvarint(b, uint64(len(chains)))
	for _, c := range chains {
		b = binary.AppendUvarint(b, uint64(len(c)))
		b = appendPoints(b, c)
	}
	return b
}

// decoder reads what the append functions wrote. After the first fault it reads
// zeroes and err says what and where. What it allocates is bounded by what it
// has read.
type decoder struct {
	data []byte
	pos  int
	err  error
}

func (d *decoder) fail(format string, args ...any) {
	if d.err == nil {
		d.err = fmt.Errorf("%w: byte %d: %s", ErrEncoding, d.pos, fmt.Sprintf(format, args...))
	}
}

func (d *decoder) rest() int { return len(d.data) - d.pos }

func (d *decoder) take(n int) []byte {
	if d.err != nil || n < 0 || n > d.rest() {
		d.fail("ends early")
		return nil
	}
	b := d.data[d.pos : d.pos+n : d.pos+n]
	d.pos += n
	return b
}

func (d *decoder) byte() byte {
	if b := d.take(1); b != nil {
		return b[0]
	}
	return 0
}

func (d *decoder) uvarint() uint64 {
	if d.err != nil {
		return 0
	}
	v, n := binary.Uvarint(d.data[d.pos:])
	if n <= 0 || n > 1 && d.data[d.pos+n-1] == 0 {
		d.fail("no integer")
		return 0
	}
	d.pos += n
	return v
}

func (d *decoder) varint() int64 {
	u := d.uvarint()
	return int64(u>>1) ^ -int64(u&1)
}

// count reads how many things follow, each of which takes at least size bytes.
func (d *decoder) count(most, size int) int {
	v := d.uvarint()
	switch {
	case d.err != nil:
	case v > uint64(most):
		d.fail("%d things, wanted at most %d", v, most)
	case v*uint64(size) > uint64(d.rest()):
		d.fail("ends early")
	default:
		return int(v)
	}
	return 0
}

func (d *decoder) float() float64 {
	b := d.take(8)
	if b == nil {
		return 0
	}
	u := binary.LittleEndian.Uint64(b)
	v := math.Float64frombits(u)
	if math.IsNaN(v) || u == 1<<63 {
		d.fail("no number")
		return 0
	}
	return v
}

func (d *decoder) string(most int) string { return string(d.take(d.count(most, 1))) }

func (d *decoder) points(n int) []geom.Point {
	if n == 0 {
		return nil
	}
	points := make([]geom.Point, n)
	var x, y int64
	for i := range points {
		x += d.varint()
		y += d.varint()
		if abs(x) >= 1<<53 || abs(y) >= 1<<53 {
			d.fail("coordinate out of range")
		}
		if d.err != nil {
			return nil
		}
		points[i] = geom.Point{X: float64(x), Y: float64(y)}
	}
	return points
}

func abs(v int64) uint64 {
	if v < 0 {
		return -uint64(v)
	}
	return uint64(v)
}

func (d *decoder) chains() [][]geom.Point {
	n := d.count(1+MaxHoles, 1)
	if n == 0 {
		return nil
	}
	chains := make([][]geom.Point, n)
	for i := range chains {
		chains[i] = d.points(d.count(MaxRingPoints, 2))
	}
	return chains
}

// done says whether all was read, without a fault.
func (d *decoder) done() error {
	if d.err == nil && d.rest() > 0 {
		d.fail("%d bytes too many", d.rest())
	}
	return d.err
}
