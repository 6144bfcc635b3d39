package floor

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"unicode/utf8"

	"example.com/wideberth/mapstore/geom"
)

// checker checks parts of an edit against a floor's settings. Its methods give nil or an
// *EditError whose Index is still to be set.
type checker struct {
	bounds geom.Rect
	cells  CellRect
}

func fault(path, format string, args ...any) *EditError {
	return &EditError{Path: path, Problem: fmt.Sprintf(format, args...)}
}

// ValidFeatureName says whether s can name a feature: 1 to 63 of a-z, 0-9, '-',
// '_', '.', '/', first a letter or digit.
func ValidFeatureName(s string) bool {
	if len(s) < 1 || len(s) > MaxNameBytes {
		return false
	}
	for i := range len(s) {
		switch c := s[i]; {
		case 'a' <= c && c <= 'z', '0' <= c && c <= '9':
		case i > 0 && (c == '-' || c == '_' || c == '.' || c == '/'):
		default:
			return false
		}
	}
	return true
}

func checkName(path, name string) *EditError {
	if !ValidFeatureName(name) {
		if len(name) > 2*MaxNameBytes {
			name = name[:2*MaxNameBytes] + "..."
		}
		return fault(path, "%q, wanted 1 to %d of a-z, 0-9, '-', '_', '.', '/', first a letter or digit", name, MaxNameBytes)
	}
	return nil
}

// feature checks a feature and gives it back in canonical form, fields that mean
// nothing for its kind left out.
func (c checker) feature(path string, f *Feature) (*Feature, *EditError) {
	if f == nil {
		return nil, fault(path, "missing")
	}
	if err := checkName(path+".name", f.Name); err != nil {
		return nil, err
	}
	if n := utf8.RuneCountInString(f.Note); !utf8.ValidString(f.Note) || n > MaxNoteRunes {
		return nil, fault(path+".note", "%d characters, wanted at most %d, in UTF-8", n, MaxNoteRunes)
	}
	g := &Feature{Name: f.Name, Note: f.Note, Kind: f.Kind}
	var err *EditError
	switch f.Kind {
	case Solid:
		g.Shape, g.WidthUm, g.RadiusUm, g.ToleranceUm, err = c.solid(path+".solid", f)
	case ClosedZone, SpeedLimitZone, OneWayZone:
		if f.Shape.Kind != Polygon || f.Shape.Grow != 0 {
			return nil, fault(path+".zone.area", "wanted a polygon that is not grown")
		}
		g.Shape = f.Shape
		if err = c.polygon(path+".zone.area", f.Shape.Chains); err != nil {
			break
		}
		switch f.Kind {
		case SpeedLimitZone:
			g.SpeedMps = f.SpeedMps
			if !(f.SpeedMps >= MinSpeedMps && f.SpeedMps <= MaxSpeedMps) {
				err = fault(path+".zone.speed_limit.max_speed_mps", "%v m/s, wanted %v m/s to %v m/s", f.SpeedMps, MinSpeedMps, MaxSpeedMps)
			}
		case OneWayZone:
			g.Heading = f.Heading
			err = checkHeading(path+".zone.one_way.heading_rad", f.Heading)
		}
	case Station:
		g.At, g.Heading = f.At, f.Heading
		if err = c.point(path+".station.pose", f.At); err == nil {
			err = checkHeading(path+".station.pose.heading_rad", f.Heading)
		}
	default:
		err = fault(path, "kind %d, wanted solid, zone or station", f.Kind)
	}
	if err != nil {
		return nil, err
	}
	return g, nil
}

func checkHeading(path string, rad float64) *EditError {
	if !(rad > -math.Pi && rad <= math.Pi) {
		return fault(path, "%v rad, wanted above -pi, at most pi", rad)
	}
	return nil
}

// solid checks the outline of f and gives what of it counts.
func (c checker) solid(path string, f *Feature) (s Shape, width, radius, tolerance int64, err *EditError) {
	s, tolerance = f.Shape, f.ToleranceUm
	if err = checkLength(path+".survey_tolerance_m", tolerance, 0, MaxToleranceUm); err != nil {
		return
	}
	switch s.Kind {
	case Polygon:
		err = c.polygon(path+".polygon", s.Chains)
	case Polyline:
		width = f.WidthUm
		if err = c.chain(path+".polyline.points", s.Chains, 2, MaxRingPoints); err == nil {
			err = checkLength(path+".polyline.width_m", width, 1, MaxWidthUm)
		}
	case Disc:
		radius = f.RadiusUm
		if len(s.Chains) != 1 || len(s.Chains[0]) != 1 {
			err = fault(path+".disc.center", "missing")
		} else if err = c.point(path+".disc.center", s.Chains[0][0]); err == nil {
			err = checkLength(path+".disc.radius_m", radius, 1, MaxRadiusUm)
		}
	default:
		err = fault(path, "outline of kind %d, wanted polygon, polyline or disc", s.Kind)
	}
	if want := f.grow(s.Kind); err == nil && s.Grow != want {
		err = fault(path, "outline grown by %v µm, its width, radius and tolerance say %v µm", s.Grow, want)
	}
	return
}

func checkLength(path string, um, least, most int64) *EditError {
	if um < least || um > most {
		return fault(path, "%s, wanted %s to %s", metres(um), metres(least), metres(most))
	}
	return nil
}

// chain checks a shape that has one chain.
func (c checker) chain(path string, chains [][]geom.Point, least, most int) *EditError {
	if len(chains) != 1 {
		return fault(path, "%d chains, wanted 1", len(chains))
	}
	return c.points(path, chains[0], least, most)
}

func (c checker) points(path string, points []geom.Point, least, most int) *EditError {
	if n := len(points); n < least || n > most {
		return fault(path, "%d points, wanted %d to %d", n, least, most)
	}
	for i, p := range points {
		if !c.bounds.Contains(p) || p.X != math.Trunc(p.X) || p.Y != math.Trunc(p.Y) {
			return c.point(path+"["+strconv.Itoa(i)+"]", p)
		}
	}
	return nil
}

// point wants p on the floor, at whole micrometres.
func (c checker) point(path string, p geom.Point) *EditError {
	for _, v := range [...]struct {
		field      string
		um, lo, hi float64
	}{{".x_m", p.X, c.bounds.Min.X, c.bounds.Max.X}, {".y_m", p.Y, c.bounds.Min.Y, c.bounds.Max.Y}} {
		switch {
		case !(v.um >= v.lo && v.um <= v.hi):
			return fault(path+v.field, "%v m lies outside the floor, wanted %s to %s",
				geom.Metres(v.um), metres(int64(v.lo)), metres(int64(v.hi)))
		case v.um != math.Trunc(v.um):
			return fault(path+v.field, "%v µm, wanted a whole number of micrometres", v.um)
		}
	}
	return nil
}

// polygon checks a polygon in every respect.
func (c checker) polygon(path string, chains [][]geom.Point) *EditError {
	if len(chains) == 0 {
		return fault(path+".outer", "missing")
	}
	if n := len(chains) - 1; n > MaxHoles {
		return fault(path+".holes", "%d holes, wanted at most %d", n, MaxHoles)
	}
	for i, ring := range chains {
		if err := c.points(ringPath(path, i)+".points", ring, 3, MaxRingPoints); err != nil {
			return err
		}
	}
	var pe *geom.PolygonError
	if err := geom.CheckPolygon(chains); errors.As(err, &pe) {
		at := ringPath(path, pe.Ring)
		if pe.Index >= 0 {
			at += ".points[" + strconv.Itoa(pe.Index) + "]"
		}
		return fault(at, "%s", pe.Problem)
	}
	return nil
}

func ringPath(path string, ring int) string {
	if ring == 0 {
		return path + ".outer"
	}
	return path + ".holes[" + strconv.Itoa(ring-1) + "]"
}

// rect wants cells of the floor, at least one.
func (c checker) rect(path string, r CellRect) *EditError {
	switch {
	case r.X0 < 0 || r.X0 >= c.cells.X1:
		return fault(path+".column", "%d, wanted 0 to %d", r.X0, c.cells.X1-1)
	case r.Y0 < 0 || r.Y0 >= c.cells.Y1:
		return fault(path+".row", "%d, wanted 0 to %d", r.Y0, c.cells.Y1-1)
	case r.X1 <= r.X0 || r.X1 > c.cells.X1:
		return fault(path+".columns", "%d, wanted 1 to %d from column %d on", r.X1-r.X0, c.cells.X1-r.X0, r.X0)
	case r.Y1 <= r.Y0 || r.Y1 > c.cells.Y1:
		return fault(path+".rows", "%d, wanted 1 to %d from row %d on", r.Y1-r.Y0, c.cells.Y1-r.Y0, r.Y0)
	}
	return nil
}

func checkFill(path string, v Occupancy) *EditError {
	if v > Unknown {
		return fault(path, "%d, wanted free, occupied or unknown", v)
	}
	return nil
}
