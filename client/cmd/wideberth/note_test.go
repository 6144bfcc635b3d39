package main

import (
	"testing"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// A note's figure is printed with its unit as people write it; a mere number has none.
func TestNotesHaveTheirUnits(t *testing.T) {
	for want, n := range map[string]*wideberthv1.RoadmapNote{
		"27":      {Value: 27, Unit: "1"},
		"0.025 m": {Value: 0.025, Unit: "m"},
		"1234 m²": {Value: 1234, Unit: "m2"},
	} {
		if got := noteValue(n); got != want {
			t.Errorf("%q, wanted %q", got, want)
		}
	}
}
