package layout_test

import (
	"math"
	"strings"
	"testing"

	"example.com/wideberth/client/layout"
	"example.com/wideberth/mapstore/geom"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/testdata"
)

// plan is the hall as plainly as it can be kept: features by name, and the
// rectangles of raster painted solid or cleared, in order, in micrometres.
type plan struct {
	features map[string]*wideberthv1.Feature
	paint    []painted
}

type painted struct {
	rect  geom.Rect
	solid bool
}

func um(m float64) float64 { return geom.FromMetres(m) }

func point(p *wideberthv1.Point) geom.Point { return geom.Point{X: um(p.GetXM()), Y: um(p.GetYM())} }

func (p *plan) apply(l *layout.Layout, edits []*wideberthv1.Edit) {
	for _, e := range edits {
		switch {
		case e.GetPutFeature() != nil:
			p.features[e.GetPutFeature().GetFeature().GetName()] = e.GetPutFeature().GetFeature()
		case e.GetRemoveFeature() != nil:
			delete(p.features, e.GetRemoveFeature().GetName())
		case e.GetClearRect() != nil:
			a := e.GetClearRect().GetArea()
			p.paint = append(p.paint, painted{rect: geom.Rect{Min: geom.Point{X: um(a.MinXM), Y: um(a.MinYM)}, Max: geom.Point{X: um(a.MaxXM), Y: um(a.MaxYM)}}})
		default:
			r := e.GetPaintOccupancy().GetRect()
			c, k := r.GetRect(), um(l.Settings.GetResolutionM())
			lo := geom.Point{X: float64(c.Column) * k, Y: float64(c.Row) * k}
			p.paint = append(p.paint, painted{
				rect:  geom.Rect{Min: lo, Max: geom.Point{X: lo.X + float64(c.Columns)*k, Y: lo.Y + float64(c.Rows)*k}},
				solid: r.GetOccupancy() != wideberthv1.Occupancy_OCCUPANCY_FREE,
			})
		}
	}
}

// clearance is the distance from a place to the nearest solid, in micrometres. A
// cleared rectangle counts only when it holds a painted one whole, as it does in
// the hall.
func (p *plan) clearance(at geom.Point) (nearest float64, what string) {
	nearest = math.Inf(1)
	closer := func(d float64, name string) {
		if d < nearest {
			nearest, what = d, name
		}
	}
	for i, r := range p.paint {
		gone := !r.solid
		for _, later := range p.paint[i+1:] {
			gone = gone || !later.solid && later.rect.Contains(r.rect.Min) && later.rect.Contains(r.rect.Max)
		}
		if !gone {
			closer(r.rect.Dist(at), "raster")
		}
	}
	for name, f := range p.features {
		s := f.GetSolid()
		switch {
		case s.GetDisc() != nil:
			closer(geom.Dist(at, point(s.GetDisc().GetCenter()))-um(s.GetDisc().GetRadiusM()), name)
		case s.GetPolyline() != nil:
			pts := s.GetPolyline().GetPoints()
			for i := 1; i < len(pts); i++ {
				d, _ := geom.SegmentDist(at, point(pts[i-1]), point(pts[i]))
				closer(d-um(s.GetPolyline().GetWidthM())/2, name)
			}
		case s.GetPolygon() != nil:
			ring := s.GetPolygon().GetOuter().GetPoints()
			for i := range ring {
				d, _ := geom.SegmentDist(at, point(ring[i]), point(ring[(i+1)%len(ring)]))
				closer(d, name)
			}
		}
	}
	return nearest, what
}

// The demonstration hall is described below testdata, which ./... leaves out; what it
// claims is tried here.

// hall is the hall before its change and after it.
func hall(t *testing.T) (l *layout.Layout, before, after *plan) {
	t.Helper()
	l, err := testdata.Hall()
	if err != nil {
		t.Fatal(err)
	}
	c, ok := l.Change(testdata.TwoOClock)
	if !ok {
		t.Fatalf("no change %q", testdata.TwoOClock)
	}
	before = &plan{features: map[string]*wideberthv1.Feature{}}
	after = &plan{features: map[string]*wideberthv1.Feature{}}
	before.apply(l, l.Edits)
	after.apply(l, l.Edits)
	after.apply(l, c.Edits)
	return l, before, after
}

func TestHallDoorsAreAsWideAsTheyClaim(t *testing.T) {
	_, before, _ := hall(t)
	for name, width := range map[string]float64{"cold-1": 0.90, "cold-2": 1.10, "cold-3": 1.60, "cold-4": 2.40} {
		end := func(f string, i int) geom.Point {
			pts := before.features[f].GetSolid().GetPolyline().GetPoints()
			return point(pts[(i+len(pts))%len(pts)])
		}
		west, east := name+"/door-west", name+"/door-east"
		thick := before.features[west].GetSolid().GetPolyline().GetWidthM()
		if got := geom.Dist(end(west, -1), end(east, 0)) - um(thick); got != um(width) {
			t.Errorf("%s: door of %v µm, want %v", name, got, um(width))
		}
		if !strings.Contains(before.features[west].GetNote(), "clear width") {
			t.Errorf("%s: its note does not say how wide it is", west)
		}
	}
}

// The story of the demonstration: what passes where.
func TestHallBodiesAndDoors(t *testing.T) {
	l, _, after := hall(t)
	tug, ok1 := l.Body("tug")
	runner, ok2 := l.Body("runner")
	if !ok1 || !ok2 {
		t.Fatal("no tug or no runner")
	}
	need := func(b *wideberthv1.Body) float64 { return 2 * (b.GetRadiusM() + b.GetMarginM()) }
	// The roadmaps may miss a passage up to two cells wider than needed; see the
	// answer's width_bias_m. The doors that are to be passed have that much more.
	const bias = 0.1
	if n := need(runner); n+bias > 0.90 {
		t.Errorf("the runner needs %v m: the door of 0.90 m is no use to it", n)
	}
	if n := need(tug); n <= 1.10 || n+bias > 1.60 {
		t.Errorf("the tug needs %v m: it should pass 1.60 m and not 1.10 m", n)
	}
	// At 02:00 the stillage leaves 1.80 m to the hand-picking rail.
	stillage := after.features["buffer-2/stillage"].GetSolid().GetPolygon().GetOuter().GetPoints()
	rail := after.features["hand-picking/rail"].GetSolid().GetPolyline()
	gap := point(rail.GetPoints()[0]).X - um(rail.GetWidthM())/2 - point(stillage[1]).X
	if gap != um(1.80) {
		t.Errorf("%v µm beside the stillage, want 1.80 m", gap)
	}
}

func TestHallStationsAreFreeForTheirBodies(t *testing.T) {
	l, before, after := hall(t)
	tug, _ := l.Body("tug")
	runner, _ := l.Body("runner")
	for _, version := range []struct {
		name string
		plan *plan
	}{{"before", before}, {"after", after}} {
		stations := 0
		for name, f := range version.plan.features {
			pose := f.GetStation().GetPose()
			if pose == nil {
				continue
			}
			stations++
			body := tug
			if name == "cold-1" || name == "cold-2" { // behind doors that only the runner passes
				body = runner
			}
			at := geom.Point{X: um(pose.GetXM()), Y: um(pose.GetYM())}
			if c, what := version.plan.clearance(at); c < um(body.GetRadiusM()+body.GetMarginM()) {
				t.Errorf("%s: %s is %v m from %s, too little for a %s", version.name, name, geom.Metres(c), what, body.GetName())
			}
			for zone, z := range version.plan.features {
				if z.GetZone().GetClosed() == nil {
					continue
				}
				var ring []geom.Point
				for _, p := range z.GetZone().GetArea().GetOuter().GetPoints() {
					ring = append(ring, point(p))
				}
				d, _ := geom.BorderDist([][]geom.Point{ring}, at)
				if geom.InPolygon([][]geom.Point{ring}, at) || d < um(body.GetRadiusM()) {
					t.Errorf("%s: %s is in or too near %s", version.name, name, zone)
				}
			}
		}
		if want := 6 + 4 + 4 + 1 + 1 + 3; stations != want {
			t.Errorf("%s: %d stations, want %d", version.name, stations, want)
		}
	}
}

// Both ways of saying where solids are must be in the hall, or the rest of the
// suite tries only one.
func TestHallHasRasterAndVectorAndEveryZone(t *testing.T) {
	l, before, _ := hall(t)
	kinds := map[string]int{}
	for _, f := range before.features {
		switch {
		case f.GetSolid().GetPolygon() != nil:
			kinds["polygon"]++
		case f.GetSolid().GetPolyline() != nil:
			kinds["polyline"]++
			p := f.GetSolid().GetPolyline().GetPoints()
			if p[0].GetXM() != p[1].GetXM() && p[0].GetYM() != p[1].GetYM() {
				kinds["oblique"]++
			}
		case f.GetSolid().GetDisc() != nil:
			kinds["disc"]++
		case f.GetZone().GetClosed() != nil:
			kinds["closed"]++
		case f.GetZone().GetSpeedLimit() != nil:
			kinds["speed limit"]++
		case f.GetZone().GetOneWay() != nil:
			kinds["one way"]++
		}
	}
	for _, k := range []string{"polygon", "polyline", "oblique", "disc", "closed", "speed limit", "one way"} {
		if kinds[k] == 0 {
			t.Errorf("no %s", k)
		}
	}
	if len(before.paint) < 1000 {
		t.Errorf("%d painted rectangles; a trolley each should be more", len(before.paint))
	}
	if s := l.Settings; s.GetColumns() != 2400 || s.GetRows() != 1600 {
		t.Errorf("%d x %d cells, want 2400 x 1600", s.GetColumns(), s.GetRows())
	}
}
