package roadmap

// A search that cannot succeed sees everything that its start can reach, which may be
// a whole hall when the goal is in a shut cupboard. From escortAfter nodes on the
// search is escorted by a flood from the goal, escortSteps cells for each node
// opened: whichever side is shut in is seen to be so at a cost in proportion to
// the smaller one. The flood ends as soon as it meets what the search has closed.
const (
	escortAfter = 4096
	escortSteps = 2
)

// bitTiles is a bit for every cell, made by block.
type bitTiles struct {
	nx  int
	all []*[side]uint64
}

func newBitTiles(nx, ny int) *bitTiles {
	return &bitTiles{nx: nx, all: make([]*[side]uint64, nx*ny)}
}

// mark sets a cell's bit and says whether it was clear.
func (b *bitTiles) mark(c Cell) bool {
	p := &b.all[c.Row/side*b.nx+c.Col/side]
	if *p == nil {
		*p = new([side]uint64)
	}
	w := &(*p)[c.Row%side]
	bit := uint64(1) << (c.Col % side)
	if *w&bit != 0 {
		return false
	}
	*w |= bit
	return true
}

// escort floods backward from the goal, nearest cells first.
type escort struct {
	g         *grid
	seen      *bitTiles
	now, next []Cell
	met       bool
}

func newEscort(g *grid) *escort {
	e := &escort{g: g, seen: newBitTiles(g.tiles.nx, g.tiles.ny)}
	for _, l := range g.To {
		e.visit(l.Cell)
	}
	return e
}

func (e *escort) visit(c Cell) {
	if !e.seen.mark(c) {
		return
	}
	if t := e.g.tiles.all[c.Row/side*e.g.tiles.nx+c.Col/side]; t != nil && t.state[(c.Row%side)*side+c.Col%side]&isClosed != 0 {
		e.met = true
	}
	e.next = append(e.next, c)
}

// step goes on for n cells and says whether the flood has ended without meeting the
// search: then no way leads to the goal.
func (e *escort) step(n int) bool {
	g := e.g
	for ; n > 0 && !e.met; n-- {
		if len(e.now) == 0 {
			e.now, e.next = e.next, e.now[:0]
		}
		last := len(e.now) - 1
		if last < 0 {
			return true
		}
		c := e.now[last]
		e.now = e.now[:last]
		var can uint8
		for d := range g.moves {
			if d >= 4 && (can&sides[d] != sides[d] || !g.Rules.HasOneWay()) {
				continue // without one-way zones, diagonal moves reach nothing more
			}
			from := Cell{c.Col + moveX[d], c.Row + moveY[d]}
			if !g.Free.Free(from.Col, from.Row) {
				continue
			}
			if d < 4 {
				can |= 1 << d
			}
			if g.Rules.HasOneWay() && g.Rules.Against(g.Frame.Centre(from), g.Frame.Centre(c)) != nil {
				continue
			}
			e.visit(from)
		}
	}
	return false
}
