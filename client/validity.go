package client

import (
	"sync"
	"time"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Validity says until when a controller may act on a route. It starts at the
// route's receipt, for the route's valid_for_s, and starts anew at the receipt of
// every heartbeat that names the very version the route was checked against as the
// head. A version event never renews it: after a break the events are history, and
// a newer version may be the next of them. Once a newer version, or the same version
// with another digest, has been seen it is never renewed again: the time left is
// for asking for a replan.
//
// It is a rule about the map's age and no safety function. Validity is safe for
// concurrent use.
type Validity struct {
	stamp *wideberthv1.VersionStamp
	lasts time.Duration
	now   func() time.Time

	mu         sync.Mutex
	until      time.Time
	superseded bool
}

// NewValidity starts the time of a route that has just been received. now is the
// clock, nil for time.Now; it must be the clock of the times given to Observe.
func NewValidity(route *wideberthv1.Route, now func() time.Time) *Validity {
	if now == nil {
		now = time.Now
	}
	v := &Validity{stamp: route.GetCheckedAgainst(), now: now}
	// Not a number, negative or absurd: no time at all.
	if s := route.GetValidForS(); s > 0 && s <= 24*3600 {
		v.lasts = time.Duration(s * float64(time.Second))
	}
	v.until = now().Add(v.lasts)
	return v
}

// Observe takes in an event of a Watch on the route's floor. Breaks change nothing:
// the time just runs on.
func (v *Validity) Observe(ev WatchEvent) {
	head := ev.Head
	if head == nil || head.GetFloor() != v.stamp.GetFloor() {
		return
	}
	v.mu.Lock()
	defer v.mu.Unlock()
	if head.GetVersion() != v.stamp.GetVersion() || head.GetDigest() != v.stamp.GetDigest() {
		// An older head was on its way before the route was planned: it renews
		// nothing and supersedes nothing.
		v.superseded = v.superseded || head.GetVersion() >= v.stamp.GetVersion()
		return
	}
	if until := ev.Received.Add(v.lasts); ev.Version == nil && !v.superseded && until.After(v.until) {
		v.until = until
	}
}

// MayAct says whether the route may be acted on now.
func (v *Validity) MayAct() bool { return v.now().Before(v.Until()) }

// Until is when the time runs out if nothing more is heard.
func (v *Validity) Until() time.Time {
	v.mu.Lock()
	defer v.mu.Unlock()
	return v.until
}

// Superseded says whether a newer head has been seen: ask for a replan.
func (v *Validity) Superseded() bool {
	v.mu.Lock()
	defer v.mu.Unlock()
	return v.superseded
}
