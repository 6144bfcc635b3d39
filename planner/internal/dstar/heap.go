package dstar

import "math/bits"

// entry is a queued node with the key it was queued with: Koenig & Likhachev's pair, the
// first part with the sum of the robot's moves in it. What its key is by now may be more.
type entry struct {
	f, g uint64 // neither negative
	id   uint32
}

const entryBytes = 24

// before is 1 when a's key is less than b's, else 0; without a branch, which would be
// foretold wrongly every other time.
func (a *entry) before(b *entry) uint64 {
	_, less := bits.Sub64(a.g, b.g, 0)
	_, less = bits.Sub64(a.f, b.f, less)
	return less
}

// heap is a 4-ary heap. Its order among equal keys depends on what was done to it alone.
type heap struct{ all []entry }

func (h *heap) push(e entry) {
	h.all = append(h.all, e)
	i := len(h.all) - 1
	for i > 0 {
		up := (i - 1) / 4
		if e.before(&h.all[up]) == 0 {
			break
		}
		h.all[i] = h.all[up]
		i = up
	}
	h.all[i] = e
}

func (h *heap) pop() entry {
	top, n := h.all[0], len(h.all)-1
	e := h.all[n]
	h.all = h.all[:n]
	if n > 0 {
		h.sink(e)
	}
	return top
}

// sink puts e in the place of the least.
func (h *heap) sink(e entry) {
	all, i := h.all, 0
	for {
		c := 4*i + 1
		if c >= len(all) {
			break
		}
		for k, end := c+1, min(c+4, len(all)); k < end; k++ {
			c += (k - c) & -int(all[k].before(&all[c]))
		}
		if all[c].before(&e) == 0 {
			break
		}
		all[i] = all[c]
		i = c
	}
	all[i] = e
}
