package client

import (
	"context"
	"io"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"example.com/wideberth/mapstore/floor"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// FloorContent is everything one version of a floor holds. It is complete: every
// cell and every feature arrived, and the counts agreed.
type FloorContent struct {
	Stamp    *wideberthv1.VersionStamp
	Settings *wideberthv1.FloorSettings
	// Cells holds two bits a cell (floor.Free, floor.Occupied, floor.Unknown),
	// lowest bits first, row by row from the lowest row, without padding.
	Cells    []byte
	Features []*wideberthv1.Feature // by name
}

// At is what a cell holds. Outside the floor it is unknown.
func (f *FloorContent) At(column, row int) floor.Occupancy {
	w, h := int(f.Settings.GetColumns()), int(f.Settings.GetRows())
	if column < 0 || row < 0 || column >= w || row >= h {
		return floor.Unknown
	}
	return floor.Occupancy(twoBit(f.Cells, row*w+column))
}

// ReadFloor reads all of one version. A nil selector asks for the head. A stream
// that breaks is read again from its start until ctx ends or Timeouts.Content is
// over; content that does not add up is an error with code DATA_LOSS.
func (c *Client) ReadFloor(ctx context.Context, id string, version *wideberthv1.VersionSelector) (*FloorContent, error) {
	if _, ok := ctx.Deadline(); !ok {
		var cancel context.CancelFunc
		ctx, cancel = context.WithTimeout(ctx, c.cfg.timeouts.Content)
		defer cancel()
	}
	var content *FloorContent
	err := c.again(ctx, "ReadFloor", func() error {
		ctx, cancel := context.WithCancel(ctx) // frees the stream when it is left early
		defer cancel()
		stream, err := c.floors.ReadFloor(ctx, &wideberthv1.ReadFloorRequest{Floor: id, Version: version})
		if err != nil {
			return err
		}
		content, err = assemble(stream.Recv)
		return err
	})
	if err != nil {
		return nil, err
	}
	return content, nil
}

// assemble puts a ReadFloor stream together. next gives io.EOF at its end.
func assemble(next func() (*wideberthv1.ReadFloorResponse, error)) (*FloorContent, error) {
	var a assembly
	for {
		msg, err := next()
		if err == io.EOF {
			return nil, lost("the stream ended without its end mark")
		}
		if err != nil {
			return nil, err
		}
		if end := msg.GetEnd(); end != nil {
			return a.finish(end)
		}
		if err := a.add(msg); err != nil {
			return nil, err
		}
	}
}

func lost(format string, args ...any) error {
	return status.Errorf(codes.DataLoss, "client: floor content: "+format, args...)
}

// unset marks cells that have not arrived: the two-bit value that means nothing.
const unset = 3

type assembly struct {
	content  *FloorContent
	received int64
}

func (a *assembly) add(msg *wideberthv1.ReadFloorResponse) error {
	if h := msg.GetHeader(); h != nil {
		return a.start(h)
	}
	if a.content == nil {
		return lost("the first message is not the header")
	}
	if b := msg.GetCells(); b != nil {
		return a.block(b)
	}
	if f := msg.GetFeatures(); f != nil {
		a.content.Features = append(a.content.Features, f.GetFeatures()...)
	}
	return nil // a part that this client does not know of adds nothing it would miss
}

func (a *assembly) start(h *wideberthv1.ReadFloorHeader) error {
	if a.content != nil {
		return lost("a second header")
	}
	w, n := int64(h.GetSettings().GetColumns()), int64(h.GetSettings().GetRows())
	if w < 1 || w > floor.MaxSide || n < 1 || n > floor.MaxSide || w*n > floor.MaxCells {
		return lost("header: %d x %d cells, want 1 to %d a side and at most %d in all", w, n, floor.MaxSide, floor.MaxCells)
	}
	cells := make([]byte, wire.CellBytes(w*n))
	for i := range cells {
		cells[i] = 0xff
	}
	a.content = &FloorContent{Stamp: h.GetStamp(), Settings: h.GetSettings(), Cells: cells}
	return nil
}

// block copies a block's cells to their place.
func (a *assembly) block(b *wideberthv1.CellBlock) error {
	r := b.GetRect()
	x, y, w, h := int64(r.GetColumn()), int64(r.GetRow()), int64(r.GetColumns()), int64(r.GetRows())
	cols, rows := int64(a.content.Settings.GetColumns()), int64(a.content.Settings.GetRows())
	if x < 0 || y < 0 || w < 1 || h < 1 || x+w > cols || y+h > rows {
		return lost("cells: rectangle %d,%d %dx%d is not within %dx%d cells", x, y, w, h, cols, rows)
	}
	packed, err := wire.CellsIn(b)
	if err != nil {
		return lost("cells: %v", err)
	}
	for j := range h {
		for i := range w {
			setTwoBit(a.content.Cells, int((y+j)*cols+x+i), twoBit(packed, int(j*w+i)))
		}
	}
	a.received += w * h
	return nil
}

// finish checks the end mark and that no cell is missing.
func (a *assembly) finish(end *wideberthv1.ReadFloorEnd) (*FloorContent, error) {
	c := a.content
	if c == nil {
		return nil, lost("the end mark came first")
	}
	n := int(c.Settings.GetColumns()) * int(c.Settings.GetRows())
	if end.GetCellCount() != int64(n) || a.received != int64(n) {
		return nil, lost("%d cells arrived, %d were sent, the floor has %d", a.received, end.GetCellCount(), n)
	}
	for i := range n {
		if twoBit(c.Cells, i) == unset {
			return nil, lost("no cell arrived for column %d, row %d, another came twice", i%int(c.Settings.GetColumns()), i/int(c.Settings.GetColumns()))
		}
	}
	if tail := n % 4; tail != 0 { // spare bits of the last byte are zero
		c.Cells[len(c.Cells)-1] &= 1<<(2*tail) - 1
	}
	if int64(len(c.Features)) != end.GetFeatureCount() {
		return nil, lost("%d features arrived, %d were sent", len(c.Features), end.GetFeatureCount())
	}
	return c, nil
}

func twoBit(cells []byte, i int) byte { return cells[i>>2] >> (2 * (i & 3)) & 3 }

func setTwoBit(cells []byte, i int, v byte) {
	shift := 2 * (i & 3)
	cells[i>>2] = cells[i>>2]&^(3<<shift) | v<<shift
}
