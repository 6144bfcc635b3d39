package cells

import (
	"context"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// Rooms are convex regions joined by doors: what the searches of roadmaps over regions need.
type Rooms interface {
	// Doors is how many doors there are, Door the place at which one is passed and the two
	// rooms it joins, DoorsOf the doors of a room.
	Doors() int
	Door(d int32) (at geom.Point, a, b int32)
	DoorsOf(room int32) []int32
	// Cost is what going straight across a room costs: the distance or more.
	Cost(from geom.Point, room int32, to geom.Point) float64
}

// Passage is the cheapest way through doors. Rooms holds the room before each door and the
// last one.
type Passage struct {
	Doors, Rooms     []int32
	Expanded, Queued int64
}

const checkEvery = 256 // expansions between looks at the context

// Find is A* (Hart, Nilsson & Raphael 1968) over doors, ties towards what is further on
// its way, then by number. The error is ctx's.
func Find(ctx context.Context, r Rooms, from, to Entry) (p Passage, ok bool, err error) {
	if err := ctx.Err(); err != nil {
		return p, false, err
	}
	for _, c := range from.In {
		if slices.Contains(to.In, c) {
			p.Rooms = []int32{c}
			return p, true, nil
		}
	}
	const unseen = -2
	n := int32(r.Doors())
	goal := n
	cost := make([]float64, n+1)
	before, via := make([]int32, n+1), make([]int32, n+1)
	closed := make([]bool, n+1)
	for i := range before {
		before[i] = unseen
	}
	var q queue
	reach := func(d, last, room int32, g, rest float64) {
		if before[d] != unseen && g >= cost[d] {
			return
		}
		cost[d], before[d], via[d] = g, last, room
		q.push(visit{g + rest, g, d})
		p.Queued++
	}
	for _, c := range from.In {
		for _, d := range r.DoorsOf(c) {
			at, _, _ := r.Door(d)
			reach(d, none, c, r.Cost(from.At, c, at), geom.Dist(at, to.At))
		}
	}
	for len(q) > 0 {
		v := q.pop()
		if closed[v.door] {
			continue
		}
		closed[v.door] = true
		if p.Expanded++; p.Expanded%checkEvery == 0 && ctx.Err() != nil {
			return p, false, ctx.Err()
		}
		if v.door == goal {
			p.Rooms = append(p.Rooms, via[goal])
			for d := before[goal]; d != none; d = before[d] {
				p.Doors = append(p.Doors, d)
				p.Rooms = append(p.Rooms, via[d])
			}
			slices.Reverse(p.Doors)
			slices.Reverse(p.Rooms)
			return p, true, nil
		}
		at, a, b := r.Door(v.door)
		for _, room := range [2]int32{a, b} {
			if slices.Contains(to.In, room) {
				reach(goal, v.door, room, v.g+r.Cost(at, room, to.At), 0)
			}
			for _, d := range r.DoorsOf(room) {
				if closed[d] {
					continue
				}
				next, _, _ := r.Door(d)
				reach(d, v.door, room, v.g+r.Cost(at, room, next), geom.Dist(next, to.At))
			}
		}
	}
	return p, false, nil
}

// visit is a door in the queue.
type visit struct {
	f, g float64
	door int32
}

func (a *visit) before(b *visit) bool {
	switch {
	case a.f != b.f:
		return a.f < b.f
	case a.g != b.g:
		return a.g > b.g
	}
	return a.door < b.door
}

// queue is a binary heap.
type queue []visit

func (q *queue) push(v visit) {
	*q = append(*q, v)
	h := *q
	i := len(h) - 1
	for i > 0 && v.before(&h[(i-1)/2]) {
		h[i] = h[(i-1)/2]
		i = (i - 1) / 2
	}
	h[i] = v
}

func (q *queue) pop() visit {
	h := *q
	top, last := h[0], h[len(h)-1]
	h = h[:len(h)-1]
	*q = h
	for i := 0; len(h) > 0; {
		k := 2*i + 1
		if k+1 < len(h) && h[k+1].before(&h[k]) {
			k++
		}
		if k >= len(h) || !h[k].before(&last) {
			h[i] = last
			break
		}
		h[i] = h[k]
		i = k
	}
	return top
}

// Polyline is the way through the places given, none of them twice in a row, and its length.
func Polyline(places ...geom.Point) (pts []geom.Point, length float64) {
	for _, p := range places {
		if n := len(pts); n > 0 {
			if pts[n-1] == p {
				continue
			}
			length += geom.Dist(pts[n-1], p)
		}
		pts = append(pts, p)
	}
	return pts, length
}
