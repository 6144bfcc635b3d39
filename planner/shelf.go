package planner

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"runtime/debug"
	"slices"
	"sync"
	"sync/atomic"

	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/voronoi"
)

const (
	// shelfIdle is for how many versions a structure is brought up to date without being
	// asked for.
	shelfIdle = 64
	// unattendedLimit is how many makings that nobody waits for any more go on, of each kind
	// of structure and in each version.
	unattendedLimit = 2
)

// shelf keeps structures of one version, each made when it is first asked for. It is
// safe for any number of callers: those who ask for one at once wait for one making of
// it, others do not wait. Whoever waits may leave; the making goes on for the next
// question, within unattendedLimit.
type shelf[K comparable, V any] struct {
	limit int
	idle  int32 // 0: shelfIdle
	// behind says that structures are brought up to date in the background, whoever asks
	// for one meanwhile waiting for it.
	behind bool
	make   func(context.Context, K) (V, error)
	mu     sync.Mutex    // held to look at or change the fields below and those of what is in the making
	kept   []*kept[K, V] // at most limit
	// making are those not done yet, kept or not, oldest first.
	making []*kept[K, V]
	// there are those of kept that are done, for who asks for one of them, which takes no lock.
	there atomic.Pointer[[]*kept[K, V]]
	clock atomic.Int64 // how often one was asked for that was not the last to be asked for
}

// kept is a structure, or one in the making.
type kept[K comparable, V any] struct {
	key     K
	idle    atomic.Int32 // versions since it was asked for
	asked   atomic.Int64 // the clock when it was last asked for
	waiters int          // while it is in the making
	cancel  context.CancelFunc
	done    chan struct{} // closed once val and err are set
	val     V
	err     error
}

func (e *kept[K, V]) ready() bool {
	select {
	case <-e.done:
		return true
	default:
		return false
	}
}

// get is the structure for k. The error is ctx's cause, or that of its making.
func (s *shelf[K, V]) get(ctx context.Context, k K) (v V, err error) {
	if ctx.Err() != nil {
		return v, context.Cause(ctx)
	}
	return s.wait(ctx, s.find(k))
}

// done is what is kept and done for k, nil when nothing is.
func (s *shelf[K, V]) done(k K) *kept[K, V] {
	if list := s.there.Load(); list != nil {
		for _, e := range *list {
			if e.key == k {
				return e
			}
		}
	}
	return nil
}

// show makes what is kept and done known; s.mu is held.
func (s *shelf[K, V]) show() {
	list := make([]*kept[K, V], 0, len(s.kept))
	for _, e := range s.kept {
		if e.ready() {
			list = append(list, e)
		}
	}
	s.there.Store(&list)
}

// touch says that e was asked for. Where it was the last to be, nothing is written that
// others read.
func (s *shelf[K, V]) touch(e *kept[K, V]) {
	if e.idle.Load() != 0 {
		e.idle.Store(0)
	}
	if e.asked.Load() != s.clock.Load() {
		e.asked.Store(s.clock.Add(1))
	}
}

// peek is the structure for k if it is there; it asks for none.
func (s *shelf[K, V]) peek(k K) (v V, ok bool) {
	if e := s.done(k); e != nil && e.err == nil {
		return e.val, true
	}
	return v, false
}

// wait waits for what find gave.
func (s *shelf[K, V]) wait(ctx context.Context, e *kept[K, V]) (v V, err error) {
	if e.ready() {
		return e.val, e.err
	}
	select {
	case <-e.done:
		return e.val, e.err
	case <-ctx.Done():
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	e.waiters--
	s.thin()
	return v, context.Cause(ctx)
}

// thin ends makings that nobody waits for, the oldest first, down to the limit; s.mu is held.
func (s *shelf[K, V]) thin() {
	var alone []*kept[K, V]
	for _, e := range s.making {
		if e.waiters == 0 {
			alone = append(alone, e)
		}
	}
	for ; len(alone) > unattendedLimit; alone = alone[1:] {
		alone[0].cancel()
		s.drop(alone[0])
	}
}

// has says whether the structure for k is there or in the making.
func (s *shelf[K, V]) has(k K) bool {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.held(k) != nil
}

func (s *shelf[K, V]) held(k K) *kept[K, V] {
	if i := slices.IndexFunc(s.kept, func(e *kept[K, V]) bool { return e.key == k }); i >= 0 {
		return s.kept[i]
	}
	return nil
}

// find is what is kept for k, its making begun if need be; the caller counts as a waiter
// until it is done.
func (s *shelf[K, V]) find(k K) *kept[K, V] {
	if e := s.done(k); e != nil {
		s.touch(e)
		return e
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	e := s.held(k)
	if e == nil {
		e = s.begin(k, func(ctx context.Context) (V, error) { return s.make(ctx, k) })
	}
	s.touch(e)
	e.waiters++
	return e
}

// begin starts a making; s.mu is held.
func (s *shelf[K, V]) begin(k K, make func(context.Context) (V, error)) *kept[K, V] {
	ctx, cancel := context.WithCancel(context.Background())
	e := &kept[K, V]{key: k, cancel: cancel, done: newDone()}
	s.put(e)
	s.making = append(s.making, e)
	go func() {
		defer cancel()
		v, err := guarded(ctx, make)
		s.mu.Lock()
		defer s.mu.Unlock()
		if e.val, e.err = v, err; err != nil && !unfit(err) {
			s.drop(e)
		}
		s.making = slices.DeleteFunc(s.making, func(o *kept[K, V]) bool { return o == e })
		close(e.done)
		s.show()
	}()
	return e
}

func (s *shelf[K, V]) idleLimit() int32 {
	if s.idle > 0 {
		return s.idle
	}
	return shelfIdle
}

func newDone() chan struct{} { return make(chan struct{}) }

// put adds e as the one asked for last, in the place of the one asked for longest ago
// where there is no room; s.mu is held.
func (s *shelf[K, V]) put(e *kept[K, V]) {
	if len(s.kept) == s.limit {
		s.drop(slices.MinFunc(s.kept, longestAgo)) // whoever waits for it has it still
	}
	e.asked.Store(s.clock.Add(1))
	s.kept = append(s.kept, e)
	s.show()
}

func longestAgo[K comparable, V any](a, b *kept[K, V]) int {
	return cmp.Compare(a.asked.Load(), b.asked.Load())
}

// makeError is a panic in the making of a structure. Whoever logs it has the stack.
type makeError struct{ fault, stack string }

func (e *makeError) Error() string {
	return "planner: making a structure: " + e.fault + "\n" + e.stack
}

// guarded makes a structure. It runs apart from any call, so a panic, a fault of this
// program, becomes an error for those who wait rather than the process's end.
func guarded[V any](ctx context.Context, make func(context.Context) (V, error)) (v V, err error) {
	defer func() {
		if p := recover(); p != nil {
			err = &makeError{fmt.Sprint(p), string(debug.Stack())}
		}
	}()
	return make(ctx)
}

// unfit says whether what was made again would fail in the same way: it is too large for
// the version. That is kept like a structure, so that a version finds it out once.
func unfit(err error) bool {
	return errors.Is(err, anyangle.ErrTooLarge) || errors.Is(err, voronoi.ErrTooLarge) || errors.Is(err, roadmap.ErrTooLarge)
}

// drop forgets e; s.mu is held.
func (s *shelf[K, V]) drop(e *kept[K, V]) {
	s.kept = slices.DeleteFunc(s.kept, func(o *kept[K, V]) bool { return o == e })
	s.show()
}

// errLeftOut is for what is not worth carrying to another version.
var errLeftOut = errors.New("planner: left out")

// carry fills n, the shelf of another version, from what is made and in use here. What
// is still in the making is carried on once it is made, in the background, or made from
// scratch when that fails: what could not be made of one version says nothing of another.
// What advance wants left out (errLeftOut), and what is too large for either version, is made
// when it is next asked for. The error
// is ctx's.
func (s *shelf[K, V]) carry(ctx context.Context, n *shelf[K, V], advance func(context.Context, K, V) (V, error)) error {
	var ready []*kept[K, V]
	s.mu.Lock()
	n.mu.Lock()
	for _, e := range slices.SortedFunc(slices.Values(s.kept), longestAgo) {
		idle := e.idle.Load() + 1
		switch {
		case idle > s.idleLimit(), e.ready() && e.err != nil:
		case !e.ready() || s.behind:
			e.waiters++
			n.begin(e.key, func(ctx context.Context) (V, error) {
				v, err := s.wait(ctx, e)
				if err == nil {
					v, err = advance(ctx, e.key, v)
					if !errors.Is(err, errLeftOut) {
						return v, err
					}
				}
				if ctx.Err() != nil {
					return v, err
				}
				return n.make(ctx, e.key)
			}).idle.Store(idle)
		default:
			ready = append(ready, e)
		}
	}
	n.mu.Unlock()
	s.mu.Unlock()
	for _, e := range ready {
		v, err := advance(ctx, e.key, e.val)
		if errors.Is(err, errLeftOut) || unfit(err) {
			continue
		}
		if err != nil {
			return err
		}
		done := newDone()
		close(done)
		c := &kept[K, V]{key: e.key, cancel: func() {}, done: done, val: v}
		c.idle.Store(e.idle.Load() + 1)
		n.mu.Lock()
		n.put(c)
		n.mu.Unlock()
	}
	return nil
}
