package voronoi

// kind is what a step of the search goes along.
type kind uint8

const (
	byRoad  kind = iota // a tight road
	byOpen              // a way in Open
	byGuess             // the same, its length taken as the crow flies
)

// item is an entry of the queue.
type item struct {
	f, g float64 // cost with and without the estimate
	node int32
	from int32 // the state it comes from, -1 at the start
	by   int32 // the road, or the way in Open; -1 for neither
	kind kind
}

// ahead says whether a comes before b: by cost, then the one further on, then by number.
func (a *item) ahead(b *item) bool {
	switch {
	case a.f != b.f:
		return a.f < b.f
	case a.g != b.g:
		return a.g > b.g
	case a.node != b.node:
		return a.node < b.node
	}
	return a.from < b.from
}

// queue is a binary heap of items.
type queue []item

func (q *queue) push(v item) {
	*q = append(*q, v)
	h := *q
	i := len(h) - 1
	for i > 0 {
		k := (i - 1) / 2
		if !v.ahead(&h[k]) {
			break
		}
		h[i] = h[k]
		i = k
	}
	h[i] = v
}

func (q *queue) pop() item {
	h := *q
	top, v := h[0], h[len(h)-1]
	h = h[:len(h)-1]
	*q = h
	if len(h) == 0 {
		return top
	}
	i := 0
	for {
		k := 2*i + 1
		if k >= len(h) {
			break
		}
		if k+1 < len(h) && h[k+1].ahead(&h[k]) {
			k++
		}
		if !h[k].ahead(&v) {
			break
		}
		h[i] = h[k]
		i = k
	}
	h[i] = v
	return top
}
