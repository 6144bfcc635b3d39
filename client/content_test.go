package client

import (
	"bytes"
	"compress/flate"
	"io"
	"slices"
	"strings"
	"testing"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"
	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

type part = wideberthv1.ReadFloorResponse

func header(columns, rows int32) *part {
	return &part{Part: &wideberthv1.ReadFloorResponse_Header{Header: &wideberthv1.ReadFloorHeader{
		Stamp:    stampAt(3),
		Settings: &wideberthv1.FloorSettings{ResolutionM: proto.Float64(0.05), Columns: columns, Rows: rows},
	}}}
}

func cells(x, y, w, h int32, enc wideberthv1.CellEncoding, b ...byte) *part {
	return &part{Part: &wideberthv1.ReadFloorResponse_Cells{Cells: &wideberthv1.CellBlock{
		Rect: &wideberthv1.CellRect{Column: x, Row: y, Columns: w, Rows: h}, Encoding: enc, Cells: b,
	}}}
}

func features(names ...string) *part {
	var b wideberthv1.FeatureBatch
	for _, n := range names {
		b.Features = append(b.Features, &wideberthv1.Feature{Name: n})
	}
	return &part{Part: &wideberthv1.ReadFloorResponse_Features{Features: &b}}
}

func end(cells, features int64) *part {
	return &part{Part: &wideberthv1.ReadFloorResponse_End{End: &wideberthv1.ReadFloorEnd{CellCount: cells, FeatureCount: features}}}
}

// play hands out parts, then io.EOF.
func play(parts ...*part) func() (*part, error) {
	return func() (*part, error) {
		if len(parts) == 0 {
			return nil, io.EOF
		}
		p := parts[0]
		parts = parts[1:]
		return p, nil
	}
}

const (
	plain    = wideberthv1.CellEncoding_CELL_ENCODING_TWO_BIT
	deflated = wideberthv1.CellEncoding_CELL_ENCODING_TWO_BIT_DEFLATE
)

func deflate(b []byte) []byte {
	var out bytes.Buffer
	w, _ := flate.NewWriter(&out, flate.BestSpeed) // the level is valid
	w.Write(b)
	w.Close()
	return out.Bytes()
}

func TestReadFloorPutsBlocksTogether(t *testing.T) {
	t.Parallel()
	// Three columns, two rows, in two blocks whose edges fall within bytes:
	//
	//	row 1: occupied unknown free
	//	row 0: free     free    occupied
	got, err := assemble(play(header(3, 2),
		cells(0, 0, 2, 2, plain, 0|0<<2|1<<4|2<<6),
		cells(2, 0, 1, 2, plain, 1|0<<2),
		features("gate", "rail"), features("rack"), end(6, 3)))
	if err != nil {
		t.Fatal(err)
	}
	want := [2][3]floor.Occupancy{{floor.Free, floor.Free, floor.Occupied}, {floor.Occupied, floor.Unknown, floor.Free}}
	for row, cols := range want {
		for col, w := range cols {
			if g := got.At(col, row); g != w {
				t.Errorf("cell %d,%d holds %v, want %v", col, row, g, w)
			}
		}
	}
	for _, c := range [][2]int{{-1, 0}, {3, 0}, {0, 2}, {0, -1}} {
		if got.At(c[0], c[1]) != floor.Unknown {
			t.Errorf("cell %v is off the floor and not unknown", c)
		}
	}
	if got.Stamp.GetVersion() != 3 || len(got.Features) != 3 {
		t.Errorf("version %d with %d features, want 3 and 3", got.Stamp.GetVersion(), len(got.Features))
	}
}

func TestReadFloorRefusesWhatDoesNotAddUp(t *testing.T) {
	t.Parallel()
	inflated := deflate(make([]byte, 1<<20)) // a megabyte for a block of four cells
	all := cells(0, 0, 2, 2, plain, 0)
	for _, tc := range []struct {
		name  string
		parts []*part
		want  string
	}{
		{"no end mark", []*part{header(2, 2), all}, "without its end mark"},
		{"nothing", nil, "without its end mark"},
		{"no header", []*part{all, end(4, 0)}, "not the header"},
		{"end alone", []*part{end(0, 0)}, "came first"},
		{"two headers", []*part{header(2, 2), header(2, 2)}, "second header"},
		{"no room for it", []*part{header(65_536, 65_536)}, "at most"},
		{"no columns", []*part{header(0, 2)}, "want 1 to"},
		{"a row is missing", []*part{header(2, 2), cells(0, 0, 2, 1, plain, 0), end(4, 0)}, "2 cells arrived, 4 were sent"},
		{"a row came twice", []*part{header(2, 2), cells(0, 0, 2, 1, plain, 0), cells(0, 0, 2, 1, plain, 0), end(4, 0)}, "no cell arrived for column 0, row 1"},
		{"features missing", []*part{header(2, 2), all, features("a"), end(4, 2)}, "1 features arrived, 2 were sent"},
		{"beyond the floor", []*part{header(2, 2), cells(1, 0, 2, 2, plain, 0)}, "not within"},
		{"beyond, by overflow", []*part{header(2, 2), cells(1, 0, 2147483647, 1, plain, 0)}, "not within"},
		{"below the floor", []*part{header(2, 2), cells(0, -1, 2, 2, plain, 0)}, "not within"},
		{"too few bytes", []*part{header(2, 2), cells(0, 0, 2, 2, plain)}, "0 bytes, wanted 1 for 4 cells"},
		{"too many bytes", []*part{header(2, 2), cells(0, 0, 2, 2, plain, 0, 0)}, "2 bytes, wanted 1 for 4 cells"},
		{"the value that means nothing", []*part{header(2, 2), cells(0, 0, 2, 2, plain, 3<<4)}, "byte 0 holds a cell of 3"},
		{"an inflating bomb", []*part{header(2, 2), cells(0, 0, 2, 2, deflated, inflated...)}, "unfolds to more than"},
		{"no deflate stream", []*part{header(2, 2), cells(0, 0, 2, 2, deflated, 0xff)}, "not a DEFLATE stream"},
		{"an unknown encoding", []*part{header(2, 2), cells(0, 0, 2, 2, 9, 0)}, "unknown encoding"},
	} {
		got, err := assemble(play(tc.parts...))
		if status.Code(err) != codes.DataLoss || got != nil || !strings.Contains(err.Error(), tc.want) {
			t.Errorf("%s: %v, want DATA_LOSS saying %q", tc.name, err, tc.want)
		}
	}
}

// However a floor is cut into blocks, it comes together as it was.
func TestReadFloorComesTogetherHoweverItIsCut(t *testing.T) {
	t.Parallel()
	rapid.Check(t, func(t *rapid.T) {
		w, h := rapid.IntRange(1, 40).Draw(t, "columns"), rapid.IntRange(1, 40).Draw(t, "rows")
		want := make([]byte, (w*h+3)/4)
		for i := range w * h {
			setTwoBit(want, i, byte(rapid.IntRange(0, 2).Draw(t, "cell")))
		}
		bw, bh := rapid.IntRange(1, w).Draw(t, "block columns"), rapid.IntRange(1, h).Draw(t, "block rows")
		parts := []*part{header(int32(w), int32(h))}
		for y := 0; y < h; y += bh {
			for x := 0; x < w; x += bw {
				n, m := min(bw, w-x), min(bh, h-y)
				packed := make([]byte, (n*m+3)/4)
				for j := range m {
					for i := range n {
						setTwoBit(packed, j*n+i, twoBit(want, (y+j)*w+x+i))
					}
				}
				enc := plain
				if rapid.Bool().Draw(t, "deflated") {
					enc = deflated
					packed = deflate(packed)
				}
				parts = append(parts, cells(int32(x), int32(y), int32(n), int32(m), enc, packed...))
			}
		}
		got, err := assemble(play(append(parts, end(int64(w*h), 0))...))
		if err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(got.Cells, want) {
			t.Fatalf("cells %x, want %x", got.Cells, want)
		}
	})
}

func TestReadFloorIsReadAgainWhenItBreaks(t *testing.T) {
	t.Parallel()
	tries := 0
	c := serve(t, &fakeService{read: func(_ *wideberthv1.ReadFloorRequest, s grpc.ServerStreamingServer[part]) error {
		tries++
		_ = s.Send(header(2, 2))
		_ = s.Send(cells(0, 0, 2, 2, plain, 0b01_00_10_01))
		if tries == 1 {
			return status.Error(codes.Unavailable, "in the middle")
		}
		_ = s.Send(end(4, 0))
		return nil
	}})
	got, err := c.ReadFloor(t.Context(), "hall", nil)
	if err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(got.Cells, []byte{0b01_00_10_01}) || tries != 2 {
		t.Errorf("cells %08b after %d tries, want 01001001 after 2", got.Cells, tries)
	}
}
