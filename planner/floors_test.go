package planner_test

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

const m = geom.UmPerMetre

func pt(x, y float64) geom.Point { return geom.Point{X: geom.FromMetres(x), Y: geom.FromMetres(y)} }

func pose(x, y float64) planner.Pose { return planner.Pose{At: pt(x, y)} }

// settings of a floor of w by h metres, cells of res metres, lower left corner at (x, y).
func settings(x, y, w, h, res float64) floor.Settings {
	r := int64(geom.FromMetres(res))
	return floor.Settings{
		ResolutionUm: r,
		Columns:      int(math.Round(w / res)),
		Rows:         int(math.Round(h / res)),
		OriginX:      int64(geom.FromMetres(x)),
		OriginY:      int64(geom.FromMetres(y)),
		CapUm:        min(5*m, 250*r),
	}
}

func newMap(t testingT, s floor.Settings, edits ...floor.Edit) *floor.Map {
	t.Helper()
	f, err := floor.New(s)
	if err != nil {
		t.Fatal(err)
	}
	if len(edits) == 0 {
		return f
	}
	if f, err = f.Apply(edits); err != nil {
		t.Fatal(err)
	}
	return f
}

func newWorld(t testingT, f *floor.Map) *planner.World {
	t.Helper()
	w, err := planner.NewWorld(context.Background(), f)
	if err != nil {
		t.Fatal(err)
	}
	return w
}

func put(f *floor.Feature) floor.Edit { return floor.Edit{Kind: floor.PutFeature, Feature: f} }

func box(x0, y0, x1, y1 float64) [][]geom.Point {
	return [][]geom.Point{{pt(x0, y0), pt(x1, y0), pt(x1, y1), pt(x0, y1)}}
}

func solidBox(name string, x0, y0, x1, y1 float64) floor.Edit {
	return put(&floor.Feature{Name: name, Kind: floor.Solid, Shape: floor.NewPolygon(box(x0, y0, x1, y1), 0)})
}

func disc(name string, x, y, r float64) floor.Edit {
	um := int64(geom.FromMetres(r))
	return put(&floor.Feature{Name: name, Kind: floor.Solid, Shape: floor.NewDisc(pt(x, y), um, 0), RadiusUm: um})
}

func zone(name string, kind floor.FeatureKind, x0, y0, x1, y1 float64) floor.Feature {
	return floor.Feature{Name: name, Kind: kind, Shape: floor.NewPolygon(box(x0, y0, x1, y1), 0)}
}

func closedBox(name string, x0, y0, x1, y1 float64) floor.Edit {
	f := zone(name, floor.ClosedZone, x0, y0, x1, y1)
	return put(&f)
}

// body of a radius in metres, without margin, that prefers what it needs.
func body(radius float64) planner.Body {
	r := geom.RadiusFromMetres(radius)
	return planner.Body{RadiusUm: r, PreferredUm: r, MaxSpeed: 1, Braking: 0.5, Reaction: 0.5}
}

func plan(t testingT, w *planner.World, q planner.Request) planner.Answer {
	t.Helper()
	a, err := w.Plan(context.Background(), q)
	if err != nil {
		t.Fatal(err)
	}
	if (a.Route == nil) == (a.Refusal == nil) {
		t.Fatalf("answer is %+v: want a route or a refusal", a)
	}
	return a
}

func mustRoute(t testingT, w *planner.World, q planner.Request) *planner.Route {
	t.Helper()
	a := plan(t, w, q)
	if a.Route == nil {
		t.Fatalf("refused: %+v %+v %+v", a.Refusal, a.Refusal.Blocked, a.Refusal.Bottleneck)
	}
	return a.Route
}

func shortest(b planner.Body, from, to planner.Pose) planner.Request {
	return planner.Request{Body: b, Start: from, Goal: to, Options: planner.Options{Preference: planner.Shortest}}
}

func points(r *planner.Route) []geom.Point {
	var ps []geom.Point
	for _, l := range r.Legs {
		for _, p := range l.Points {
			if len(ps) == 0 || ps[len(ps)-1] != p.At {
				ps = append(ps, p.At)
			}
		}
	}
	if len(ps) == 1 { // standing still
		ps = append(ps, ps[0])
	}
	return ps
}

// testingT is what a helper needs of a test or of a property's draw.
type testingT interface {
	Helper()
	Fatal(args ...any)
	Fatalf(format string, args ...any)
}
