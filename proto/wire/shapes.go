package wire

import (
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// XY is a message with a place in it: a Point, a Pose, a RoutePoint.
type XY interface {
	GetXM() float64
	GetYM() float64
}

// PointIn is where a message says.
func PointIn(p XY) geom.Point {
	return geom.Point{X: geom.FromMetres(p.GetXM()), Y: geom.FromMetres(p.GetYM())}
}

// PointOut is a place as a message.
func PointOut(p geom.Point) *pb.Point {
	return &pb.Point{XM: geom.Metres(p.X), YM: geom.Metres(p.Y)}
}

// PointsIn are the places of a chain.
func PointsIn(points []*pb.Point) []geom.Point {
	out := make([]geom.Point, len(points))
	for i, p := range points {
		out[i] = PointIn(p)
	}
	return out
}

// PointsOut is a chain of places as messages.
func PointsOut(points []geom.Point) []*pb.Point {
	out := make([]*pb.Point, len(points))
	for i, p := range points {
		out[i] = PointOut(p)
	}
	return out
}

// RingsIn are a polygon's rings, the outer one first.
func RingsIn(g *pb.Polygon) [][]geom.Point {
	rings := make([][]geom.Point, 0, 1+len(g.GetHoles()))
	rings = append(rings, PointsIn(g.GetOuter().GetPoints()))
	for _, h := range g.GetHoles() {
		rings = append(rings, PointsIn(h.GetPoints()))
	}
	return rings
}

// PolygonOut is a polygon of those rings, the outer one first.
func PolygonOut(rings [][]geom.Point) *pb.Polygon {
	out := &pb.Polygon{}
	for i, c := range rings {
		r := &pb.Ring{Points: PointsOut(c)}
		if i == 0 {
			out.Outer = r
		} else {
			out.Holes = append(out.Holes, r)
		}
	}
	return out
}

// AreaIn is a rectangle; what is turned round in the message is empty.
func AreaIn(a *pb.Area) geom.Rect {
	return geom.Rect{
		Min: geom.Point{X: geom.FromMetres(a.GetMinXM()), Y: geom.FromMetres(a.GetMinYM())},
		Max: geom.Point{X: geom.FromMetres(a.GetMaxXM()), Y: geom.FromMetres(a.GetMaxYM())},
	}
}

// AreaOut is a rectangle as a message, nil for an empty one.
func AreaOut(r geom.Rect) *pb.Area {
	if r.IsEmpty() {
		return nil
	}
	return &pb.Area{
		MinXM: geom.Metres(r.Min.X), MinYM: geom.Metres(r.Min.Y),
		MaxXM: geom.Metres(r.Max.X), MaxYM: geom.Metres(r.Max.Y),
	}
}

// CellRectIn is a rectangle of cells; without columns or rows it is empty.
func CellRectIn(r *pb.CellRect) floor.CellRect {
	x, y := int(r.GetColumn()), int(r.GetRow())
	return floor.CellRect{X0: x, Y0: y, X1: x + int(r.GetColumns()), Y1: y + int(r.GetRows())}
}

// CellRectOut is a rectangle of cells as a message.
func CellRectOut(r floor.CellRect) *pb.CellRect {
	return &pb.CellRect{Column: int32(r.X0), Row: int32(r.Y0), Columns: int32(r.X1 - r.X0), Rows: int32(r.Y1 - r.Y0)}
}
