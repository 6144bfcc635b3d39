package server

import (
	"errors"
	"math"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

func checkCreateFloor(r *pb.CreateFloorRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	if r.Settings == nil {
		f.missing(root.at("settings"))
	} else {
		checkSettings(r.Settings, root.at("settings"), f)
	}
	f.text(root.at("author"), r.Author, 1, maxAuthorLength)
	f.requestID(root.at("request_id"), r.RequestId)
}

// checkSettings checks that the lengths can be rounded to whole micrometres; what
// depends on another field is floor.Settings.Validate's business.
func checkSettings(s *pb.FloorSettings, p *field, f *faults) {
	ok := true
	if s.ResolutionM != nil {
		ok = f.number(p.at("resolution_m"), *s.ResolutionM, geom.Metres(floor.MinResolutionUm), geom.Metres(floor.MaxResolutionUm))
	}
	if um := s.GetResolutionM() * geom.UmPerMetre; ok && math.Abs(um-math.Round(um)) > 1e-3 {
		f.add(p.at("resolution_m"), "%v, wanted a whole number of micrometres", s.GetResolutionM())
		ok = false
	}
	ok = f.number(p.at("clearance_cap_m"), s.ClearanceCapM, 0, maxCapM) && ok
	if s.Origin != nil {
		ok = f.coordinate(p.at("origin").at("x_m"), s.Origin.XM) && ok
		ok = f.coordinate(p.at("origin").at("y_m"), s.Origin.YM) && ok
	}
	ok = enum(f, p.at("initial_occupancy"), s.InitialOccupancy, pb.Occupancy_name, true) && ok
	var wrong floor.SettingsError
	if ok && errors.As(wire.SettingsIn(s).Validate(), &wrong) {
		for _, w := range wrong {
			f.add(p.at(w.Field), "%s", w.Problem)
		}
	}
}

func checkGetFloor(r *pb.GetFloorRequest, f *faults) { f.floorID(root.at("floor"), r.Floor) }

func checkListFloors(r *pb.ListFloorsRequest, f *faults) { f.page(r.PageSize, r.PageToken) }

func checkListVersions(r *pb.ListVersionsRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.page(r.PageSize, r.PageToken)
}

func checkGetVersion(r *pb.GetVersionRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.selector(root.at("version"), r.Version)
}

func checkCompareVersions(r *pb.CompareVersionsRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.version(root.at("from_version"), r.FromVersion, 1)
	f.version(root.at("to_version"), r.ToVersion, 0)
}

func checkRestoreVersion(r *pb.RestoreVersionRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.version(root.at("restored_version"), r.RestoredVersion, 1)
	f.version(root.at("base_version"), r.BaseVersion, 1)
	f.text(root.at("author"), r.Author, 1, maxAuthorLength)
	f.text(root.at("reason"), r.Reason, 1, maxReasonLength)
	f.requestID(root.at("request_id"), r.RequestId)
}

func checkReadFloor(r *pb.ReadFloorRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.selector(root.at("version"), r.Version)
	if r.Area != nil {
		f.area(root.at("area"), r.Area)
	}
}

func checkWatchVersions(r *pb.WatchVersionsRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.version(root.at("after_version"), r.AfterVersion, 0)
}

func checkPushPatch(r *pb.PushPatchRequest, f *faults) {
	f.floorID(root.at("floor"), r.Floor)
	f.requestID(root.at("request_id"), r.RequestId)
	p := root.at("patch")
	if r.Patch == nil {
		f.missing(p)
		return
	}
	f.version(p.at("base_version"), r.Patch.BaseVersion, 1)
	f.text(p.at("author"), r.Patch.Author, 1, maxAuthorLength)
	f.text(p.at("reason"), r.Patch.Reason, 1, maxReasonLength)
	if n := len(r.Patch.Edits); n < 1 || n > floor.MaxEdits {
		f.add(p.at("edits"), "%d edits, wanted 1 to %d", n, floor.MaxEdits)
		return
	}
	cells := int64(0)
	for i, e := range r.Patch.Edits {
		checkEdit(e, p.at("edits").item(i), f, &cells)
	}
}

// checkEdit checks one edit. cells counts the cells of all cell blocks so far, so
// that a patch of many small compressed blocks cannot unfold without bound.
func checkEdit(e *pb.Edit, p *field, f *faults, cells *int64) {
	switch a := e.GetAction().(type) {
	case *pb.Edit_PutFeature:
		checkFeature(a.PutFeature.GetFeature(), p.at("put_feature").at("feature"), f)
	case *pb.Edit_RemoveFeature:
		f.featureName(p.at("remove_feature").at("name"), a.RemoveFeature.GetName())
	case *pb.Edit_PaintOccupancy:
		checkPaint(a.PaintOccupancy, p.at("paint_occupancy"), f, cells)
	case *pb.Edit_ClearRect:
		if a.ClearRect.GetArea() == nil {
			f.missing(p.at("clear_rect").at("area"))
		} else {
			f.area(p.at("clear_rect").at("area"), a.ClearRect.Area)
		}
	default:
		f.add(p, "no action set, wanted one of put_feature, remove_feature, paint_occupancy, clear_rect")
	}
}

func checkPaint(o *pb.PaintOccupancy, p *field, f *faults, cells *int64) {
	switch t := o.GetPaint().(type) {
	case *pb.PaintOccupancy_Polygon:
		checkPolygon(t.Polygon.GetPolygon(), p.at("polygon").at("polygon"), f)
		enum(f, p.at("polygon").at("occupancy"), t.Polygon.GetOccupancy(), pb.Occupancy_name, false)
	case *pb.PaintOccupancy_Rect:
		checkCellRect(t.Rect.GetRect(), p.at("rect").at("rect"), f)
		enum(f, p.at("rect").at("occupancy"), t.Rect.GetOccupancy(), pb.Occupancy_name, false)
	case *pb.PaintOccupancy_Cells:
		checkCellBlock(t.Cells, p.at("cells"), f, cells)
	default:
		f.add(p, "nothing set, wanted one of polygon, rect, cells")
	}
}

// checkCellRect faults a rectangle that no floor can hold.
func checkCellRect(r *pb.CellRect, p *field, f *faults) bool {
	if r == nil {
		f.missing(p)
		return false
	}
	span := func(first, count string, lo, n int32) bool {
		ok := true
		if lo < 0 || lo >= floor.MaxSide {
			f.add(p.at(first), "%d, wanted 0 to %d", lo, floor.MaxSide-1)
			ok = false
		}
		if n < 1 || int64(n) > floor.MaxSide {
			f.add(p.at(count), "%d, wanted 1 to %d", n, floor.MaxSide)
			ok = false
		}
		return ok
	}
	ok := span("column", "columns", r.Column, r.Columns)
	ok = span("row", "rows", r.Row, r.Rows) && ok
	if n := int64(r.Columns) * int64(r.Rows); ok && n > floor.MaxCells {
		f.add(p, "%d x %d are %d cells, wanted at most %d", r.Columns, r.Rows, n, floor.MaxCells)
		ok = false
	}
	return ok
}

func checkCellBlock(b *pb.CellBlock, p *field, f *faults, cells *int64) {
	ok := checkCellRect(b.GetRect(), p.at("rect"), f)
	ok = enum(f, p.at("encoding"), b.GetEncoding(), pb.CellEncoding_name, false) && ok
	if !ok {
		return
	}
	n := int64(b.Rect.Columns) * int64(b.Rect.Rows)
	if *cells += n; *cells > floor.MaxCells {
		f.add(p.at("rect"), "brings the patch's cell blocks to %d cells, wanted at most %d", *cells, floor.MaxCells)
		return
	}
	if err := wire.CheckCells(b); err != nil {
		f.add(p.at("cells"), "%v", err)
	}
}

func checkFeature(t *pb.Feature, p *field, f *faults) {
	if t == nil {
		f.missing(p)
		return
	}
	if n := proto.Size(t); n > maxFeatureBytes {
		f.add(p, "%d bytes, wanted at most %d", n, maxFeatureBytes)
		return
	}
	f.featureName(p.at("name"), t.Name)
	f.text(p.at("note"), t.Note, 0, floor.MaxNoteRunes)
	switch k := t.Kind.(type) {
	case *pb.Feature_Solid:
		checkSolid(k.Solid, p.at("solid"), f)
	case *pb.Feature_Zone:
		checkZone(k.Zone, p.at("zone"), f)
	case *pb.Feature_Station:
		f.pose(p.at("station").at("pose"), k.Station.GetPose())
	default:
		f.add(p, "no kind set, wanted one of solid, zone, station")
	}
}

func checkSolid(s *pb.Solid, p *field, f *faults) {
	f.number(p.at("survey_tolerance_m"), s.GetSurveyToleranceM(), 0, 1)
	switch k := s.GetShape().(type) {
	case *pb.Solid_Polygon:
		checkPolygon(k.Polygon, p.at("polygon"), f)
	case *pb.Solid_Polyline:
		at := p.at("polyline")
		if n := len(k.Polyline.GetPoints()); n < 2 || n > floor.MaxRingPoints {
			f.add(at.at("points"), "%d points, wanted 2 to %d", n, floor.MaxRingPoints)
		} else {
			checkPoints(k.Polyline.Points, at.at("points"), f)
		}
		f.number(at.at("width_m"), k.Polyline.GetWidthM(), 0.000001, 100)
	case *pb.Solid_Disc:
		at := p.at("disc")
		if c := k.Disc.GetCenter(); c == nil {
			f.missing(at.at("center"))
		} else {
			f.coordinate(at.at("center").at("x_m"), c.XM)
			f.coordinate(at.at("center").at("y_m"), c.YM)
		}
		f.number(at.at("radius_m"), k.Disc.GetRadiusM(), 0.000001, 1000)
	default:
		f.add(p, "no shape set, wanted one of polygon, polyline, disc")
	}
}

func checkZone(z *pb.Zone, p *field, f *faults) {
	checkPolygon(z.GetArea(), p.at("area"), f)
	switch r := z.GetRule().(type) {
	case *pb.Zone_Closed:
	case *pb.Zone_SpeedLimit:
		f.number(p.at("speed_limit").at("max_speed_mps"), r.SpeedLimit.GetMaxSpeedMps(), floor.MinSpeedMps, floor.MaxSpeedMps)
	case *pb.Zone_OneWay:
		f.heading(p.at("one_way").at("heading_rad"), r.OneWay.GetHeadingRad())
	default:
		f.add(p, "no rule set, wanted one of closed, speed_limit, one_way")
	}
}

func checkPoints(points []*pb.Point, p *field, f *faults) bool {
	ok := true
	for i, q := range points {
		if q == nil {
			f.missing(p.item(i))
			ok = false
			continue
		}
		// The paths are made only for a fault: a ring may have 10,000 points.
		if !(math.Abs(q.XM) <= maxCoordinateM) {
			ok = f.coordinate(p.item(i).at("x_m"), q.XM)
		}
		if !(math.Abs(q.YM) <= maxCoordinateM) {
			ok = f.coordinate(p.item(i).at("y_m"), q.YM)
		}
	}
	return ok
}

// checkPolygon faults what is not a simple polygon once its points are rounded to
// whole micrometres.
func checkPolygon(g *pb.Polygon, p *field, f *faults) {
	if g == nil {
		f.missing(p)
		return
	}
	ring := func(r *pb.Ring, at *field) bool {
		if r == nil {
			f.missing(at)
			return false
		}
		if n := len(r.Points); n < 3 || n > floor.MaxRingPoints {
			f.add(at.at("points"), "%d points, wanted 3 to %d", n, floor.MaxRingPoints)
			return false
		}
		return checkPoints(r.Points, at.at("points"), f)
	}
	ok := ring(g.Outer, p.at("outer"))
	if len(g.Holes) > floor.MaxHoles {
		f.add(p.at("holes"), "%d holes, wanted at most %d", len(g.Holes), floor.MaxHoles)
		return
	}
	for i, h := range g.Holes {
		ok = ring(h, p.at("holes").item(i)) && ok
	}
	if !ok {
		return
	}
	var wrong *geom.PolygonError
	if errors.As(geom.CheckPolygon(wire.RingsIn(g)), &wrong) {
		at := p.at("outer")
		if wrong.Ring > 0 {
			at = p.at("holes").item(wrong.Ring - 1)
		}
		if at = at.at("points"); wrong.Index >= 0 {
			at = at.item(wrong.Index)
		}
		f.add(at, "%s", wrong.Problem)
	}
}
