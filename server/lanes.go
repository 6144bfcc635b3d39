package server

import (
	"context"
	"sync/atomic"
	"time"
)

// lanes bounds how many plans are computed at once. A plan that would wait too
// long, or beyond its deadline, is refused at once rather than queued.
type lanes struct {
	slots   chan struct{}
	waiting atomic.Int64
	most    int64         // that may wait
	wait    time.Duration // the longest wait
}

func newLanes(slots, most int, wait time.Duration) *lanes {
	return &lanes{slots: make(chan struct{}, slots), most: int64(most), wait: wait}
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
		// Half of what is left to the caller is for the search.
		wait = min(wait, time.Until(end)/2)
	}
	timer := time.NewTimer(wait)
	defer timer.Stop()
	select {
	case l.slots <- struct{}{}:
		return leave, nil
	case <-timer.C:
		return nil, errOverloaded
	case <-ctx.Done():
		return nil, ctx.Err()
	}
}
