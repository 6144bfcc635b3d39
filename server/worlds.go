package server

import (
	"container/list"
	"context"
	"errors"
	"fmt"
	"runtime"
	"runtime/debug"
	"sync"
	"time"

	"github.com/rs/zerolog"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/planner"
)

// comeBackWithin is how long a build goes on for a caller that ran out of time
// (prepareGrace, or its own) and will ask again. It is longer than any client's wait
// between tries; were the build given up at once, a version that takes longer than
// that time to make ready could never be planned on.
const comeBackWithin = 30 * time.Second

// worldKey names a version's content: a restored version shares the world of the
// one it brought back.
type worldKey struct {
	floor  string
	digest [32]byte
}

func keyOf(s *mapstore.Snapshot) worldKey { return worldKey{s.Info.Floor, s.Info.Digest} }

// worlds keeps versions ready to plan on. For every floor it has been asked about
// it follows the store and makes each new head ready in the background, from the
// head before. Other versions are made ready when somebody plans on them, and the
// least recently used of those are let go. Two callers never build the same world
// twice. A build that nobody waits for any more is given up: at once when its callers
// have gone, after comeBackWithin when one of them ran out of time.
type worlds struct {
	store *mapstore.Store
	log   zerolog.Logger
	spare int           // how many worlds beside the heads are kept
	turns chan struct{} // bounds builds of versions other than heads

	comeBack time.Duration // comeBackWithin, but in tests

	ctx    context.Context // ends the followers
	cancel context.CancelFunc
	done   sync.WaitGroup

	mu      sync.Mutex
	floors  map[string]*following
	ready   map[worldKey]*list.Element // of recent
	recent  *list.List                 // *readyWorld, most recently used first
	pending map[worldKey]*build
}

// following is a floor that is followed.
type following struct {
	head  *planner.World // of the newest head made ready
	snap  *mapstore.Snapshot
	fresh chan struct{} // closed once the first head was made ready or failed
}

type readyWorld struct {
	key   worldKey
	world *planner.World
	head  bool // kept beside the spare ones
}

// build is a world in the making.
type build struct {
	cancel  context.CancelFunc
	waiters int
	promise *time.Timer   // runs while a caller that ran out of time may come back
	done    chan struct{} // closed when world and err are set
	world   *planner.World
	err     error
}

// newWorlds follows nothing yet. log hears of builds that fail.
func newWorlds(store *mapstore.Store, spare int, log zerolog.Logger) *worlds {
	w := &worlds{
		store: store, log: log, spare: spare,
		turns:  make(chan struct{}, max(1, runtime.GOMAXPROCS(0)/2)),
		floors: map[string]*following{}, ready: map[worldKey]*list.Element{},
		recent: list.New(), pending: map[worldKey]*build{}, comeBack: comeBackWithin,
	}
	w.ctx, w.cancel = context.WithCancel(context.Background())
	return w
}

// close ends the followers and the builds and waits for them.
func (w *worlds) close() {
	w.cancel()
	w.done.Wait()
}

// follow starts following a floor, once; it returns at once.
func (w *worlds) follow(id string) *following {
	w.mu.Lock()
	defer w.mu.Unlock()
	if f := w.floors[id]; f != nil {
		return f
	}
	f := &following{fresh: make(chan struct{})}
	w.floors[id] = f
	w.done.Add(1)
	go func() {
		defer w.done.Done()
		w.run(id, f)
	}()
	return f
}

// run makes each head of a floor ready as it lands. When heads land faster than
// that, the newest wins.
func (w *worlds) run(id string, f *following) {
	first := sync.OnceFunc(func() { close(f.fresh) })
	defer first()
	watch, err := w.store.Watch(id, 0)
	if err != nil {
		w.forget(id)
		if !errors.Is(err, mapstore.ErrNoFloor) && !errors.Is(err, mapstore.ErrClosed) {
			w.log.Error().Err(err).Str("floor", id).Msg("floor cannot be followed")
		}
		return
	}
	defer watch.Close()
	for {
		if _, err := watch.Next(w.ctx); err != nil {
			w.forget(id)
			return
		}
		snap, err := w.store.Head(id)
		if err == nil {
			_, err = w.get(w.ctx, snap)
		}
		if err != nil && w.ctx.Err() == nil {
			w.log.Error().Err(err).Str("floor", id).Msg("head cannot be made ready to plan on")
		}
		first()
	}
}

// forget lets a floor be followed anew when it is next asked about.
func (w *worlds) forget(id string) {
	w.mu.Lock()
	defer w.mu.Unlock()
	delete(w.floors, id)
}

// prepare waits until a floor's head has been made ready once.
func (w *worlds) prepare(ctx context.Context, id string) error {
	f := w.follow(id)
	select {
	case <-f.fresh:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}

// newest is the newest head of a floor that is ready, nil when none is yet. It
// never waits.
func (w *worlds) newest(id string) (*planner.World, *mapstore.Snapshot) {
	f := w.follow(id)
	w.mu.Lock()
	defer w.mu.Unlock()
	return f.head, f.snap
}

// get is the world of a version, made ready first when it is not yet. The error
// is ctx's or the planner's.
func (w *worlds) get(ctx context.Context, snap *mapstore.Snapshot) (*planner.World, error) {
	key := keyOf(snap)
	w.mu.Lock()
	if e := w.ready[key]; e != nil {
		w.recent.MoveToFront(e)
		r := e.Value.(*readyWorld)
		w.noteHead(snap, r)
		w.mu.Unlock()
		return r.world, nil
	}
	b := w.pending[key]
	if b == nil {
		b = w.start(key, snap)
	}
	b.waiters++
	w.mu.Unlock()

	select {
	case <-b.done:
		return b.world, b.err
	case <-ctx.Done():
		w.mu.Lock()
		defer w.mu.Unlock()
		b.waiters--
		if errors.Is(ctx.Err(), context.DeadlineExceeded) {
			w.promise(key, b)
		} else {
			w.giveUp(key, b)
		}
		return nil, ctx.Err()
	}
}

// promise lets a build go on for comeBackWithin from now; w.mu is held.
func (w *worlds) promise(key worldKey, b *build) {
	if b.promise != nil {
		b.promise.Stop()
	}
	var t *time.Timer
	t = time.AfterFunc(w.comeBack, func() {
		w.mu.Lock()
		defer w.mu.Unlock()
		if b.promise == t { // not renewed meanwhile
			b.promise = nil
			w.giveUp(key, b)
		}
	})
	b.promise = t
}

// giveUp ends a build that nobody waits for or may come back for, and lets the next
// caller start anew; w.mu is held.
func (w *worlds) giveUp(key worldKey, b *build) {
	if b.waiters > 0 || b.promise != nil {
		return
	}
	b.cancel()
	if w.pending[key] == b {
		delete(w.pending, key)
	}
}

// start begins a build; w.mu is held.
func (w *worlds) start(key worldKey, snap *mapstore.Snapshot) *build {
	ctx, cancel := context.WithCancel(w.ctx)
	b := &build{cancel: cancel, done: make(chan struct{})}
	w.pending[key] = b
	var base *planner.World
	isHead := true
	if f := w.floors[key.floor]; f != nil {
		base = f.head
		isHead = f.snap == nil || snap.Info.Version > f.snap.Info.Version
	}
	w.done.Add(1)
	go func() {
		defer w.done.Done()
		defer cancel()
		world, err := w.make(ctx, base, snap, isHead)
		w.mu.Lock()
		defer w.mu.Unlock()
		if w.pending[key] == b {
			delete(w.pending, key)
			if err == nil {
				w.keep(key, snap, world)
			}
		}
		b.world, b.err = world, err
		if b.promise != nil {
			b.promise.Stop()
		}
		close(b.done)
	}()
	return b
}

// make builds one world, from base when there is one. Only builds of heads start
// without waiting for a turn. It runs apart from any call, so a panic in it is logged
// and becomes an error for this version alone.
func (w *worlds) make(ctx context.Context, base *planner.World, snap *mapstore.Snapshot, isHead bool) (world *planner.World, err error) {
	defer func() {
		if p := recover(); p != nil {
			w.log.Error().Str("floor", snap.Info.Floor).Int64("map_version", snap.Info.Version).
				Str("panic", fmt.Sprint(p)).Bytes("stack", debug.Stack()).Msg("making a version ready panicked")
			world, err = nil, errPanic
		}
	}()
	if !isHead {
		select {
		case w.turns <- struct{}{}:
			defer func() { <-w.turns }()
		case <-ctx.Done():
			return nil, ctx.Err()
		}
	}
	if base != nil {
		return base.Advance(ctx, snap.Map)
	}
	return planner.NewWorld(ctx, snap.Map)
}

// keep files a finished world and lets the least recently used spare ones go;
// w.mu is held.
func (w *worlds) keep(key worldKey, snap *mapstore.Snapshot, world *planner.World) {
	r := &readyWorld{key: key, world: world}
	w.ready[key] = w.recent.PushFront(r)
	w.noteHead(snap, r)
	spare := 0
	for e := w.recent.Front(); e != nil; {
		next := e.Next()
		if r := e.Value.(*readyWorld); !r.head {
			if spare++; spare > w.spare {
				w.recent.Remove(e)
				delete(w.ready, r.key)
			}
		}
		e = next
	}
}

// noteHead makes r the world of its floor's head when snap is newer than the head
// known so far; w.mu is held.
func (w *worlds) noteHead(snap *mapstore.Snapshot, r *readyWorld) {
	f := w.floors[snap.Info.Floor]
	if f == nil || f.snap != nil && f.snap.Info.Version >= snap.Info.Version {
		return
	}
	if f.snap != nil {
		if e := w.ready[keyOf(f.snap)]; e != nil {
			e.Value.(*readyWorld).head = false
		}
	}
	f.head, f.snap = r.world, snap
	r.head = true
}
