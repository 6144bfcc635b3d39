// Package picture draws a floor, a route on it and what changed as one SVG sheet,
// made to be read by a person in a hurry and to survive a grey printer: what
// matters differs in line and pattern as well as in colour.
//
// A sheet shows the floor to scale (x right, y up), raster solids grey and vector
// solids dark, zones by pattern, stations by name; the route as a line, tight
// legs as a thick barred one, over a band as wide as the clearance up to the
// body's preferred clearance; the smallest clearance with its figure, drawn again
// enlarged; and below it a legend, the figures in words, a scale bar, the
// version and its digest.
//
// For engineers a sheet shows a roadmap over the floor, thinned out to what can be read,
// or the solids grown for a body; and DrawComparison several routes side by side.
//
// The same scene always gives the same bytes. The band is worked out here from
// the floor's content for drawing alone; every figure in words is the service's.
package picture

import (
	"bufio"
	"fmt"
	"io"
	"math"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Scene is what a sheet shows. Floor is required, all else may be nil or empty.
// Draw does not change it and keeps nothing of it.
type Scene struct {
	Title   string // one line; cut when it does not fit
	Caption string // one line below the title

	// Floor is the version drawn.
	Floor *client.FloorContent
	// Before is an earlier version of the same floor: what Floor adds to it and
	// takes from it is hatched.
	Before *client.FloorContent

	// Route is drawn with its legs and its smallest clearance.
	Route *wideberthv1.Route
	// Previous is drawn as a thin dotted line: the route that was given up.
	Previous *wideberthv1.Route

	// Refusal is drawn with the place that caused it. It carries no body and no
	// ends; Body, Start and Goal say what was asked for.
	Refusal     *wideberthv1.Refusal
	Body        *wideberthv1.Body
	Start, Goal *wideberthv1.Pose

	// Roadmap is drawn over the floor, as far as it can be read: see the words that the
	// sheet has about it. Its header's body is the sheet's.
	Roadmap *client.Roadmap
	// Grown is drawn about the solids.
	Grown *client.Grown

	// Part is the part of the floor to draw. Nil means all.
	Part *wideberthv1.Area
}

// Sizes in user units, the SVG's own; a sheet is 1280 of them wide.
const (
	sheetWidth   = 1280.0
	sheetMargin  = 40.0
	planTop      = 92.0
	planWidth    = sheetWidth - 2*sheetMargin
	planHeight   = 1000.0 // at most; a tall floor is drawn narrower
	maxUnitsPerM = 200.0  // a tiny floor is not blown up beyond this
	panelGap     = 26.0
)

// maxRoutePoints bounds a drawn route, far above what a plan answers with.
const maxRoutePoints = 200_000

// Draw writes the scene as an SVG document. An error names the field of the scene
// that cannot be drawn, or is w's; then what was written is not a document.
func Draw(w io.Writer, s Scene) error {
	if err := s.validate(); err != nil {
		return err
	}
	bw := bufio.NewWriter(w)
	d := newDrawing(s)
	d.sheet()
	if _, err := d.out.buf.WriteTo(bw); err != nil {
		return err
	}
	return bw.Flush()
}

func (s *Scene) validate() error {
	if s.Floor == nil || s.Floor.Settings == nil {
		return fmt.Errorf("picture: floor: missing")
	}
	if err := checkContent("floor", s.Floor); err != nil {
		return err
	}
	if s.Before != nil {
		if err := checkContent("before", s.Before); err != nil {
			return err
		}
		a, b := s.Floor.Settings, s.Before.Settings
		if a.GetColumns() != b.GetColumns() || a.GetRows() != b.GetRows() || resolution(a) != resolution(b) {
			return fmt.Errorf("picture: before: %d x %d cells of %v m; the floor has %d x %d of %v m",
				b.GetColumns(), b.GetRows(), resolution(b), a.GetColumns(), a.GetRows(), resolution(a))
		}
	}
	for _, r := range []struct {
		name  string
		route *wideberthv1.Route
	}{{"route", s.Route}, {"previous", s.Previous}} {
		if err := checkRoute(r.name, r.route); err != nil {
			return err
		}
	}
	if s.Roadmap != nil {
		if err := checkRoadmap(s.Roadmap); err != nil {
			return err
		}
	}
	if s.Grown != nil {
		if err := checkGrown(s.Grown); err != nil {
			return err
		}
	}
	if p := s.Part; p != nil {
		if !finite(p.MinXM, p.MinYM, p.MaxXM, p.MaxYM) || p.MaxXM <= p.MinXM || p.MaxYM <= p.MinYM {
			return fmt.Errorf("picture: part: [%v, %v, %v, %v]; wanted min below max", p.MinXM, p.MinYM, p.MaxXM, p.MaxYM)
		}
	}
	return nil
}

func checkContent(name string, c *client.FloorContent) error {
	if c.Settings == nil {
		return fmt.Errorf("picture: %s: settings missing", name)
	}
	w, h := int64(c.Settings.GetColumns()), int64(c.Settings.GetRows())
	if w < 1 || h < 1 || int64(len(c.Cells))*4 < w*h {
		return fmt.Errorf("picture: %s: %d bytes of cells for %d x %d", name, len(c.Cells), w, h)
	}
	if !finite(c.Settings.GetOrigin().GetXM(), c.Settings.GetOrigin().GetYM(), c.Settings.GetResolutionM()) || resolution(c.Settings) <= 0 {
		return fmt.Errorf("picture: %s: origin and resolution must be numbers, the resolution above 0", name)
	}
	return nil
}

func checkRoute(name string, r *wideberthv1.Route) error {
	n := 0
	for i, leg := range r.GetLegs() {
		n += len(leg.GetPoints())
		if n > maxRoutePoints {
			return fmt.Errorf("picture: %s: more than %d points", name, maxRoutePoints)
		}
		for j, p := range leg.GetPoints() {
			if !finite(p.GetXM(), p.GetYM(), p.GetSM(), p.GetHeadingRad()) {
				return fmt.Errorf("picture: %s.legs[%d].points[%d]: not numbers", name, i, j)
			}
		}
	}
	return nil
}

// resolution is a floor's, its default filled in.
func resolution(s *wideberthv1.FloorSettings) float64 {
	if s.GetResolutionM() == 0 {
		return 0.05
	}
	return s.GetResolutionM()
}

func finite(vs ...float64) bool {
	for _, v := range vs {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}
