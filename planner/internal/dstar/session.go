// Package dstar keeps the search of a grid roadmap from one plan to the next: D* Lite
// (Koenig & Likhachev, "D* Lite", AAAI 2002; "Fast Replanning for Navigation in Unknown
// Terrain", IEEE Transactions on Robotics 21(3), 2005), in the optimised form with lower
// bounds as keys, on the graph that roadmap.Grid searches.
//
// The search runs from the goal, so that its state outlives the robot's moving on; a
// change of the floor is worth repairing where few cells get another cost to go, which is
// where it is near the robot or behind it. What changed is found by comparing blocks of
// free cells, not told: whatever is asked next, the answer is right.
//
// # The path is a function of the question
//
// Of several cheapest paths the answer is the one that is least in this order: the first
// link that a cheapest path can begin with, then at each cell the goal's link where that
// is cheapest, else the lowest move that stays cheapest. When Plan's search ends, every
// inconsistent node has a key above the cost C of the cheapest path. Costs are whole
// numbers above 0, so that a node whose cost to go plus heuristic is C or less then has
// its true cost to go: by induction from the goal along a cheapest path, and downward
// along best moves. All nodes of all cheapest paths are of that kind, and no other can
// seem to be on one. So a repaired session and a fresh one give the same path, to the last
// digit.
//
// # Memory
//
// A session holds 32 KiB of costs to go for every block of 64x64 cells that its search
// came into, as much again where nodes are inconsistent (mostly along the search's rim; at
// the worst everywhere, and for up to sweepEvery expansions after), 4 KiB where cells
// differ in cost, and 24 bytes for every queued node, of which there are at most
// 2·inconsistent + queueSlack. Flooding 4096x4096 cells keeps 128 MiB; 272 MiB and the queue
// are the most. Bytes says how much it is. Release gives it back.
package dstar

import (
	"context"

	"example.com/wideberth/planner/internal/mask"
	"example.com/wideberth/planner/internal/roadmap"
	"example.com/wideberth/planner/internal/rules"
)

// never is the cost to go of where no way to the goal is known. Twice that still fits.
const never = int64(1) << 62

// farthest is how much the sum of the robot's moves may grow, in whole-number costs,
// before the search begins afresh: keys stay below 2^63.
const farthest = int64(1) << 60

// giveUp is the share, 1 / giveUp, of the expansions of the session's last search from
// scratch that a repair may take before that is done instead: near the goal, or where all
// ways from the robot led past the change, a repair is more work than a search from scratch,
// and a node of it takes several times as long. leastRepair is what is allowed in any case.
const (
	giveUp      = 3
	leastRepair = roadmap.PollEvery
)

// Session is a search that is kept. The zero value is ready. It is for one goroutine at a
// time.
type Session struct {
	steps  roadmap.Steps
	flat   [roadmap.MaxLevels + 1]int64
	across [roadmap.MaxLevels + 1]int64
	frame  roadmap.Frame
	weight float64
	levels int
	rules  *rules.Rules
	nx, ny int
	all    []*tile
	made   []int32        // which of them there are, in order of making
	held   int            // arrays of costs held
	odd    int            // inconsistent nodes
	first  *roadmap.Queue // while searching from scratch: instead of open
	open   heap
	moved  int64 // Koenig's k_m
	from   zone
	to     []link // sorted by id
	fresh  int64  // expansions of the last search from scratch; 0 while it has not ended
	mended bool

	// Of the plan under way.
	q      *roadmap.Query
	polled int
	opened int64
	dirty  []*tile // with nodes to look at
}

// link is a link of the goal: its cell's number, its cost and its index in Query.To.
type link struct {
	id   uint32
	cost int64
	i    int
}

// Mended says whether the last Plan repaired what was there; else it searched from
// scratch.
func (s *Session) Mended() bool { return s.mended }

// Bytes is how much memory the session holds, but for a few hundred bytes a block.
func (s *Session) Bytes() int64 {
	n := int64(s.held)*costBytes + int64(cap(s.open.all))*entryBytes
	for _, i := range s.made {
		if s.all[i].class != noClass {
			n += cellsIn
		}
	}
	return n
}

// Plan finds the cheapest path for q on the 4- or 8-connected grid: at the same cost as
// roadmap.Grid, the same path for the same question whatever the session planned before.
// Work grows with what changed since, as far as it matters to the path. The outcome, when
// there is none, says which end fewer cells are connected to (roadmap.Connected). q is not
// kept. The error is the context's cause, looked at once in roadmap.PollEvery nodes taken
// from the queue; the session stays good for another Plan.
func (s *Session) Plan(ctx context.Context, q *roadmap.Query, diagonal bool) (roadmap.Path, roadmap.Outcome, error) {
	s.mended = false
	if len(q.From) == 0 {
		return roadmap.Path{}, roadmap.FromShut, nil
	}
	if len(q.To) == 0 {
		return roadmap.Path{}, roadmap.ToShut, nil
	}
	s.q, s.polled, s.opened = q, 0, 0
	defer func() { s.q = nil }()
	s.mended = s.fits(q, diagonal)
	if s.mended {
		if err := s.follow(ctx); err != nil {
			s.Release()
			return roadmap.Path{}, roadmap.Found, err
		}
	} else {
		s.begin(q, diagonal)
	}
	out, err := s.search(ctx)
	s.sweep()
	if err != nil || out != roadmap.Found {
		return roadmap.Path{}, out, err
	}
	if s.fresh == 0 {
		s.fresh = s.opened
	}
	p, err := s.path()
	if err != nil {
		s.Release()
	}
	return p, out, err
}

// fits says whether what is there is of any use for q.
func (s *Session) fits(q *roadmap.Query, diagonal bool) bool {
	return s.all != nil && s.frame == q.Frame && s.weight == q.Weight && s.levels == len(q.Levels) &&
		(s.steps.Can&0xf0 != 0) == diagonal && s.moved <= farthest
}

// begin starts a search from scratch.
func (s *Session) begin(q *roadmap.Query, diagonal bool) {
	queue := s.open.all[:0]
	s.Release()
	s.open.all = queue
	s.steps = roadmap.StepsOf(q, diagonal)
	s.flat, s.across = s.steps.Halves()
	s.frame, s.weight, s.levels, s.rules = q.Frame, q.Weight, len(q.Levels), q.Rules
	s.nx, s.ny = q.Free.Size()
	s.all = make([]*tile, s.nx*s.ny)
	s.aim()
	first := roadmap.NewQueue(&s.steps)
	s.first = &first
	for _, l := range s.to {
		t, k := s.node(l.id)
		s.setNext(t, k, l.cost)
	}
}

// Release gives all memory back. The next Plan searches from scratch.
func (s *Session) Release() {
	for _, i := range s.made {
		s.drop(s.all[i])
	}
	*s = Session{q: s.q, polled: s.polled, opened: s.opened}
}

// poll looks at ctx once in roadmap.PollEvery calls.
func (s *Session) poll(ctx context.Context) error {
	if s.polled++; s.polled%roadmap.PollEvery != 0 || ctx.Err() == nil {
		return nil
	}
	return context.Cause(ctx)
}

// blocks are the words of a block's masks: which cells are free, and the levels.
type blocks struct {
	free   *mask.Block
	levels [roadmap.MaxLevels]*mask.Block
}

func (s *Session) blocks(bx, by int) (b blocks) {
	b.free = s.q.Free.Block(bx, by)
	for i, m := range s.q.Levels {
		b.levels[i] = m.Block(bx, by)
	}
	return b
}
