package server

import (
	"encoding/hex"
	"math"

	"google.golang.org/protobuf/types/known/timestamppb"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/mapstore/journal"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// The conversions take messages that their validators have passed; metres become
// micrometres here and nowhere else in the package.

// Defaults of a floor's settings, from the contract.
const (
	defaultResolutionUm = 50_000
	defaultCapUm        = 5_000_000
)

func um(m float64) int64 { return int64(geom.FromMetres(m)) }

func metres(um int64) float64 { return geom.Metres(float64(um)) }

// heading brings a direction that headingSlack let pass into (-pi, pi].
func heading(v float64) float64 {
	if v > math.Pi || v <= -math.Pi {
		return math.Pi
	}
	return v
}

func pointIn(p *pb.Point) geom.Point {
	return geom.Point{X: geom.FromMetres(p.GetXM()), Y: geom.FromMetres(p.GetYM())}
}

func pointOut(p geom.Point) *pb.Point {
	return &pb.Point{XM: geom.Metres(p.X), YM: geom.Metres(p.Y)}
}

func settingsIn(s *pb.FloorSettings) floor.Settings {
	out := floor.Settings{
		ResolutionUm:  um(s.ResolutionM),
		Columns:       int(s.Columns),
		Rows:          int(s.Rows),
		OriginX:       um(s.GetOrigin().GetXM()),
		OriginY:       um(s.GetOrigin().GetYM()),
		CapUm:         geom.RadiusFromMetres(s.ClearanceCapM),
		UnknownIsFree: s.UnknownIsFree,
		OpenBorder:    s.OpenBorder,
		Initial:       floor.Unknown,
	}
	if s.ResolutionM == 0 {
		out.ResolutionUm = defaultResolutionUm
	}
	if s.ClearanceCapM == 0 {
		out.CapUm = min(defaultCapUm, floor.MaxCapCells*out.ResolutionUm)
		out.CapUm = max(out.CapUm, out.ResolutionUm)
	}
	if s.InitialOccupancy != pb.Occupancy_OCCUPANCY_UNSPECIFIED {
		out.Initial = occupancyIn(s.InitialOccupancy)
	}
	return out
}

func settingsOut(s floor.Settings) *pb.FloorSettings {
	return &pb.FloorSettings{
		ResolutionM:      metres(s.ResolutionUm),
		Columns:          int32(s.Columns),
		Rows:             int32(s.Rows),
		Origin:           &pb.Point{XM: metres(s.OriginX), YM: metres(s.OriginY)},
		ClearanceCapM:    metres(s.CapUm),
		UnknownIsFree:    s.UnknownIsFree,
		OpenBorder:       s.OpenBorder,
		InitialOccupancy: occupancyOut(s.Initial),
	}
}

func occupancyIn(o pb.Occupancy) floor.Occupancy {
	switch o {
	case pb.Occupancy_OCCUPANCY_FREE:
		return floor.Free
	case pb.Occupancy_OCCUPANCY_OCCUPIED:
		return floor.Occupied
	}
	return floor.Unknown
}

func occupancyOut(o floor.Occupancy) pb.Occupancy {
	switch o {
	case floor.Free:
		return pb.Occupancy_OCCUPANCY_FREE
	case floor.Occupied:
		return pb.Occupancy_OCCUPANCY_OCCUPIED
	}
	return pb.Occupancy_OCCUPANCY_UNKNOWN
}

func digestOut(d [32]byte) string { return hex.EncodeToString(d[:]) }

func stampOut(v mapstore.VersionInfo) *pb.VersionStamp {
	return &pb.VersionStamp{Floor: v.Floor, Version: v.Version, Digest: digestOut(v.Digest)}
}

func areaOut(r geom.Rect) *pb.Area {
	if r.IsEmpty() {
		return nil
	}
	return &pb.Area{
		MinXM: geom.Metres(r.Min.X), MinYM: geom.Metres(r.Min.Y),
		MaxXM: geom.Metres(r.Max.X), MaxYM: geom.Metres(r.Max.Y),
	}
}

func areaIn(a *pb.Area) geom.Rect {
	return geom.Rect{
		Min: geom.Point{X: geom.FromMetres(a.MinXM), Y: geom.FromMetres(a.MinYM)},
		Max: geom.Point{X: geom.FromMetres(a.MaxXM), Y: geom.FromMetres(a.MaxYM)},
	}
}

func versionOut(v mapstore.VersionInfo) *pb.Version {
	out := &pb.Version{
		Stamp:           stampOut(v),
		BaseVersion:     v.Base,
		Author:          v.Author,
		Reason:          v.Reason,
		RequestId:       v.RequestID,
		PushTime:        timestamppb.New(v.Time),
		EditCount:       int32(v.EditCount),
		Touched:         areaOut(v.Touched),
		RestoredVersion: v.Restored,
	}
	switch v.Kind {
	case journal.Created:
		out.Kind = pb.VersionKind_VERSION_KIND_CREATED
	case journal.Patched:
		out.Kind = pb.VersionKind_VERSION_KIND_PATCHED
	case journal.Restored:
		out.Kind = pb.VersionKind_VERSION_KIND_RESTORED
	}
	return out
}

func floorOut(i mapstore.FloorInfo) *pb.Floor {
	return &pb.Floor{
		Id:            i.ID,
		Settings:      settingsOut(i.Settings),
		Head:          stampOut(i.Head),
		OldestVersion: i.Oldest,
		CreateTime:    timestamppb.New(i.Created),
	}
}

func pointsIn(points []*pb.Point) []geom.Point {
	out := make([]geom.Point, len(points))
	for i, p := range points {
		out[i] = pointIn(p)
	}
	return out
}

func pointsOut(points []geom.Point) []*pb.Point {
	out := make([]*pb.Point, len(points))
	for i, p := range points {
		out[i] = pointOut(p)
	}
	return out
}

func polygonChains(g *pb.Polygon) [][]geom.Point {
	chains := make([][]geom.Point, 0, 1+len(g.GetHoles()))
	chains = append(chains, pointsIn(g.GetOuter().GetPoints()))
	for _, h := range g.GetHoles() {
		chains = append(chains, pointsIn(h.GetPoints()))
	}
	return chains
}

func polygonIn(g *pb.Polygon) floor.Shape {
	return floor.NewPolygon(polygonChains(g), 0)
}

func polygonOut(s floor.Shape) *pb.Polygon {
	out := &pb.Polygon{}
	for i, c := range s.Chains {
		r := &pb.Ring{Points: pointsOut(c)}
		if i == 0 {
			out.Outer = r
		} else {
			out.Holes = append(out.Holes, r)
		}
	}
	return out
}

func featureIn(t *pb.Feature) *floor.Feature {
	out := &floor.Feature{Name: t.Name, Note: t.Note}
	switch k := t.Kind.(type) {
	case *pb.Feature_Solid:
		solidIn(k.Solid, out)
	case *pb.Feature_Zone:
		out.Shape = polygonIn(k.Zone.GetArea())
		switch r := k.Zone.GetRule().(type) {
		case *pb.Zone_Closed:
			out.Kind = floor.ClosedZone
		case *pb.Zone_SpeedLimit:
			out.Kind, out.SpeedMps = floor.SpeedLimitZone, r.SpeedLimit.GetMaxSpeedMps()
		case *pb.Zone_OneWay:
			out.Kind, out.Heading = floor.OneWayZone, heading(r.OneWay.GetHeadingRad())
		}
	case *pb.Feature_Station:
		p := poseIn(k.Station.GetPose())
		out.Kind, out.At, out.Heading = floor.Station, p.At, p.Heading
	}
	return out
}

func solidIn(s *pb.Solid, out *floor.Feature) {
	out.Kind = floor.Solid
	out.ToleranceUm = geom.RadiusFromMetres(s.GetSurveyToleranceM())
	switch k := s.GetShape().(type) {
	case *pb.Solid_Polygon:
		out.Shape = floor.NewPolygon(polygonChains(k.Polygon), out.ToleranceUm)
	case *pb.Solid_Polyline:
		out.WidthUm = geom.RadiusFromMetres(k.Polyline.GetWidthM())
		out.Shape = floor.NewPolyline(pointsIn(k.Polyline.GetPoints()), out.WidthUm, out.ToleranceUm)
	case *pb.Solid_Disc:
		out.RadiusUm = geom.RadiusFromMetres(k.Disc.GetRadiusM())
		out.Shape = floor.NewDisc(pointIn(k.Disc.GetCenter()), out.RadiusUm, out.ToleranceUm)
	}
}

func featureOut(t *floor.Feature) *pb.Feature {
	if t == nil {
		return nil
	}
	out := &pb.Feature{Name: t.Name, Note: t.Note}
	switch t.Kind {
	case floor.Solid:
		s := &pb.Solid{SurveyToleranceM: metres(t.ToleranceUm)}
		switch t.Shape.Kind {
		case floor.Polygon:
			s.Shape = &pb.Solid_Polygon{Polygon: polygonOut(t.Shape)}
		case floor.Polyline:
			s.Shape = &pb.Solid_Polyline{Polyline: &pb.Polyline{Points: pointsOut(t.Shape.Chains[0]), WidthM: metres(t.WidthUm)}}
		case floor.Disc:
			s.Shape = &pb.Solid_Disc{Disc: &pb.Disc{Center: pointOut(t.Shape.Chains[0][0]), RadiusM: metres(t.RadiusUm)}}
		}
		out.Kind = &pb.Feature_Solid{Solid: s}
	case floor.Station:
		out.Kind = &pb.Feature_Station{Station: &pb.Station{Pose: &pb.Pose{
			XM: geom.Metres(t.At.X), YM: geom.Metres(t.At.Y), HeadingRad: t.Heading,
		}}}
	default:
		z := &pb.Zone{Area: polygonOut(t.Shape)}
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
