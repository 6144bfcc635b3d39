package layout

import (
	"math"
	"regexp"
	"slices"
	"strings"

	"example.com/wideberth/mapstore/geom"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

var (
	floorID     = regexp.MustCompile(`^[a-z][a-z0-9-]{0,62}$`)
	featureName = regexp.MustCompile(`^[a-z0-9][a-z0-9_./-]{0,62}$`)
)

const (
	defaultResolutionM = 0.05
	minResolutionM     = 0.001
	maxResolutionM     = 10
	maxSideCells       = 65_536      // the contract's own
	maxCells           = 268_435_456 // the contract's own
	minCellsCap        = 1
	maxCellsCap        = 250
)

var occupancies = map[string]wideberthv1.Occupancy{
	"free":     wideberthv1.Occupancy_OCCUPANCY_FREE,
	"occupied": wideberthv1.Occupancy_OCCUPANCY_OCCUPIED,
	"unknown":  wideberthv1.Occupancy_OCCUPANCY_UNKNOWN,
}

// grid is the floor's raster in whole micrometres.
type grid struct {
	res, x0, y0   int64
	columns, rows int64
}

// builder turns the file's words into the contract's.
type builder struct {
	*faults
	grid  grid
	edits int // made so far
	bytes int // of those
}

func build(spec *fileSpec, f *faults) *Layout {
	if spec.Format != formatVersion {
		f.add([]any{"format"}, "%d; this program reads format %d", spec.Format, formatVersion)
		return nil
	}
	b := &builder{faults: f}
	l := &Layout{Floor: spec.Floor, Title: spec.Title, Settings: b.settings(spec)}
	if l.Settings == nil {
		return nil
	}
	l.Bodies = b.bodies(spec.Bodies)
	l.Edits = b.items(spec.Items, []any{"items"}, false)
	if len(spec.Changes) > maxChanges {
		b.add([]any{"changes"}, "%d changes; at most %d", len(spec.Changes), maxChanges)
		return nil
	}
	for i, c := range spec.Changes {
		path := []any{"changes", i}
		b.text(at(path, "name"), c.Name, 1, maxNames)
		b.text(at(path, "title"), c.Title, 0, maxNames)
		b.text(at(path, "reason"), c.Reason, 1, maxReason)
		if _, twice := l.Change(c.Name); twice {
			b.add(at(path, "name"), "%q is the name of an earlier change", c.Name)
		}
		if len(c.Items) == 0 {
			b.add(path, "no items; a change changes something")
		}
		l.Changes = append(l.Changes, Change{Name: c.Name, Title: c.Title, Reason: c.Reason,
			Edits: b.items(c.Items, at(path, "items"), true)})
	}
	return l
}

func (b *builder) text(path []any, s string, least, most int) {
	if n := len([]rune(s)); n < least || n > most {
		b.add(path, "%d characters; wanted %d to %d", n, least, most)
	}
}

func (b *builder) number(path []any, v, least, most float64) bool {
	if math.IsNaN(v) || v < least || v > most {
		b.add(path, "%v; wanted %v to %v", v, least, most)
		return false
	}
	return true
}

func (b *builder) settings(spec *fileSpec) *wideberthv1.FloorSettings {
	before := len(b.err.Faults)
	if !floorID.MatchString(spec.Floor) {
		b.add([]any{"floor"}, "%q; wanted 1 to 63 of a-z, 0-9 and '-', first a letter", spec.Floor)
	}
	b.text([]any{"title"}, spec.Title, 0, maxNames)
	resM := defaultResolutionM
	if spec.ResolutionM != nil {
		resM = *spec.ResolutionM
	}
	if !b.number([]any{"resolution_m"}, resM, minResolutionM, maxResolutionM) {
		return nil
	}
	b.grid.res = int64(geom.FromMetres(resM))
	b.grid.columns = b.side("width_m", spec.WidthM)
	b.grid.rows = b.side("height_m", spec.HeightM)
	if c := b.grid.columns * b.grid.rows; c > maxCells {
		b.add([]any{"width_m"}, "%d cells in all; at most %d", c, maxCells)
	}
	origin := []float64{0, 0}
	if spec.OriginM != nil {
		origin = spec.OriginM
	}
	x, y, ok := b.pair([]any{"origin_m"}, origin)
	if ok {
		b.grid.x0, b.grid.y0 = int64(geom.FromMetres(x)), int64(geom.FromMetres(y))
	}
	if spec.CapM != 0 {
		b.number([]any{"clearance_cap_m"}, spec.CapM, minCellsCap*resM, maxCellsCap*resM)
	}
	initial := wideberthv1.Occupancy_OCCUPANCY_UNKNOWN
	if spec.Initial != "" {
		initial, ok = occupancies[spec.Initial]
		if !ok {
			b.add([]any{"initial"}, "%q; wanted free, occupied or unknown", spec.Initial)
		}
	}
	if len(b.err.Faults) > before {
		return nil
	}
	return &wideberthv1.FloorSettings{
		ResolutionM: &resM, Columns: int32(b.grid.columns), Rows: int32(b.grid.rows),
		Origin:        &wideberthv1.Point{XM: x, YM: y},
		ClearanceCapM: spec.CapM, UnknownIsFree: spec.UnknownIsFree, OpenBorder: spec.OpenBorder,
		InitialOccupancy: initial,
	}
}

// side is how many cells a side has; it must be a whole number of them.
func (b *builder) side(field string, m float64) int64 {
	if !b.number([]any{field}, m, geom.Metres(float64(b.grid.res)), maxCoordM) {
		return 0
	}
	um := int64(geom.FromMetres(m))
	n := um / b.grid.res
	if um%b.grid.res != 0 {
		b.add([]any{field}, "%v is not a whole number of cells of %v m", m, geom.Metres(float64(b.grid.res)))
	} else if n > maxSideCells {
		b.add([]any{field}, "%v m are %d cells; at most %d", m, n, maxSideCells)
		return 0
	}
	return n
}

func (b *builder) bodies(specs []bodySpec) []*wideberthv1.Body {
	if len(specs) > maxBodies {
		b.add([]any{"bodies"}, "%d bodies; at most %d", len(specs), maxBodies)
		return nil
	}
	var out []*wideberthv1.Body
	for i, s := range specs {
		path := []any{"bodies", i}
		b.text(at(path, "name"), s.Name, 1, 63)
		if slices.ContainsFunc(out, func(o *wideberthv1.Body) bool { return o.GetName() == s.Name }) {
			b.add(at(path, "name"), "%q is the name of an earlier body", s.Name)
		}
		// The ranges are the contract's.
		b.number(at(path, "radius_m"), s.RadiusM, 0, 10)
		b.number(at(path, "margin_m"), s.MarginM, 0, 5)
		b.number(at(path, "max_speed_mps"), s.SpeedMps, 0, 20)
		b.number(at(path, "braking_mps2"), s.BrakingMps, 0, 10)
		b.number(at(path, "reaction_s"), s.ReactionS, 0, 10)
		b.number(at(path, "sensing_range_m"), s.SensingM, 0, 1000)
		if s.PreferredM != 0 {
			b.number(at(path, "preferred_clearance_m"), s.PreferredM, s.RadiusM+s.MarginM, maxCellsCap*maxResolutionM)
		}
		out = append(out, &wideberthv1.Body{
			Name: s.Name, RadiusM: s.RadiusM, MarginM: s.MarginM, PreferredClearanceM: s.PreferredM,
			MaxSpeedMps: s.SpeedMps, BrakingMps2: s.BrakingMps, ReactionS: s.ReactionS, SensingRangeM: s.SensingM,
		})
	}
	return out
}

// pair is a point's two numbers.
func (b *builder) pair(path []any, p []float64) (x, y float64, ok bool) {
	if len(p) != 2 || !finite(p[0]) || !finite(p[1]) {
		b.add(path, "%s; wanted [x, y] in metres, each within %d", list(p), maxCoordM)
		return 0, 0, false
	}
	return p[0], p[1], true
}

// name checks a feature's name.
func (b *builder) name(path []any, name string) bool {
	if !featureName.MatchString(name) {
		b.add(path, "%q; wanted 1 to 63 of a-z, 0-9, '-', '_', '.' and '/', first a letter or digit", name)
		return false
	}
	return true
}

// list writes numbers for a message, not more than a few of them.
func list(p []float64) string {
	const shown = 6
	var parts []string
	for i, v := range p {
		if i == shown {
			parts = append(parts, "...")
			break
		}
		parts = append(parts, trim(v))
	}
	return "[" + strings.Join(parts, ", ") + "]"
}
