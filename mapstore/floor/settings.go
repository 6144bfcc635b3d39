package floor

import (
	"fmt"
	"strings"

	"example.com/wideberth/mapstore/geom"
)

// FieldError says what is wrong with one field.
type FieldError struct {
	Field   string // in the contract's words, e.g. "resolution_m"
	Problem string // value and wanted range
}

// SettingsError names every fault of a Settings at once.
type SettingsError []FieldError

// Error lists the faults.
func (e SettingsError) Error() string {
	parts := make([]string, len(e))
	for i, f := range e {
		parts[i] = f.Field + ": " + f.Problem
	}
	return strings.Join(parts, "; ")
}

// Validate checks s against the limits of this package. The error is a
// SettingsError that names every field at fault.
func (s Settings) Validate() error {
	var faults SettingsError
	bad := func(field, format string, args ...any) {
		faults = append(faults, FieldError{field, fmt.Sprintf(format, args...)})
	}
	resolutionOK := s.ResolutionUm >= MinResolutionUm && s.ResolutionUm <= MaxResolutionUm
	if !resolutionOK {
		bad("resolution_m", "%s, wanted %s to %s", metres(s.ResolutionUm), metres(MinResolutionUm), metres(MaxResolutionUm))
	}
	sidesOK := true
	for _, side := range []struct {
		field string
		n     int
	}{{"columns", s.Columns}, {"rows", s.Rows}} {
		if side.n < 1 || side.n > MaxSide {
			bad(side.field, "%d, wanted 1 to %d", side.n, MaxSide)
			sidesOK = false
		}
	}
	if sidesOK && s.Columns*s.Rows > MaxCells {
		bad("columns", "%d columns of %d rows are %d cells, wanted at most %d", s.Columns, s.Rows, s.Columns*s.Rows, MaxCells)
	}
	for _, o := range []struct {
		field string
		um    int64
	}{{"origin.x_m", s.OriginX}, {"origin.y_m", s.OriginY}} {
		if o.um < -MaxOriginUm || o.um > MaxOriginUm {
			bad(o.field, "%s, wanted %s to %s", metres(o.um), metres(-MaxOriginUm), metres(MaxOriginUm))
		}
	}
	if resolutionOK && (s.CapUm < s.ResolutionUm || s.CapUm > MaxCapCells*s.ResolutionUm) {
		bad("clearance_cap_m", "%s, wanted %s to %s (1 to %d cells)",
			metres(s.CapUm), metres(s.ResolutionUm), metres(MaxCapCells*s.ResolutionUm), MaxCapCells)
	}
	if s.Initial > Unknown {
		bad("initial_occupancy", "%d, wanted free, occupied or unknown", s.Initial)
	}
	if faults != nil {
		return faults
	}
	return nil
}

// metres writes a length of whole micrometres in metres, exactly.
func metres(um int64) string {
	sign, u := "", uint64(um)
	if um < 0 {
		sign, u = "-", -u
	}
	frac := strings.TrimRight(fmt.Sprintf("%06d", u%geom.UmPerMetre), "0")
	if frac != "" {
		frac = "." + frac
	}
	return fmt.Sprintf("%s%d%s m", sign, u/geom.UmPerMetre, frac)
}

// Bounds is the floor's rectangle.
func (s Settings) Bounds() geom.Rect { return s.CellBounds(s.AllCells()) }

// AllCells are all cells of the floor.
func (s Settings) AllCells() CellRect { return CellRect{0, 0, s.Columns, s.Rows} }

// CellBounds is the rectangle that the cells of r cover, empty when r is.
func (s Settings) CellBounds(r CellRect) geom.Rect {
	if r.IsEmpty() {
		return geom.EmptyRect()
	}
	return geom.Rect{Min: s.Vertex(r.X0, r.Y0), Max: s.Vertex(r.X1, r.Y1)}
}

// Vertex is lattice vertex (i, j): the lower left corner of cell (i, j).
func (s Settings) Vertex(i, j int) geom.Point {
	return geom.Point{
		X: float64(s.OriginX + int64(i)*s.ResolutionUm),
		Y: float64(s.OriginY + int64(j)*s.ResolutionUm),
	}
}

// CellAt is the cell that holds p. On a line between cells it is the one to the
// right or above; on the floor's right and upper border the last one. ok is false
// when p is not on the floor.
func (s Settings) CellAt(p geom.Point) (col, row int, ok bool) {
	if !s.Bounds().Contains(p) {
		return 0, 0, false
	}
	col = int(floorDiv(p.X-float64(s.OriginX), s.ResolutionUm))
	row = int(floorDiv(p.Y-float64(s.OriginY), s.ResolutionUm))
	return min(col, s.Columns-1), min(row, s.Rows-1), true
}

// CellRectOf are the cells whose open square meets the closed rectangle r, within
// the floor. A rectangle that only touches a cell's border does not meet it.
func (s Settings) CellRectOf(r geom.Rect) CellRect {
	r = r.Intersect(s.Bounds())
	if r.IsEmpty() {
		return CellRect{}
	}
	ox, oy := float64(s.OriginX), float64(s.OriginY)
	return CellRect{
		X0: int(floorDiv(r.Min.X-ox, s.ResolutionUm)),
		Y0: int(floorDiv(r.Min.Y-oy, s.ResolutionUm)),
		X1: int(-floorDiv(ox-r.Max.X, s.ResolutionUm)),
		Y1: int(-floorDiv(oy-r.Max.Y, s.ResolutionUm)),
	}.Intersect(s.AllCells())
}

// TouchedCells are the cells whose closed square meets the closed rectangle r,
// within the floor.
func (s Settings) TouchedCells(r geom.Rect) CellRect {
	if r.IsEmpty() || !r.Intersects(s.Bounds()) {
		return CellRect{}
	}
	r = r.Intersect(s.Bounds())
	ox, oy := float64(s.OriginX), float64(s.OriginY)
	return CellRect{
		X0: int(-floorDiv(ox-r.Min.X, s.ResolutionUm)) - 1,
		Y0: int(-floorDiv(oy-r.Min.Y, s.ResolutionUm)) - 1,
		X1: int(floorDiv(r.Max.X-ox, s.ResolutionUm)) + 1,
		Y1: int(floorDiv(r.Max.Y-oy, s.ResolutionUm)) + 1,
	}.Intersect(s.AllCells())
}

// floorDiv is the largest whole number not above um / step, exactly: um is first
// rounded down to a whole micrometre, which does not change the answer.
func floorDiv(um float64, step int64) int64 {
	n := int64(um)
	if float64(n) > um {
		n--
	}
	q := n / step
	if n%step < 0 {
		q--
	}
	return q
}

// IsEmpty says whether r holds no cell.
func (r CellRect) IsEmpty() bool { return r.X0 >= r.X1 || r.Y0 >= r.Y1 }

// Count is how many cells r holds.
func (r CellRect) Count() int64 {
	if r.IsEmpty() {
		return 0
	}
	return int64(r.X1-r.X0) * int64(r.Y1-r.Y0)
}

// Intersect are the cells that r and o share; the zero CellRect when there is none.
func (r CellRect) Intersect(o CellRect) CellRect {
	c := CellRect{max(r.X0, o.X0), max(r.Y0, o.Y0), min(r.X1, o.X1), min(r.Y1, o.Y1)}
	if c.IsEmpty() {
		return CellRect{}
	}
	return c
}

// Union is the smallest rectangle that holds the cells of both.
func (r CellRect) Union(o CellRect) CellRect {
	switch {
	case r.IsEmpty():
		return o
	case o.IsEmpty():
		return r
	}
	return CellRect{min(r.X0, o.X0), min(r.Y0, o.Y0), max(r.X1, o.X1), max(r.Y1, o.Y1)}
}
