// Package geom is the plane geometry that the map and the planner share: points,
// rectangles, outlines, and exact distances between them.
//
// Lengths are micrometres, held in float64. Everything that comes from a map is a
// whole number of micrometres and stays below 2^53, so differences of
// coordinates are exact and a wall 0.45 m away is 450,000 away, not
// 449,999.99999. Metres exist only at the doors (the wire, files, pictures).
// x runs right, y up, angles in radians counter-clockwise from +x.
//
// Predicates (Orient, SegmentsTouch, InPolygon, CheckPolygon) are exact: they
// never answer wrongly because of rounding. Distances are exact between
// axis-aligned things and within RelativeError otherwise. All functions are
// pure, give the same bits on every machine, and may be called from any number
// of goroutines.
package geom

import "math"

// UmPerMetre is how many micrometres a metre has.
const UmPerMetre = 1_000_000

// Point is a place on the floor, in micrometres of the floor frame.
type Point struct{ X, Y float64 }

// Rect is an axis-aligned rectangle, its border included, in micrometres. A Rect
// whose Max is below its Min in x or y is empty; Empty returns one.
type Rect struct{ Min, Max Point }

// Ring is a closed chain of points; the last joins the first and is not repeated.
type Ring []Point

// FromMetres rounds a length in metres to the nearest whole micrometre, as a
// float64. NaN and infinities pass through.
func FromMetres(m float64) float64 { return math.Round(m * UmPerMetre) }

// RadiusFromMetres rounds a radius, margin or wanted clearance in metres up to a
// whole micrometre. A length within 1e-9 m above a whole micrometre counts as
// that micrometre: 0.35 is 350,000 µm, whatever its float64 neighbours say.
func RadiusFromMetres(m float64) int64 { return int64(math.Ceil(m*UmPerMetre - 1e-3)) }

// Metres turns micrometres into metres.
func Metres(um float64) float64 { return um / UmPerMetre }
