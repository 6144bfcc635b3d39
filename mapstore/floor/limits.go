package floor

import "example.com/wideberth/mapstore/geom"

// The limits of a floor. Everything stays below 2^53 µm (9.0e9 m), so that
// coordinates and their differences are exact in float64.
const (
	MinResolutionUm = 1_000                           // 1 mm
	MaxResolutionUm = 10 * geom.UmPerMetre            // 10 m
	MaxSide         = 65_536                          // columns, rows
	MaxCells        = 1 << 28                         // columns times rows
	MaxCapCells     = 250                             // clearance cap in cells; the least is one cell
	MaxOriginUm     = 1_000_000_000 * geom.UmPerMetre // size of an origin coordinate, 1e9 m
)

// The limits of a version's features and of a patch.
const (
	MaxFeatures    = 100_000   // on one floor
	MaxVertices    = 2_000_000 // of all features of one floor
	MaxRingPoints  = 10_000    // in a ring or a polyline
	MaxHoles       = 100       // in a polygon
	MaxNameBytes   = 63
	MaxNoteRunes   = 500
	MaxWidthUm     = 100 * geom.UmPerMetre   // of a polyline; the least is 1 µm
	MaxRadiusUm    = 1_000 * geom.UmPerMetre // of a disc; the least is 1 µm
	MaxToleranceUm = 1 * geom.UmPerMetre     // of a survey
	MinSpeedMps    = 0.001                   // of a speed limit; below it a route would take no finite time
	MaxSpeedMps    = 20                      // of a speed limit
	MaxEdits       = 10_000                  // in a patch
	MaxPatchCells  = MaxCells                // written one by one in a patch, all PaintCells together
	MaxPaintSteps  = 1 << 25                 // of all PaintPolygon in a patch together, see paintSteps
)
