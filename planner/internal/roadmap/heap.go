package roadmap

// entry is a queued node. The search decides what key and tie mean; the smallest
// key comes first, then the larger tie, then the smaller id.
type entry struct {
	key, tie int64
	ref      int64 // id, and how it was come by in the lowest byte
}

func newEntry(key, tie, id int64, dir uint8) entry { return entry{key, tie, id<<8 | int64(dir)} }

func (a *entry) id() int64  { return a.ref >> 8 }
func (a *entry) dir() uint8 { return uint8(a.ref) }

func (a *entry) before(b *entry) bool {
	if a.key != b.key {
		return a.key < b.key
	}
	if a.tie != b.tie {
		return a.tie > b.tie
	}
	return a.ref < b.ref
}

// queue is a 4-ary heap. Entries are not moved when a node gets cheaper: the search
// queues the node again and skips the stale one.
type queue []entry

func (q *queue) push(e entry) {
	h := append(*q, e)
	i := len(h) - 1
	for i > 0 {
		p := (i - 1) / 4
		if !e.before(&h[p]) {
			break
		}
		h[i] = h[p]
		i = p
	}
	h[i] = e
	*q = h
}

func (q *queue) pop() entry {
	h := *q
	top := h[0]
	n := len(h) - 1
	e := h[n]
	h = h[:n]
	*q = h
	if n == 0 {
		return top
	}
	i := 0
	for {
		first := 4*i + 1
		if first >= n {
			break
		}
		best := first
		for c := first + 1; c < min(first+4, n); c++ {
			if h[c].before(&h[best]) {
				best = c
			}
		}
		if !h[best].before(&e) {
			break
		}
		h[i] = h[best]
		i = best
	}
	h[i] = e
	return top
}
