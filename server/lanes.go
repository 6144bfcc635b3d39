package server

import (
	"context"
	"errors"
	"sync/atomic"
	"time"

	"example.com/wideberth/planner"
)

// maxManyCalls is how many PlanMany calls may be under way at once, on all
// connections together: each keeps its answers coming through a share of the lanes
// that gets no larger.
const maxManyCalls = 64

// lanes bounds how many plans are computed at once. A plan that would wait too
// long, or beyond its deadline, is refused at once rather than queued. The pairs of
// PlanMany calls wait for their turns as long as their calls have time; all of them
// together hold at most half of the lanes, so that single plans find one (with a
// single lane, after one pair).
type lanes struct {
	slots   chan struct{}
	waiting atomic.Int64
	most    int64         // that may wait
	wait    time.Duration // the longest wait

	turns chan struct{} // pairs of PlanMany calls in a lane, or next to enter one
	calls atomic.Int64  // PlanMany calls under way
}

func newLanes(slots, most int, wait time.Duration) *lanes {
	return &lanes{
		slots: make(chan struct{}, slots), most: int64(most), wait: wait,
		turns: make(chan struct{}, max(1, slots/2)),
	}
}

// enterMany admits a PlanMany call. The error is errOverloaded.
func (l *lanes) enterMany() (leave func(), err error) {
	if l.calls.Add(1) > maxManyCalls {
		l.calls.Add(-1)
		return nil, errOverloaded
	}
	return func() { l.calls.Add(-1) }, nil
}

// enterPair takes a slot for one pair of a PlanMany call. The error is ctx's.
func (l *lanes) enterPair(ctx context.Context) (leave func(), err error) {
	select {
	case l.turns <- struct{}{}:
	case <-ctx.Done():
		return nil, ctx.Err()
	}
	select {
	case l.slots <- struct{}{}:
		return func() { <-l.slots; <-l.turns }, nil
	case <-ctx.Done():
		<-l.turns
		return nil, ctx.Err()
	}
}

// enter takes a slot. The error is errOverloaded, or ctx's.
func (l *lanes) enter(ctx context.Context) (leave func(), err error) {
	leave = func() { <-l.slots }
	select {
	case l.slots <- struct{}{}:
		return leave, nil
	default:
	}
	if l.waiting.Add(1) > l.most {
		l.waiting.Add(-1)
		return nil, errOverloaded
	}
	defer l.waiting.Add(-1)
	wait := l.wait
	if end, ok := ctx.Deadline(); ok {
		// Half of what is left, to the caller or of the time budget, is for the search.
		if wait = min(wait, time.Until(end)/2); wait <= 0 {
			return nil, errOverloaded
		}
	}
	timer := time.NewTimer(wait)
	defer timer.Stop()
	select {
	case l.slots <- struct{}{}:
		return leave, nil
	case <-timer.C:
		return nil, errOverloaded
	case <-ctx.Done():
		if errors.Is(context.Cause(ctx), planner.ErrTimeBudget) {
			return nil, errOverloaded
		}
		return nil, ctx.Err()
	}
}
