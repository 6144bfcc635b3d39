package anyangle

import (
	"context"
	"errors"
	"math/rand/v2"
	"reflect"
	"sync"
	"testing"
)

// countdown is a context that ends after it was asked a number of times.
type countdown struct {
	context.Context
	left int
}

func (c *countdown) Err() error {
	if c.left--; c.left < 0 {
		return context.Canceled
	}
	return nil
}

// TestSearchLooksAtItsContext ends the context at the first look within the search.
func TestSearchLooksAtItsContext(t *testing.T) {
	g := build(t, maze(500, 4).floor(t, false), 0)
	way, ok, err := g.Shortest(context.Background(), at50(3, 3), at50(494, 494))
	if err != nil || !ok || way.Expanded <= pollEvery {
		t.Fatalf("%v, %v: %d expansions, wanted more than %d", ok, err, way.Expanded, pollEvery)
	}
	ctx := &countdown{context.Background(), 1}
	if _, _, err := g.Shortest(ctx, at50(3, 3), at50(494, 494)); !errors.Is(err, context.Canceled) {
		t.Errorf("error %v, wanted %v", err, context.Canceled)
	}
	if ctx.left < -1 {
		t.Errorf("the search went on after its context ended")
	}
}

// TestSameQuestionSameAnswer plans the same tasks at once and in turn.
func TestSameQuestionSameAnswer(t *testing.T) {
	const seed = 13
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 0))
	g := build(t, randomMask(rng, 150, 150, 0.2).floor(t, false), 0)
	var tasks [40][4]int
	var want [40]Way
	for i := range tasks {
		for k := range tasks[i] {
			tasks[i][k] = rng.IntN(151)
		}
		want[i], _, _ = g.Shortest(context.Background(), at50(tasks[i][0], tasks[i][1]), at50(tasks[i][2], tasks[i][3]))
	}
	var wg sync.WaitGroup
	for range 4 {
		wg.Go(func() {
			for i, k := range tasks {
				got, _, _ := g.Shortest(context.Background(), at50(k[0], k[1]), at50(k[2], k[3]))
				if !reflect.DeepEqual(got, want[i]) {
					t.Errorf("task %v: %v, before %v", k, got, want[i])
				}
			}
		})
	}
	wg.Wait()
}

// TestNoWayIsFoundWithoutASearch asks for a goal in a closed room.
func TestNoWayIsFoundWithoutASearch(t *testing.T) {
	m := newMask(300, 300)
	m.fill(100, 100, 140, 140, true)
	m.fill(101, 101, 139, 139, false)
	g := build(t, m.floor(t, false), 100_000)
	if g.Connected(at50(20, 20), at50(120, 120)) {
		t.Error("connected through a wall")
	}
	way, ok, err := g.Shortest(context.Background(), at50(20, 20), at50(120, 120))
	if ok || err != nil || way.Expanded != 0 {
		t.Errorf("%v, %v, %d expansions", ok, err, way.Expanded)
	}
	near := at50(98, 120) // 2 cells from the wall
	near.X++
	if g.Contains(near) {
		t.Fatal("the mesh holds a place too near to the wall")
	}
	if p, ok := g.Nearest(near, 10); !ok || p != at50(98, 120) {
		t.Errorf("nearest to %v: %v, %v", near, p, ok)
	}
}

// TestLooksAtPortalsFewTimes holds searches of a hall, where many ways lead to each aisle, to
// fewer expansions than there are portals, of which each is looked through both ways.
func TestLooksAtPortalsFewTimes(t *testing.T) {
	g := build(t, hallFloor(t, 2048, 0, false), 450_000)
	portals := 0
	for _, b := range g.blocks {
		portals += len(b.portals)
	}
	for _, y := range []int{80, 1000, 2000} {
		way, ok, err := g.Shortest(context.Background(), at50(15, 15), at50(2030, y))
		if err != nil || !ok || way.Expanded > int64(portals) {
			t.Errorf("%v, %v: %d expansions, wanted at most %d", ok, err, way.Expanded, portals)
		}
	}
}
