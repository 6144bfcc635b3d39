package server

import (
	"example.com/wideberth/mapstore/floor"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
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
		t, err := wire.FeatureIn(a.PutFeature.GetFeature())
		if err != nil {
			f.add(p.at("put_feature").at("feature"), "%v, wanted one of the contract's", err)
		}
		return floor.Edit{Kind: floor.PutFeature, Feature: t}
	case *pb.Edit_RemoveFeature:
		return floor.Edit{Kind: floor.RemoveFeature, Name: a.RemoveFeature.GetName()}
	case *pb.Edit_ClearRect:
		r := set.CellRectOf(wire.AreaIn(a.ClearRect.GetArea()))
		if r.IsEmpty() {
			b := wire.AreaOut(set.Bounds())
			f.add(p.at("clear_rect").at("area"), "meets no cell, wanted an area that meets the floor's bounds, x %v to %v and y %v to %v",
				b.MinXM, b.MaxXM, b.MinYM, b.MaxYM)
		}
		return floor.Edit{Kind: floor.ClearRect, Rect: r}
	case *pb.Edit_PaintOccupancy:
		at := p.at("paint_occupancy")
		switch t := a.PaintOccupancy.GetPaint().(type) {
		case *pb.PaintOccupancy_Polygon:
			return floor.Edit{Kind: floor.PaintPolygon, Shape: floor.NewPolygon(wire.RingsIn(t.Polygon.GetPolygon()), 0), Fill: wire.OccupancyIn(t.Polygon.GetOccupancy())}
		case *pb.PaintOccupancy_Rect:
			rectOnFloor(t.Rect.GetRect(), set, at.at("rect").at("rect"), f)
			return floor.Edit{Kind: floor.PaintRect, Rect: wire.CellRectIn(t.Rect.GetRect()), Fill: wire.OccupancyIn(t.Rect.GetOccupancy())}
		case *pb.PaintOccupancy_Cells:
			out := floor.Edit{Kind: floor.PaintCells, Rect: wire.CellRectIn(t.Cells.GetRect())}
			if rectOnFloor(t.Cells.GetRect(), set, at.at("cells").at("rect"), f) {
				// Only unfolded once the floor is known to hold it.
				var err error
				if out.Cells, err = wire.CellsIn(t.Cells); err != nil {
					f.add(at.at("cells").at("cells"), "%v", err)
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

// editOut is an edit as it came, but for its cells, which go back in whichever
// encoding is shorter.
func editOut(e floor.Edit, set floor.Settings) (*pb.Edit, error) {
	paint := func(o *pb.PaintOccupancy) *pb.Edit {
		return &pb.Edit{Action: &pb.Edit_PaintOccupancy{PaintOccupancy: o}}
	}
	switch e.Kind {
	case floor.PutFeature:
		return &pb.Edit{Action: &pb.Edit_PutFeature{PutFeature: &pb.PutFeature{Feature: wire.FeatureOut(e.Feature)}}}, nil
	case floor.RemoveFeature:
		return &pb.Edit{Action: &pb.Edit_RemoveFeature{RemoveFeature: &pb.RemoveFeature{Name: e.Name}}}, nil
	case floor.ClearRect:
		return &pb.Edit{Action: &pb.Edit_ClearRect{ClearRect: &pb.ClearRect{Area: wire.AreaOut(set.CellBounds(e.Rect))}}}, nil
	case floor.PaintRect:
		return paint(&pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Rect{
			Rect: &pb.PaintRect{Rect: wire.CellRectOut(e.Rect), Occupancy: wire.OccupancyOut(e.Fill)}}}), nil
	case floor.PaintPolygon:
		return paint(&pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Polygon{
			Polygon: &pb.PaintPolygon{Polygon: wire.PolygonOut(e.Shape.Chains), Occupancy: wire.OccupancyOut(e.Fill)}}}), nil
	default:
		block, err := wire.BlockOut(e.Rect, e.Cells)
		return paint(&pb.PaintOccupancy{Paint: &pb.PaintOccupancy_Cells{Cells: block}}), err
	}
}
