package planner

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// bearing is the direction from a to b, radians in (-pi, pi]; 0 when they are one.
func bearing(a, b geom.Point) float64 {
	if a == b {
		return 0
	}
	return wrapped(math.Atan2(b.Y-a.Y, b.X-a.X))
}

// wrapped brings an angle within one turn of (-pi, pi] into it.
func wrapped(rad float64) float64 {
	switch {
	case rad > math.Pi:
		return rad - 2*math.Pi
	case rad <= -math.Pi:
		return rad + 2*math.Pi
	}
	return rad
}

// roundedDown is a clearance in whole micrometres, at most the floor's cap.
func (t *task) roundedDown(um float64) int64 { return roundDown(um, t.w.field.Cap()) }

func roundDown(um float64, most int64) int64 { return max(0, min(int64(math.Floor(um)), most)) }
