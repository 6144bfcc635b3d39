package trapezoid

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/cells"
)

// Solid is what a wall that is followed belongs to.
type Solid = cells.Source

// The kinds of Solid: the end of the floor, solid cells of its raster, a named feature.
const (
	Border = cells.Border
	Raster = cells.Raster
	Named  = cells.Named
)

// Hand is the side on which a wall is followed.
type Hand uint8

// The hands.
const (
	Left Hand = iota + 1
	Right
)

// Step is one wall of a wall-following sequence: keep the hand on the solid's grown
// outline, from the first of Points until the last. Pieces at its ends lead straight to
// the wall or away from it.
type Step struct {
	Hand   Hand
	On     Solid
	Points []geom.Point
}

// WallFollowing is another way through the cells that Search finds: along the outlines of the
// solids above and below them, as a sequence of walls to follow. Among the ways that
// change walls only where cells meet it is a shortest one. Between ends in one cell there
// is no wall to follow, and no steps.
func (r *Roadmap) WallFollowing(ctx context.Context, s, t geom.Point) (steps []Step, w roadmap.Way, ok bool, err error) {
	from, okFrom := r.s.Enter(s)
	to, okTo := r.s.Enter(t)
	if !okFrom || !okTo {
		return nil, w, false, ctx.Err()
	}
	p, ok, err := cells.Find(ctx, star{r.s}, from, to)
	w.Expanded, w.Queued = p.Expanded, p.Queued
	if !ok || err != nil {
		return nil, w, false, err
	}
	if len(p.Doors) == 0 {
		w.Points, w.LengthUm = cells.Polyline(s, from.At, to.At, t)
		return nil, w, true, nil
	}
	steps = join(r.crossings(p, from.At, to.At))
	places := []geom.Point{s}
	for _, k := range steps {
		places = append(places, k.Points...)
	}
	w.Points, w.LengthUm = cells.Polyline(append(places, t)...)
	return steps, w, true, nil
}

// crossings is the best way across each room: doors are passed at one of their ends.
func (r *Roadmap) crossings(p cells.Passage, from, to geom.Point) []Step {
	type state struct {
		cost float64
		last int
		step Step
	}
	ends := func(i int) []geom.Point { // of the door before room i
		switch i {
		case 0:
			return []geom.Point{from}
		case len(p.Rooms):
			return []geom.Point{to}
		}
		w := r.s.Walls[p.Doors[i-1]]
		return []geom.Point{r.s.Point(float64(w.X), float64(w.Lo)), r.s.Point(float64(w.X), float64(w.Hi))}
	}
	table := make([][]state, len(p.Rooms)+1)
	table[0] = []state{{}}
	for i, room := range p.Rooms {
		before := room
		if i > 0 {
			before = p.Rooms[i-1]
		}
		for _, q := range ends(i + 1) {
			best := state{cost: math.Inf(1)}
			for k, a := range ends(i) {
				for _, up := range [2]bool{true, false} {
					step := r.cross(room, before, a, q, up)
					_, l := cells.Polyline(step.Points...)
					if c := table[i][k].cost + l; c < best.cost {
						best = state{c, k, step}
					}
				}
			}
			table[i+1] = append(table[i+1], best)
		}
	}
	steps := make([]Step, len(p.Rooms))
	k := 0
	for i := len(p.Rooms); i > 0; i-- {
		steps[i-1] = table[i][k].step
		k = table[i][k].last
	}
	return steps
}

// cross goes from a to q in a room along its upper or its lower side. before is the room from
// which a was reached.
func (r *Roadmap) cross(room, before int32, a, q geom.Point, up bool) Step {
	c := &r.s.Cells[room]
	if a.X == q.X {
		// Round the end of the solid between two doors in one wall: what was above or
		// below on the way there.
		b := &r.s.Cells[before]
		on, _ := b.Above()
		hand := Left
		if q.Y < a.Y {
			on, _ = b.Below()
			hand = Right
		}
		if a.X == r.s.Point(float64(c.X1), 0).X && !c.Slit() {
			hand = Left + Right - hand
		}
		return Step{hand, on, []geom.Point{a, q}}
	}
	on, _ := c.Below()
	if up {
		on, _ = c.Above()
	}
	hand := Right
	if up == (q.X > a.X) {
		hand = Left
	}
	return Step{hand, on, []geom.Point{a, r.s.OnSide(room, a, up), r.s.OnSide(room, q, up), q}}
}

// join puts successive steps along one wall together.
func join(in []Step) []Step {
	var out []Step
	for _, s := range in {
		if n := len(out); n > 0 && out[n-1].Hand == s.Hand && out[n-1].On == s.On {
			out[n-1].Points = append(out[n-1].Points, s.Points...)
			continue
		}
		out = append(out, s)
	}
	for i := range out {
		out[i].Points, _ = cells.Polyline(out[i].Points...)
	}
	return out
}
