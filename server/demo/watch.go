package demo

import (
	"context"
	"fmt"
	"slices"
	"sync"
)

// watch is the controller's ear: it keeps the versions that the service names.
type watch struct {
	cancel context.CancelFunc
	done   chan struct{}

	mu       sync.Mutex
	changed  chan struct{} // closed and made anew at every version
	versions []int64
	err      error // why it ended
}

// watch starts after a version that the controller has.
func (s *story) watch(ctx context.Context, after int64) *watch {
	ctx, cancel := context.WithCancel(ctx)
	w := &watch{cancel: cancel, done: make(chan struct{}), changed: make(chan struct{}), versions: []int64{after}}
	go func() {
		defer close(w.done)
		for ev, err := range s.client.Watch(ctx, s.hall.Floor, after) {
			w.mu.Lock()
			if err != nil {
				w.err = err
			} else if ev.Version != nil {
				w.versions = append(w.versions, ev.Version.GetStamp().GetVersion())
			}
			close(w.changed)
			w.changed = make(chan struct{})
			w.mu.Unlock()
		}
	}()
	return w
}

// until waits until a version, or a later one, has been named.
func (w *watch) until(ctx context.Context, version int64) error {
	for {
		w.mu.Lock()
		last, err, changed := w.versions[len(w.versions)-1], w.err, w.changed
		w.mu.Unlock()
		if last >= version {
			return nil
		}
		if err != nil {
			return fmt.Errorf("watching for version %d: %w", version, err)
		}
		select {
		case <-changed:
		case <-ctx.Done():
			return fmt.Errorf("watching for version %d: %w", version, ctx.Err())
		}
	}
}

func (w *watch) seen() []int64 {
	w.mu.Lock()
	defer w.mu.Unlock()
	return slices.Clone(w.versions)
}

// stop ends the watch and waits until nothing of it runs any more.
func (w *watch) stop() {
	w.cancel()
	<-w.done
}
