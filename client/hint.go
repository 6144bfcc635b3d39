package client

import (
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Advice is what a controller is to make of a hint at a time of its own monotonic
// clock, the one its reports are stamped with (seconds): the hint's state while
// it may be followed, and hold otherwise, which is: no hint, one that is older
// than its valid_for_s, one stamped later than now, or a state that this client
// does not know. Hold is advice, not a stop command.
func Advice(h *wideberthv1.Hint, nowS float64) wideberthv1.GuideState {
	const hold = wideberthv1.GuideState_GUIDE_STATE_HOLD
	age := nowS - h.GetStampS()
	if h == nil || !(age >= 0 && age < h.GetValidForS()) { // not-a-number holds too
		return hold
	}
	switch s := h.GetState(); s {
	case wideberthv1.GuideState_GUIDE_STATE_CLEAR,
		wideberthv1.GuideState_GUIDE_STATE_HINTING,
		wideberthv1.GuideState_GUIDE_STATE_REPLAN_ADVISED:
		return s
	}
	return hold
}
