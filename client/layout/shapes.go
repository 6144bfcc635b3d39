package layout

import (
	"math"

	"example.com/wideberth/mapstore/geom"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// The contract's bounds on a polygon.
const (
	maxRingPoints = 10_000
	maxHoles      = 100
)

func (b *builder) solid(it *itemSpec, kind string, path []any, pl place) *wideberthv1.Solid {
	s := &wideberthv1.Solid{}
	if it.ToleranceM != nil {
		if !b.number(at(path, "tolerance_m"), *it.ToleranceM, 0, 1) {
			return nil
		}
		s.SurveyToleranceM = *it.ToleranceM
	}
	switch kind {
	case "wall":
		pts := b.chain(at(path, "points"), it.Points, pl, 2)
		if pts == nil || !b.number(at(path, "width_m"), *it.WidthM, 0.000001, 100) {
			return nil
		}
		s.Shape = &wideberthv1.Solid_Polyline{Polyline: &wideberthv1.Polyline{Points: pts, WidthM: *it.WidthM}}
	case "column":
		pt := b.point(at(path, "at"), it.At, pl)
		if pt == nil || !b.number(at(path, "radius_m"), *it.RadiusM, 0.000001, 1000) {
			return nil
		}
		s.Shape = &wideberthv1.Solid_Disc{Disc: &wideberthv1.Disc{Center: pt, RadiusM: *it.RadiusM}}
	default:
		pg := b.outline(it, path, pl)
		if pg == nil {
			return nil
		}
		s.Shape = &wideberthv1.Solid_Polygon{Polygon: pg}
	}
	return s
}

func (b *builder) zone(it *itemSpec, kind string, path []any, pl place) (*wideberthv1.Zone, string) {
	pg := b.outline(it, path, pl)
	if pg == nil {
		return nil, ""
	}
	z := &wideberthv1.Zone{Area: pg}
	switch kind {
	case "closed":
		z.Rule = &wideberthv1.Zone_Closed{Closed: &wideberthv1.ClosedRule{}}
		return z, *it.Closed
	case "speed_limit":
		if !b.number(at(path, "max_speed_mps"), *it.SpeedMps, 0.001, 20) {
			return nil, ""
		}
		z.Rule = &wideberthv1.Zone_SpeedLimit{SpeedLimit: &wideberthv1.SpeedLimitRule{MaxSpeedMps: *it.SpeedMps}}
		return z, *it.SpeedLimit
	default:
		h, ok := b.heading(at(path, "heading_deg"), *it.HeadingDeg)
		if !ok {
			return nil, ""
		}
		z.Rule = &wideberthv1.Zone_OneWay{OneWay: &wideberthv1.OneWayRule{HeadingRad: h}}
		return z, *it.OneWay
	}
}

func (b *builder) cells(it *itemSpec, path []any, pl place) *wideberthv1.Edit {
	occ, ok := occupancies[*it.Cells]
	if !ok {
		b.add(at(path, "cells"), "%q; wanted free, occupied or unknown", *it.Cells)
		return nil
	}
	paint := &wideberthv1.PaintOccupancy{}
	if it.Rect != nil {
		a := b.area(at(path, "rect"), it.Rect, pl)
		if a == nil {
			return nil
		}
		r, ok := b.grid.cells(a)
		if !ok {
			b.add(at(path, "rect"), "%s sets no cell, or cells off the floor of %d by %d", list(it.Rect), b.grid.columns, b.grid.rows)
			return nil
		}
		paint.Paint = &wideberthv1.PaintOccupancy_Rect{Rect: &wideberthv1.PaintRect{Rect: r, Occupancy: occ}}
	} else {
		pg := b.outline(it, path, pl)
		if pg == nil {
			return nil
		}
		paint.Paint = &wideberthv1.PaintOccupancy_Polygon{Polygon: &wideberthv1.PaintPolygon{Polygon: pg, Occupancy: occ}}
	}
	return &wideberthv1.Edit{Action: &wideberthv1.Edit_PaintOccupancy{PaintOccupancy: paint}}
}

// cells is which cells' open squares meet an area; false when there are none or
// they are not all on the floor.
func (g grid) cells(a *wideberthv1.Area) (*wideberthv1.CellRect, bool) {
	lo := func(m float64, o int64) int64 { return floorDiv(int64(geom.FromMetres(m))-o, g.res) }
	hi := func(m float64, o int64) int64 { return -floorDiv(o-int64(geom.FromMetres(m)), g.res) }
	c0, c1 := lo(a.MinXM, g.x0), hi(a.MaxXM, g.x0)
	r0, r1 := lo(a.MinYM, g.y0), hi(a.MaxYM, g.y0)
	if c0 < 0 || r0 < 0 || c1 > g.columns || r1 > g.rows || c1 <= c0 || r1 <= r0 {
		return nil, false
	}
	return &wideberthv1.CellRect{Column: int32(c0), Row: int32(r0), Columns: int32(c1 - c0), Rows: int32(r1 - r0)}, true
}

func floorDiv(a, b int64) int64 {
	q := a / b
	if a%b != 0 && (a < 0) != (b < 0) {
		q--
	}
	return q
}

func (b *builder) onFloor(p *wideberthv1.Point) bool {
	x, y := int64(geom.FromMetres(p.XM))-b.grid.x0, int64(geom.FromMetres(p.YM))-b.grid.y0
	return x >= 0 && y >= 0 && x <= b.grid.columns*b.grid.res && y <= b.grid.rows*b.grid.res
}

// point is a place of one copy, rounded to whole micrometres so that 0.65 added
// forty times is 26.
func (b *builder) point(path []any, p []float64, pl place) *wideberthv1.Point {
	x, y, ok := b.pair(path, p)
	if !ok {
		return nil
	}
	x, y = whole(x+pl.dx), whole(y+pl.dy)
	if !finite(x) || !finite(y) {
		b.add(path, "repeated as far as (%v, %v); wanted within %d m", x, y, maxCoordM)
		return nil
	}
	return &wideberthv1.Point{XM: x, YM: y}
}

func whole(m float64) float64 { return geom.Metres(geom.FromMetres(m)) + 0 } // + 0: never -0

func (b *builder) chain(path []any, pts [][]float64, pl place, least int) []*wideberthv1.Point {
	if len(pts) < least || len(pts) > maxRingPoints {
		b.add(path, "%d points; wanted %d to %d", len(pts), least, maxRingPoints)
		return nil
	}
	out := make([]*wideberthv1.Point, len(pts))
	for i, p := range pts {
		if out[i] = b.point(at(path, i), p, pl); out[i] == nil {
			return nil
		}
	}
	return out
}

func (b *builder) area(path []any, r []float64, pl place) *wideberthv1.Area {
	if len(r) != 4 {
		b.add(path, "%s; wanted [min x, min y, max x, max y] in metres", list(r))
		return nil
	}
	lo, hi := b.point(path, r[:2], pl), b.point(path, r[2:], pl)
	if lo == nil || hi == nil {
		return nil
	}
	if lo.XM >= hi.XM || lo.YM >= hi.YM {
		b.add(path, "%s; wanted [min x, min y, max x, max y], max above min", list(r))
		return nil
	}
	return &wideberthv1.Area{MinXM: lo.XM, MinYM: lo.YM, MaxXM: hi.XM, MaxYM: hi.YM}
}

// outline is an item's rect or polygon.
func (b *builder) outline(it *itemSpec, path []any, pl place) *wideberthv1.Polygon {
	if it.Rect != nil {
		a := b.area(at(path, "rect"), it.Rect, pl)
		if a == nil {
			return nil
		}
		return &wideberthv1.Polygon{Outer: &wideberthv1.Ring{Points: []*wideberthv1.Point{
			{XM: a.MinXM, YM: a.MinYM}, {XM: a.MaxXM, YM: a.MinYM},
			{XM: a.MaxXM, YM: a.MaxYM}, {XM: a.MinXM, YM: a.MaxYM},
		}}}
	}
	outer := b.chain(at(path, "polygon"), it.Polygon, pl, 3)
	if outer == nil {
		return nil
	}
	pg := &wideberthv1.Polygon{Outer: &wideberthv1.Ring{Points: outer}}
	if len(it.Holes) > maxHoles {
		b.add(at(path, "holes"), "%d holes; at most %d", len(it.Holes), maxHoles)
		return nil
	}
	for i, h := range it.Holes {
		pts := b.chain(at(path, "holes", i), h, pl, 3)
		if pts == nil {
			return nil
		}
		pg.Holes = append(pg.Holes, &wideberthv1.Ring{Points: pts})
	}
	return pg
}

// heading turns degrees into radians within (-pi, pi].
func (b *builder) heading(path []any, deg float64) (float64, bool) {
	if !b.number(path, deg, -360, 360) {
		return 0, false
	}
	for deg > 180 {
		deg -= 360
	}
	for deg <= -180 {
		deg += 360
	}
	return deg*math.Pi/180 + 0, true // + 0: never -0
}
