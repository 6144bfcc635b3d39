package dstar

import (
	"context"
	"errors"
	"math"
	"slices"
	"testing"

	"gonum.org/v1/gonum/graph/path"
	"gonum.org/v1/gonum/graph/simple"
	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/mask"
	"example.com/wideberth/planner/internal/roadmap"
	"example.com/wideberth/planner/internal/rules"
)

// world is one version of a floor and the masks of it, as planner.World has them.
type world struct {
	m     *floor.Map
	field *clearance.Field
	rules *rules.Rules
	masks *mask.Set
}

type fataler interface{ Fatal(...any) }

func newWorld(t fataler, set floor.Settings) *world {
	m, err := floor.New(set)
	if err != nil {
		t.Fatal(err)
	}
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	r := rules.Of(m)
	return &world{m, f, r, mask.NewSet(f, r)}
}

func (w *world) apply(t fataler, es ...floor.Edit) *world {
	m, err := w.m.Apply(es)
	if err != nil {
		t.Fatal(err)
	}
	c := floor.Diff(w.m, m)
	f, err := w.field.Advance(context.Background(), m, c)
	if err != nil {
		t.Fatal(err)
	}
	r := rules.Of(m)
	var closed []geom.Rect
	for _, fc := range c.Features {
		for _, f := range []*floor.Feature{fc.Before, fc.After} {
			if f != nil && f.Kind == floor.ClosedZone {
				closed = append(closed, f.Shape.Bounds())
			}
		}
	}
	return &world{m, f, r, w.masks.Carry(f, r, closed)}
}

// asked is a question but for the version.
type asked struct {
	need     int64
	levels   []int64
	weight   float64
	from, to []roadmap.Link
}

func (a *asked) query(w *world) *roadmap.Query {
	q := &roadmap.Query{Frame: roadmap.FrameOf(w.m.Settings()), Rules: w.rules, Weight: a.weight, Count: &roadmap.Counters{},
		Free: w.masks.Mask(mask.Key{Um: a.need, Zones: true})}
	for _, um := range a.levels {
		q.Levels = append(q.Levels, w.masks.Mask(mask.Key{Um: um}))
	}
	keep := func(ls []roadmap.Link) (out []roadmap.Link) {
		for _, l := range ls {
			if q.Free.Free(l.Cell.Col, l.Cell.Row) {
				l.At = q.Frame.Centre(l.Cell)
				out = append(out, l)
			}
		}
		return out
	}
	q.From, q.To = keep(a.from), keep(a.to)
	return q
}

func paint(fill floor.Occupancy, x0, y0, x1, y1 int) floor.Edit {
	return floor.Edit{Kind: floor.PaintRect, Fill: fill, Rect: floor.CellRect{X0: x0, Y0: y0, X1: x1, Y1: y1}}
}

// oneCell is the link to the middle of a cell.
func oneCell(col, row int) []roadmap.Link {
	return []roadmap.Link{{Cell: roadmap.Cell{Col: col, Row: row}}}
}

func drawLinks(t *rapid.T, set floor.Settings, label string) []roadmap.Link {
	c, r := rapid.IntRange(0, set.Columns-1).Draw(t, label), rapid.IntRange(0, set.Rows-1).Draw(t, label)
	ls := oneCell(c, r)
	if rapid.Bool().Draw(t, label+" off the middle") {
		for _, d := range [3][2]int{{1, 0}, {0, 1}, {2, 1}} {
			if c+d[0] < set.Columns && r+d[1] < set.Rows {
				ls = append(ls, roadmap.Link{Cell: roadmap.Cell{Col: c + d[0], Row: r + d[1]}, CostUm: rapid.Float64Range(0, 120_000).Draw(t, label)})
			}
		}
		ls[0].CostUm = rapid.Float64Range(0, 60_000).Draw(t, label)
	}
	return ls
}

// drawEdits draws a change: solids put down or taken away, now and then a one-way or a closed zone put, turned
// or taken away.
func drawEdits(t *rapid.T, w *world) (es []floor.Edit) {
	set := w.m.Settings()
	for range rapid.IntRange(0, 3).Draw(t, "boxes") {
		// Every other one begins or ends at a block's edge where there is one.
		place := func(n int, label string) (lo, hi int) {
			lo = rapid.IntRange(0, n-1).Draw(t, label)
			hi = min(n, lo+rapid.IntRange(1, 14).Draw(t, label))
			if edge := rapid.IntRange(0, 3).Draw(t, label+" edge"); edge == 0 && n > side {
				return side, min(n, side+hi-lo)
			} else if edge == 1 && n > side {
				return side - hi + lo, side
			}
			return lo, hi
		}
		x0, x1 := place(set.Columns, "column")
		y0, y1 := place(set.Rows, "row")
		fill := floor.Occupied
		if rapid.Bool().Draw(t, "away") {
			fill = floor.Free
		}
		es = append(es, paint(fill, x0, y0, x1, y1))
	}
	for _, name := range []string{"lane", "shut"} {
		has := false
		for f := range w.m.Features() {
			has = has || f.Name == name
		}
		switch rapid.IntRange(0, 5).Draw(t, name) {
		case 0:
			x, y := float64(set.Columns*50_000), float64(set.Rows*50_000)
			at := func() geom.Point {
				return geom.Point{X: math.Round(x * rapid.Float64Range(0, 1).Draw(t, "x")), Y: math.Round(y * rapid.Float64Range(0, 1).Draw(t, "y"))}
			}
			ring := []geom.Point{at(), at(), at()}
			if area := (ring[1].X-ring[0].X)*(ring[2].Y-ring[0].Y) - (ring[1].Y-ring[0].Y)*(ring[2].X-ring[0].X); math.Abs(area) < 1e9 {
				continue
			}
			f := &floor.Feature{Name: name, Kind: floor.OneWayZone, Shape: floor.NewPolygon([][]geom.Point{ring}, 0)}
			if name == "shut" {
				f.Kind = floor.ClosedZone
			} else {
				f.Heading = rapid.Float64Range(-3, 3).Draw(t, "heading")
			}
			es = append(es, floor.Edit{Kind: floor.PutFeature, Feature: f})
		case 1:
			if has {
				es = append(es, floor.Edit{Kind: floor.RemoveFeature, Name: name})
			}
		}
	}
	return es
}

// gonumCost is the cost in steps of the cheapest path by gonum's Dijkstra over the same
// graph, made cell by cell from the masks' single bits.
func gonumCost(q *roadmap.Query, diagonal bool) float64 {
	g := simple.NewWeightedDirectedGraph(0, math.Inf(1))
	cols := q.Frame.Cols
	id := func(c roadmap.Cell) int64 { return int64(c.Row*cols + c.Col) }
	dear := func(c roadmap.Cell) float64 {
		f := 1.0
		for _, m := range q.Levels {
			if !m.Free(c.Col, c.Row) {
				f += q.Weight / float64(len(q.Levels))
			}
		}
		return f
	}
	for r := range q.Frame.Rows {
		for c := range cols {
			a := roadmap.Cell{Col: c, Row: r}
			for dr := -1; dr <= 1; dr++ {
				for dc := -1; dc <= 1; dc++ {
					b := roadmap.Cell{Col: c + dc, Row: r + dr}
					if dc == 0 && dr == 0 || dc != 0 && dr != 0 && !diagonal ||
						!q.Free.Free(c, r) || !q.Free.Free(b.Col, b.Row) || !q.Free.Free(c, b.Row) || !q.Free.Free(b.Col, r) {
						continue
					}
					p, v := q.Frame.Centre(a), q.Frame.Centre(b)
					if q.Rules.Against(p, v, rules.StepSlackUm) == nil {
						g.SetWeightedEdge(simple.WeightedEdge{F: simple.Node(id(a)), T: simple.Node(id(b)), W: geom.Dist(p, v) * (dear(a) + dear(b)) / 2})
					}
				}
			}
		}
	}
	const s, t = -1, -2
	for _, l := range q.From {
		g.SetWeightedEdge(simple.WeightedEdge{F: simple.Node(s), T: simple.Node(id(l.Cell)), W: l.CostUm})
	}
	for _, l := range q.To {
		g.SetWeightedEdge(simple.WeightedEdge{F: simple.Node(id(l.Cell)), T: simple.Node(t), W: l.CostUm})
	}
	return path.DijkstraFrom(simple.Node(s), g).WeightTo(t)
}

// Law 8 for sessions: through any sequence of changes, moves of the robot, and changes of the
// goal or the body, the session answers as a fresh one does, to the last digit; and at
// the cost of the cheapest path.
func TestRepairedIsFresh(t *testing.T) {
	repairs := 0
	rapid.Check(t, func(t *rapid.T) {
		set := floor.Settings{ResolutionUm: 50_000, Columns: rapid.IntRange(8, 150).Draw(t, "columns"), CapUm: 1_000_000, OpenBorder: true}
		set.Rows = rapid.IntRange(8, max(8, 6000/set.Columns)).Draw(t, "rows")
		w := newWorld(t, set)
		a := asked{need: rapid.Int64Range(0, 120_000).Draw(t, "need")}
		if rapid.Bool().Draw(t, "balanced") {
			a.weight = rapid.Float64Range(0, 5).Draw(t, "weight")
			for k := range rapid.IntRange(1, 4).Draw(t, "levels") {
				a.levels = append(a.levels, 300_000-int64(k)*40_000)
			}
		}
		for range rapid.IntRange(0, 6).Draw(t, "clutter") {
			w = w.apply(t, drawEdits(t, w)...)
		}
		a.from, a.to = drawLinks(t, set, "from"), drawLinks(t, set, "to")
		diagonal := rapid.Bool().Draw(t, "diagonal")
		var s Session
		for range rapid.IntRange(1, 8).Draw(t, "questions") {
			q := a.query(w)
			got, out, err := s.Plan(context.Background(), q, diagonal)
			if err != nil {
				t.Fatal(err)
			}
			if s.Mended() {
				repairs++
			}
			same(t, a.query(w), diagonal, got, out)
			if len(q.From) > 0 && len(q.To) > 0 {
				consistent(t, &s, q)
			}
			if rapid.IntRange(0, 3).Draw(t, "change") > 0 {
				w = w.apply(t, drawEdits(t, w)...)
			}
			switch rapid.IntRange(0, 7).Draw(t, "next") {
			case 0:
				a.to = drawLinks(t, set, "to")
			case 1:
				a.need = rapid.Int64Range(0, 120_000).Draw(t, "need")
			case 2, 3:
				a.from = drawLinks(t, set, "from")
			case 4:
				if out == roadmap.Found { // along the path
					c, _ := q.Frame.CellAt(got.Points[len(got.Points)/2])
					a.from = oneCell(c.Col, c.Row)
				}
			case 5:
				a.weight = rapid.Float64Range(0, 5).Draw(t, "weight")
			}
		}
	})
	if repairs == 0 {
		t.Fatal("nothing was repaired")
	}
}

func same(t *rapid.T, q *roadmap.Query, diagonal bool, got roadmap.Path, out roadmap.Outcome) {
	var fresh Session
	want, wantOut, err := fresh.Plan(context.Background(), q, diagonal)
	if err != nil {
		t.Fatal(err)
	}
	if out != wantOut || got.CostUm != want.CostUm || got.From != want.From || got.To != want.To || !slices.Equal(got.Points, want.Points) {
		t.Fatalf("repaired: outcome %d, %+v\nfresh: outcome %d, %+v", out, got, wantOut, want)
	}
	grid, gridOut, err := roadmap.Grid(context.Background(), q, diagonal)
	if err != nil {
		t.Fatal(err)
	}
	if (out == roadmap.Found) != (gridOut == roadmap.Found) || got.CostUm != grid.CostUm {
		t.Fatalf("outcome %d, cost %v; A*: outcome %d, cost %v", out, got.CostUm, gridOut, grid.CostUm)
	}
	// 1e-9: whole-number costs round a diagonal step to 2^-33 of a straight one. 1 µm:
	// each link's cost is rounded.
	if d := gonumCost(q, diagonal); (out == roadmap.Found) != !math.IsInf(d, 1) || out == roadmap.Found && math.Abs(got.CostUm-d) > 1e-9*d+1 {
		t.Fatalf("outcome %d, cost %v; gonum %v", out, got.CostUm, d)
	}
}

// consistent checks what a session relies on between plans: every node's second cost follows
// from its neighbours', every inconsistent node is queued with a key that is not above its
// own, and the counts are right.
func consistent(t interface{ Fatalf(string, ...any) }, s *Session, q *roadmap.Query) {
	queued := map[uint32]entry{}
	for _, e := range s.open.all {
		if old, ok := queued[e.id]; !ok || e.before(&old) == 1 {
			queued[e.id] = e
		}
	}
	s.q = q
	defer func() { s.q = nil }()
	odd, arrays := 0, 0
	for _, i := range s.made {
		u := s.all[i]
		if u.cost != noCosts {
			arrays++
		}
		if u.next != u.cost && u.next != noCosts {
			arrays++
		}
		here := 0
		for k := range u.cost {
			if u.cost[k] != u.next[k] {
				here++
				now := s.key(u, k)
				if e, ok := queued[now.id]; !ok || now.before(&e) == 1 {
					t.Fatalf("node %d inconsistent, its key %+v, queued with %+v, %t", now.id, now, e, ok)
				}
			}
		}
		if odd += here; here != u.odd {
			t.Fatalf("block %d: %d inconsistent nodes counted, %d there", i, u.odd, here)
		}
	}
	if odd != s.odd || arrays != s.held || len(s.open.all) > 2*s.odd+queueSlack+1 {
		t.Fatalf("%d inconsistent, %d arrays, %d queued; counted %d and %d", odd, arrays, len(s.open.all), s.odd, s.held)
	}
	for _, i := range s.made {
		for k := range cellsIn {
			if u := s.all[i]; u.next[k] < never && s.derive(u, k) != u.next[k] {
				t.Fatalf("block %d node %d: %d, its neighbours say %d", i, k, u.next[k], s.derive(u, k))
			}
		}
	}
}

// Cells at the corners and edges of blocks change what follows in the blocks beside.
func TestChangesAtBlockEdges(t *testing.T) {
	w := newWorld(t, floor.Settings{ResolutionUm: 50_000, Columns: 130, Rows: 130, CapUm: 1_000_000, OpenBorder: true})
	for _, a := range []asked{{from: oneCell(0, 20), to: oneCell(129, 110)}, {from: oneCell(129, 110), to: oneCell(0, 20)}} {
		var s Session
		ask := func(w *world) {
			q := a.query(w)
			if _, out, err := s.Plan(context.Background(), q, true); err != nil || out != roadmap.Found {
				t.Fatal(out, err)
			}
			consistent(t, &s, q)
		}
		ask(w)
		for x := side - 2; x < side+2; x++ {
			for y := side - 2; y < side+2; y++ {
				ask(w.apply(t, paint(floor.Occupied, x, y, x+1, y+1)))
				if !s.Mended() {
					t.Fatal("searched from scratch")
				}
				ask(w)
			}
		}
	}
}

var errGone = errors.New("the asker has gone")

// A search ends soon after its asker has gone, and the session is good for the next.
func TestStopsWhenCancelled(t *testing.T) {
	set := floor.Settings{ResolutionUm: 50_000, Columns: 400, Rows: 400, CapUm: 1_000_000}
	w := newWorld(t, set)
	a := asked{from: oneCell(0, 0), to: oneCell(399, 380)}
	var s Session
	ctx, cancel := context.WithCancelCause(context.Background())
	cancel(errGone)
	q := a.query(w)
	if _, _, err := s.Plan(ctx, q, true); !errors.Is(err, errGone) || q.Count.Expanded > roadmap.PollEvery {
		t.Fatalf("%v after %d expansions", err, q.Count.Expanded)
	}
	got, out, err := s.Plan(context.Background(), a.query(w), true)
	if err != nil || out != roadmap.Found || !s.Mended() {
		t.Fatal(out, err, s.Mended())
	}
	var fresh Session
	want, _, _ := fresh.Plan(context.Background(), a.query(w), true)
	if !slices.Equal(got.Points, want.Points) || got.CostUm != want.CostUm {
		t.Fatalf("%v, want %v", got, want)
	}
	if s.Bytes() == 0 {
		t.Fatal("a session of no bytes")
	}
	if s.Release(); s.Bytes() != 0 {
		t.Fatalf("%d bytes after Release", s.Bytes())
	}
}
