package mask

import (
	"math/bits"
	"sync"

	"example.com/wideberth/mapstore/floor"
)

// parts are the connected parts of one block's free cells, by runs of cells in a row
// (Rosenfeld & Pfaltz, "Sequential Operations in Digital Picture Processing",
// J. ACM 13(4), 1966). Cells connect along sides; a diagonal move of a roadmap
// needs both side moves, so that it connects nothing more. Immutable.
type parts struct {
	n    int // how many parts
	row  [floor.BlockSize + 1]uint16
	runs []run
	size []int32 // cells of each part
}

// run is the free cells from lo to hi of a row, both included.
type run struct {
	lo, hi uint8
	part   uint16
}

func newParts(b *Block) *parts {
	p := &parts{}
	var up []int32 // forest over runs
	find := func(i int32) int32 {
		for up[i] != i {
			up[i] = up[up[i]]
			i = up[i]
		}
		return i
	}
	for y, w := range b {
		below := 0
		if y > 0 {
			below = int(p.row[y-1])
		}
		start := len(p.runs)
		p.row[y] = uint16(start)
		for x := 0; w>>x != 0; {
			x += bits.TrailingZeros64(w >> x)
			long := bits.TrailingZeros64(^(w >> x))
			id := int32(len(p.runs))
			up = append(up, id)
			r := run{lo: uint8(x), hi: uint8(x + long - 1)}
			for below < start && p.runs[below].hi < r.lo {
				below++
			}
			for k := below; k < start && p.runs[k].lo <= r.hi; k++ {
				a, c := find(int32(k)), find(id)
				up[max(a, c)] = min(a, c)
			}
			p.runs = append(p.runs, r)
			if x += long; x >= floor.BlockSize {
				break
			}
		}
	}
	p.row[floor.BlockSize] = uint16(len(p.runs))
	for i := range p.runs { // roots come before what hangs on them
		r := &p.runs[i]
		if root := find(int32(i)); int(root) == i {
			r.part = uint16(p.n)
			p.size = append(p.size, 0)
			p.n++
		} else {
			r.part = p.runs[root].part
		}
		p.size[r.part] += int32(r.hi-r.lo) + 1
	}
	return p
}

// at is the part that a cell of the block is in, -1 for none.
func (p *parts) at(x, y int) int {
	for _, r := range p.runs[p.row[y]:p.row[y+1]] {
		if int(r.lo) <= x && x <= int(r.hi) {
			return int(r.part)
		}
	}
	return -1
}

var allParts = newParts(allFree)

// parts are those of a block, computed by whoever needs them first.
func (m *Mask) blockParts(i int) *parts {
	b := m.Block(i%m.nx, i/m.nx)
	if b == allFree {
		return allParts
	}
	p := &m.parts[i]
	if v := p.Load(); v != nil {
		return v
	}
	p.CompareAndSwap(nil, newParts(b))
	return p.Load()
}

// regions are the connected parts of a whole mask: a forest over the blocks' parts.
type regions struct {
	once  sync.Once
	first []int32 // by block: number of its first part
	up    []int32 // after building, the root of each
	size  []int64 // cells, at roots
}

// Region is the number of the connected region of free cells that a cell is in and how
// many cells that has; ok is false for a cell that is not free. The first call looks at
// every block of the floor, at the parts of those not known from an earlier version.
func (m *Mask) Region(col, row int) (region int, cells int64, ok bool) {
	if !m.Free(col, row) {
		return 0, 0, false
	}
	m.regions.once.Do(m.join)
	i := row/floor.BlockSize*m.nx + col/floor.BlockSize
	k := m.blockParts(i).at(col%floor.BlockSize, row%floor.BlockSize)
	root := m.regions.up[int(m.regions.first[i])+k]
	return int(root), m.regions.size[root], true
}

func (m *Mask) join() {
	g := &m.regions
	n := m.nx * m.ny
	g.first = make([]int32, n+1)
	for i := range n {
		g.first[i+1] = g.first[i] + int32(m.blockParts(i).n)
	}
	g.up = make([]int32, g.first[n])
	for i := range g.up {
		g.up[i] = int32(i)
	}
	find := func(i int32) int32 {
		for g.up[i] != i {
			g.up[i] = g.up[g.up[i]]
			i = g.up[i]
		}
		return i
	}
	unite := func(a, b int32) {
		a, b = find(a), find(b)
		g.up[max(a, b)] = min(a, b)
	}
	const last = floor.BlockSize - 1
	for i := range n {
		p := m.blockParts(i)
		if p.n == 0 {
			continue
		}
		if (i+1)%m.nx != 0 {
			q := m.blockParts(i + 1)
			for y := range floor.BlockSize {
				a, b := p.runs[p.row[y]:p.row[y+1]], q.runs[q.row[y]:q.row[y+1]]
				if len(a) > 0 && len(b) > 0 && a[len(a)-1].hi == last && b[0].lo == 0 {
					unite(g.first[i]+int32(a[len(a)-1].part), g.first[i+1]+int32(b[0].part))
				}
			}
		}
		if i+m.nx < n {
			q := m.blockParts(i + m.nx)
			a, b := p.runs[p.row[last]:], q.runs[:q.row[1]]
			for len(a) > 0 && len(b) > 0 {
				if max(a[0].lo, b[0].lo) <= min(a[0].hi, b[0].hi) {
					unite(g.first[i]+int32(a[0].part), g.first[i+m.nx]+int32(b[0].part))
				}
				if a[0].hi < b[0].hi {
					a = a[1:]
				} else {
					b = b[1:]
				}
			}
		}
	}
	g.size = make([]int64, len(g.up))
	for i := range n {
		for k, cells := range m.blockParts(i).size {
			at := g.first[i] + int32(k)
			g.up[at] = find(at)
			g.size[g.up[at]] += int64(cells)
		}
	}
}
