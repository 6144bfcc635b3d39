package client

import (
	"context"
	"fmt"

	"example.com/wideberth/mapstore/floor"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// MaxLoadCells is how many cells LoadCells puts into one patch: 1 MiB at two bits
// a cell before it is deflated, well below the service's bound on a message.
const MaxLoadCells = 4 << 20

// CellLoad is a survey to be painted onto a floor.
type CellLoad struct {
	Floor  string
	Base   int64  // the head its author looked at
	Author string // who
	Reason string // why; each patch says which part of how many it is
	Rect   *wideberthv1.CellRect
	// Cells holds Rect's cells as CELL_ENCODING_TWO_BIT does.
	Cells []byte
	// Progress, if set, is called after every patch.
	Progress func(done, total int, v *wideberthv1.Version)
}

// LoadCells paints a rectangle of any size, in patches of at most MaxLoadCells
// cells: bands of whole rows from the lowest up. Each patch is a version of its
// own, based on the one before, so others pushing meanwhile stop it with ABORTED.
// It gives the last version it made. When it fails, the versions before remain
// and RestoreVersion of Base undoes them.
func (c *Client) LoadCells(ctx context.Context, l CellLoad) (*wideberthv1.Version, error) {
	w, h := int(l.Rect.GetColumns()), int(l.Rect.GetRows())
	if w < 1 || w > floor.MaxSide || h < 1 || h > floor.MaxSide || w*h > floor.MaxCells {
		return nil, fmt.Errorf("client: rect is %d x %d cells, want 1 to %d a side and at most %d in all", w, h, floor.MaxSide, floor.MaxCells)
	}
	if want := int(wire.CellBytes(int64(w) * int64(h))); len(l.Cells) != want {
		return nil, fmt.Errorf("client: cells has %d bytes for %d x %d cells, want %d", len(l.Cells), w, h, want)
	}
	band := min(h, MaxLoadCells/w)
	total := (h + band - 1) / band
	var version *wideberthv1.Version
	base := l.Base
	for part := range total {
		y := part * band
		n := min(band, h-y)
		x0, y0 := int(l.Rect.GetColumn()), int(l.Rect.GetRow())+y
		block, err := wire.BlockOut(floor.CellRect{X0: x0, X1: x0 + w, Y0: y0, Y1: y0 + n}, slice(l.Cells, y*w, n*w))
		if err != nil {
			return version, err
		}
		reason := l.Reason
		if total > 1 {
			reason = fmt.Sprintf("%s (part %d of %d)", reason, part+1, total)
		}
		resp, err := c.PushPatch(ctx, &wideberthv1.PushPatchRequest{
			Floor: l.Floor,
			Patch: &wideberthv1.Patch{
				BaseVersion: base, Author: l.Author, Reason: reason,
				Edits: []*wideberthv1.Edit{{Action: &wideberthv1.Edit_PaintOccupancy{
					PaintOccupancy: &wideberthv1.PaintOccupancy{Paint: &wideberthv1.PaintOccupancy_Cells{Cells: block}},
				}}},
			},
		})
		if err != nil {
			return version, fmt.Errorf("client: part %d of %d: %w", part+1, total, err)
		}
		version = resp.GetVersion()
		base = version.GetStamp().GetVersion()
		if l.Progress != nil {
			l.Progress(part+1, total, version)
		}
	}
	return version, nil
}

// slice takes n cells out of a packed run, from cell i.
func slice(cells []byte, i, n int) []byte {
	out := make([]byte, (n+3)/4)
	for k := range n {
		setTwoBit(out, k, twoBit(cells, i+k))
	}
	return out
}
