package roadmap

import (
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/rules"
)

// Steps are the moves of the grid that Grid searches and what each costs in whole
// numbers, for a search of the same graph that keeps its state elsewhere.
type Steps struct {
	// Can has a bit for each move there is: 0 to 3 straight, the way of +x first, counter-
	// clockwise; 4 to 7 diagonal, that of (+1, +1) first.
	Can   uint8
	costs gridCosts
}

// StepsOf are the steps that Grid takes for q. They depend on its frame, its weight and how
// many levels it has.
func StepsOf(q *Query, diagonal bool) Steps {
	s := Steps{Can: 0x0f, costs: newGridCosts(q)}
	if diagonal {
		s.Can = 0xff
	}
	return s
}

// Halves are what half a straight and half a diagonal step cost in a cell, by how many of
// the query's levels the cell is below. A step costs half of each of its two cells.
func (s *Steps) Halves() (flat, across [MaxLevels + 1]int64) { return s.costs.flat, s.costs.across }

// Least is the least that a way between cells dx columns and dy rows apart costs. It is a
// metric.
func (s *Steps) Least(dx, dy int64) int64 { return s.costs.octile(dx, dy, s.Can&0xf0 != 0) }

// FromUm is a cost in micrometres as a whole number, UmFrom the other way round.
func (s *Steps) FromUm(um float64) int64 { return s.costs.fromUm(um) }

// UmFrom is a whole-number cost in micrometres.
func (s *Steps) UmFrom(cost int64) float64 { return float64(float64(cost) * s.costs.unit) }

// MoveOf is where move d leads: columns and rows.
func MoveOf(d int) (dx, dy int) { return moveX[d], moveY[d] }

// MovesAmong are the moves, a bit each, that cut no corner for a pattern of free cells:
// three bits each for the row below, the cell's own and the row above, from left to right.
func MovesAmong(around uint) uint8 { return moves[around&511] }

// Against says whether a one-way zone forbids the step from a to its neighbour b.
func (q *Query) Against(a, b Cell) bool {
	return q.Rules.Against(q.Frame.Centre(a), q.Frame.Centre(b), rules.StepSlackUm) != nil
}

// StraightRuns drops the points inside straight runs of equal steps.
func StraightRuns(p []geom.Point) []geom.Point { return straightRuns(p) }

// Queue is the queue that Grid uses: for keys that never fall below what was last taken out
// and do not run far ahead of it. Among equal keys the last to come goes first.
type Queue struct{ b *buckets }

// NewQueue is an empty queue for keys that grow by the costs of steps.
func NewQueue(s *Steps) Queue {
	q := Queue{bucketPool.Get().(*buckets)}
	q.b.reset(s.costs.scale - bucketsPerStep)
	return q
}

// Push queues a node.
func (q Queue) Push(f int64, id uint32) { q.b.push(f, id) }

// Empty says whether none is queued.
func (q Queue) Empty() bool { return q.b.empty() }

// Pop takes a node of the least key out. There must be one.
func (q Queue) Pop() (f int64, id uint32) { return q.b.pop() }

// Release gives the queue's memory back; it is of no use after.
func (q Queue) Release() { bucketPool.Put(q.b) }
