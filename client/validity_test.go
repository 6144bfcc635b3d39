package client

import (
	"math"
	"testing"
	"time"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func TestValidity(t *testing.T) {
	t.Parallel()
	start := time.Date(2026, 12, 1, 2, 14, 0, 0, time.UTC)
	at := func(s float64) time.Time { return start.Add(time.Duration(s * float64(time.Second))) }
	head := func(version int64, digest string, s float64) WatchEvent {
		return WatchEvent{Head: &wideberthv1.VersionStamp{Floor: "hall", Version: version, Digest: digest}, Received: at(s)}
	}
	event := func(version int64, digest string, s float64) WatchEvent {
		ev := head(version, digest, s)
		ev.Version = &wideberthv1.Version{Stamp: ev.Head}
		return ev
	}
	other := head(7, "d", 8)
	other.Head.Floor = "dock"
	for _, tc := range []struct {
		name       string
		validFor   float64
		events     []WatchEvent
		until      float64 // seconds after receipt
		superseded bool
	}{
		{"nothing heard", 10, nil, 10, false},
		{"renewed by a heartbeat that names it", 10, []WatchEvent{head(7, "d", 4)}, 14, false},
		{"renewed again and again", 10, []WatchEvent{head(7, "d", 2), head(7, "d", 4), head(7, "d", 6)}, 16, false},
		{"a newer head lets the time run out", 10, []WatchEvent{head(7, "d", 4), head(8, "e", 6)}, 14, true},
		{"never renewed after a newer head", 10, []WatchEvent{head(8, "e", 3), head(7, "d", 4)}, 10, true},
		{"a version event is history, not the head", 10, []WatchEvent{event(7, "d", 9), event(8, "e", 9)}, 10, true},
		{"a version event of its own version", 10, []WatchEvent{event(7, "d", 4), head(7, "d", 5)}, 15, false},
		{"another digest is another map", 10, []WatchEvent{head(7, "other", 4)}, 10, true},
		{"an older head was on its way", 10, []WatchEvent{head(6, "c", 1), head(7, "d", 2)}, 12, false},
		{"another floor says nothing", 10, []WatchEvent{other}, 10, false},
		{"a break says nothing", 10, []WatchEvent{{Broken: errQuiet, Received: at(5)}}, 10, false},
		{"late word does not shorten", 10, []WatchEvent{head(7, "d", 5), head(7, "d", 1)}, 15, false},
		{"renewed after it ran out", 10, []WatchEvent{head(7, "d", 60)}, 70, false},
		{"no time given", 0, []WatchEvent{head(7, "d", 4)}, 4, false},
		{"negative", -5, nil, 0, false},
		{"not a number", math.NaN(), nil, 0, false},
		{"without end", math.Inf(1), nil, 0, false},
	} {
		now := start
		v := NewValidity(&wideberthv1.Route{
			CheckedAgainst: &wideberthv1.VersionStamp{Floor: "hall", Version: 7, Digest: "d"},
			ValidForS:      tc.validFor,
		}, func() time.Time { return now })
		for _, ev := range tc.events {
			now = ev.Received
			v.Observe(ev)
		}
		if got := v.Until(); !got.Equal(at(tc.until)) {
			t.Errorf("%s: until %v after receipt, want %v s", tc.name, got.Sub(start), tc.until)
		}
		if v.Superseded() != tc.superseded {
			t.Errorf("%s: superseded %v, want %v", tc.name, v.Superseded(), tc.superseded)
		}
		if now = at(tc.until).Add(-time.Nanosecond); tc.until > 0 && !v.MayAct() {
			t.Errorf("%s: may not act just before %v s", tc.name, tc.until)
		}
		if now = at(tc.until); v.MayAct() {
			t.Errorf("%s: may act at %v s, when the time is over", tc.name, tc.until)
		}
	}
}

func TestAdvice(t *testing.T) {
	t.Parallel()
	const hold = wideberthv1.GuideState_GUIDE_STATE_HOLD
	hint := func(state wideberthv1.GuideState, stamp, valid float64) *wideberthv1.Hint {
		return &wideberthv1.Hint{State: state, StampS: stamp, ValidForS: valid}
	}
	for _, tc := range []struct {
		name string
		hint *wideberthv1.Hint
		now  float64
		want wideberthv1.GuideState
	}{
		{"fresh", hint(wideberthv1.GuideState_GUIDE_STATE_CLEAR, 100, 0.5), 100.2, wideberthv1.GuideState_GUIDE_STATE_CLEAR},
		{"fresh, hinting", hint(wideberthv1.GuideState_GUIDE_STATE_HINTING, 100, 0.5), 100, wideberthv1.GuideState_GUIDE_STATE_HINTING},
		{"replan", hint(wideberthv1.GuideState_GUIDE_STATE_REPLAN_ADVISED, 100, 0.5), 100, wideberthv1.GuideState_GUIDE_STATE_REPLAN_ADVISED},
		{"hold", hint(hold, 100, 0.5), 100, hold},
		{"its time is just over", hint(wideberthv1.GuideState_GUIDE_STATE_CLEAR, 100, 0.5), 100.5, hold},
		{"none yet", nil, 100, hold},
		{"from the future", hint(wideberthv1.GuideState_GUIDE_STATE_CLEAR, 101, 0.5), 100, hold},
		{"not said", hint(wideberthv1.GuideState_GUIDE_STATE_UNSPECIFIED, 100, 0.5), 100, hold},
		{"a state of a later contract", hint(wideberthv1.GuideState(99), 100, 0.5), 100, hold},
		{"no validity", hint(wideberthv1.GuideState_GUIDE_STATE_CLEAR, 100, 0), 100, hold},
		{"not a number", hint(wideberthv1.GuideState_GUIDE_STATE_CLEAR, math.NaN(), 0.5), 100, hold},
	} {
		if got := Advice(tc.hint, tc.now); got != tc.want {
			t.Errorf("%s: %v, want %v", tc.name, got, tc.want)
		}
	}
}
