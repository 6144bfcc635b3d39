// Package wire turns messages of the contract into the map's own types and back:
// metres into whole micrometres, enums into kinds, outlines into shapes. Server and
// client both go through it, so the two cannot come to read one message
// differently.
//
// Names end in In for what comes from a message and in Out for what goes into one.
// Nothing here judges a message beyond what is needed to read it: the server
// checks first (its validate*.go), floor.Map.Apply checks what a client has read.
// Missing messages and lists read as zero, as protobuf's getters give them.
//
// Whole micrometres survive both ways: XIn(XOut(v)) is v for every v that a floor can
// hold. The other way round metres come back rounded, coordinates to the nearest
// micrometre, radii, widths and tolerances up, and headings within (-pi, pi].
package wire

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// Um rounds metres to the nearest whole micrometre.
func Um(m float64) int64 { return int64(geom.FromMetres(m)) }

// Metres turns whole micrometres into metres.
func Metres(um int64) float64 { return geom.Metres(float64(um)) }

// Heading takes a direction that lies a little beyond (-pi, pi], as rounding
// leaves it (float32 holds pi 8.8e-8 too large, and Atan2 may give -pi), as pi.
func Heading(rad float64) float64 {
	if rad > math.Pi || rad <= -math.Pi {
		return math.Pi
	}
	return rad
}
