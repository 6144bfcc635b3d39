package roadmap

import "math/bits"

// seed is a queued node of a grid search.
type seed struct {
	f  int64
	id uint32
}

// stack is the nodes queued with one f. The last to come goes first: it is as far on its way
// as any, and a stack costs nothing to keep in order.
type stack struct {
	f   int64
	ids []uint32
}

// buckets is a priority queue for keys that never fall below what was last taken out and
// do not run far ahead of it (Dial, "Algorithm 360: Shortest-path forest with topological
// ordering", Comm. ACM 12(11), 1969): a ring of lists by key. Only the foremost list is put
// in exact order, which costs little as most of its keys are equal.
type buckets struct {
	shift int
	ring  [][]seed // length a power of two, 64 or more
	some  []uint64 // a bit for each list of the ring that is not empty
	now   int64    // number of the list in front
	front []stack  // by falling f
	spare [][]uint32
	n     int // in the ring
}

func (q *buckets) reset(shift int) {
	q.shift, q.now, q.n = shift, 0, 0
	for _, s := range q.front {
		q.spare = append(q.spare, s.ids[:0])
	}
	q.front = q.front[:0]
	if q.ring == nil {
		q.ring, q.some = make([][]seed, 1024), make([]uint64, 1024/64)
	}
	for i := range q.ring {
		q.ring[i] = q.ring[i][:0]
	}
	clear(q.some)
}

func (q *buckets) empty() bool { return q.n == 0 && len(q.front) == 0 }

func (q *buckets) push(f int64, id uint32) {
	b := f >> q.shift
	if b > q.now && q.empty() {
		q.now = b
	}
	if b <= q.now {
		q.stack(f, id)
		return
	}
	for b-q.now >= int64(len(q.ring)) {
		q.grow()
	}
	i := b & int64(len(q.ring)-1)
	q.ring[i] = append(q.ring[i], seed{f, id})
	q.some[i/64] |= 1 << (i % 64)
	q.n++
}

func (q *buckets) grow() {
	old := q.ring
	q.ring, q.some = make([][]seed, 2*len(old)), make([]uint64, 2*len(q.some))
	for _, s := range old {
		if len(s) > 0 {
			i := s[0].f >> q.shift & int64(len(q.ring)-1)
			q.ring[i] = s
			q.some[i/64] |= 1 << (i % 64)
		}
	}
}

// stack puts a node into the front.
func (q *buckets) stack(f int64, id uint32) {
	lo, hi := 0, len(q.front)
	if hi > 0 && q.front[hi-1].f >= f {
		lo = hi - 1
		if q.front[lo].f > f {
			lo = hi
		}
	} else {
		for lo < hi { // the first whose f is f or less
			if mid := (lo + hi) / 2; q.front[mid].f > f {
				lo = mid + 1
			} else {
				hi = mid
			}
		}
	}
	if lo == len(q.front) || q.front[lo].f != f {
		var ids []uint32
		if n := len(q.spare) - 1; n >= 0 {
			ids, q.spare = q.spare[n], q.spare[:n]
		}
		q.front = append(q.front, stack{})
		copy(q.front[lo+1:], q.front[lo:])
		q.front[lo] = stack{f, ids}
	}
	s := &q.front[lo]
	s.ids = append(s.ids, id)
}

// pop takes the node of least f that was queued last. The queue must not be empty.
func (q *buckets) pop() (int64, uint32) {
	if len(q.front) == 0 {
		q.next()
	}
	last := len(q.front) - 1
	s := &q.front[last]
	n := len(s.ids) - 1
	f, id := s.f, s.ids[n]
	if s.ids = s.ids[:n]; n == 0 {
		q.spare = append(q.spare, s.ids)
		q.front = q.front[:last]
	}
	return f, id
}

// next brings the next list to the front.
func (q *buckets) next() {
	mask := int64(len(q.ring) - 1)
	i := (q.now + 1) & mask
	w := q.some[i/64] >> (i % 64) << (i % 64)
	for k := i / 64; ; w = q.some[k] {
		if w != 0 {
			i = k*64 + int64(bits.TrailingZeros64(w))
			break
		}
		k = (k + 1) & (mask / 64)
	}
	q.now += (i - q.now) & mask
	s := q.ring[i]
	q.ring[i] = s[:0]
	q.some[i/64] &^= 1 << (i % 64)
	q.n -= len(s)
	for _, e := range s {
		q.stack(e.f, e.id)
	}
}
