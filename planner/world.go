package planner

import (
	"context"
	"errors"

	"example.com/wideberth/mapstore/floor"
)

// World is one version made ready for planning. It is immutable and safe for any
// number of readers.
type World struct{}

var errTodo = errors.New("planner: not built yet")

// NewWorld makes a version ready from scratch.
func NewWorld(ctx context.Context, m *floor.Map) (*World, error) { return nil, errTodo }

// Advance makes m ready from the world of an earlier (or later) version of the
// same floor, with work proportional to what differs.
func (w *World) Advance(ctx context.Context, m *floor.Map) (*World, error) { return nil, errTodo }

// Map is the version the world was made from.
func (w *World) Map() *floor.Map { return nil }

// Plan answers a request. The error is ctx's, or a *RequestError; "no way" is a Refusal.
// A deadline that passes during the search gives a Refusal with OutOfTime when
// the deadline is ctx's own cause ErrTimeBudget, else ctx's error.
func (w *World) Plan(ctx context.Context, q Request) (Answer, error) { return Answer{}, errTodo }

// Replan answers a replan request.
func (w *World) Replan(ctx context.Context, q ReplanRequest) (ReplanAnswer, error) {
	return ReplanAnswer{}, errTodo
}

// Advise gives the hint for one report.
func (w *World) Advise(s GuideSetup, r GuideReport) Hint { return Hint{} }

// ErrTimeBudget is the cause to set on a context whose deadline is the request's own
// time budget (context.WithTimeoutCause).
var ErrTimeBudget = errors.New("planner: time budget spent")
