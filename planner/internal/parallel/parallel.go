// Package parallel spreads work that has no order over all processors.
package parallel

import (
	"context"
	"fmt"
	"runtime"
	"runtime/debug"
	"sync"
	"sync/atomic"
)

// Each calls work(0) to work(n-1), each once, on at most workers goroutines (0: one for
// each processor, and never more than that); mk makes the work of one of them, so that
// it can keep scratch of its own. It stops early when ctx ends and returns ctx's error. A panic in one piece of work ends the others and is raised
// again in the caller, where whoever guards the call can catch it.
func Each(ctx context.Context, workers, n int, mk func() func(int)) error {
	if procs := runtime.GOMAXPROCS(0); workers <= 0 || workers > procs {
		workers = procs
	}
	ctx, stop := context.WithCancelCause(ctx)
	defer stop(nil)
	var next atomic.Int64
	var fault atomic.Pointer[string]
	var wg sync.WaitGroup
	for range min(workers, n) {
		wg.Go(func() {
			defer func() {
				if r := recover(); r != nil {
					text := fmt.Sprintf("%v\n%s", r, debug.Stack())
					fault.CompareAndSwap(nil, &text)
					stop(nil)
				}
			}()
			work := mk()
			for ctx.Err() == nil {
				i := int(next.Add(1)) - 1
				if i >= n {
					return
				}
				work(i)
			}
		})
	}
	wg.Wait()
	if text := fault.Load(); text != nil {
		panic(*text)
	}
	return ctx.Err()
}
