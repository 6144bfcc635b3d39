package floor

import (
	"bytes"
	"compress/flate"
	"encoding/binary"
	"io"
)

// Packed bytes are either as they are (0) or a DEFLATE stream (1, RFC 1951),
// whichever is shorter, after a length.

func appendPacked(b, raw []byte) []byte {
	if small := deflate(raw); len(small) < len(raw) {
		return appendBytes(append(b, 1), small)
	}
	return appendBytes(append(b, 0), raw)
}

func deflate(raw []byte) []byte {
	var buf bytes.Buffer
	w, err := flate.NewWriter(&buf, flate.BestSpeed)
	if err != nil {
		return raw // not for a level that exists
	}
	// A bytes.Buffer takes every write.
	_, _ = w.Write(raw)
	_ = w.Close()
	return buf.Bytes()
}

// packed reads packed bytes that are known to unpack to size. It never allocates
// more than about twice what the stream really holds, nor much more than size.
func (d *decoder) packed(size int) []byte {
	kind := d.byte()
	stored := d.take(d.count(len(d.data), 1))
	if d.err != nil {
		return nil
	}
	switch kind {
	case 0:
	case 1:
		var err error
		if stored, err = inflate(stored, size); err != nil {
			d.fail("%v", err)
			return nil
		}
	default:
		d.fail("packing %d", kind)
		return nil
	}
	if len(stored) != size {
		d.fail("%d bytes of cells, wanted %d", len(stored), size)
		return nil
	}
	return stored
}

// inflate unpacks a DEFLATE stream of at most size bytes.
func inflate(stored []byte, size int) ([]byte, error) {
	r := flate.NewReader(bytes.NewReader(stored))
	var buf bytes.Buffer
	if _, err := io.Copy(&buf, io.LimitReader(r, int64(size)+1)); err != nil {
		return nil, err
	}
	return buf.Bytes(), nil
}

// badCells looks at two-bit cells of n cells: the first cell that holds 3, or n
// when spare bits of the last byte are set; -1 when all is well.
func badCells(cells []byte, n int64) int64 {
	check := func(from int, w uint64) int64 {
		if w&(w>>1)&0x5555555555555555 == 0 {
			return -1
		}
		for i := range int64(32) {
			if w>>(2*i)&3 == 3 {
				return min(int64(from)*4+i, n)
			}
		}
		return -1
	}
	i := 0
	for ; i+8 <= len(cells); i += 8 {
		if at := check(i, binary.LittleEndian.Uint64(cells[i:])); at >= 0 {
			return at
		}
	}
	for ; i < len(cells); i++ {
		if at := check(i, uint64(cells[i])); at >= 0 {
			return at
		}
	}
	if n%4 != 0 && len(cells) > 0 && cells[len(cells)-1]>>(2*(n%4)) != 0 {
		return n
	}
	return -1
}
