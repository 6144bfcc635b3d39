package wire_test

import (
	"bytes"
	"compress/flate"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"
	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

const (
	plain    = pb.CellEncoding_CELL_ENCODING_TWO_BIT
	deflated = pb.CellEncoding_CELL_ENCODING_TWO_BIT_DEFLATE
)

func packed(b []byte) []byte {
	var out bytes.Buffer
	w, _ := flate.NewWriter(&out, flate.BestCompression) // the level is valid
	w.Write(b)
	w.Close()
	return out.Bytes()
}

// Cells come back as they went, and take no more bytes than they have.
func TestCellsSurviveTheWire(t *testing.T) {
	encodings := map[pb.CellEncoding]bool{}
	rapid.Check(t, func(t *rapid.T) {
		w, h := rapid.IntRange(1, 300).Draw(t, "columns"), rapid.IntRange(1, 40).Draw(t, "rows")
		want := make([]byte, wire.CellBytes(int64(w*h)))
		noise := rapid.Bool().Draw(t, "noise")
		x := rapid.Uint64().Draw(t, "seed") | 1
		for i := range w * h {
			if x ^= x << 13; noise || i < w {
				want[i/4] |= byte(x>>33%3) << (i % 4 * 2)
			}
			x ^= x >> 7
			x ^= x << 17
		}
		r := floor.CellRect{X0: 3, Y0: 4, X1: 3 + w, Y1: 4 + h}
		block, err := wire.BlockOut(r, want)
		if err != nil {
			t.Fatal(err)
		}
		block = travel(t, block)
		encodings[block.Encoding] = true
		if len(block.Cells) > len(want) || wire.CellRectIn(block.Rect) != r {
			t.Fatalf("%d cells went as %d bytes at %v", w*h, len(block.Cells), block.Rect)
		}
		if err := wire.CheckCells(block); err != nil {
			t.Fatal(err)
		}
		if got, err := wire.CellsIn(block); err != nil || !bytes.Equal(got, want) {
			t.Fatalf("came back as %x (%v), went as %x", got, err, want)
		}
	})
	if !encodings[plain] || !encodings[deflated] {
		t.Errorf("only %v were tried", encodings)
	}
}

func TestBadCells(t *testing.T) {
	for _, c := range []struct {
		name  string
		enc   pb.CellEncoding
		cells []byte // of 3 x 2
		says  string
	}{
		{"too few bytes", plain, []byte{0}, "1 bytes, wanted 2 for 6 cells"},
		{"too many bytes", plain, []byte{0, 0, 0}, "3 bytes, wanted 2"},
		{"a cell of 3", plain, []byte{0, 3 << 2}, "byte 1 holds a cell of 3"},
		{"spare bits", plain, []byte{0, 1 << 4}, "spare bits"},
		{"not packed", deflated, []byte{0xff}, "not a DEFLATE stream"},
		{"cut off", deflated, packed([]byte{1, 2})[:3], "not a DEFLATE stream"},
		{"unfolds to too little", deflated, packed([]byte{0}), "ends after 1 bytes, wanted 2"},
		{"unfolds to too much", deflated, packed(make([]byte, 1<<20)), "unfolds to more than the 2 bytes"},
		{"no encoding", 0, []byte{0, 0}, "unknown encoding"},
		{"a later encoding", 9, []byte{0, 0}, "unknown encoding 9"},
	} {
		b := &pb.CellBlock{Rect: &pb.CellRect{Columns: 3, Rows: 2}, Encoding: c.enc, Cells: c.cells}
		got, err := wire.CellsIn(b)
		if err == nil || got != nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v, wanted %q", c.name, err, c.says)
		}
		if again := wire.CheckCells(b); again == nil || again.Error() != err.Error() {
			t.Errorf("%s: checked, %v; read, %v", c.name, again, err)
		}
	}
}

// No bytes make reading cells panic, and what is read is what the map takes.
func FuzzCells(f *testing.F) {
	f.Add(uint8(3), uint8(2), true, []byte{0, 1})
	f.Add(uint8(200), uint8(200), false, packed(make([]byte, 10_000)))
	f.Fuzz(func(t *testing.T, columns, rows uint8, two bool, cells []byte) {
		b := &pb.CellBlock{Rect: &pb.CellRect{Columns: int32(columns) + 1, Rows: int32(rows) + 1}, Encoding: deflated, Cells: cells}
		if two {
			b.Encoding = plain
		}
		before := proto.Clone(b)
		got, err := wire.CellsIn(b)
		if !proto.Equal(before, b) {
			t.Fatal("reading changed the message")
		}
		if err != nil {
			return
		}
		set := floor.Settings{ResolutionUm: 50_000, Columns: int(b.Rect.Columns), Rows: int(b.Rect.Rows), CapUm: 500_000}
		m, err := floor.New(set)
		if err != nil {
			t.Fatal(err)
		}
		if m, err = m.Apply([]floor.Edit{{Kind: floor.PaintCells, Rect: set.AllCells(), Cells: got}}); err != nil {
			t.Fatalf("the map does not take them: %v", err)
		}
		if again := m.ReadCells(nil, set.AllCells()); !bytes.Equal(again, got) {
			t.Fatal("the map holds other cells")
		}
	})
}
