package dstar

// entry is a queued node with the key it was queued with: Koenig & Likhachev's pair, the
// first part with the sum of the robot's moves in it. What its key is by now may be more.
type entry struct {
	f, g int64
	id   uint32
}

const entryBytes = 24

// less orders by the key, then by the node's number so that the order of work is fixed.
func (a *entry) less(b *entry) bool {
	if a.f != b.f {
		return a.f < b.f
	}
	if a.g != b.g {
		return a.g < b.g
	}
	return a.id < b.id
}

// heap is a 4-ary heap.
type heap struct{ all []entry }

func (h *heap) push(e entry) {
	h.all = append(h.all, e)
	i := len(h.all) - 1
	for i > 0 {
		up := (i - 1) / 4
		if !e.less(&h.all[up]) {
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
	if n == 0 {
		return top
	}
	i := 0
	for {
		c := 4*i + 1
		if c >= n {
			break
		}
		for k, end := c+1, min(c+4, n); k < end; k++ {
			if h.all[k].less(&h.all[c]) {
				c = k
			}
		}
		if !h.all[c].less(&e) {
			break
		}
		h.all[i] = h.all[c]
		i = c
	}
	h.all[i] = e
	return top
}
