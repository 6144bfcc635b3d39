package server

import (
	"bytes"
	"compress/flate"
	"errors"
	"fmt"
	"io"

	pb "example.com/wideberth/proto/wideberth/v1"
)

// cellBytes is how many bytes n cells of two bits take.
func cellBytes(n int64) int64 { return (n + 3) / 4 }

// scanCells reads a block of n cells, unfolding DEFLATE as it goes, and says what
// is wrong with it, "" when nothing is. The cells are appended to *out unless out
// is nil. It never reads more than n cells' bytes plus one, whatever the stream
// would unfold to, and without out it holds no more than one buffer.
func scanCells(b *pb.CellBlock, n int64, out *[]byte) (problem string) {
	want := cellBytes(n)
	var src io.Reader
	if b.Encoding == pb.CellEncoding_CELL_ENCODING_TWO_BIT {
		if got := int64(len(b.Cells)); got != want {
			return fmt.Sprintf("%d bytes, wanted %d for %d cells", got, want, n)
		}
		src = bytes.NewReader(b.Cells)
	} else {
		inflate := flate.NewReader(bytes.NewReader(b.Cells))
		defer inflate.Close() // its error repeats what Read said
		src = inflate
	}
	buf := make([]byte, min(want+1, 32<<10))
	seen := int64(0)
	for {
		k, err := src.Read(buf[:min(int64(len(buf)), want+1-seen)])
		for i, c := range buf[:k] {
			// A cell of 3 has both its bits set.
			if pair := c & (c >> 1) & 0x55; pair != 0 {
				return fmt.Sprintf("byte %d holds a cell of 3, wanted 0 (free), 1 (occupied) or 2 (unknown)", seen+int64(i))
			}
		}
		if seen += int64(k); seen > want {
			return fmt.Sprintf("unfolds to more than the %d bytes of %d cells", want, n)
		}
		if spare := n % 4; k > 0 && seen == want && spare != 0 && buf[k-1]>>(2*spare) != 0 {
			return "the last byte's spare bits are set, wanted zero"
		}
		if out != nil {
			*out = append(*out, buf[:k]...)
		}
		switch {
		case errors.Is(err, io.EOF):
			if seen < want {
				return fmt.Sprintf("ends after %d bytes, wanted %d for %d cells", seen, want, n)
			}
			return ""
		case err != nil:
			return fmt.Sprintf("not a DEFLATE stream after %d bytes (%v)", seen, err)
		}
	}
}

// deflateCells packs two-bit cells into a DEFLATE stream.
func deflateCells(cells []byte) ([]byte, error) {
	var b bytes.Buffer
	w, err := flate.NewWriter(&b, flate.BestSpeed)
	if err != nil {
		return nil, err
	}
	if _, err := w.Write(cells); err != nil {
		return nil, err
	}
	if err := w.Close(); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
}
