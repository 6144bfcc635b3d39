package wire

import (
	"bytes"
	"compress/flate"
	"errors"
	"fmt"
	"io"

	"example.com/wideberth/mapstore/floor"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// CellBytes is how many bytes n cells of two bits take.
func CellBytes(n int64) int64 { return (n + 3) / 4 }

// CheckCells says what is wrong with a block's cells, unfolding DEFLATE as it goes
// and keeping nothing of it. The block's rectangle must have been checked.
func CheckCells(b *pb.CellBlock) error { return scan(b, nil) }

// CellsIn are a block's cells, two bits each. It takes memory for as many cells as
// the block's rectangle has, so that must have been checked.
func CellsIn(b *pb.CellBlock) ([]byte, error) {
	out := make([]byte, 0, CellBytes(count(b)))
	if err := scan(b, &out); err != nil {
		return nil, err
	}
	return out, nil
}

func count(b *pb.CellBlock) int64 {
	return int64(b.GetRect().GetColumns()) * int64(b.GetRect().GetRows())
}

// scan reads a block of cells and appends them to *out unless out is nil. It never
// reads more than its cells' bytes plus one, whatever the stream would unfold to,
// and without out it holds no more than one buffer.
func scan(b *pb.CellBlock, out *[]byte) error {
	n := count(b)
	want := CellBytes(n)
	var src io.Reader
	switch b.GetEncoding() {
	case pb.CellEncoding_CELL_ENCODING_TWO_BIT:
		if got := int64(len(b.GetCells())); got != want {
			return fmt.Errorf("%d bytes, wanted %d for %d cells", got, want, n)
		}
		src = bytes.NewReader(b.GetCells())
	case pb.CellEncoding_CELL_ENCODING_TWO_BIT_DEFLATE:
		inflate := flate.NewReader(bytes.NewReader(b.GetCells()))
		defer inflate.Close() // its error repeats what Read said
		src = inflate
	default:
		return fmt.Errorf("in the unknown encoding %v, wanted one of the contract's", b.GetEncoding())
	}
	buf := make([]byte, min(want+1, 32<<10))
	seen := int64(0)
	for {
		k, err := src.Read(buf[:min(int64(len(buf)), want+1-seen)])
		for i, c := range buf[:k] {
			// A cell of 3 has both its bits set.
			if pair := c & (c >> 1) & 0x55; pair != 0 {
				return fmt.Errorf("byte %d holds a cell of 3, wanted 0 (free), 1 (occupied) or 2 (unknown)", seen+int64(i))
			}
		}
		if seen += int64(k); seen > want {
			return fmt.Errorf("unfolds to more than the %d bytes of %d cells", want, n)
		}
		if spare := n % 4; k > 0 && seen == want && spare != 0 && buf[k-1]>>(2*spare) != 0 {
			return errors.New("the last byte's spare bits are set, wanted zero")
		}
		if out != nil {
			*out = append(*out, buf[:k]...)
		}
		switch {
		case errors.Is(err, io.EOF):
			if seen < want {
				return fmt.Errorf("ends after %d bytes, wanted %d for %d cells", seen, want, n)
			}
			return nil
		case err != nil:
			return fmt.Errorf("not a DEFLATE stream after %d bytes (%v)", seen, err)
		}
	}
}

// BlockOut is a block of cells, two bits each, in whichever encoding is shorter. It
// keeps cells.
func BlockOut(r floor.CellRect, cells []byte) (*pb.CellBlock, error) {
	packed, err := deflate(cells)
	if err != nil {
		return nil, err
	}
	if len(packed) < len(cells) {
		return &pb.CellBlock{Rect: CellRectOut(r), Encoding: pb.CellEncoding_CELL_ENCODING_TWO_BIT_DEFLATE, Cells: packed}, nil
	}
	return &pb.CellBlock{Rect: CellRectOut(r), Encoding: pb.CellEncoding_CELL_ENCODING_TWO_BIT, Cells: cells}, nil
}

// deflate packs two-bit cells into a DEFLATE stream.
func deflate(cells []byte) ([]byte, error) {
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
