package planner_test

import (
	"context"
	"reflect"
	"testing"

	"pgregory.net/rapid"

	"example.com/wideberth/planner"
)

// A world advanced from another version, with the free cells that were known there
// carried over, answers as one made from scratch.
func TestAdvancedWorldAnswersAsRebuilt(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sc := drawScene(t, true)
		plan(t, sc.w, sc.q) // fills masks
		m, w := sc.m, sc.w
		for range 2 {
			m = newMapFrom(t, m, drawChange(t, m.Settings(), m))
			var err error
			if w, err = w.Advance(context.Background(), m); err != nil {
				t.Fatal(err)
			}
			got, want := plan(t, w, sc.q), plan(t, newWorld(t, m), sc.q)
			if !reflect.DeepEqual(got, want) {
				t.Fatalf("advanced:\n%+v\nrebuilt:\n%+v", got, want)
			}
		}
		if w.Map() != m {
			t.Fatal("the world is of another version")
		}
	})
}

// More kinds of body than masks are kept for: all are still answered.
func TestManyBodies(t *testing.T) {
	w := newWorld(t, newMap(t, settings(0, 0, 10, 10, 0.05), solidBox("rack", 4, 0, 5, 8)))
	q := shortest(body(0.2), pose(2, 2), pose(8, 2))
	want := plan(t, w, q)
	for k := range 50 {
		b := body(0.2)
		b.MarginUm = int64(k) * 1000
		b.PreferredUm += b.MarginUm
		mustRoute(t, w, planner.Request{Body: b, Start: q.Start, Goal: q.Goal, Options: q.Options})
	}
	if got := plan(t, w, q); !reflect.DeepEqual(got, want) {
		t.Error("the answer changed once other bodies had been planned for")
	}
}
