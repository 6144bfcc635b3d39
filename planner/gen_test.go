package planner_test

import (
	"fmt"
	"math"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// drawSettings draws a floor of up to three by three blocks at odd origins.
func drawSettings(t *rapid.T) floor.Settings {
	res := rapid.SampledFrom([]int64{50_000, 33_333, 100_000}).Draw(t, "resolution")
	return floor.Settings{
		ResolutionUm: res,
		Columns:      rapid.IntRange(20, 150).Draw(t, "columns"),
		Rows:         rapid.IntRange(20, 150).Draw(t, "rows"),
		OriginX:      rapid.Int64Range(-3_000_000, 3_000_000).Draw(t, "x"),
		OriginY:      rapid.Int64Range(-3_000_000, 3_000_000).Draw(t, "y"),
		CapUm:        res * int64(rapid.IntRange(15, 60).Draw(t, "cap")),
		OpenBorder:   rapid.Bool().Draw(t, "open"),
	}
}

func drawPoint(t *rapid.T, b geom.Rect, label string) geom.Point {
	return geom.Point{
		X: float64(rapid.Int64Range(int64(b.Min.X), int64(b.Max.X)).Draw(t, label+".x")),
		Y: float64(rapid.Int64Range(int64(b.Min.Y), int64(b.Max.Y)).Draw(t, label+".y")),
	}
}

// drawTriangle draws a proper triangle about a point, within b.
func drawTriangle(t *rapid.T, b geom.Rect, size float64) [][]geom.Point {
	size = math.Floor(min(size, 0.45*b.Width(), 0.45*b.Height()))
	mid := drawPoint(t, b.Grow(-size-1), "mid")
	turn := rapid.Float64Range(0, 2*math.Pi).Draw(t, "turn")
	var ps []geom.Point
	for k := range 3 {
		a := turn + float64(k)*2*math.Pi/3
		ps = append(ps, geom.Point{X: math.Round(mid.X + size*math.Cos(a)), Y: math.Round(mid.Y + size*math.Sin(a))})
	}
	return [][]geom.Point{ps}
}

// drawEdits draws clutter: cells, walls, discs, polygons, zones.
func drawEdits(t *rapid.T, s floor.Settings, b geom.Rect, zones bool) []floor.Edit {
	var es []floor.Edit
	res := float64(s.ResolutionUm)
	for i := range rapid.IntRange(0, 8).Draw(t, "solids") {
		name := fmt.Sprintf("s%d", i)
		switch rapid.IntRange(0, 3).Draw(t, "kind") {
		case 0:
			x, y := rapid.IntRange(0, s.Columns-1).Draw(t, "c"), rapid.IntRange(0, s.Rows-1).Draw(t, "r")
			w, h := rapid.IntRange(1, 30).Draw(t, "w"), rapid.IntRange(1, 30).Draw(t, "h")
			es = append(es, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied,
				Rect: floor.CellRect{X0: x, Y0: y, X1: min(x+w, s.Columns), Y1: min(y+h, s.Rows)}})
		case 1:
			w := rapid.Int64Range(1, 5*s.ResolutionUm).Draw(t, "width")
			ps := []geom.Point{drawPoint(t, b, "a"), drawPoint(t, b, "b")}
			if ps[0] == ps[1] {
				if ps[1] = b.Min; ps[0] == b.Min {
					ps[1] = b.Max
				}
			}
			es = append(es, put(&floor.Feature{Name: name, Kind: floor.Solid, WidthUm: w, Shape: floor.NewPolyline(ps, w, 0)}))
		case 2:
			r := rapid.Int64Range(1, 10*s.ResolutionUm).Draw(t, "radius")
			es = append(es, put(&floor.Feature{Name: name, Kind: floor.Solid, RadiusUm: r, Shape: floor.NewDisc(drawPoint(t, b, "mid"), r, 0)}))
		case 3:
			es = append(es, put(&floor.Feature{Name: name, Kind: floor.Solid, Shape: floor.NewPolygon(drawTriangle(t, b, 12*res), 0)}))
		}
	}
	if !zones {
		return es
	}
	for i := range rapid.IntRange(0, 3).Draw(t, "zones") {
		f := &floor.Feature{Name: fmt.Sprintf("z%d", i), Shape: floor.NewPolygon(drawTriangle(t, b, 15*res), 0)}
		switch rapid.IntRange(0, 2).Draw(t, "rule") {
		case 0:
			f.Kind = floor.ClosedZone
		case 1:
			f.Kind, f.Heading = floor.OneWayZone, rapid.Float64Range(-3.1, 3.1).Draw(t, "heading")
		case 2:
			f.Kind, f.SpeedMps = floor.SpeedLimitZone, 0.3
		}
		es = append(es, put(f))
	}
	return es
}

func drawBody(t *rapid.T, s floor.Settings) planner.Body {
	b := planner.Body{ // now and then a point
		RadiusUm: max(0, rapid.Int64Range(-s.ResolutionUm, 6*s.ResolutionUm).Draw(t, "radius")),
		MarginUm: max(0, rapid.Int64Range(-s.ResolutionUm, 2*s.ResolutionUm).Draw(t, "margin")),
		MaxSpeed: 1.5, Braking: 0.5, Reaction: 0.3,
		SensingUm: rapid.SampledFrom([]int64{0, 700_000, 4_000_000}).Draw(t, "sensing"),
	}
	b.PreferredUm = rapid.Int64Range(b.Required(), s.CapUm).Draw(t, "preferred")
	return b
}

func drawOptions(t *rapid.T, s floor.Settings, b planner.Body) planner.Options {
	o := planner.Options{
		Preference:      rapid.SampledFrom([]planner.Preference{planner.Balanced, planner.Shortest, planner.Clearest}).Draw(t, "preference"),
		Roadmap:         rapid.SampledFrom([]planner.Roadmap{planner.Auto, planner.Grid4, planner.Grid8, planner.Quadtree}).Draw(t, "roadmap"),
		KeepRoadmapPath: rapid.IntRange(0, 3).Draw(t, "keep") == 0,
		TightWeight:     rapid.SampledFrom([]float64{0, 1, 4}).Draw(t, "weight"),
		TightBelowUm:    rapid.SampledFrom([]int64{0, b.PreferredUm, s.CapUm, b.Required() + 1000}).Draw(t, "below") % (s.CapUm + 1),
		MaxSpacingUm:    rapid.SampledFrom([]int64{0, 0, 200_000}).Draw(t, "spacing"),
	}
	if o.Preference == planner.Clearest {
		o.Roadmap, o.KeepRoadmapPath = planner.Auto, false
	}
	return o
}

type scene struct {
	m *floor.Map
	w *planner.World
	q planner.Request
}

func drawScene(t *rapid.T, zones bool) scene {
	s := drawSettings(t)
	b := geom.Rect{
		Min: geom.Point{X: float64(s.OriginX), Y: float64(s.OriginY)},
		Max: geom.Point{X: float64(s.OriginX + int64(s.Columns)*s.ResolutionUm), Y: float64(s.OriginY + int64(s.Rows)*s.ResolutionUm)},
	}
	f := newMap(t, s, drawEdits(t, s, b, zones)...)
	bd := drawBody(t, s)
	stand := func(label string) geom.Point {
		p := drawPoint(t, b, label)
		for range 6 { // mostly somewhere free
			if bruteDist(f, p) >= float64(bd.Required()) {
				break
			}
			p = drawPoint(t, b, label)
		}
		return p
	}
	return scene{f, newWorld(t, f), planner.Request{
		Body:  bd,
		Start: planner.Pose{At: stand("start"), Heading: 1},
		Goal:  planner.Pose{At: stand("goal"), Heading: -2},

		Options: drawOptions(t, s, bd),
	}}
}
