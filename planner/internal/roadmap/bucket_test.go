package roadmap

import (
	"testing"

	"pgregory.net/rapid"
)

// The queue against a list searched from its end: least f first, of equal f the last to
// come, over rings that have to grow and keys that stand still.
func TestBucketsAgainstList(t *testing.T) {
	q := &buckets{}
	rapid.Check(t, func(t *rapid.T) {
		q.reset(rapid.IntRange(0, 6).Draw(t, "shift"))
		var list []seed
		floor, id := int64(0), uint32(0)
		step := rapid.SampledFrom([]int64{1, 50, 5000, 300_000}).Draw(t, "step")
		for range rapid.IntRange(1, 200).Draw(t, "operations") {
			if len(list) == 0 || rapid.IntRange(0, 2).Draw(t, "push") > 0 {
				f := floor + rapid.Int64Range(0, step).Draw(t, "ahead")
				id++
				q.push(f, id)
				list = append(list, seed{f, id})
				continue
			}
			best := len(list) - 1
			for i := best; i >= 0; i-- {
				if list[i].f < list[best].f {
					best = i
				}
			}
			want := list[best]
			list = append(list[:best], list[best+1:]...)
			if f, id := q.pop(); f != want.f || id != want.id {
				t.Fatalf("took (%d, %d), want (%d, %d)", f, id, want.f, want.id)
			}
			if floor = want.f; q.empty() != (len(list) == 0) {
				t.Fatalf("empty: %t with %d left", q.empty(), len(list))
			}
		}
	})
}
