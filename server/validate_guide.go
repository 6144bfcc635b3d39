package server

import (
	"example.com/wideberth/mapstore/geom"
	pb "example.com/wideberth/proto/wideberth/v1"
)

func checkGuide(r *pb.GuideRequest, f *faults) {
	switch m := r.Message.(type) {
	case *pb.GuideRequest_Setup:
		checkSetup(m.Setup, root.at("setup"), f)
	case *pb.GuideRequest_Report:
		checkReport(m.Report, root.at("report"), f)
	default:
		f.add(root.at("message"), "not set, wanted a setup or a report")
	}
}

func checkGuideOnce(r *pb.GuideOnceRequest, f *faults) {
	checkSetup(r.Setup, root.at("setup"), f)
	checkReport(r.Report, root.at("report"), f)
}

func checkSetup(s *pb.GuideSetup, p *field, f *faults) {
	if s == nil {
		f.missing(p)
		return
	}
	checkRoute(s.Route, p.at("route"), f)
	ok := f.number(p.at("hint_below_m"), s.HintBelowM, 0, maxCapM)
	if f.number(p.at("quiet_above_m"), s.QuietAboveM, 0, maxCapM) && ok && s.QuietAboveM != 0 && s.Route != nil {
		if hint := hintBelowUm(s); geom.RadiusFromMetres(s.QuietAboveM) < hint {
			f.add(p.at("quiet_above_m"), "%v, wanted hint_below_m (%v) or more", s.QuietAboveM, geom.Metres(float64(hint)))
		}
	}
	if s.OffRouteM != 0 {
		f.number(p.at("off_route_m"), s.OffRouteM, 0.01, 10)
	}
}

func checkReport(r *pb.GuideReport, p *field, f *faults) {
	if r == nil {
		f.missing(p)
		return
	}
	f.finite(p.at("stamp_s"), r.StampS)
	f.pose(p.at("pose"), r.Pose)
	f.number(p.at("position_spread_m"), r.PositionSpreadM, 0, 10)
	f.number(p.at("speed_mps"), r.SpeedMps, -20, 20)
}
