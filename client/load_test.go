package client

import (
	"bytes"
	"context"
	"strings"
	"testing"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

func TestLoadCellsInBands(t *testing.T) {
	t.Parallel()
	const w, h = 65_536, 150 // 64 rows make a full patch, so 64 + 64 + 22
	want := make([]byte, (w*h+3)/4)
	for i := range want {
		want[i] = byte(i*7) & 0b10_01_10_01 // no cell holds 3
	}
	got := make([]byte, len(want))
	head := int64(5)
	var reasons []string
	c := serve(t, &fakeService{push: func(_ context.Context, r *wideberthv1.PushPatchRequest) (*wideberthv1.PushPatchResponse, error) {
		if r.GetPatch().GetBaseVersion() != head {
			return nil, status.Errorf(codes.Aborted, "base %d, head %d", r.GetPatch().GetBaseVersion(), head)
		}
		reasons = append(reasons, r.GetPatch().GetReason())
		b := r.GetPatch().GetEdits()[0].GetPaintOccupancy().GetCells()
		rect := b.GetRect()
		n := int(rect.GetColumns() * rect.GetRows())
		if n > MaxLoadCells {
			t.Errorf("%d cells in one patch, want at most %d", n, MaxLoadCells)
		}
		packed, err := wire.CellsIn(b)
		if err != nil {
			return nil, err
		}
		for i := range n {
			setTwoBit(got, (int(rect.GetRow())-3)*w+i, twoBit(packed, i))
		}
		head++
		return &wideberthv1.PushPatchResponse{Version: versionAt(head)}, nil
	}})
	var done []int
	v, err := c.LoadCells(t.Context(), CellLoad{
		Floor: "hall", Base: 5, Author: "survey", Reason: "yearly survey",
		Rect:     &wideberthv1.CellRect{Column: 0, Row: 3, Columns: w, Rows: h},
		Cells:    want,
		Progress: func(n, total int, _ *wideberthv1.Version) { done = append(done, n*10+total) },
	})
	if err != nil {
		t.Fatal(err)
	}
	if v.GetStamp().GetVersion() != 8 || len(reasons) != 3 || reasons[2] != "yearly survey (part 3 of 3)" {
		t.Errorf("last version %d after %q, want 8 after three parts", v.GetStamp().GetVersion(), reasons)
	}
	if len(done) != 3 || done[2] != 33 {
		t.Errorf("progress %v, want three steps of three", done)
	}
	if !bytes.Equal(got, want) {
		t.Error("the cells that arrived differ from those that were loaded")
	}
}

func TestLoadCellsRefusesBeforeItPushes(t *testing.T) {
	t.Parallel()
	c := serve(t, &fakeService{push: func(context.Context, *wideberthv1.PushPatchRequest) (*wideberthv1.PushPatchResponse, error) {
		t.Error("pushed")
		return nil, status.Error(codes.Internal, "no")
	}})
	for _, tc := range []struct {
		rect  *wideberthv1.CellRect
		bytes int
		want  string
	}{
		{&wideberthv1.CellRect{Columns: 3, Rows: 3}, 2, "want 3"},
		{&wideberthv1.CellRect{Columns: 0, Rows: 3}, 0, "want 1 to"},
		{&wideberthv1.CellRect{Columns: 65_536, Rows: 65_536}, 1 << 30, "at most"},
		{nil, 0, "want 1 to"},
	} {
		_, err := c.LoadCells(t.Context(), CellLoad{Rect: tc.rect, Cells: make([]byte, min(tc.bytes, 16))})
		if err == nil || !strings.Contains(err.Error(), tc.want) {
			t.Errorf("%v: %v, want %q", tc.rect, err, tc.want)
		}
	}
}
