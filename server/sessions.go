package server

import (
	"container/list"
	"sync"
	"time"

	"example.com/wideberth/planner"
)

// What the kept sessions may come to. A route takes half a kilobyte a point; on a named grid, its
// search across a busy hall of 1024x1024 cells about 9 MiB besides, one of 4096x4096 up to some
// 130. The one used longest ago goes first; that costs time when its robot replans, and
// changes no route.
const (
	maxSessions     = 4096
	maxSessionBytes = 192 << 20
	sessionIdle     = 10 * time.Minute // after which it goes in any case, once another is kept
)

// sessions are kept for robots that drive a route, by the route's id. A restart loses them.
type sessions struct {
	now   func() time.Time
	mu    sync.Mutex
	by    map[string]*list.Element
	order *list.List // of *kept, the last used in front
	bytes int64
	most  int64 // bytes
}

type kept struct {
	id    string
	s     *planner.Session
	bytes int64
	at    time.Time
}

func newSessions(now func() time.Time) *sessions {
	return &sessions{now: now, by: map[string]*list.Element{}, order: list.New(), most: maxSessionBytes}
}

// take is the session of a route, which is the caller's alone until it is kept again; a new
// one when there is none.
func (c *sessions) take(id string) *planner.Session {
	c.mu.Lock()
	defer c.mu.Unlock()
	if e := c.by[id]; e != nil {
		return c.remove(e).s
	}
	return new(planner.Session)
}

// keep keeps a session for the route of that id, unless it is worth nothing.
func (c *sessions) keep(id string, s *planner.Session) {
	k := &kept{id, s, s.Bytes(), c.now()}
	if k.bytes == 0 {
		return
	}
	var gone []*planner.Session
	c.mu.Lock()
	if e := c.by[id]; e != nil {
		gone = append(gone, c.remove(e).s)
	}
	c.by[id] = c.order.PushFront(k)
	c.bytes += k.bytes
	for e := c.order.Back(); e != nil; e = c.order.Back() {
		if c.bytes <= c.most && c.order.Len() <= maxSessions && k.at.Sub(e.Value.(*kept).at) < sessionIdle {
			break
		}
		gone = append(gone, c.remove(e).s)
	}
	c.mu.Unlock()
	for _, s := range gone {
		s.Release()
	}
}

func (c *sessions) remove(e *list.Element) *kept {
	k := c.order.Remove(e).(*kept)
	delete(c.by, k.id)
	c.bytes -= k.bytes
	return k
}
