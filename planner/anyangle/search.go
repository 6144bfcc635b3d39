package anyangle

import (
	"context"
	"errors"
	"math"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/spare"
)

// MaxNodes bounds the nodes, and the bends, that a search may keep at once. A node
// takes 104 bytes with its place in the queue, a bend about 90 with its place in the
// table, so the two take at most about 800 MB. What is noted of the portals of cells that were
// looked into comes to that, as much as those take in the mesh (see MaxBytes). A search is cut
// short only in clutter over more than a hundred million cells.
const MaxNodes = 4_000_000

// maxExpanded bounds the nodes that a search may look at, some ten times as many as it may
// keep: it ends even if rounding should lead it round in circles.
const maxExpanded = 16 * MaxNodes

// ErrTooLarge says that a search came to MaxNodes, or to the bound of its work.
var ErrTooLarge = errors.New("anyangle: the search came to its bound of nodes")

// pollEvery is how many expansions pass between looks at the context.
const pollEvery = 1024

// tieUm is the difference of two path lengths that counts as none, in
// micrometres: above the rounding of sums of a kilometre's length, and 1e-11 of
// a metre.
const tieUm = 1e-5

// Way is a shortest way through a mesh.
type Way struct {
	Points   []geom.Point // from start to goal, a point at every bend
	LengthUm float64
	Expanded int64 // nodes looked at
	Queued   int64 // nodes put into the queue
}

// root is a point where ways bend, with the shortest way known to it.
type root struct {
	x, y, g float64
	parent  int32
	place   int32 // in the search's list of places
}

// node is a stretch of a cell's border, from r to l, right and left as seen by one
// who comes from the start, and what sees it: a fan of roots. The way to the
// apex is common to all; from there the right chain bends to the right, root by
// root, down to rootR, which sees r; the left chain likewise down to rootL, which
// sees l. Between them each root sees what lies between the two rays from its
// neighbours through it, so that every point of the stretch is seen by one root. (Polyanya
// keeps a node for each root instead: round a corner of a dozen chords, a dozen.)
// Where r and l are the root itself, all of the cell is seen.
type node struct {
	lx, ly, rx, ry      float64
	rootR, rootL, apex  int32
	block, cell         int32 // the cell to look into
	fromBlock, fromCell int32 // where the way comes from; none at the start
	portal              int32 // in the search's list of portals
	flags               uint8
	least               float64 // no point of the stretch is reached by a shorter way over the fan
}

const (
	turnL = 1 << iota // a way may bend at l
	turnR             // and at r
	point             // the root lies on the cell itself
	gone              // its stretch is a part of another node's now
)

// search is the scratch of one search.
type search struct {
	g                 *Mesh
	start, goal       geom.Point // as asked for
	tx, ty            float64    // the goal, settled
	starts, goals     []at
	step              [downward + 1]int32 // Mesh.step
	open              []at                // dead ends that lead to the goal
	openLow, openHigh int32               // their blocks

	roots   []root
	nodes   []node
	spare   []int32
	queue   queue
	table   table        // numbers places
	best    []int32      // the best root at each place
	visited table        // roots with cells that they lie on, queued before
	notes   []portalNote // of each portal
	cells   []int32      // for a cell, its first portal in that list
	base    []reached    // for a block, its first cell in that list
	stamp   uint32
	out     []node
	fs      []float64

	expanded, queued int64
	most             float64 // ways longer than that are of no use
	gaveUp           bool    // because there is none shorter
}

var scratch spare.Shelf[search]

// Shortest finds a shortest way from start to goal. ok is false when there is none:
// an end is not in the mesh, or the two are not connected, which is found without
// a search. A point that two solids touch in, at clearance 0, belongs to the free
// space on all sides of it when it is an end; no way leads through it. Of several
// ways of one length the same is found each time. The error is ctx's (looked at
// every 1,024 expansions) or ErrTooLarge. The counters are given in any case.
func (g *Mesh) Shortest(ctx context.Context, start, goal geom.Point) (way Way, ok bool, err error) {
	return g.ShortestWithin(ctx, start, goal, math.Inf(1))
}

// none is the counters without a way.
func (s *search) none() Way { return Way{Expanded: s.expanded, Queued: s.queued} }

func (s *search) run(ctx context.Context, g *Mesh, start, goal geom.Point) (Way, bool, error) {
	s.g = g
	s.start, s.goal = start, goal
	from, to := g.settled(start), g.settled(goal)
	s.tx, s.ty = to.X-g.o.X, to.Y-g.o.Y
	s.roots, s.nodes, s.spare = s.roots[:0], s.nodes[:0], s.spare[:0]
	s.queue.reset()
	s.table.reset()
	s.visited.reset()
	s.best = s.best[:0]
	s.resetPortals()
	for dir := range s.step {
		s.step[dir] = int32(g.step(uint8(dir)))
	}
	s.expanded, s.queued, s.gaveUp = 0, 0, false
	s.goals = g.locate(s.goals[:0], to, g.eps)
	if len(s.goals) == 0 {
		return Way{}, false, nil
	}
	s.starts = g.locate(s.starts[:0], from, g.eps)
	sx, sy := from.X-g.o.X, from.Y-g.o.Y
	s.roots = append(s.roots, root{x: sx, y: sy, parent: none})
	s.table.find(sx, sy)
	s.best = append(s.best, 0)
	s.open = s.open[:0]
	s.openLow, s.openHigh = s.goals[0].block, s.goals[len(s.goals)-1].block
	for _, a := range s.goals {
		for c := a.cell; c != none; c = g.blocks[a.block].dead[c] {
			s.open = append(s.open, at{a.block, c})
		}
	}
	h := math.Hypot(sx-s.tx, sy-s.ty)
	for _, a := range s.starts {
		if s.isGoal(a.block, a.cell) {
			return s.straight(start, goal), true, nil
		}
		reachable := false
		for _, t := range s.goals {
			reachable = reachable || g.compOf(a) == g.compOf(t)
		}
		if reachable {
			s.push(&node{lx: sx, ly: sy, rx: sx, ry: sy, block: a.block, cell: a.cell, fromBlock: none, fromCell: none, flags: point}, h)
		}
	}
	for {
		i, f, ok := s.queue.pop()
		if !ok {
			return s.none(), false, nil
		}
		n := s.nodes[i]
		s.spare = append(s.spare, i)
		if n.flags&gone != 0 {
			continue
		}
		if n.flags&point == 0 && s.notes[n.portal].last == i {
			s.notes[n.portal].last = none
		}
		for s.trim(&n, &f) && !s.undercut(&n) {
			if f > s.most {
				s.gaveUp = true
				return s.none(), false, nil
			}
			if s.isGoal(n.block, n.cell) {
				return s.way(&n), true, nil
			}
			if s.expanded++; s.expanded%pollEvery == 0 {
				if err := ctx.Err(); err != nil {
					return s.none(), false, err
				}
				if s.expanded > maxExpanded {
					return s.none(), false, ErrTooLarge
				}
			}
			s.expand(&n)
			// The best successor is looked into at once when it would be the next.
			best := -1
			for k := range s.out {
				if best < 0 || s.fs[k] < s.fs[best] {
					best = k
				}
			}
			if best >= 0 && !(s.fs[best] < s.queue.least()) {
				best = -1
			}
			for k := range s.out {
				if k != best {
					s.push(&s.out[k], s.fs[k])
				}
			}
			if best < 0 {
				break
			}
			n, f = s.out[best], s.fs[best]
		}
		if len(s.nodes) > MaxNodes || len(s.roots) > MaxNodes {
			return s.none(), false, ErrTooLarge
		}
	}
}

// settled is an end that is on whole micrometres but for rounding put there: corners are
// on whole micrometres, and from beside one a search would look past it.
func (g *Mesh) settled(p geom.Point) geom.Point {
	q := geom.Point{X: math.Round(p.X), Y: math.Round(p.Y)}
	if math.Abs(p.X-q.X) <= 4*g.eps && math.Abs(p.Y-q.Y) <= 4*g.eps {
		return q
	}
	return p
}

// trim takes off n what is seen from roots to which a better way is known by now.
// It is false when nothing is left, or when what is left must wait its turn.
func (s *search) trim(n *node, f *float64) bool {
	if s.stale(n.apex) {
		return false
	}
	cut := false
	for n.rootR != n.apex && s.stale(n.rootR) {
		p := &s.roots[s.roots[n.rootR].parent]
		t, ok := s.crossAt(p, n.rootR, n)
		if !ok || t >= 1 {
			return false
		}
		if t > 0 {
			n.rx, n.ry = n.rx+float64(t*(n.lx-n.rx)), n.ry+float64(t*(n.ly-n.ry))
			n.flags &^= turnR
		}
		n.rootR, cut = s.roots[n.rootR].parent, true
	}
	for n.rootL != n.apex && s.stale(n.rootL) {
		p := &s.roots[s.roots[n.rootL].parent]
		t, ok := s.crossAt(p, n.rootL, n)
		if !ok || t <= 0 {
			return false
		}
		if t < 1 {
			n.lx, n.ly = n.rx+float64(t*(n.lx-n.rx)), n.ry+float64(t*(n.ly-n.ry))
			n.flags &^= turnL
		}
		n.rootL, cut = s.roots[n.rootL].parent, true
	}
	if !cut {
		return true
	}
	was := *f
	if *f = s.estimate(n); *f > was+tieUm {
		s.push(n, *f)
		return false
	}
	return true
}

// crossAt is where the ray from p through root r meets n's stretch, as a share of the way
// from its right end to its left.
func (s *search) crossAt(p *root, r int32, n *node) (t float64, ok bool) {
	q := &s.roots[r]
	ux, uy := q.x-p.x, q.y-p.y
	a := float64(ux*(n.ry-p.y)) - float64(uy*(n.rx-p.x))
	b := float64(ux*(n.ly-p.y)) - float64(uy*(n.lx-p.x))
	switch {
	case a >= 0:
		return 0, true
	case b <= 0:
		return 1, true
	}
	return a / (a - b), a != b
}

func (s *search) isGoal(block, cell int32) bool {
	for _, t := range s.goals {
		if t.block == block && t.cell == cell {
			return true
		}
	}
	return false
}

// stale says whether a better way to the root is known by now.
func (s *search) stale(r int32) bool {
	return s.best[s.roots[r].place] != r
}

func (s *search) push(n *node, f float64) {
	if n.flags&point == 0 && s.join(n, f) {
		return
	}
	s.queued++
	var i int32
	if k := len(s.spare); k > 0 {
		i = s.spare[k-1]
		s.spare = s.spare[:k-1]
		s.nodes[i] = *n
	} else {
		i = int32(len(s.nodes))
		s.nodes = append(s.nodes, *n)
	}
	if n.flags&point == 0 {
		e := &s.notes[n.portal]
		e.last, e.f = i, f
	}
	s.queue.push(f, s.roots[n.apex].g, i)
}

// bend is a root at (x, y) reached from parent; none when a way as good is known.
// Two ways of one length to a point lead on the same from there: what one of them
// sees and the other does not is reached sooner without passing the point.
func (s *search) bend(parent int32, x, y float64) int32 {
	p := &s.roots[parent]
	g := p.g + dist(p.x, p.y, x, y)
	r := int32(len(s.roots))
	place, found := s.table.find(x, y)
	if found {
		q := &s.roots[s.best[place]]
		if g >= q.g-tieUm {
			if q.parent == parent {
				return s.best[place]
			}
			return none
		}
		s.best[place] = r
	} else {
		s.best = append(s.best, r)
	}
	s.roots = append(s.roots, root{x, y, g, parent, place})
	return r
}

func dist(ax, ay, bx, by float64) float64 {
	dx, dy := ax-bx, ay-by
	return math.Sqrt(float64(dx*dx) + float64(dy*dy))
}
