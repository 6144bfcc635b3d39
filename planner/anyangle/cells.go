package anyangle

import (
	"cmp"
	"slices"
)

// row is a horizontal section of a cell, from (l, y) to (r, y).
type row struct{ y, l, r int32 }

// cell is a convex part of the free space: rows from the lowest up, joined by
// straight sides; or a triangle of a fan (see mitre.go).
type cell struct {
	row0, rows int32 // in the block's rows; no rows: where in the block's fans
	comp       int32 // connected component within the block
	lo, hi     int32 // its heights, in a turned cut from left to right
}

// link says that the cells a, below, and b, above, share the points from l to r at height y.
type link struct {
	a, b    int32
	y, l, r int32
}

// contact is a stretch of a block's border, from lo to hi along it, that belongs to a cell.
type contact struct{ lo, hi, cell int32 }

// The sides of a block, and the direction of the neighbour beyond each.
const (
	inside = iota
	rightward
	upward
	leftward
	downward
)

// cut is the free space of one block, from its lower left corner, as convex cells.
// It depends on the pieces near the block alone. A turned cut is one along
// columns: in its rows and links, x and y have changed places. Contacts have not.
type cut struct {
	w, h    int32
	turned  bool
	cells   []cell
	rows    []row
	links   []link
	fan     []triangle
	joints  []joint
	corners []pt // of each fan where the sides meet and the chain's two ends
	comps   int32
	contact [5][]contact // by side; inside is not used
	rounds  []round      // corners of vector obstacles that ways may bend about; none in a lean mesh's own cuts
}

// rowsOf are a cell's rows, none for a triangle.
func (c *cut) rowsOf(i int32) []row {
	if k := &c.cells[i]; k.rows > 0 {
		return c.rows[k.row0 : k.row0+k.rows]
	}
	return nil
}

// triangleOf is the triangle that a cell is, nil when it is none.
func (c *cut) triangleOf(i int32) *triangle {
	if k := &c.cells[i]; k.rows == 0 {
		return &c.fan[k.row0]
	}
	return nil
}

// finish joins trapezoids into convex cells and lays out the cut, but for its components' numbers.
func (c *cutter) finish() *cut {
	out := &cut{w: int32(c.w), h: int32(c.h)}
	cellOf := make([]int32, len(c.traps))
	for i := range c.traps {
		if c.traps[i].merged {
			continue
		}
		id := int32(len(out.cells))
		first := len(out.rows)
		t := &c.traps[i]
		cellOf[i] = id
		out.rows = append(out.rows, rowAt(t.y0, &t.bottom))
		if t.y1 > t.y0 {
			out.rows = append(out.rows, rowAt(t.y1, &t.top))
		}
		bottom := &t.bottom
		for t.upCount == 1 {
			u := &c.traps[t.up]
			if u.downCount != 1 || u.bottom.lo != t.top.lo || u.bottom.hi != t.top.hi {
				break
			}
			top := rowAt(u.y1, &u.top)
			n := len(out.rows)
			// Between the same sides a row is one too many. Its ends were rounded, though, so
			// that without it the sides may bend otherwise at the row before.
			if sameSides(bottom, &t.top, &u.bottom, &u.top) &&
				(n-first < 3 || convexAt(out.rows[n-3], out.rows[n-2], top)) {
				out.rows[n-1] = top
			} else if convexAt(out.rows[n-2], out.rows[n-1], top) {
				out.rows = append(out.rows, top)
				bottom = &u.bottom
			} else {
				break
			}
			cellOf[t.up] = id
			u.merged = true
			t = u
		}
		out.cells = append(out.cells, cell{row0: int32(first), rows: int32(len(out.rows) - first), comp: id,
			lo: out.rows[first].y, hi: out.rows[len(out.rows)-1].y})
	}
	for _, l := range c.links {
		if l.a, l.b = cellOf[l.a], cellOf[l.b]; l.a != l.b {
			out.links = append(out.links, l)
			unite(out.cells, l.a, l.b)
		}
	}
	return out
}

func rowAt(y int64, g *gap) row { return row{int32(y), int32(g.lo), int32(g.hi)} }

// sameSides says whether four sections end at the same two edges.
func sameSides(a, b, c, d *gap) bool {
	return a.el == b.el && b.el == c.el && c.el == d.el && a.er == b.er && b.er == c.er && c.er == d.er
}

// convexAt says whether the sides bend inwards or not at all at row b.
func convexAt(a, b, c row) bool {
	dy0, dy1 := int64(b.y-a.y), int64(c.y-b.y)
	// Left: the obstacle must not stick out to the right at b.
	return cmpProducts(int64(b.l-a.l), dy1, int64(c.l-b.l), dy0) <= 0 &&
		cmpProducts(int64(b.r-a.r), dy1, int64(c.r-b.r), dy0) >= 0
}

func findComp(cells []cell, i int32) int32 {
	for cells[i].comp != i {
		cells[i].comp = cells[cells[i].comp].comp
		i = cells[i].comp
	}
	return i
}

// numberComps turns leaders into component numbers, in order of their lowest cell.
func (c *cut) numberComps() {
	for i := range c.cells {
		c.cells[i].comp = findComp(c.cells, int32(i))
	}
	for i := range c.cells {
		// A leader comes before those it leads, and holds its number from then on.
		if lead := c.cells[i].comp; lead == int32(i) {
			c.cells[i].comp = c.comps
			c.comps++
		} else {
			c.cells[i].comp = c.cells[lead].comp
		}
	}
}

// unite joins two components; the lower cell leads.
func unite(cells []cell, a, b int32) {
	a, b = findComp(cells, a), findComp(cells, b)
	if a > b {
		a, b = b, a
	}
	cells[b].comp = a
}

// findContacts lists what of the block's border is free.
func (c *cut) findContacts() {
	w, h := c.w, c.h
	side := [5]int{inside, rightward, upward, leftward, downward}
	if c.turned {
		w, h = h, w
		side = [5]int{inside, upward, rightward, downward, leftward}
	}
	put := func(s int, k contact) { c.contact[side[s]] = append(c.contact[side[s]], k) }
	for i := range c.cells {
		id := int32(i)
		if t := c.triangleOf(id); t != nil {
			c.touch(t, id)
			continue
		}
		rows := c.rowsOf(id)
		first, last := rows[0], rows[len(rows)-1]
		if first.y == 0 {
			put(downward, contact{first.l, first.r, id})
		}
		if last.y == h {
			put(upward, contact{last.l, last.r, id})
		}
		if lo, hi, ok := stretchOf(rows, func(r row) bool { return r.l == 0 }); ok {
			put(leftward, contact{lo, hi, id})
		}
		if lo, hi, ok := stretchOf(rows, func(r row) bool { return r.r == w }); ok {
			put(rightward, contact{lo, hi, id})
		}
	}
	for s := range c.contact {
		slices.SortFunc(c.contact[s], func(a, b contact) int {
			return cmp.Or(cmp.Compare(a.lo, b.lo), cmp.Compare(a.hi, b.hi), cmp.Compare(a.cell, b.cell))
		})
	}
}

// stretchOf is the heights between which rows are on a side; cells are convex, so it is one stretch.
func stretchOf(rows []row, on func(row) bool) (lo, hi int32, ok bool) {
	for _, r := range rows {
		if on(r) {
			if !ok {
				lo, ok = r.y, true
			}
			hi = r.y
		}
	}
	return lo, hi, ok
}
