package roadmap

import (
	"context"
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/mask"
	"example.com/wideberth/planner/internal/rules"
)

// drawQuery draws a cluttered floor of up to two by two blocks, with a one-way zone
// now and then, and a balanced query between two free cells; nil when none is free.
func drawQuery(t *rapid.T) (*Query, *clearance.Field) {
	set := floor.Settings{ResolutionUm: 50_000, Columns: rapid.IntRange(8, 90).Draw(t, "columns"), Rows: rapid.IntRange(8, 90).Draw(t, "rows"), CapUm: 1_000_000, OpenBorder: true}
	m, err := floor.New(set)
	if err != nil {
		t.Fatal(err)
	}
	var es []floor.Edit
	for range rapid.IntRange(0, 25).Draw(t, "boxes") {
		c, r := rapid.IntRange(0, set.Columns-1).Draw(t, "c"), rapid.IntRange(0, set.Rows-1).Draw(t, "r")
		es = append(es, floor.Edit{Kind: floor.PaintRect, Fill: floor.Occupied, Rect: floor.CellRect{X0: c, Y0: r,
			X1: min(set.Columns, c+rapid.IntRange(1, 12).Draw(t, "w")), Y1: min(set.Rows, r+rapid.IntRange(1, 12).Draw(t, "h"))}})
	}
	if rapid.Bool().Draw(t, "one-way") {
		x, y := float64(set.Columns)*50_000, float64(set.Rows)*50_000
		ring := []geom.Point{{X: 0.3 * x, Y: 0.2 * y}, {X: 0.7 * x, Y: 0.3 * y}, {X: 0.6 * x, Y: 0.8 * y}}
		for i := range ring {
			ring[i] = geom.Point{X: math.Round(ring[i].X), Y: math.Round(ring[i].Y)}
		}
		es = append(es, floor.Edit{Kind: floor.PutFeature, Feature: &floor.Feature{Name: "lane", Kind: floor.OneWayZone,
			Shape: floor.NewPolygon([][]geom.Point{ring}, 0), Heading: rapid.Float64Range(-3, 3).Draw(t, "heading")}})
	}
	if m, err = m.Apply(es); err != nil {
		t.Fatal(err)
	}
	f, err := clearance.Build(context.Background(), m)
	if err != nil {
		t.Fatal(err)
	}
	r := rules.Of(m)
	ms := mask.NewSet(f, r)
	q := &Query{Frame: FrameOf(set), Free: ms.Mask(mask.Key{Um: rapid.Int64Range(0, 120_000).Draw(t, "need"), Zones: true}), Rules: r, Count: &Counters{}}
	if rapid.Bool().Draw(t, "balanced") {
		q.Weight = rapid.Float64Range(0, 5).Draw(t, "weight")
		for k := range rapid.IntRange(1, 4).Draw(t, "levels") {
			q.Levels = append(q.Levels, ms.Mask(mask.Key{Um: 300_000 - int64(k)*40_000}))
		}
	}
	link := func(label string) []Link {
		for range 8 {
			c := Cell{rapid.IntRange(0, set.Columns-1).Draw(t, label), rapid.IntRange(0, set.Rows-1).Draw(t, label)}
			if q.Free.Free(c.Col, c.Row) {
				return []Link{{Cell: c, At: q.Frame.Centre(c)}}
			}
		}
		return nil
	}
	if q.From, q.To = link("from"), link("to"); q.From == nil || q.To == nil {
		return nil, nil
	}
	return q, f
}

// dear is what a metre costs in a cell.
func (q *Query) dear(c Cell) float64 {
	f := 1.0
	for _, m := range q.Levels {
		if !m.Free(c.Col, c.Row) {
			f += q.Weight / float64(len(q.Levels))
		}
	}
	return f
}

// dijkstra is the twin: every node settled in order by looking at all of them.
func dijkstra(n, from int, edges func(i int, to func(k int, cost float64))) []float64 {
	dist := make([]float64, n)
	for i := range dist {
		dist[i] = math.Inf(1)
	}
	dist[from] = 0
	type item struct {
		d float64
		i int
	}
	queue := []item{{0, from}}
	for len(queue) > 0 {
		best := 0
		for k := range queue {
			if queue[k].d < queue[best].d {
				best = k
			}
		}
		v := queue[best]
		queue[best] = queue[len(queue)-1]
		queue = queue[:len(queue)-1]
		if v.d > dist[v.i] {
			continue
		}
		edges(v.i, func(k int, cost float64) {
			if d := v.d + cost; d < dist[k]-1e-7 {
				dist[k] = d
				queue = append(queue, item{d, k})
			}
		})
	}
	return dist
}

func TestGridAgainstTwin(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		q, _ := drawQuery(t)
		if q == nil {
			return
		}
		cols := q.Frame.Cols
		for _, diagonal := range []bool{false, true} {
			moves := 4
			if diagonal {
				moves = 8
			}
			dist := dijkstra(cols*q.Frame.Rows, q.From[0].Cell.Row*cols+q.From[0].Cell.Col, func(i int, to func(int, float64)) {
				c := Cell{i % cols, i / cols}
				for d := range moves {
					n := Cell{c.Col + moveX[d], c.Row + moveY[d]}
					if !q.Free.Free(n.Col, n.Row) || !q.Free.Free(c.Col, n.Row) || !q.Free.Free(n.Col, c.Row) {
						continue
					}
					if a, b := q.Frame.Centre(c), q.Frame.Centre(n); q.Rules.Against(a, b, rules.StepSlackUm) == nil {
						to(n.Row*cols+n.Col, geom.Dist(a, b)*(q.dear(c)+q.dear(n))/2)
					}
				}
			})
			want := dist[q.To[0].Cell.Row*cols+q.To[0].Cell.Col]
			p, out, err := Grid(context.Background(), q, diagonal)
			if err != nil {
				t.Fatal(err)
			}
			// 1e-9: the search rounds a diagonal step to 2^-33 of a straight one.
			if (out == Found) != !math.IsInf(want, 1) || out == Found && math.Abs(p.CostUm-want) > 1e-9*want+1e-3 {
				t.Fatalf("diagonal %t: outcome %d, cost %f, the twin %f", diagonal, out, p.CostUm, want)
			}
			if out != Found {
				if !q.Rules.HasOneWay() && Connected(q) == Found {
					t.Fatal("said to be connected, but there is no way")
				}
			} else if Connected(q) != Found {
				t.Fatal("said not to be connected, but there is a way")
			}
		}
	})
}

func TestQuadtreeAgainstTwin(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		q, _ := drawQuery(t)
		if q == nil {
			return
		}
		s := &quad{Query: q}
		// Nodes: the start, the goal, and every portal of every free leaf.
		nodes := []portal{{dir: sourceDir}, {dir: sourceDir, x2: 1}}
		index := map[portal]int{}
		out := map[Leaf][]portal{}
		for r := range q.Frame.Rows {
			for c := range q.Frame.Cols {
				l := s.leaf(Cell{c, r})
				if _, ok := out[l]; ok || l.Class == ClassBlocked {
					continue
				}
				out[l] = s.border(l)
				for _, p := range out[l] {
					if _, ok := index[p]; !ok {
						index[p] = len(nodes)
						nodes = append(nodes, p)
					}
				}
			}
		}
		goal := s.leaf(q.To[0].Cell)
		dist := dijkstra(len(nodes), 0, func(i int, to func(int, float64)) {
			if i == 1 {
				return
			}
			p := nodes[i]
			var at geom.Point
			var l Leaf
			if i == 0 {
				at, l = q.From[0].At, s.leaf(q.From[0].Cell)
			} else {
				at, l = s.point(p), s.leaf(p.into())
			}
			factor := q.dear(Cell{l.Col, l.Row})
			step := func(k int, b geom.Point) {
				if q.Rules.Against(at, b, rules.StepSlackUm) == nil {
					to(k, factor*geom.Dist(at, b))
				}
			}
			if l == goal {
				step(1, q.To[0].At)
			}
			for _, n := range out[l] {
				step(index[n], s.point(n))
			}
		})
		p, got, err := Quadtree(context.Background(), q)
		if err != nil {
			t.Fatal(err)
		}
		if want := dist[1]; (got == Found) != !math.IsInf(want, 1) || got == Found && math.Abs(p.CostUm-want) > 1e-9*want+1e-3 {
			t.Fatalf("outcome %d, cost %f, the twin %f", got, p.CostUm, want)
		}
	})
}

// The widest chain against a flood at each clearance: there is a chain that keeps what
// Widest finds, and none that keeps a micrometre more.
func TestWidestAgainstFloods(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		q, f := drawQuery(t)
		if q == nil {
			return
		}
		need := rapid.Int64Range(1, 400_000).Draw(t, "wide")
		w := &WideQuery{Frame: q.Frame, Field: f, Rules: q.Rules, NeedUm: need, From: q.From[0].At, To: q.To[0].At, Count: &Counters{}, Exact: new(int64)}
		way, found, err := Widest(context.Background(), w)
		if err != nil {
			t.Fatal(err)
		}
		back := *w
		back.From, back.To, back.Backward = w.To, w.From, true
		yaw, again, err := Widest(context.Background(), &back)
		if err != nil || again != found {
			t.Fatalf("forward %t, backward %t, %v", found, again, err)
		}
		least := func(way []geom.Point) int64 {
			v := need
			for i := 1; i < len(way); i++ {
				if q.Rules.Against(way[i-1], way[i], rules.BackwardSlackUm) != nil {
					t.Fatal("the way goes backward in a one-way zone")
				}
				v = min(v, int64(f.Segment(way[i-1], way[i]).Um))
			}
			return v
		}
		var got int64
		if found {
			got = least(way)
			if b := least(yaw); b != got {
				t.Fatalf("forward %d µm wide, backward %d", got, b)
			}
			if got < 1 || way[0] != w.From || way[len(way)-1] != w.To {
				t.Fatalf("%d µm along %v", got, way)
			}
		}
		if got >= need {
			return
		}
		// A flood that keeps one more.
		cols := q.Frame.Cols
		ok := func(a, b geom.Point) bool {
			return q.Rules.Against(a, b, rules.BackwardSlackUm) == nil && int64(f.Segment(a, b).Um) > got
		}
		n := cols * q.Frame.Rows
		dist := dijkstra(n+2, n, func(i int, to func(int, float64)) {
			at, c := w.From, Cell{}
			if i < n {
				c = Cell{i % cols, i / cols}
				at = q.Frame.Centre(c)
			}
			if geom.Dist(at, w.To) < 120_000 && ok(at, w.To) && i != n {
				end, _ := q.Frame.CellAt(w.To)
				if max(c.Col-end.Col, end.Col-c.Col, c.Row-end.Row, end.Row-c.Row) <= 1 {
					to(n+1, 1)
				}
			}
			for d := range 8 {
				k := Cell{c.Col + moveX[d], c.Row + moveY[d]}
				if i == n {
					start, _ := q.Frame.CellAt(w.From)
					k = Cell{start.Col + moveX[d], start.Row + moveY[d]}
				} else if d >= 4 {
					continue
				}
				if k.Col >= 0 && k.Row >= 0 && k.Col < cols && k.Row < q.Frame.Rows && ok(at, q.Frame.Centre(k)) {
					to(k.Row*cols+k.Col, 1)
				}
			}
		})
		if !math.IsInf(dist[n+1], 1) {
			t.Fatalf("Widest keeps %d µm, a flood keeps more", got)
		}
	})
}
