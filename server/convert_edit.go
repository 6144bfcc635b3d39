package server

import (
	"example.com/wideberth/mapstore/floor"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// editsIn turns a checked patch into the store's edits, faulting what only the
// floor's settings can tell.
func editsIn(edits []*pb.Edit, set floor.Settings, p *field, f *faults) []floor.Edit {
	out := make([]floor.Edit, 0, len(edits))
	for i, e := range edits {
		out = append(out, editIn(e, set, p.item(i), f))
	}
	return out
}

func editIn(e *pb.Edit, set floor.Settings, p *field, f *faults) floor.Edit {
	switch a := e.Action.(type) {
	case *pb.Edit_PutFeature:
		return floor.Edit{Kind: floor.PutFeature, Feature: featureIn(a.PutFeature.GetFeature())}
	case *pb.Edit_RemoveFeature:
		return floor.Edit{Kind: floor.RemoveFeature, Name: a.RemoveFeature.GetName()}
	case *pb.Edit_ClearRect:
		r := set.CellRectOf(areaIn(a.ClearRect.GetArea()))
		if r.IsEmpty() {
			b := areaOut(set.Bounds())
			f.add(p.at("clear_rect").at("area"), "meets no cell, wanted an area that meets the floor's bounds, x %v to %v and y %v to %v",
				b.MinXM, b.MaxXM, b.MinYM, b.MaxYM)
		}
		return floor.Edit{Kind: floor.ClearRect, Rect: r}
	case *pb.Edit_PaintOccupancy:
		at := p.at("paint_occupancy")
		switch t := a.PaintOccupancy.GetPaint().(type) {
		case *pb.PaintOccupancy_Polygon:
			return floor.Edit{Kind: floor.PaintPolygon, Shape: polygonIn(t.Polygon.GetPolygon()), Fill: occupancyIn(t.Polygon.GetOccupancy())}
		case *pb.PaintOccupancy_Rect:
			rectOnFloor(t.Rect.GetRect(), set, at.at("rect").at("rect"), f)
			return floor.Edit{Kind: floor.PaintRect, Rect: cellRectIn(t.Rect.GetRect()), Fill: occupancyIn(t.Rect.GetOccupancy())}
		case *pb.PaintOccupancy_Cells:
			out := floor.Edit{Kind: floor.PaintCells, Rect: cellRectIn(t.Cells.GetRect())}
			if rectOnFloor(t.Cells.GetRect(), set, at.at("cells").at("rect"), f) {
				// Only unfolded once the floor is known to hold it.
				n := int64(t.Cells.Rect.Columns) * int64(t.Cells.Rect.Rows)
				out.Cells = make([]byte, 0, cellBytes(n))
				if problem := scanCells(t.Cells, n, &out.Cells); problem != "" {
					f.add(at.at("cells").at("cells"), "%s", problem)
				}
			}
			return out
		}
	}
	return floor.Edit{}
}

// rectOnFloor faults a rectangle of cells that leaves the floor.
func rectOnFloor(r *pb.CellRect, set floor.Settings, p *field, f *faults) bool {
	span := func(first, count string, lo, n int32, side int) bool {
		if int(lo)+int(n) <= side {
			return true
		}
		f.add(p.at(count), "%d + %d (%s) is %d, wanted at most the floor's %d %s", lo, n, first, int(lo)+int(n), side, count)
		return false
	}
	ok := span("column", "columns", r.Column, r.Columns, set.Columns)
	return span("row", "rows", r.Row, r.Rows, set.Rows) && ok
}

func cellRectIn(r *pb.CellRect) floor.CellRect {
	x, y := int(r.GetColumn()), int(r.GetRow())
	return floor.CellRect{X0: x, Y0: y, X1: x + int(r.GetColumns()), Y1: y + int(r.GetRows())}
}

func cellRectOut(r floor.CellRect) *pb.CellRect {
	return &pb.CellRect{Column: int32(r.X0), Row: int32(r.Y0), Columns: int32(r.X1 - r.X0), Rows: int32(r.Y1 - r.Y0)}
}

// editOut is an edit as it came, but for its cells, which go back in whichever
// encoding is shorter.
func editOut(e floor.Edit, set floor.Settings) (*pb.Edit, error) {
	paint := func(o *pb.PaintOccupancy) *pb.Edit {
		return &pb.Edit{Action: &pb.Edit_PaintOccupancy{PaintOccupancy: o}}
	}
	switch e.Kind {
	case floor.PutFeature:
		return &pb.Edit{Action: &pb.Edit_PutFeature{PutFeature: &pb.PutFeature{Feature: featureOut(e.Feature)}}}, nil
	case floor.RemoveFeature:
		return &pb.Edit{Action: &pb.Edit_RemoveFeature{RemoveFeature: &pb.RemoveFeature{Name: e.Name}}}, nil
	case floor.ClearRect:
		return &pb.Edit{Action: &pb.Edit_ClearRect{ClearRect: &pb.ClearRect{Area: areaOut(set.CellBounds(e.Rect))}}}, nil
	case floor.PaintRect:
		return paint(&pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Rect{
			Rect: &pb.PaintRect{Rect: cellRectOut(e.Rect), Occupancy: occupancyOut(e.Fill)}}}), nil
	case floor.PaintPolygon:
		return paint(&pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Polygon{
			Polygon: &pb.PaintPolygon{Polygon: polygonOut(e.Shape), Occupancy: occupancyOut(e.Fill)}}}), nil
	default:
		block, err := blockOut(e.Rect, e.Cells)
		return paint(&pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Cells{Cells: block}}), err
	}
}

// blockOut is a block of cells in whichever encoding is shorter.
func blockOut(r floor.CellRect, cells []byte) (*pb.CellBlock, error) {
	packed, err := deflateCells(cells)
	if err != nil {
		return nil, err
	}
	if len(packed) < len(cells) {
		return &pb.CellBlock{Rect: cellRectOut(r), Encoding: pb.CellEncoding_CELL_ENCODING_TWO_BIT_DEFLATE, Cells: packed}, nil
	}
	return &pb.CellBlock{Rect: cellRectOut(r), Encoding: pb.CellEncoding_CELL_ENCODING_TWO_BIT, Cells: cells}, nil
}
