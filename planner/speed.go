package planner

import (
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/judge"
)

// ceiling is the advised speed ceiling for leaving a along the straight piece ab: the
// body's own, a zone's, or what the free travel straight ahead allows. At the end of
// a route a equals b.
func (t *task) ceiling(a, b geom.Point, heading float64) (float64, SpeedCause) {
	// The piece itself is known to be free, whatever rounding makes of its heading.
	free := geom.Dist(a, b)
	limit := t.w.rules.SpeedLimit(a, b)
	if most := t.w.stopping(t.q.Body, limit); free < float64(most) {
		free += t.w.travel(t.j, b, heading, t.q.Body.RadiusUm, most-int64(free))
	}
	return advised(t.q.Body, limit, free)
}

// advised is the lowest of the body's own speed, a zone's limit, and the speed from
// which the body stops within free micrometres.
func advised(b Body, limit, free float64) (float64, SpeedCause) {
	v, cause := b.MaxSpeed, CauseBody
	if limit < v {
		v, cause = limit, CauseZone
	}
	if room := roomSpeed(b, geom.Metres(free)); room < v {
		v, cause = room, CauseRoom
	}
	return v, cause
}

// roomSpeed is the speed, m/s, from which a body stops within d metres: v·t + v²/2a = d
// solved for v, with reaction time t and braking a.
func roomSpeed(b Body, d float64) float64 {
	t := b.Reaction
	return float64(b.Braking * (math.Sqrt(float64(t*t)+float64(2*d/b.Braking)) - t))
}

// stopping is the free travel, in micrometres, beyond which room does not limit the
// body's speed where limit does already; at most the floor's diagonal.
func (w *World) stopping(b Body, limit float64) int64 {
	v := min(b.MaxSpeed, limit)
	d := float64(v*b.Reaction) + float64(v*v)/(2*b.Braking)
	r := w.field.Bounds()
	return int64(math.Ceil(min(d*geom.UmPerMetre, geom.Dist(r.Min, r.Max)))) + 1
}

// travel is the field's Travel, which on a floor with an open border ends where the
// disc's middle would leave the floor.
func (w *World) travel(j *judge.Judge, p geom.Point, heading float64, radiusUm, most int64) float64 {
	d := j.Travel(p, heading, radiusUm, most)
	if !w.m.Settings().OpenBorder {
		return d
	}
	r := w.field.Bounds()
	leave := func(v, lo, hi, step float64) float64 {
		switch {
		case step > 0:
			return (hi - v) / step
		case step < 0:
			return (lo - v) / step
		}
		return math.Inf(1)
	}
	out := min(leave(p.X, r.Min.X, r.Max.X, math.Cos(heading)), leave(p.Y, r.Min.Y, r.Max.Y, math.Sin(heading)))
	return max(0, min(d, math.Floor(out)))
}
