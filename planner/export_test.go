package planner

import "example.com/wideberth/mapstore/geom"

// RoomOf is the smallest clearance along a way for a request, but for what its ends leave.
func (w *World) RoomOf(q Request, pts []geom.Point) float64 {
	t, err := w.task(q)
	if err != nil {
		panic(err)
	}
	return t.roomOf(pts)
}
