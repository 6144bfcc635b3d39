package wire

import (
	"errors"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// What FeatureIn cannot read: a later contract's, or not set.
var (
	errKind  = errors.New("a kind of feature that this program does not know")
	errShape = errors.New("a solid of a shape that this program does not know")
	errRule  = errors.New("a zone of a rule that this program does not know")
)

// FeatureIn reads a feature. The error says that its kind, shape or rule is not set
// or unknown; the outline is not judged.
func FeatureIn(t *pb.Feature) (*floor.Feature, error) {
	out := &floor.Feature{Name: t.GetName(), Note: t.GetNote()}
	switch k := t.GetKind().(type) {
	case *pb.Feature_Solid:
		if err := solidIn(k.Solid, out); err != nil {
			return nil, err
		}
	case *pb.Feature_Zone:
		out.Shape = floor.NewPolygon(RingsIn(k.Zone.GetArea()), 0)
		switch r := k.Zone.GetRule().(type) {
		case *pb.Zone_Closed:
			out.Kind = floor.ClosedZone
		case *pb.Zone_SpeedLimit:
			out.Kind, out.SpeedMps = floor.SpeedLimitZone, r.SpeedLimit.GetMaxSpeedMps()
		case *pb.Zone_OneWay:
			out.Kind, out.Heading = floor.OneWayZone, Heading(r.OneWay.GetHeadingRad())
		default:
			return nil, errRule
		}
	case *pb.Feature_Station:
		p := k.Station.GetPose()
		out.Kind, out.At, out.Heading = floor.Station, PointIn(p), Heading(p.GetHeadingRad())
	default:
		return nil, errKind
	}
	return out, nil
}

func solidIn(s *pb.Solid, out *floor.Feature) error {
	out.Kind = floor.Solid
	out.ToleranceUm = geom.RadiusFromMetres(s.GetSurveyToleranceM())
	switch k := s.GetShape().(type) {
	case *pb.Solid_Polygon:
		out.Shape = floor.NewPolygon(RingsIn(k.Polygon), out.ToleranceUm)
	case *pb.Solid_Polyline:
		out.WidthUm = geom.RadiusFromMetres(k.Polyline.GetWidthM())
		out.Shape = floor.NewPolyline(PointsIn(k.Polyline.GetPoints()), out.WidthUm, out.ToleranceUm)
	case *pb.Solid_Disc:
		out.RadiusUm = geom.RadiusFromMetres(k.Disc.GetRadiusM())
		out.Shape = floor.NewDisc(PointIn(k.Disc.GetCenter()), out.RadiusUm, out.ToleranceUm)
	default:
		return errShape
	}
	return nil
}

// FeatureOut is a feature of a map as a message, nil for nil.
func FeatureOut(t *floor.Feature) *pb.Feature {
	if t == nil {
		return nil
	}
	out := &pb.Feature{Name: t.Name, Note: t.Note}
	switch t.Kind {
	case floor.Solid:
		out.Kind = &pb.Feature_Solid{Solid: solidOut(t)}
	case floor.Station:
		out.Kind = &pb.Feature_Station{Station: &pb.Station{Pose: &pb.Pose{
			XM: geom.Metres(t.At.X), YM: geom.Metres(t.At.Y), HeadingRad: t.Heading,
		}}}
	default:
		z := &pb.Zone{Area: PolygonOut(t.Shape.Chains)}
		switch t.Kind {
		case floor.ClosedZone:
			z.Rule = &pb.Zone_Closed{Closed: &pb.ClosedRule{}}
		case floor.SpeedLimitZone:
			z.Rule = &pb.Zone_SpeedLimit{SpeedLimit: &pb.SpeedLimitRule{MaxSpeedMps: t.SpeedMps}}
		case floor.OneWayZone:
			z.Rule = &pb.Zone_OneWay{OneWay: &pb.OneWayRule{HeadingRad: t.Heading}}
		}
		out.Kind = &pb.Feature_Zone{Zone: z}
	}
	return out
}

func solidOut(t *floor.Feature) *pb.Solid {
	s := &pb.Solid{SurveyToleranceM: Metres(t.ToleranceUm)}
	switch t.Shape.Kind {
	case floor.Polygon:
		s.Shape = &pb.Solid_Polygon{Polygon: PolygonOut(t.Shape.Chains)}
	case floor.Polyline:
		s.Shape = &pb.Solid_Polyline{Polyline: &pb.Polyline{Points: PointsOut(t.Shape.Chains[0]), WidthM: Metres(t.WidthUm)}}
	case floor.Disc:
		s.Shape = &pb.Solid_Disc{Disc: &pb.Disc{Center: PointOut(t.Shape.Chains[0][0]), RadiusM: Metres(t.RadiusUm)}}
	}
	return s
}
