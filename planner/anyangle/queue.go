package anyangle

import "math"

// item is a node in the queue: the length of the shortest way it may be a part of, and of
// the way to its root.
type item struct {
	f, g float64
	node int32
}

// before orders by f, ties towards larger g, then by node.
func (a *item) before(b *item) bool {
	if a.f != b.f {
		return a.f < b.f
	}
	if a.g != b.g {
		return a.g > b.g
	}
	return a.node < b.node
}

// queue is a heap with four children a node.
type queue struct{ items []item }

func (q *queue) reset() { q.items = q.items[:0] }

// least is the smallest f, +Inf when the queue is empty.
func (q *queue) least() float64 {
	if len(q.items) == 0 {
		return math.Inf(1)
	}
	return q.items[0].f
}

func (q *queue) push(f, g float64, node int32) {
	it := item{f, g, node}
	q.items = append(q.items, it)
	i := len(q.items) - 1
	for i > 0 {
		up := (i - 1) / 4
		if !it.before(&q.items[up]) {
			break
		}
		q.items[i] = q.items[up]
		i = up
	}
	q.items[i] = it
}

func (q *queue) pop() (node int32, f float64, ok bool) {
	n := len(q.items) - 1
	if n < 0 {
		return 0, 0, false
	}
	top := q.items[0]
	it := q.items[n]
	q.items = q.items[:n]
	if n > 0 {
		i := 0
		for {
			first := 4*i + 1
			if first >= n {
				break
			}
			best := first
			for k := first + 1; k < min(first+4, n); k++ {
				if q.items[k].before(&q.items[best]) {
					best = k
				}
			}
			if !q.items[best].before(&it) {
				break
			}
			q.items[i] = q.items[best]
			i = best
		}
		q.items[i] = it
	}
	return top.node, top.f, true
}

// table numbers pairs of numbers in the order in which they come. Entries of earlier
// searches are told by their stamp. A search begins with a small part of the memory, which stays in
// the processor's caches, whatever came before it.
type table struct {
	entries []entry
	spare   []entry // those to be put in again while it grows
	count   int32
	stamp   uint32
	mask    uint64 // places in use, less one
}

type entry struct {
	x, y  float64
	index int32
	stamp uint32
}

// firstTable is the first size of a table, a power of two.
const firstTable = 1 << 10

func (t *table) reset() {
	t.count = 0
	t.renew()
	t.mask = firstTable - 1
}

// renew forgets all entries.
func (t *table) renew() {
	t.stamp++
	if t.entries == nil || t.stamp == 0 {
		t.entries = make([]entry, max(firstTable, len(t.entries)))
		t.stamp = 1
	}
}

// find is the number of (x, y), and whether it came before.
func (t *table) find(x, y float64) (index int32, found bool) {
	e := t.slot(x, y)
	if e.stamp == t.stamp {
		return e.index, true
	}
	*e = entry{x, y, t.count, t.stamp}
	t.count++
	if uint64(t.count) > t.mask/2 {
		t.grow()
	}
	return t.count - 1, false
}

func (t *table) slot(x, y float64) *entry {
	for i := hash(x, y) & t.mask; ; i = (i + 1) & t.mask {
		if e := &t.entries[i]; e.stamp != t.stamp || e.x == x && e.y == y {
			return e
		}
	}
}

func (t *table) grow() {
	t.spare = t.spare[:0]
	for i := range t.entries[:t.mask+1] {
		if e := &t.entries[i]; e.stamp == t.stamp {
			t.spare = append(t.spare, *e)
		}
	}
	t.mask = 2*t.mask + 1
	if uint64(len(t.entries)) <= t.mask {
		t.entries = make([]entry, t.mask+1)
	}
	t.renew()
	for _, e := range t.spare {
		e.stamp = t.stamp
		*t.slot(e.x, e.y) = e
	}
}

func hash(x, y float64) uint64 {
	h := math.Float64bits(x)*0x9E3779B97F4A7C15 ^ math.Float64bits(y)*0xC2B2AE3D27D4EB4F
	h ^= h >> 29
	h *= 0xBF58476D1CE4E5B9
	return h ^ h>>32
}
