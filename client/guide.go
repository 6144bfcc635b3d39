package client

import (
	"context"
	"errors"
	"fmt"
	"sync"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Guide is a robot's line to the guide service. Reports go out and hints come back
// over a stream that is opened again whenever it breaks, setup first. Only the
// newest counts both ways: a report that has not gone out yet gives way to the
// next, and a hint that has not been taken gives way to a newer one. Safe for
// concurrent use. Close it when done.
type Guide struct {
	c      *Client
	cancel context.CancelFunc
	done   chan struct{}

	mu      sync.Mutex
	changed chan struct{} // closed and made anew whenever something below changes
	setup   *wideberthv1.GuideSetup
	route   int                      // counts setups
	report  *wideberthv1.GuideReport // the newest
	oldest  int64                    // hints to earlier reports are about another setup
	hint    *wideberthv1.Hint        // not yet taken
	heard   int64                    // sequence of the newest hint received
	err     error                    // for good
}

// errGuideClosed is what Next gives after Close.
var errGuideClosed = errors.New("client: guide: closed")

// Guide opens a line for one robot. It lives until ctx ends, Close, or the server
// refuses for good (Next then gives the error). The setup must not be changed
// afterwards; see SetSetup.
func (c *Client) Guide(ctx context.Context, setup *wideberthv1.GuideSetup) *Guide {
	ctx, cancel := context.WithCancel(ctx)
	g := &Guide{
		c: c, cancel: cancel, done: make(chan struct{}), changed: make(chan struct{}),
		setup: setup, route: 1, oldest: minSequence, heard: minSequence - 1,
	}
	go g.run(ctx)
	return g
}

// minSequence is the lowest sequence a report may have.
const minSequence = 1

// Report hands over where the robot is, without waiting. Sequences count up from 1.
// The report must not be changed afterwards.
func (g *Guide) Report(r *wideberthv1.GuideReport) error {
	g.mu.Lock()
	defer g.mu.Unlock()
	if g.err != nil {
		return g.err
	}
	if last := max(g.report.GetSequence(), minSequence-1); r.GetSequence() <= last {
		return fmt.Errorf("client: guide: sequence is %d, want above %d", r.GetSequence(), last)
	}
	g.report = r
	g.notify()
	return nil
}

// SetSetup changes the route or the thresholds. Hints to reports handed over before
// are not given any more.
func (g *Guide) SetSetup(s *wideberthv1.GuideSetup) {
	g.mu.Lock()
	defer g.mu.Unlock()
	g.setup, g.hint = s, nil
	g.route++
	g.oldest = max(g.report.GetSequence()+1, minSequence)
	g.notify()
}

// Next waits for a hint newer than any it gave before. It fails when ctx ends, after
// Close, or when the server refused for good. While the stream is broken it just
// waits: bound ctx by how long the controller may go without, and see Advice.
func (g *Guide) Next(ctx context.Context) (*wideberthv1.Hint, error) {
	for {
		g.mu.Lock()
		hint, err, changed := g.hint, g.err, g.changed
		g.hint = nil
		g.mu.Unlock()
		if hint != nil {
			return hint, nil
		}
		if err != nil {
			return nil, err
		}
		select {
		case <-changed:
		case <-ctx.Done():
			return nil, ctx.Err()
		}
	}
}

// Close ends the line and waits until nothing of it runs any more.
func (g *Guide) Close() {
	g.fail(errGuideClosed)
	g.cancel()
	<-g.done
}

// notify wakes whoever waits for a change. g.mu is held.
func (g *Guide) notify() {
	close(g.changed)
	g.changed = make(chan struct{})
}

func (g *Guide) fail(err error) {
	g.mu.Lock()
	defer g.mu.Unlock()
	if g.err == nil {
		g.err = err
		g.notify()
	}
}

// run keeps a stream open.
func (g *Guide) run(ctx context.Context) {
	defer close(g.done)
	for tries := 0; ; {
		alive, err := g.session(ctx)
		if ctx.Err() != nil {
			g.fail(ctx.Err())
			return
		}
		if final(err) {
			g.fail(fmt.Errorf("client: guide: %w", err))
			return
		}
		if alive {
			tries = 0
		}
		tries++
		wait, _ := retryAfter(err)
		if err := sleep(ctx, wait+g.c.cfg.backoff.after(tries)); err != nil {
			g.fail(err)
			return
		}
	}
}

// session runs one stream until it breaks, and says whether a hint came.
func (g *Guide) session(ctx context.Context) (alive bool, err error) {
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	stream, err := g.c.guides.Guide(ctx)
	if err != nil {
		return false, err
	}
	sent := make(chan struct{})
	go func() {
		defer close(sent)
		g.send(ctx, stream.Send)
	}()
	defer func() { cancel(); <-sent }()
	for {
		msg, err := stream.Recv()
		if err != nil {
			return alive, err
		}
		alive = true
		g.receive(msg.GetHint())
	}
}

// send sends the setup, then every newest report, until the stream breaks: its
// cause comes out of Recv.
func (g *Guide) send(ctx context.Context, out func(*wideberthv1.GuideRequest) error) {
	route, sequence := 0, int64(minSequence-1)
	for {
		g.mu.Lock()
		setup, setupNo, report := g.setup, g.route, g.report
		heard, oldest, changed := g.heard, g.oldest, g.changed
		g.mu.Unlock()
		if setupNo != route {
			if out(&wideberthv1.GuideRequest{Message: &wideberthv1.GuideRequest_Setup{Setup: setup}}) != nil {
				return
			}
			route = setupNo
		}
		if n := report.GetSequence(); report != nil && n > sequence && n > heard && n >= oldest {
			if out(&wideberthv1.GuideRequest{Message: &wideberthv1.GuideRequest_Report{Report: report}}) != nil {
				return
			}
			sequence = n
			continue // something newer may have come meanwhile
		}
		select {
		case <-changed:
		case <-ctx.Done():
			return
		}
	}
}

func (g *Guide) receive(h *wideberthv1.Hint) {
	g.mu.Lock()
	defer g.mu.Unlock()
	if h == nil || h.GetSequence() <= g.heard || h.GetSequence() < g.oldest {
		return
	}
	g.hint, g.heard = h, h.GetSequence()
	g.notify()
}
