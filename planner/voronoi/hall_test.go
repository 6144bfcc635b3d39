package voronoi

import (
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/testdata"
)

// auctionHall is the demonstration floor.
func auctionHall(tb testing.TB) *floor.Map {
	tb.Helper()
	l, err := testdata.Hall()
	if err != nil {
		tb.Fatal(err)
	}
	um := func(m float64) float64 { return geom.FromMetres(m) }
	s := floor.Settings{
		ResolutionUm: int64(um(l.Settings.GetResolutionM())), Columns: int(l.Settings.GetColumns()), Rows: int(l.Settings.GetRows()),
		CapUm: 5_000_000,
	}
	m, err := floor.New(s)
	if err != nil {
		tb.Fatal(err)
	}
	ring := func(ps []*wideberthv1.Point) (out []geom.Point) {
		for _, p := range ps {
			out = append(out, geom.Point{X: um(p.GetXM()), Y: um(p.GetYM())})
		}
		return out
	}
	var edits []floor.Edit
	for _, e := range l.Edits {
		switch {
		case e.GetClearRect() != nil:
			a := e.GetClearRect().GetArea()
			edits = append(edits, floor.Edit{Kind: floor.ClearRect, Rect: s.CellRectOf(geom.Rect{Min: geom.Point{X: um(a.MinXM), Y: um(a.MinYM)}, Max: geom.Point{X: um(a.MaxXM), Y: um(a.MaxYM)}})})
		case e.GetPaintOccupancy() != nil:
			r := e.GetPaintOccupancy().GetRect()
			c := r.GetRect()
			edits = append(edits, paint(int(c.Column), int(c.Row), int(c.Column+c.Columns), int(c.Row+c.Rows), floor.Occupancy(int(r.GetOccupancy())-1)))
		case e.GetPutFeature() != nil:
			f := e.GetPutFeature().GetFeature()
			v := f.GetSolid()
			tol := int64(um(v.GetSurveyToleranceM()))
			var shape floor.Shape
			switch {
			case v.GetDisc() != nil:
				shape = floor.NewDisc(ring([]*wideberthv1.Point{v.GetDisc().GetCenter()})[0], int64(um(v.GetDisc().GetRadiusM())), tol)
			case v.GetPolyline() != nil:
				shape = floor.NewPolyline(ring(v.GetPolyline().GetPoints()), int64(um(v.GetPolyline().GetWidthM())), tol)
			case v.GetPolygon() != nil:
				shape = floor.NewPolygon([][]geom.Point{ring(v.GetPolygon().GetOuter().GetPoints())}, tol)
			default:
				continue
			}
			ft := solid(f.GetName(), shape)
			ft.ToleranceUm = tol
			switch {
			case v.GetDisc() != nil:
				ft.RadiusUm = int64(um(v.GetDisc().GetRadiusM()))
			case v.GetPolyline() != nil:
				ft.WidthUm = int64(um(v.GetPolyline().GetWidthM()))
			}
			edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: ft})
		}
	}
	if m, err = m.Apply(edits); err != nil {
		tb.Fatal(err)
	}
	return m
}
