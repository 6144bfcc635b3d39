// Package join joins the ends of a route to the cells of a grid or quadtree.
package join

import (
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/mask"
	"example.com/wideberth/planner/internal/roadmap"
)

// The bounds of joining an end.
const (
	// reach is how many cells away, in columns or rows, a node may be.
	reach = 12
	// more is how many rings beyond the first that holds one are looked at.
	more = 2
	// most is how many nodes an end is joined to at most.
	most = 32
)

// Links joins an end to free cells: straight pieces that may be driven, from p to
// middles of free cells near it, or to p for a goal. An end in the middle of a free
// cell is that cell's node; with leaves, as in a quadtree, one anywhere in a free cell is.
func Links(j *judge.Judge, free *mask.Mask, f roadmap.Frame, p geom.Point, goal, leaves bool) []roadmap.Link {
	own, ok := f.CellAt(p)
	if !ok {
		return nil
	}
	if free.Free(own.Col, own.Row) && (p == f.Centre(own) || leaves) {
		return []roadmap.Link{{Cell: own, At: p}}
	}
	var links []roadmap.Link
	last := reach
	for k := 0; k <= last && len(links) < most; k++ {
		for dr := -k; dr <= k; dr++ {
			step := 1
			if dr > -k && dr < k {
				step = 2 * k
			}
			for dc := -k; dc <= k; dc += step {
				c := roadmap.Cell{Col: own.Col + dc, Row: own.Row + dr}
				if !free.Free(c.Col, c.Row) || len(links) == most {
					continue
				}
				a, b := p, f.Centre(c)
				if goal {
					a, b = b, a
				}
				if !j.Sight(a, b) {
					continue
				}
				cost, _ := j.Weigh(a, b)
				links = append(links, roadmap.Link{Cell: c, At: f.Centre(c), CostUm: cost})
				last = min(last, k+more)
			}
		}
	}
	return links
}
