package dstar

import (
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// The heap against a list that is searched for its least.
func TestHeapAgainstList(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var h heap
		var list []entry
		for range rapid.IntRange(0, 300).Draw(t, "steps") {
			if len(list) == 0 || rapid.IntRange(0, 2).Draw(t, "push") > 0 {
				e := entry{rapid.Int64Range(0, 9).Draw(t, "f"), rapid.Int64Range(0, 9).Draw(t, "g"), rapid.Uint32Range(0, 9).Draw(t, "id")}
				h.push(e)
				list = append(list, e)
				continue
			}
			least := 0
			for i := range list {
				if list[i].less(&list[least]) {
					least = i
				}
			}
			if got := h.pop(); got != list[least] {
				t.Fatalf("%+v, want %+v", got, list[least])
			}
			list = slices.Delete(list, least, least+1)
		}
		if len(h.all) != len(list) {
			t.Fatalf("%d left, want %d", len(h.all), len(list))
		}
	})
}
