// Package roadmap searches roadmaps over the free cells of one version: the 4- and
// 8-connected grid and the leaves of a quadtree, each with A* (Hart, Nilsson &
// Raphael, "A Formal Basis for the Heuristic Determination of Minimum Cost
// Paths", IEEE TSSC 4(2), 1968); and, when there is no way, the widest one.
//
// A search owns its state. Given the same query it does the same: ties on grids go to the
// node queued last, in the quadtree to larger g and then to the node found first.
package roadmap

import (
	"context"
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/mask"
	"example.com/wideberth/planner/internal/rules"
)

// PollEvery is how many nodes a search opens at most between two looks at its context.
const PollEvery = 1024

// Cell is a cell of the floor.
type Cell struct{ Col, Row int }

// Link joins an end of the route to the roadmap: a straight piece from the end to At
// in Cell, with what that piece costs in micrometres. At is the cell's Centre on
// grids.
type Link struct {
	Cell   Cell
	At     geom.Point
	CostUm float64
}

// Counters say how much a search did.
type Counters struct{ Expanded, Queued int64 }

// MaxLevels is how many levels a Query has at most.
const MaxLevels = 8

// Query is a question to a roadmap.
type Query struct {
	Frame Frame
	Free  *mask.Mask // cells that are nodes
	// Levels are masks that narrow the free cells, each holding all cells of the one before
	// it. A metre in a cell of the first costs one; in cells of none of them it costs
	// Weight on top; between, in equal steps.
	Levels []*mask.Mask
	Weight float64
	Rules  *rules.Rules
	From   []Link // each in a free cell, no two in one cell
	To     []Link
	Count  *Counters
}

// factor is what a metre costs in a cell that is in all but k of the levels.
func (q *Query) factor(k int) float64 {
	if len(q.Levels) == 0 {
		return 1
	}
	return 1 + float64(q.Weight*float64(k))/float64(len(q.Levels))
}

// Path is the cheapest way over the roadmap from one of Query.From to one of
// Query.To, both ends' At included.
type Path struct {
	Points   []geom.Point
	From, To int     // which links
	CostUm   float64 // with both links' cost
}

// Outcome says how a search ended.
type Outcome uint8

// The outcomes.
const (
	Found    Outcome = iota
	FromShut         // all that can be reached from Query.From was seen
	ToShut           // all from which Query.To can be reached was seen
)

// Frame is where cells lie.
type Frame struct {
	Res        float64
	OX, OY     float64
	Cols, Rows int
}

// FrameOf is the frame of a floor.
func FrameOf(s floor.Settings) Frame {
	return Frame{float64(s.ResolutionUm), float64(s.OriginX), float64(s.OriginY), s.Columns, s.Rows}
}

// Centre is the middle of a cell, rounded down to whole micrometres so that it can
// be sent. Joining rounded middles of free neighbours stays within their squares
// as joining exact ones does.
func (f Frame) Centre(c Cell) geom.Point {
	half := math.Floor(f.Res / 2)
	return geom.Point{X: f.OX + float64(float64(c.Col)*f.Res) + half, Y: f.OY + float64(float64(c.Row)*f.Res) + half}
}

// CellAt is the cell that holds p, the upper right one of several; on the floor's
// upper and right border the last. ok is false off the floor.
func (f Frame) CellAt(p geom.Point) (c Cell, ok bool) {
	x, y := math.Floor((p.X-f.OX)/f.Res), math.Floor((p.Y-f.OY)/f.Res)
	w, h := float64(f.Cols), float64(f.Rows)
	if !(p.X >= f.OX && p.Y >= f.OY && p.X <= f.OX+float64(w*f.Res) && p.Y <= f.OY+float64(h*f.Res)) {
		return Cell{}, false
	}
	return Cell{int(min(x, w-1)), int(min(y, h-1))}, true
}

// Rect is the closed square of a cell.
func (f Frame) Rect(c Cell) geom.Rect {
	lo := geom.Point{X: f.OX + float64(float64(c.Col)*f.Res), Y: f.OY + float64(float64(c.Row)*f.Res)}
	return geom.Rect{Min: lo, Max: geom.Point{X: lo.X + f.Res, Y: lo.Y + f.Res}}
}

// poll looks at ctx once in PollEvery calls.
type poll struct {
	ctx context.Context
	n   int
}

func (p *poll) err() error {
	if p.n++; p.n%PollEvery != 0 {
		return nil
	}
	if p.ctx.Err() != nil {
		return context.Cause(p.ctx)
	}
	return nil
}
