package parallel

import (
	"context"
	"errors"
	"strings"
	"sync/atomic"
	"testing"
)

func TestEachDoesEveryPieceOnce(t *testing.T) {
	for _, n := range []int{0, 1, 2, 1000} {
		done := make([]atomic.Int32, n)
		err := Each(t.Context(), n%3, n, func() func(int) { return func(i int) { done[i].Add(1) } })
		if err != nil {
			t.Fatal(err)
		}
		for i := range done {
			if k := done[i].Load(); k != 1 {
				t.Errorf("piece %d of %d done %d times", i, n, k)
			}
		}
	}
}

func TestEachStopsWithItsContext(t *testing.T) {
	ctx, cancel := context.WithCancel(t.Context())
	var done atomic.Int32
	err := Each(ctx, 0, 1_000_000, func() func(int) {
		return func(int) {
			if done.Add(1) == 10 {
				cancel()
			}
		}
	})
	if !errors.Is(err, context.Canceled) {
		t.Errorf("error %v, wanted the context's", err)
	}
	if n := done.Load(); n >= 1_000_000 {
		t.Errorf("all %d pieces were done after the context ended", n)
	}
}

func TestEachRaisesAPanicInItsCaller(t *testing.T) {
	defer func() {
		if r := recover(); r == nil || !strings.Contains(r.(string), "piece 3") {
			t.Errorf("recovered %v, wanted the panic of piece 3", r)
		}
	}()
	_ = Each(t.Context(), 2, 100, func() func(int) {
		return func(i int) {
			if i == 3 {
				panic("piece 3")
			}
		}
	})
	t.Error("Each returned")
}
