package planner

import (
	"context"

	"example.com/wideberth/planner/internal/dstar"
	"example.com/wideberth/planner/internal/roadmap"
)

// Session keeps what stands behind one robot's route, so that the next answer takes work that
// grows with what changed and not with the route or the floor: the route it answered last, with
// what was found out about each piece of it (record.go), and, when a grid was named to be
// searched (Grid4, Grid8), the search, D* Lite (Koenig & Likhachev 2002; package dstar). What it
// answers is what a plan without it answers, to the last digit, whatever it was used for before;
// it pays where body, goal and options stay, and for the search where the change is nearer to
// the robot than to the goal. The zero value is ready; nil is no session. It is for one call
// at a time.
type Session struct {
	search dstar.Session
	last   *record // nil: none
}

// Bytes is about how much memory the session holds: half a kilobyte for each point of the
// route, and 32 KiB for each 64x64 cells that its search came into, more along the search's rim (see
// package dstar). It keeps no version's map in memory. 0 is a session that is worth nothing yet.
func (s *Session) Bytes() int64 { return s.search.Bytes() + s.last.bytes() }

// Release gives that memory back. The session is as new.
func (s *Session) Release() {
	s.search.Release()
	s.last = nil
}

// PlanIn is Plan in a session.
func (w *World) PlanIn(ctx context.Context, s *Session, q Request) (Answer, error) {
	t, err := w.task(q)
	if err != nil {
		return Answer{}, err
	}
	t.session = s
	a, err := t.plan(ctx)
	if err == nil {
		t.remember(a.Route)
	}
	return t.finish(ctx, a, err)
}

// grid searches the named grid for a path, the same one with a session and without.
func (t *task) grid(ctx context.Context, q *roadmap.Query) (roadmap.Path, roadmap.Outcome, error) {
	s := t.session
	if s == nil {
		s = new(Session)
		defer s.Release()
	}
	p, out, err := s.search.Plan(ctx, q, t.q.Options.Roadmap == Grid8)
	t.mended = s.search.Mended()
	return p, out, err
}
