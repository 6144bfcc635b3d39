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

// moves are the possible moves, a bit each, for every pattern of free cells about one:
// three bits each for the row below, its own and the row above, from left to right.
var moves = func() (t [512]uint8) {
	for i := range t {
		for d := range 8 {
			at := 3*(moveY[d]+1) + moveX[d] + 1
			if i>>at&1 == 1 && (d < 4 || t[i]&sides[d] == sides[d]) {
				t[i] |= 1 << d
			}
		}
	}
	return t
}()

// Costs are whole numbers: a straight step is 2^scale, a diagonal one sqrt 2 times that,
// rounded. Sums do not depend on their order, so that ties are ties. scale is 32,
// less where the floor is so large or the weight so heavy that the dearest simple
// path would pass 2^62: 26 at worst (2^28 cells, weight 100). The rounding of a
// diagonal step is at most 2^-27 of a straight one at that worst, 2^-33 else;
// relative to a path's cost below 1e-10 but for floors above 2^24 cells.
const maxScale = 32

type gridCosts struct {
	unit  float64 // micrometres in one whole-number unit
	scale int
	// Half a step by the number of levels (Query.Levels) that a cell is below.
	flat, across [MaxLevels + 1]int64
}

func newGridCosts(q *Query) gridCosts {
	cells := bits.Len(uint(q.Frame.Cols * q.Frame.Rows))
	weight := bits.Len(uint(math.Ceil(1.5 * (1 + q.Weight))))
	c := gridCosts{scale: min(maxScale, 61-cells-weight)}
	c.unit = q.Frame.Res / math.Ldexp(1, c.scale)
	half := math.Ldexp(1, c.scale-1)
	for k := range c.flat {
		f := q.factor(k)
		c.flat[k] = int64(math.Round(half * f))
		c.across[k] = int64(math.Round(half * math.Sqrt2 * f))
	}
	return c
}

func (c *gridCosts) fromUm(um float64) int64 { return int64(math.Round(um / c.unit)) }

// octile is the least cost between cells dx columns and dy rows apart.
func (c *gridCosts) octile(dx, dy int64, diagonal bool) int64 {
	if !diagonal {
		return 2 * c.flat[0] * (dx + dy)
	}
	return 2*c.across[0]*min(dx, dy) + 2*c.flat[0]*max(dx-dy, dy-dx)
}

// grid is one A* search over the free cells. A node's number is its block's times the
// cells in a block plus its place in there.
type grid struct {
	*Query
	costs    gridCosts
	diagonal bool
	can      uint8 // the moves there are
	tiles    *tiles
	open     *buckets
	goal     map[uint32]int // node's number to index in To
	lo, hi   Cell           // rectangle of To's cells
	least    int64          // least cost of To's links
}

var bucketPool = sync.Pool{New: func() any { return new(buckets) }}

// Numbers from goalID on stand for the far ends of the links of To.
const goalID = math.MaxUint32 - 1<<16

// connectAfter is how many nodes a search opens before it asks whether the goal is
// connected at all: what that costs is known to be worth it then.
const connectAfter = 4096

// bucketsPerStep is how many lists of the queue a straight step spans, as a power of 2.
const bucketsPerStep = 8

// Grid searches the grid: 8-connected with the octile distance as heuristic, or
// 4-connected with the Manhattan distance.
func Grid(ctx context.Context, q *Query, diagonal bool) (Path, Outcome, error) {
	g := &grid{Query: q, costs: newGridCosts(q), diagonal: diagonal, tiles: newTiles(q), can: 0x0f, goal: map[uint32]int{}}
	if diagonal {
		g.can = 0xff
	}
	g.open = bucketPool.Get().(*buckets)
	g.open.reset(g.costs.scale - bucketsPerStep)
	defer func() {
		g.tiles.release()
		bucketPool.Put(g.open)
	}()
	return g.run(ctx)
}

func (g *grid) number(c Cell) uint32 {
	return uint32(c.Row/side*g.tiles.nx+c.Col/side)*cellsIn + uint32(c.Row%side*side+c.Col%side)
}

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
		g.tiles.at(l.Cell.Col/side, l.Cell.Row/side).goal = true
		g.lo = Cell{min(g.lo.Col, l.Cell.Col), min(g.lo.Row, l.Cell.Row)}
		g.hi = Cell{max(g.hi.Col, l.Cell.Col), max(g.hi.Row, l.Cell.Row)}
		g.least = min(g.least, g.costs.fromUm(l.CostUm))
	}
	// The cheapest first, so that keys do not fall below the queue's front.
	order := make([]int, len(g.From))
	for i := range order {
		order[i] = i
	}
	cost := func(i int) int64 { return g.costs.fromUm(g.From[i].CostUm) }
	slices.SortFunc(order, func(i, k int) int {
		a, b := cost(i)+g.heuristic(g.From[i].Cell), cost(k)+g.heuristic(g.From[k].Cell)
		switch {
		case a < b:
			return -1
		case a > b:
			return 1
		}
		return i - k
	})
	for _, i := range order {
		c := g.From[i].Cell
		t := g.tiles.at(c.Col/side, c.Row/side)
		k := c.Row%side*side + c.Col%side
		t.state[k], t.cost[k] = isSource, cost(i)
		g.push(c, cost(i), g.number(c))
	}
	p := poll{ctx: ctx}
	for !g.open.empty() {
		f, id := g.open.pop()
		if id >= goalID {
			return g.path(f, int(id-goalID)), Found, nil
		}
		if !g.expand(id) {
			continue
		}
		if err := p.err(); err != nil {
			return Path{}, Found, err
		}
		if g.Count.Expanded++; p.n == connectAfter {
			if out := Connected(g.Query); out != Found {
				return Path{}, out, nil
			}
		}
	}
	return Path{}, FromShut, nil
}

// heuristic is the least that the way from c to the goal can cost.
func (g *grid) heuristic(c Cell) int64 {
	dx := max(g.lo.Col-c.Col, 0, c.Col-g.hi.Col)
	dy := max(g.lo.Row-c.Row, 0, c.Row-g.hi.Row)
	return g.costs.octile(int64(dx), int64(dy), g.diagonal) + g.least
}

func (g *grid) push(c Cell, cost int64, id uint32) {
	g.open.push(cost+g.heuristic(c), id)
	g.Count.Queued++
}

// expand closes a node and queues its neighbours; false for a node closed before.
func (g *grid) expand(id uint32) bool {
	block, k := int(id/cellsIn), int(id%cellsIn)
	t := g.tiles.all[block]
	if t.state[k]&isClosed != 0 {
		return false
	}
	here := t.cost[k]
	t.close(k)
	if t.goal {
		if i, ok := g.goal[id]; ok {
			g.open.push(here+g.costs.fromUm(g.To[i].CostUm), goalID+uint32(i))
		}
	}
	x, y := k%side, k/side
	c := Cell{t.col + x, t.row + y}
	flat, across := here+g.costs.flat[t.class[k]], here+g.costs.across[t.class[k]]
	if x == 0 || x == side-1 || y == 0 || y == side-1 {
		g.expandRim(t, c, k, flat, across)
		return true
	}
	around := t.free[y-1]>>(x-1)&7 | t.free[y]>>(x-1)&7<<3 | t.free[y+1]>>(x-1)&7<<6
	for m := moves[around] & g.can; m != 0; m &= m - 1 {
		d := bits.TrailingZeros8(m)
		n := k + moveY[d]*side + moveX[d]
		s := t.state[n]
		if s&isClosed != 0 {
			continue
		}
		cost := flat + g.costs.flat[t.class[n]]
		if d >= 4 {
			cost = across + g.costs.across[t.class[n]]
		}
		if s != unseen && t.cost[n] <= cost {
			continue
		}
		to := Cell{c.Col + moveX[d], c.Row + moveY[d]}
		if t.oneWay && g.against(c, to) {
			continue
		}
		t.state[n], t.cost[n] = uint8(d+1), cost
		g.push(to, cost, id-uint32(k)+uint32(n))
	}
	return true
}

// expandRim queues the neighbours of a cell along its block's rim.
func (g *grid) expandRim(t *tile, c Cell, k int, flat, across int64) {
	var can uint8 // straight moves that are possible
	for d := range 8 {
		if g.can>>d&1 == 0 || d >= 4 && can&sides[d] != sides[d] {
			continue
		}
		to := Cell{c.Col + moveX[d], c.Row + moveY[d]}
		if uint(to.Col) >= uint(g.Frame.Cols) || uint(to.Row) >= uint(g.Frame.Rows) {
			continue
		}
		u := t
		if to.Col/side != c.Col/side || to.Row/side != c.Row/side {
			u = g.tiles.at(to.Col/side, to.Row/side)
		}
		x, y := to.Col%side, to.Row%side
		if u.free[y]>>x&1 == 0 {
			continue
		}
		if d < 4 {
			can |= 1 << d
		}
		n := y*side + x
		s := u.state[n]
		if s&isClosed != 0 {
			continue
		}
		cost := flat + g.costs.flat[u.class[n]]
		if d >= 4 {
			cost = across + g.costs.across[u.class[n]]
		}
		if s != unseen && u.cost[n] <= cost || (t.oneWay || u.oneWay) && g.against(c, to) {
			continue
		}
		u.state[n], u.cost[n] = uint8(d+1), cost
		g.push(to, cost, g.number(to))
	}
}

func (g *grid) against(a, b Cell) bool {
	return g.Rules.Against(g.Frame.Centre(a), g.Frame.Centre(b), rules.StepSlackUm) != nil
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
