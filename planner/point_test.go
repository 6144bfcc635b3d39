package planner_test

import (
	"context"
	"testing"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// A point body touches solids and turns at their corners, on every roadmap, and does not
// slip between two that touch.
func TestPointBody(t *testing.T) {
	const res = 50_000
	s := floor.Settings{ResolutionUm: res, Columns: 20, Rows: 20, CapUm: 1_000_000}
	cells := func(x0, y0, x1, y1 int) floor.Edit {
		return floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}}
	}
	at := func(c, r float64) geom.Point { return geom.Point{X: c * res, Y: r * res} }
	disc := func(name string, mid geom.Point, r int64) floor.Edit {
		return put(&floor.Feature{Name: name, Kind: floor.Solid, RadiusUm: r, Shape: floor.NewDisc(mid, r, 0)})
	}
	// A wall of two halves that touch at a corner: below and right of (10, 10), and above
	// and left of it.
	halves := []floor.Edit{cells(10, 0, 12, 10), cells(8, 10, 10, 20)}
	for _, c := range []struct {
		name        string
		edits       []floor.Edit
		start, goal geom.Point
		long        float64 // shortest, in cells; 0: no way
	}{
		{"along a side", []floor.Edit{cells(5, 5, 15, 10)}, at(3, 10), at(17, 10), 14},
		{"from corner to corner", []floor.Edit{cells(5, 5, 15, 10)}, at(5, 10), at(15, 10), 10},
		{"about a corner", []floor.Edit{cells(5, 5, 15, 10)}, at(15, 7), at(12, 10), 6},
		{"along the border", nil, at(0, 0), at(20, 0), 20},
		{"through a gap of a cell", []floor.Edit{cells(0, 9, 10, 10), cells(11, 9, 20, 10)}, at(10.5, 2), at(10.5, 18), 16},
		{"no way where corners touch", halves, at(2, 2), at(18, 18), 0},
		{"no way along a side and on past the corner that is touched", halves, at(8, 10), at(14, 10), 0},
		{"to the corner that is touched", halves, at(5, 5), at(10, 10), 7.0710678118654755},
		{"and from it on the other side", halves, at(10, 10), at(15, 15), 7.0710678118654755},
		{"no way between discs that touch", []floor.Edit{disc("a", at(5, 10), 5*res), disc("b", at(15, 10), 5*res)}, at(10, 3), at(10, 17), 0},
		{"between discs two micrometres apart", []floor.Edit{disc("a", at(5, 10), 5*res-1), disc("b", at(15, 10), 5*res-1)}, at(10, 3), at(10, 17), 14},
	} {
		w := newWorld(t, newMap(t, s, c.edits...))
		for _, r := range []planner.Roadmap{planner.Auto, planner.Grid4, planner.Grid8, planner.Quadtree} {
			a, err := w.Plan(context.Background(), planner.Request{
				Body:    planner.Body{MaxSpeed: 1, Braking: 1, Reaction: 1},
				Start:   planner.Pose{At: c.start},
				Goal:    planner.Pose{At: c.goal},
				Options: planner.Options{Preference: planner.Shortest, Roadmap: r},
			})
			switch {
			case err != nil:
				t.Errorf("%s, roadmap %d: %v", c.name, r, err)
			case c.long == 0 && a.Route != nil:
				t.Errorf("%s, roadmap %d: a route of %f µm", c.name, r, a.Route.LengthUm)
			case c.long != 0 && a.Route == nil:
				t.Errorf("%s, roadmap %d: %+v", c.name, r, a.Refusal)
			case c.long != 0 && (a.Route.LengthUm < c.long*res-1e-3 || a.Route.LengthUm > (c.long+1.0/50)*res): // the gain that a bend is worth
				t.Errorf("%s, roadmap %d: %f cells long, want %f", c.name, r, a.Route.LengthUm/res, c.long)
			}
		}
	}
}
