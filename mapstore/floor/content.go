package floor

import "example.com/wideberth/mapstore/geom"

// Occupancy is what a cell of the surveyed raster holds.
type Occupancy uint8

// The occupancies. Their numbers are those of the two-bit encoding on the wire
// and in the journal.
const (
	Free     Occupancy = 0
	Occupied Occupancy = 1
	Unknown  Occupancy = 2
)

// Settings are what stays the same for all versions of a floor.
type Settings struct {
	ResolutionUm     int64 // side of a cell, whole micrometres
	Columns, Rows    int   // cells from left to right and from bottom to top
	OriginX, OriginY int64 // lower left corner of cell (0, 0), micrometres
	CapUm            int64 // largest clearance told apart, whole micrometres
	UnknownIsFree    bool
	OpenBorder       bool
	Initial          Occupancy // what every cell holds at version 1
}

// ShapeKind says how a Shape's chains are to be read.
type ShapeKind uint8

// The kinds of shape.
const (
	Polygon  ShapeKind = iota + 1 // filled: Chains[0] is the outer ring, the rest are holes
	Polyline                      // Chains[0] is an open chain with round ends
	Disc                          // Chains[0] holds the middle alone
)

// Shape is the exact outline of a solid: a core (a filled polygon, a chain of
// segments, a point) grown by Grow micrometres. A thick polyline is its chain
// grown by half its width, a disc its middle grown by its radius; a survey
// tolerance is grown on top. The distance to a shape is the distance to its
// core less Grow, not below 0.
type Shape struct {
	Kind   ShapeKind
	Chains [][]geom.Point
	Grow   float64
}

// FeatureKind says what a feature is.
type FeatureKind uint8

// The kinds of feature.
const (
	Solid          FeatureKind = iota + 1 // blocks
	ClosedZone                            // no robots
	SpeedLimitZone                        // SpeedMps holds inside
	OneWayZone                            // travel against Heading is refused inside
	Station                               // a pose to go to
)

// Feature is a named vector shape. A Feature is immutable once it is part of a
// Map; callers must not write to its slices.
type Feature struct {
	Name string
	Note string
	Kind FeatureKind

	// Solids and zones. What was declared (before growing) is kept beside the
	// outline so that it can be given back as it came: WidthUm for a polyline,
	// RadiusUm for a disc, ToleranceUm for any solid.
	Shape                          Shape
	WidthUm, RadiusUm, ToleranceUm int64

	SpeedMps float64    // speed limit zones
	Heading  float64    // one-way zones and stations, radians in (-pi, pi]
	At       geom.Point // stations
}

// CellRect is a rectangle of cells: columns X0 <= x < X1, rows Y0 <= y < Y1.
type CellRect struct{ X0, Y0, X1, Y1 int }

// EditKind says what an Edit does.
type EditKind uint8

// The kinds of edit.
const (
	PutFeature    EditKind = iota + 1 // Feature replaces or joins
	RemoveFeature                     // Name goes; an error when it is not there
	PaintRect                         // Rect becomes Fill
	PaintPolygon                      // cells whose closed square meets Shape become Fill
	PaintCells                        // Rect becomes Cells
	ClearRect                         // Rect becomes Free
)

// Edit is one change of a patch.
type Edit struct {
	Kind    EditKind
	Feature *Feature
	Name    string
	Rect    CellRect
	Shape   Shape
	Fill    Occupancy
	Cells   []byte // two bits a cell, lowest bits first, row by row from Y0, no row padding
}
