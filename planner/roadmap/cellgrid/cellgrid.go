// Package cellgrid is the roadmaps over cells: the 4- and the 8-connected grid, whose nodes
// are the middles of cells that keep the clearance as a whole, and the quadtree, whose
// leaves are squares of such cells and whose nodes are the middles of the borders
// that leaves share.
//
// Whole cells miss passages up to 2·sqrt 2 cells wider than a body needs (the note
// "width bias"), and admit none that is too narrow.
package cellgrid

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/bits"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/join"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/internal/mask"
	search "example.com/wideberth/planner/internal/roadmap"
	"example.com/wideberth/planner/internal/rules"
	"example.com/wideberth/planner/roadmap"
)

// Kind says which roadmap over cells it is.
type Kind uint8

// The kinds.
const (
	Grid4 Kind = iota + 1
	Grid8
	Quadtree
)

// Cells is a roadmap over the cells of one version, for one Need.
type Cells struct {
	kind  Kind
	need  roadmap.Need
	field *clearance.Field
	rules *rules.Rules
	set   *mask.Set
	free  *mask.Mask
	frame search.Frame
}

// Build makes the roadmap of a version. Time is linear in the floor's cells, 64 at a time.
// The error is ctx's.
func Build(ctx context.Context, f *clearance.Field, need roadmap.Need, kind Kind) (*Cells, error) {
	r := rules.Of(f.Map())
	return of(ctx, f, r, mask.NewSet(f, r), need, kind)
}

func of(ctx context.Context, f *clearance.Field, r *rules.Rules, set *mask.Set, need roadmap.Need, kind Kind) (*Cells, error) {
	c := &Cells{kind: kind, need: need, field: f, rules: r, set: set, frame: search.FrameOf(f.Map().Settings())}
	c.free = set.Mask(mask.Key{Um: need.ClearanceUm, RadiusUm: need.ZoneUm, Zones: need.Zones})
	nx, ny := c.free.Size()
	for by := range ny {
		if ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		for bx := range nx {
			c.free.Block(bx, by)
		}
	}
	return c, nil
}

// Need is what the roadmap is for.
func (c *Cells) Need() roadmap.Need { return c.need }

// Advance is the roadmap of another version of the same floor. Blocks of 64x64 cells near
// which nothing changed are carried over.
func (c *Cells) Advance(ctx context.Context, f *clearance.Field, change floor.Change) (roadmap.Roadmap, error) {
	if f.Map().Settings() != c.field.Map().Settings() {
		return Build(ctx, f, c.need, c.kind)
	}
	r := rules.Of(f.Map())
	return of(ctx, f, r, c.set.Carry(f, r, rules.ClosedChanges(change)), c.need, c.kind)
}

// Search finds the shortest way over the roadmap; one-way zones are obeyed.
func (c *Cells) Search(ctx context.Context, s, t geom.Point) (roadmap.Way, bool, error) {
	j := judge.New(c.field, c.rules, c.need.ClearanceUm, c.need.ZoneUm)
	defer j.Release()
	j.Ends = [2]geom.Point{s, t}
	var count search.Counters
	leaves := c.kind == Quadtree
	q := &search.Query{
		Frame: c.frame, Free: c.free, Rules: c.rules, Count: &count,
		From: join.Links(j, c.free, c.frame, s, false, leaves), To: join.Links(j, c.free, c.frame, t, true, leaves),
	}
	var p search.Path
	var out search.Outcome
	var err error
	if leaves {
		p, out, err = search.Quadtree(ctx, q)
	} else {
		p, out, err = search.Grid(ctx, q, c.kind == Grid8)
	}
	w := roadmap.Way{Expanded: count.Expanded, Queued: count.Queued}
	if err != nil || out != search.Found {
		return w, false, err
	}
	w.Points = append(w.Points, s)
	for _, v := range append(p.Points, t) {
		if v != w.Points[len(w.Points)-1] {
			w.LengthUm += geom.Dist(w.Points[len(w.Points)-1], v)
			w.Points = append(w.Points, v)
		}
	}
	if len(w.Points) == 1 {
		w.Points = append(w.Points, t)
	}
	return w, true, nil
}

// Describe describes the whole floor, cut off at roadmap.MaxWindow nodes.
func (c *Cells) Describe() roadmap.Description {
	d, _ := c.describe(context.Background(), c.field.Bounds())
	return d
}

// DescribeIn describes what meets area.
func (c *Cells) DescribeIn(ctx context.Context, area geom.Rect) (roadmap.Description, error) {
	if c.kind != Quadtree && c.crowded(area) {
		return roadmap.Description{}, tooMany()
	}
	d, err := c.describe(ctx, area)
	if errors.Is(err, roadmap.ErrTooLarge) || err == nil {
		return d, err
	}
	return roadmap.Description{}, err
}

func (c *Cells) describe(ctx context.Context, area geom.Rect) (roadmap.Description, error) {
	var d roadmap.Description
	var err error
	if r := area.Intersect(c.field.Bounds()); !r.IsEmpty() {
		if c.kind == Quadtree {
			err = c.leaves(ctx, r, &d)
		} else {
			err = c.moves(ctx, r, &d)
		}
	}
	d.Bytes = c.Size().Bytes
	d.Notes = c.notes()
	return d, err
}

// window is the cells that meet r.
func (c *Cells) window(r geom.Rect) (lo, hi search.Cell) {
	lo, _ = c.frame.CellAt(r.Min)
	hi, _ = c.frame.CellAt(r.Max)
	return lo, hi
}

// crowded tells, before anything is described, whether a grid has too many nodes in area.
func (c *Cells) crowded(area geom.Rect) bool {
	r := area.Intersect(c.field.Bounds())
	if r.IsEmpty() {
		return false
	}
	lo, hi := c.window(r)
	n := 0
	for y := lo.Row; y <= hi.Row && n <= roadmap.MaxWindow; y++ {
		for x := lo.Col; x <= hi.Col; x++ {
			if c.free.Free(x, y) {
				n++
			}
		}
	}
	return n > roadmap.MaxWindow
}

func tooMany() error {
	return fmt.Errorf("%w: more than %d nodes in this area", roadmap.ErrTooLarge, roadmap.MaxWindow)
}

// moves lists the nodes of a grid and the moves between them.
func (c *Cells) moves(ctx context.Context, r geom.Rect, d *roadmap.Description) error {
	lo, hi := c.window(r)
	id := map[search.Cell]int32{}
	for y := lo.Row; y <= hi.Row; y++ {
		if ctx.Err() != nil {
			return context.Cause(ctx)
		}
		for x := lo.Col; x <= hi.Col; x++ {
			if !c.free.Free(x, y) {
				continue
			}
			if len(d.Nodes) == roadmap.MaxWindow {
				return tooMany()
			}
			v := search.Cell{Col: x, Row: y}
			at := c.frame.Centre(v)
			id[v] = int32(len(d.Nodes))
			d.Nodes = append(d.Nodes, roadmap.Node{At: at, ClearanceUm: c.down(c.field.At(at).Um)})
			for _, m := range [4][2]int{{-1, 0}, {0, -1}, {-1, -1}, {1, -1}} {
				if m[0] != 0 && m[1] != 0 && (c.kind == Grid4 || !c.free.Free(x+m[0], y) || !c.free.Free(x, y+m[1])) {
					continue
				}
				w := search.Cell{Col: x + m[0], Row: y + m[1]}
				if k, ok := id[w]; ok {
					a, b := c.frame.Centre(w), at
					d.Edges = append(d.Edges, roadmap.Edge{
						A: k, B: id[v], Points: []geom.Point{a, b}, LengthUm: geom.Dist(a, b), ClearanceUm: c.down(c.field.Segment(a, b).Um),
					})
				}
			}
		}
	}
	return nil
}

// maxWindowEdges bounds the edges of a window on a quadtree; a grid has at most four a
// node.
const maxWindowEdges = 5 * roadmap.MaxWindow

// leaves lists the leaves of a quadtree, as nodes the middles of shared borders, and as
// edges the straight lines between those of one leaf.
func (c *Cells) leaves(ctx context.Context, r geom.Rect, d *roadmap.Description) error {
	lo, hi := c.window(r)
	id := map[geom.Point]int32{}
	var of []int32 // nodes of a leaf
	for by := lo.Row &^ (floor.BlockSize - 1); by <= hi.Row; by += floor.BlockSize {
		if ctx.Err() != nil {
			return context.Cause(ctx)
		}
		for bx := lo.Col &^ (floor.BlockSize - 1); bx <= hi.Col; bx += floor.BlockSize {
			err := c.eachLeaf(bx, by, func(l search.Leaf) error {
				ring := c.ring(l)
				if !(geom.Rect{Min: ring[0], Max: ring[2]}).Intersects(r) {
					return nil
				}
				smallest := int64(math.MaxInt64)
				for y := l.Row; y < l.Row+l.Size; y++ {
					for x := l.Col; x < l.Col+l.Size; x++ {
						smallest = min(smallest, c.cellClearance(x, y))
					}
				}
				d.Cells = append(d.Cells, roadmap.Cell{Ring: ring, ClearanceUm: smallest})
				of = of[:0]
				for _, p := range search.Borders(c.frame, c.free, l) {
					k, ok := id[p]
					if !ok {
						if len(d.Nodes) == roadmap.MaxWindow {
							return tooMany()
						}
						k = int32(len(d.Nodes))
						id[p] = k
						d.Nodes = append(d.Nodes, roadmap.Node{At: p, ClearanceUm: c.down(c.field.At(p).Um)})
					}
					of = append(of, k)
				}
				if len(d.Edges)+len(of)*(len(of)-1)/2 > maxWindowEdges {
					return fmt.Errorf("%w: more than %d edges in this area", roadmap.ErrTooLarge, maxWindowEdges)
				}
				for i, k := range of {
					for _, j := range of[:i] {
						a, b := d.Nodes[j].At, d.Nodes[k].At
						d.Edges = append(d.Edges, roadmap.Edge{
							A: j, B: k, Points: []geom.Point{a, b}, LengthUm: geom.Dist(a, b), ClearanceUm: c.down(c.field.Segment(a, b).Um),
						})
					}
				}
				return nil
			})
			if err != nil {
				return err
			}
		}
	}
	return nil
}

// cellClearance is a lower bound of the clearance in a cell: the smallest at its
// vertices, which vector solids may undercut inside; never below what the Need asks.
func (c *Cells) cellClearance(x, y int) int64 {
	least := min(c.field.Vertex(x, y), c.field.Vertex(x+1, y), c.field.Vertex(x, y+1), c.field.Vertex(x+1, y+1))
	m, h := float64(least), c.frame.Res
	if m > h {
		return max(c.need.ClearanceUm, c.down(math.Sqrt(m*m-h*h/4)))
	}
	return c.need.ClearanceUm
}

// eachLeaf visits the free leaves of the block whose lower left cell is (bx, by), lower
// left first.
func (c *Cells) eachLeaf(bx, by int, do func(search.Leaf) error) error {
	for y := by; y < min(by+floor.BlockSize, c.frame.Rows); y++ {
		for x := bx; x < min(bx+floor.BlockSize, c.frame.Cols); {
			l := search.LeafAt(c.free, nil, search.Cell{Col: x, Row: y})
			if l.Class == search.ClassOpen && l.Row == y && l.Col == x {
				if err := do(l); err != nil {
					return err
				}
			}
			x = l.Col + l.Size
		}
	}
	return nil
}

func (c *Cells) ring(l search.Leaf) []geom.Point {
	a := c.frame.Rect(search.Cell{Col: l.Col, Row: l.Row}).Min
	b := c.frame.Rect(search.Cell{Col: min(l.Col+l.Size, c.frame.Cols) - 1, Row: min(l.Row+l.Size, c.frame.Rows) - 1}).Max
	return []geom.Point{a, {X: b.X, Y: a.Y}, b, {X: a.X, Y: b.Y}}
}

// roundingUm is float64's rounding of clearances, with room to spare.
const roundingUm = 1e-6

func (c *Cells) down(um float64) int64 {
	return int64(math.Floor(min(um+roundingUm, float64(c.field.Cap()))))
}

// Size counts the nodes and edges of the whole roadmap. A quadtree's edges are the
// straight lines between any two nodes of one leaf.
func (c *Cells) Size() roadmap.Size {
	nx, ny := c.free.Size()
	s := roadmap.Size{Bytes: int64(nx*ny) * 16}
	for by := range ny {
		for bx := range nx {
			if b := c.free.Block(bx, by); b[0] != 0 || b[floor.BlockSize-1] != 0 {
				s.Bytes += floor.BlockSize * 8 // shared where all cells are alike: an upper bound
			}
			if c.kind == Quadtree {
				_ = c.eachLeaf(bx*floor.BlockSize, by*floor.BlockSize, func(l search.Leaf) error {
					n := int64(len(search.Borders(c.frame, c.free, l)))
					s.Cells++
					s.Nodes += n
					s.Edges += n * (n - 1) / 2
					return nil
				})
				continue
			}
			c.count(bx, by, &s)
		}
	}
	if c.kind == Quadtree {
		s.Nodes /= 2 // each border was seen from both sides
	}
	return s
}

// count adds the nodes of a block of a grid, and their moves to the left and below.
func (c *Cells) count(bx, by int, s *roadmap.Size) {
	row := func(y int) (own, left, right uint64) {
		yy := by*floor.BlockSize + y
		if yy < 0 || yy >= c.frame.Rows {
			return 0, 0, 0
		}
		k := yy / floor.BlockSize
		own = c.free.Block(bx, k)[yy%floor.BlockSize]
		nx, _ := c.free.Size()
		if bx > 0 {
			left = c.free.Block(bx-1, k)[yy%floor.BlockSize] >> 63
		}
		if bx+1 < nx {
			right = c.free.Block(bx+1, k)[yy%floor.BlockSize] & 1
		}
		return own, left, right
	}
	below, belowLeft, belowRight := row(-1)
	for y := range floor.BlockSize {
		own, left, right := row(y)
		toLeft, toRight := own<<1|left, own>>1|right<<63
		s.Nodes += int64(bits.OnesCount64(own))
		s.Edges += int64(bits.OnesCount64(own & toLeft))
		s.Edges += int64(bits.OnesCount64(own & below))
		if c.kind == Grid8 {
			s.Edges += int64(bits.OnesCount64(own & below & toLeft & (below<<1 | belowLeft)))
			s.Edges += int64(bits.OnesCount64(own & below & toRight & (below>>1 | belowRight<<63)))
		}
		below, belowLeft, belowRight = own, left, right
	}
}
