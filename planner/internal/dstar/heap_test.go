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
				e := entry{rapid.Uint64Range(0, 9).Draw(t, "f"), rapid.Uint64Range(0, 9).Draw(t, "g"), rapid.Uint32Range(0, 9).Draw(t, "id")}
				h.push(e)
				list = append(list, e)
				continue
			}
			least := 0
			for i := range list {
				if list[i].f < list[least].f || list[i].f == list[least].f && list[i].g < list[least].g {
					least = i
				}
			}
			top := h.all[0]
			if top.f != list[least].f || top.g != list[least].g {
				t.Fatalf("%+v, want %+v", top, list[least])
			}
			least = slices.Index(list, top) // any of equal ones
			if rapid.Bool().Draw(t, "sink") {
				list[least] = entry{f: rapid.Uint64Range(0, 9).Draw(t, "f"), id: 3}
				h.sink(list[least])
				continue
			}
			h.pop()
			list = slices.Delete(list, least, least+1)
		}
		if len(h.all) != len(list) {
			t.Fatalf("%d left, want %d", len(h.all), len(list))
		}
	})
}
