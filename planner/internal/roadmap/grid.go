package roadmap

import (
	"context"
	"math"
	"math/bits"
	"slices"
	"sync"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/internal/rules"
)

// The moves: four straight ones, then four diagonal ones, each of which needs the
// straight moves on its two sides (no cutting of corners).
var (
	moveX = [8]int{1, 0, -1, 0, 1, -1, -1, 1}
	moveY = [8]int{0, 1, 0, -1, 1, 1, -1, -1}
	sides = [8]uint8{4: 1 | 2, 5: 2 | 4, 6: 4 | 8, 7: 8 | 1}
)

// Costs are whole numbers: a straight step is 2^scale, a diagonal one sqrt 2 times that,
// rounded. Sums do not depend on their order, so that ties are ties. scale is 32,
// less where the floor is so large or the weight so heavy that the dearest simple
// path would pass 2^62: 26 at worst (2^28 cells, weight 100). The rounding of a
// diagonal step is at most 2^-27 of a straight one at that worst, 2^-33 else;
// relative to a path's cost below 1e-10 but for floors above 2^24 cells.
const maxScale = 32

type gridCosts struct {
	unit         float64 // micrometres in one whole-number unit
	flat, across [2]int64
}

func newGridCosts(q *Query) gridCosts {
	cells := bits.Len(uint(q.Frame.Cols * q.Frame.Rows))
	weight := bits.Len(uint(math.Ceil(1.5 * (1 + q.Weight))))
	scale := min(maxScale, 61-cells-weight)
	// Half a step in an open cell and in any other.
	one := math.Ldexp(1, scale-1)
	heavy := 1 + q.Weight
	return gridCosts{
		unit:   q.Frame.Res / math.Ldexp(1, scale),
		flat:   [2]int64{int64(one), int64(math.Round(one * heavy))},
		across: [2]int64{int64(math.Round(one * math.Sqrt2)), int64(math.Round(one * math.Sqrt2 * heavy))},
	}
}

func (c *gridCosts) fromUm(um float64) int64 { return int64(math.Round(um / c.unit)) }

// octile is the least cost between cells dx columns and dy rows apart.
func (c *gridCosts) octile(dx, dy int64, diagonal bool) int64 {
	dx, dy = max(dx, -dx), max(dy, -dy)
	if !diagonal {
		return 2 * c.flat[0] * (dx + dy)
	}
	return 2*c.across[0]*min(dx, dy) + 2*c.flat[0]*max(dx-dy, dy-dx)
}

// grid is one A* search over the free cells.
type grid struct {
	*Query
	costs    gridCosts
	diagonal bool
	tiles    *tiles
	open     queue
	moves    int
	goal     map[int64]int // cell number to index in To
	lo, hi   Cell          // rectangle of To's cells
	least    int64         // least cost of To's links
	escort   *flood
	met      bool // the escort has met the search
}

var queuePool = sync.Pool{New: func() any { return new(queue) }}

// goalID is the node that stands for the far end of every link of To.
const goalID = 1 << 40

// Grid searches the grid: 8-connected with the octile distance as heuristic, or
// 4-connected with the Manhattan distance.
func Grid(ctx context.Context, q *Query, diagonal bool) (Path, Outcome, error) {
	g := &grid{Query: q, costs: newGridCosts(q), diagonal: diagonal, tiles: newTiles(q), moves: 4, goal: map[int64]int{}}
	if diagonal {
		g.moves = 8
	}
	heap := queuePool.Get().(*queue)
	g.open = (*heap)[:0]
	defer func() {
		g.tiles.release()
		*heap = g.open[:0]
		queuePool.Put(heap)
	}()
	return g.run(ctx)
}

func (g *grid) number(c Cell) int64 { return int64(c.Row)*int64(g.Frame.Cols) + int64(c.Col) }

func (g *grid) run(ctx context.Context) (Path, Outcome, error) {
	if len(g.From) == 0 {
		return Path{}, FromShut, nil
	}
	if len(g.To) == 0 {
		return Path{}, ToShut, nil
	}
	g.lo, g.hi = g.To[0].Cell, g.To[0].Cell
	g.least = math.MaxInt64
	for i, l := range g.To {
		g.goal[g.number(l.Cell)] = i
		g.lo = Cell{min(g.lo.Col, l.Cell.Col), min(g.lo.Row, l.Cell.Row)}
		g.hi = Cell{max(g.hi.Col, l.Cell.Col), max(g.hi.Row, l.Cell.Row)}
		g.least = min(g.least, g.costs.fromUm(l.CostUm))
	}
	for _, l := range g.From {
		g.queue(l.Cell, g.costs.fromUm(l.CostUm), isSource)
	}
	p := poll{ctx: ctx}
	for len(g.open) > 0 {
		e := g.open.pop()
		if e.id() == goalID {
			return g.path(e.key, int(e.dir())), Found, nil
		}
		if !g.expand(e) {
			continue
		}
		if err := p.err(); err != nil {
			return Path{}, Found, err
		}
		if g.Count.Expanded++; p.n == escortAfter {
			g.escort = newFlood(g.Query, g.To, true, g.meet)
		}
		if g.escort != nil && !g.met && g.escort.step(escortSteps) && !g.met {
			return Path{}, ToShut, nil
		}
	}
	return Path{}, FromShut, nil
}

// meet is told of the cells that the escort comes to.
func (g *grid) meet(c Cell) {
	if t := g.tiles.all[c.Row/side*g.tiles.nx+c.Col/side]; t != nil && t.state[(c.Row%side)*side+c.Col%side]&isClosed != 0 {
		g.met = true
	}
}

// heuristic is the least that the way from c to the goal can cost.
func (g *grid) heuristic(c Cell) int64 {
	dx := max(g.lo.Col-c.Col, 0, c.Col-g.hi.Col)
	dy := max(g.lo.Row-c.Row, 0, c.Row-g.hi.Row)
	return g.costs.octile(int64(dx), int64(dy), g.diagonal) + g.least
}

// queue puts a free cell into the queue unless it is there as cheaply already.
func (g *grid) queue(c Cell, cost int64, dir uint8) {
	t := g.tiles.at(c.Col/side, c.Row/side)
	g.queueIn(t, (c.Row%side)*side+c.Col%side, c, cost, dir)
}

func (g *grid) queueIn(t *tile, k int, c Cell, cost int64, dir uint8) {
	s := t.state[k]
	if s&isClosed != 0 || s != unseen && t.cost[k] <= cost {
		return
	}
	t.state[k], t.cost[k] = dir, cost
	g.open.push(newEntry(cost+g.heuristic(c), cost, g.number(c), dir))
	g.Count.Queued++
}

// expand closes a node and queues its neighbours; false for a stale entry.
func (g *grid) expand(e entry) bool {
	c := Cell{int(e.id() % int64(g.Frame.Cols)), int(e.id() / int64(g.Frame.Cols))}
	t := g.tiles.at(c.Col/side, c.Row/side)
	x, y := c.Col%side, c.Row%side
	k := y*side + x
	if t.state[k]&isClosed != 0 {
		return false
	}
	t.close(k, e.dir())
	g0, heavy := e.tie, tight(t, x, y)
	if i, ok := g.goal[e.id()]; ok {
		cost := g0 + g.costs.fromUm(g.To[i].CostUm)
		g.open.push(newEntry(cost, cost, goalID, uint8(i)))
	}
	var can uint8 // straight moves that are possible
	inner := x > 0 && x < side-1 && y > 0 && y < side-1
	for d := range g.moves {
		if d >= 4 && can&sides[d] != sides[d] {
			continue
		}
		nx, ny := x+moveX[d], y+moveY[d]
		n, to := t, Cell{c.Col + moveX[d], c.Row + moveY[d]}
		if !inner {
			if uint(to.Col) >= uint(g.Frame.Cols) || uint(to.Row) >= uint(g.Frame.Rows) {
				continue
			}
			if uint(nx) >= side || uint(ny) >= side {
				n = g.tiles.at(to.Col/side, to.Row/side)
				nx, ny = nx&(side-1), ny&(side-1)
			}
		}
		if n.free[ny]>>nx&1 == 0 {
			continue
		}
		if d < 4 {
			can |= 1 << d
		}
		nk := ny*side + nx
		if n.state[nk]&isClosed != 0 {
			continue
		}
		if (t.oneWay || n.oneWay) && g.Rules.Against(g.Frame.Centre(c), g.Frame.Centre(to), rules.StepSlackUm) != nil {
			continue
		}
		half := &g.costs.flat
		if d >= 4 {
			half = &g.costs.across
		}
		g.queueIn(n, nk, to, g0+half[heavy]+half[tight(n, nx, ny)], uint8(d+1))
	}
	return true
}

// tight is 1 where a metre costs more.
func tight(t *tile, x, y int) int {
	if t.open == nil || t.open[y]>>x&1 == 1 {
		return 0
	}
	return 1
}

func (g *grid) path(cost int64, to int) Path {
	p := Path{To: to, CostUm: float64(float64(cost) * g.costs.unit)}
	c := g.To[to].Cell
	for {
		p.Points = append(p.Points, g.Frame.Centre(c))
		d := g.tiles.at(c.Col/side, c.Row/side).state[(c.Row%side)*side+c.Col%side] & dirMask
		if d == isSource {
			break
		}
		c = Cell{c.Col - moveX[d-1], c.Row - moveY[d-1]}
	}
	slices.Reverse(p.Points)
	p.From = slices.IndexFunc(g.From, func(l Link) bool { return l.Cell == c })
	p.Points = straightRuns(p.Points)
	return p
}

// straightRuns drops the points inside straight runs of equal steps.
func straightRuns(p []geom.Point) []geom.Point {
	if len(p) < 3 {
		return p
	}
	out := []geom.Point{p[0]}
	for i := 1; i < len(p)-1; i++ {
		if p[i].X-p[i-1].X != p[i+1].X-p[i].X || p[i].Y-p[i-1].Y != p[i+1].Y-p[i].Y {
			out = append(out, p[i])
		}
	}
	return append(out, p[len(p)-1])
}
