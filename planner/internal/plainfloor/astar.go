package plainfloor

import "math"

// AStar is the plain twin: A* (Hart, Nilsson & Raphael 1968) over arrays of the whole
// floor's cells, 8 neighbours without corner cutting, octile estimate, a binary heap,
// ties towards larger g. Its arrays are made once and stamped, not cleared, from plan to plan.
type AStar struct {
	w, h   int
	free   []bool
	g      []float64
	stamp  []int32
	closed []int32
	now    int32
	heap   []entry
}

type entry struct {
	f, g float64
	cell int32
}

func (a entry) before(b entry) bool { return a.f < b.f || a.f == b.f && a.g > b.g }

// NewAStar plans over the free cells of a raster of w by h.
func NewAStar(w, h int, free []bool) *AStar {
	return &AStar{w: w, h: h, free: free, g: make([]float64, w*h), stamp: make([]int32, w*h), closed: make([]int32, w*h)}
}

func (a *AStar) push(e entry) {
	a.heap = append(a.heap, e)
	i := len(a.heap) - 1
	for i > 0 && e.before(a.heap[(i-1)/2]) {
		a.heap[i] = a.heap[(i-1)/2]
		i = (i - 1) / 2
	}
	a.heap[i] = e
}

func (a *AStar) pop() entry {
	h := a.heap
	top, last := h[0], h[len(h)-1]
	h = h[:len(h)-1]
	for i := 0; len(h) > 0; {
		k := 2*i + 1
		if k+1 < len(h) && h[k+1].before(h[k]) {
			k++
		}
		if k >= len(h) || !h[k].before(last) {
			h[i] = last
			break
		}
		h[i] = h[k]
		i = k
	}
	a.heap = h
	return top
}

// Plan is the length in cells of a shortest path from cell s to cell t, both free.
func (a *AStar) Plan(s, t int) (length float64, ok bool) {
	a.now++
	a.heap = a.heap[:0]
	tx, ty := t%a.w, t/a.w
	est := func(i int) float64 {
		dx, dy := max(i%a.w-tx, tx-i%a.w), max(i/a.w-ty, ty-i/a.w)
		return float64(max(dx, dy)) + (math.Sqrt2-1)*float64(min(dx, dy))
	}
	a.g[s], a.stamp[s] = 0, a.now
	a.push(entry{est(s), 0, int32(s)})
	for len(a.heap) > 0 {
		i := int(a.pop().cell)
		if i == t {
			return a.g[i], true
		}
		if a.closed[i] == a.now {
			continue
		}
		a.closed[i] = a.now
		x, y := i%a.w, i/a.w
		var can [3][3]bool
		for dy := -1; dy <= 1; dy++ {
			for dx := -1; dx <= 1; dx++ {
				nx, ny := x+dx, y+dy
				can[dy+1][dx+1] = nx >= 0 && ny >= 0 && nx < a.w && ny < a.h && a.free[ny*a.w+nx]
			}
		}
		for dy := -1; dy <= 1; dy++ {
			for dx := -1; dx <= 1; dx++ {
				if dx == 0 && dy == 0 || !can[dy+1][dx+1] || !can[1][dx+1] || !can[dy+1][1] {
					continue
				}
				c := 1.0
				if dx != 0 && dy != 0 {
					c = math.Sqrt2
				}
				k := i + dy*a.w + dx
				if g := a.g[i] + c; a.stamp[k] != a.now || g < a.g[k]-1e-9 {
					a.g[k], a.stamp[k] = g, a.now
					a.push(entry{g + est(k), g, int32(k)})
				}
			}
		}
	}
	return 0, false
}
