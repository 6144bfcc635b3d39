package wire

import (
	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// What FloorSettings asks for with 0, from the contract.
const (
	defaultResolutionUm = 50_000
	defaultCapUm        = 5_000_000 // or floor.MaxCapCells cells
)

// SettingsIn are a floor's settings with defaults filled in.
func SettingsIn(s *pb.FloorSettings) floor.Settings {
	out := floor.Settings{
		ResolutionUm:  Um(s.GetResolutionM()),
		Columns:       int(s.GetColumns()),
		Rows:          int(s.GetRows()),
		OriginX:       Um(s.GetOrigin().GetXM()),
		OriginY:       Um(s.GetOrigin().GetYM()),
		CapUm:         geom.RadiusFromMetres(s.GetClearanceCapM()),
		UnknownIsFree: s.GetUnknownIsFree(),
		OpenBorder:    s.GetOpenBorder(),
		Initial:       OccupancyIn(s.GetInitialOccupancy()),
	}
	if s.GetResolutionM() == 0 { // not set
		out.ResolutionUm = defaultResolutionUm
	}
	if s.GetClearanceCapM() == 0 {
		out.CapUm = min(defaultCapUm, floor.MaxCapCells*out.ResolutionUm)
		out.CapUm = max(out.CapUm, out.ResolutionUm)
	}
	return out
}

// SettingsOut are a floor's settings as a message.
func SettingsOut(s floor.Settings) *pb.FloorSettings {
	return &pb.FloorSettings{
		ResolutionM:      proto.Float64(Metres(s.ResolutionUm)),
		Columns:          int32(s.Columns),
		Rows:             int32(s.Rows),
		Origin:           &pb.Point{XM: Metres(s.OriginX), YM: Metres(s.OriginY)},
		ClearanceCapM:    Metres(s.CapUm),
		UnknownIsFree:    s.UnknownIsFree,
		OpenBorder:       s.OpenBorder,
		InitialOccupancy: OccupancyOut(s.Initial),
	}
}

// OccupancyIn is what a message says of a cell; what is not said is unknown.
func OccupancyIn(o pb.Occupancy) floor.Occupancy {
	switch o {
	case pb.Occupancy_OCCUPANCY_FREE:
		return floor.Free
	case pb.Occupancy_OCCUPANCY_OCCUPIED:
		return floor.Occupied
	}
	return floor.Unknown
}

// OccupancyOut is what a cell holds, as a message says it.
func OccupancyOut(o floor.Occupancy) pb.Occupancy {
	switch o {
	case floor.Free:
		return pb.Occupancy_OCCUPANCY_FREE
	case floor.Occupied:
		return pb.Occupancy_OCCUPANCY_OCCUPIED
	}
	return pb.Occupancy_OCCUPANCY_UNKNOWN
}
