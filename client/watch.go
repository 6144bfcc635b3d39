package client

import (
	"context"
	"errors"
	"fmt"
	"io"
	"iter"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

const (
	// heartbeatEvery is how often a watch hears from the server at the least.
	heartbeatEvery = 2 * time.Second
	// missedHeartbeats is how many may be missed before the stream counts as dead.
	missedHeartbeats = 3
	// heartbeatGrace is for the network and the server's own timers.
	heartbeatGrace = time.Second
)

// WatchEvent is one thing a watch has to say.
type WatchEvent struct {
	// Version is a version that is new to the watch. Nil for a heartbeat or a break.
	Version *wideberthv1.Version
	// Skipped is how many versions between Version and the one before it were not
	// given. When it is not 0 and they matter, read them with ListVersions.
	Skipped int64
	// Head is the head for a heartbeat, and Version's stamp for a version, which newer
	// ones may already follow. Nil for a break.
	Head *wideberthv1.VersionStamp
	// Broken is why the stream broke. The watch goes on by itself; until the next
	// event nothing is known of the head.
	Broken error
	// Received is when the event arrived, by this machine's clock. Validity counts
	// from it.
	Received time.Time
}

// errQuiet ends a stream that has missed its heartbeats.
var errQuiet = errors.New("client: watch: no word from the server for longer than three heartbeats")

// errEnded is a stream that the server ended without a fault: it is going down.
var errEnded = errors.New("client: watch: the server ended the stream")

// Watch yields the versions of a floor after a version, in order and each once, and
// a heartbeat about every two seconds; after 0 begins with the head. A break is
// yielded once, and the watch is taken up again after the last version yielded. A
// stream without a word for more than three heartbeats counts as broken. It ends,
// with an error in the last pair, when ctx ends or the server refuses for good:
// there is no such floor, or the caller may not watch it.
//
// The loop's body should be quick: while it runs nothing is received, and a reader
// that falls behind is given the newest version and told how many it skipped.
func (c *Client) Watch(ctx context.Context, floor string, after int64) iter.Seq2[WatchEvent, error] {
	return func(yield func(WatchEvent, error) bool) {
		w := watch{c: c, floor: floor, last: after, yield: yield}
		for tries := 0; ; {
			alive, err := w.follow(ctx)
			if w.stopped {
				return
			}
			if ctx.Err() != nil {
				yield(WatchEvent{}, ctx.Err())
				return
			}
			if final(err) {
				yield(WatchEvent{}, fmt.Errorf("client: watch of floor %q after version %d: %w", floor, w.last, err))
				return
			}
			if alive {
				tries = 0
			}
			if tries++; tries == 1 && !yield(WatchEvent{Broken: err, Received: time.Now()}, nil) {
				return
			}
			wait, _ := retryAfter(err)
			if sleep(ctx, wait+c.cfg.backoff.after(tries)) != nil {
				yield(WatchEvent{}, ctx.Err())
				return
			}
		}
	}
}

type watch struct {
	c       *Client
	floor   string
	last    int64 // the last version yielded
	yield   func(WatchEvent, error) bool
	stopped bool // the loop was left
}

// follow yields from one stream until it breaks, and says whether anything came.
func (w *watch) follow(ctx context.Context) (alive bool, err error) {
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	quiet := time.AfterFunc(w.c.cfg.quiet, func() { cancel(errQuiet) })
	defer quiet.Stop()
	stream, err := w.c.floors.WatchVersions(ctx, &wideberthv1.WatchVersionsRequest{Floor: w.floor, AfterVersion: w.last})
	for err == nil {
		var msg *wideberthv1.WatchVersionsResponse
		if msg, err = stream.Recv(); err != nil {
			break
		}
		quiet.Stop()
		alive = true
		if ev, ok := w.event(msg); ok && !w.yield(ev, nil) {
			w.stopped = true
			return alive, nil
		}
		quiet.Reset(w.c.cfg.quiet)
	}
	switch {
	case errors.Is(context.Cause(ctx), errQuiet):
		err = errQuiet
	case errors.Is(err, io.EOF):
		err = errEnded
	}
	return alive, err
}

// event reads a message. A version that was yielded before is not one again.
func (w *watch) event(msg *wideberthv1.WatchVersionsResponse) (WatchEvent, bool) {
	ev := WatchEvent{Received: time.Now()}
	if h := msg.GetHeartbeat(); h != nil {
		ev.Head = h.GetHead()
		return ev, true
	}
	v := msg.GetVersion().GetVersion()
	n := v.GetStamp().GetVersion()
	if v == nil || n <= w.last {
		return ev, false
	}
	ev.Version, ev.Head, ev.Skipped = v, v.GetStamp(), msg.GetVersion().GetSkipped()
	if w.last > 0 {
		ev.Skipped = n - w.last - 1
	}
	w.last = n
	return ev, true
}

// final says whether asking again cannot help: the request is at fault, or the
// caller is. Everything else, an unknown code too, may pass.
func final(err error) bool {
	switch status.Code(err) {
	case codes.InvalidArgument, codes.NotFound, codes.OutOfRange, codes.FailedPrecondition,
		codes.PermissionDenied, codes.Unauthenticated, codes.Unimplemented:
		return true
	}
	return false
}
