package client

import (
	"encoding/hex"
	"errors"
	"fmt"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Map makes the content into the map that the service itself keeps, so that a tool
// can measure clearances and plan on it without the network. It fails when
// the map's digest is not the stamp's: then it is not the same map, and nothing
// worked out on it holds for the service's version.
func (f *FloorContent) Map() (*floor.Map, error) {
	s := f.Settings
	set := floor.Settings{
		ResolutionUm: um(s.GetResolutionM()),
		Columns:      int(s.GetColumns()), Rows: int(s.GetRows()),
		OriginX: um(s.GetOrigin().GetXM()), OriginY: um(s.GetOrigin().GetYM()),
		CapUm:         geom.RadiusFromMetres(s.GetClearanceCapM()),
		UnknownIsFree: s.GetUnknownIsFree(),
		OpenBorder:    s.GetOpenBorder(),
		Initial:       initial(s.GetInitialOccupancy()),
	}
	m, err := floor.New(set)
	if err != nil {
		return nil, fmt.Errorf("client: floor content: settings: %w", err)
	}
	edits := make([]floor.Edit, 0, len(f.Features)+1)
	edits = append(edits, floor.Edit{Kind: floor.PaintCells, Rect: set.AllCells(), Cells: f.Cells})
	for i, feature := range f.Features {
		t, err := mirrorFeature(feature)
		if err != nil {
			return nil, fmt.Errorf("client: floor content: features[%d] %q: %w", i, feature.GetName(), err)
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: t})
	}
	if m, err = m.Apply(edits); err != nil {
		return nil, fmt.Errorf("client: floor content: %w", err)
	}
	digest := m.Digest()
	if got := hex.EncodeToString(digest[:]); got != f.Stamp.GetDigest() {
		return nil, fmt.Errorf("client: floor content: digest is %s, the service says %q for version %d", got, f.Stamp.GetDigest(), f.Stamp.GetVersion())
	}
	return m, nil
}

func initial(o wideberthv1.Occupancy) floor.Occupancy {
	switch o {
	case wideberthv1.Occupancy_OCCUPANCY_FREE:
		return floor.Free
	case wideberthv1.Occupancy_OCCUPANCY_OCCUPIED:
		return floor.Occupied
	}
	return floor.Unknown
}

func um(m float64) int64 { return int64(geom.FromMetres(m)) }

func mirrorPoint(p *wideberthv1.Point) geom.Point {
	return geom.Point{X: geom.FromMetres(p.GetXM()), Y: geom.FromMetres(p.GetYM())}
}

func mirrorPoints(points []*wideberthv1.Point) []geom.Point {
	out := make([]geom.Point, len(points))
	for i, p := range points {
		out[i] = mirrorPoint(p)
	}
	return out
}

func mirrorRings(p *wideberthv1.Polygon) [][]geom.Point {
	chains := [][]geom.Point{mirrorPoints(p.GetOuter().GetPoints())}
	for _, h := range p.GetHoles() {
		chains = append(chains, mirrorPoints(h.GetPoints()))
	}
	return chains
}

// mirrorFeature reads a feature; floor.Map.Apply then checks it.
func mirrorFeature(f *wideberthv1.Feature) (*floor.Feature, error) {
	out := &floor.Feature{Name: f.GetName(), Note: f.GetNote()}
	switch k := f.GetKind().(type) {
	case *wideberthv1.Feature_Solid:
		out.Kind = floor.Solid
		out.ToleranceUm = geom.RadiusFromMetres(k.Solid.GetSurveyToleranceM())
		switch s := k.Solid.GetShape().(type) {
		case *wideberthv1.Solid_Polygon:
			out.Shape = floor.NewPolygon(mirrorRings(s.Polygon), out.ToleranceUm)
		case *wideberthv1.Solid_Polyline:
			out.WidthUm = geom.RadiusFromMetres(s.Polyline.GetWidthM())
			out.Shape = floor.NewPolyline(mirrorPoints(s.Polyline.GetPoints()), out.WidthUm, out.ToleranceUm)
		case *wideberthv1.Solid_Disc:
			out.RadiusUm = geom.RadiusFromMetres(s.Disc.GetRadiusM())
			out.Shape = floor.NewDisc(mirrorPoint(s.Disc.GetCenter()), out.RadiusUm, out.ToleranceUm)
		default:
			return nil, errors.New("solid of a shape unknown to this client")
		}
	case *wideberthv1.Feature_Zone:
		out.Shape = floor.NewPolygon(mirrorRings(k.Zone.GetArea()), 0)
		switch r := k.Zone.GetRule().(type) {
		case *wideberthv1.Zone_Closed:
			out.Kind = floor.ClosedZone
		case *wideberthv1.Zone_SpeedLimit:
			out.Kind, out.SpeedMps = floor.SpeedLimitZone, r.SpeedLimit.GetMaxSpeedMps()
		case *wideberthv1.Zone_OneWay:
			out.Kind, out.Heading = floor.OneWayZone, r.OneWay.GetHeadingRad()
		default:
			return nil, errors.New("zone of a rule unknown to this client")
		}
	case *wideberthv1.Feature_Station:
		p := k.Station.GetPose()
		out.Kind, out.Heading = floor.Station, p.GetHeadingRad()
		out.At = geom.Point{X: geom.FromMetres(p.GetXM()), Y: geom.FromMetres(p.GetYM())}
	default:
		return nil, errors.New("a kind unknown to this client")
	}
	return out, nil
}
