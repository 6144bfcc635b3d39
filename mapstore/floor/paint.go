package floor

import (
	"cmp"
	"encoding/binary"
	"math/bits"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// paint finds the cells whose closed square meets a polygon, interior or border,
// exactly: the cells that an edge touches, and, row by row, the runs between
// them that lie inside by even-odd counting of the edges to their left.
// Coordinates are whole micrometres from the floor's lower left corner.
type paint struct {
	cells CellRect // that the polygon's bounds touch
	res   int64
	edges []paintEdge // by first row
}

// paintEdge runs upward or level, and touches rows r0 to r1.
type paintEdge struct {
	x0, y0, x1, y1 int64
	r0, r1         int
}

func newPaint(s Settings, chains [][]geom.Point) *paint {
	p := &paint{
		cells: s.TouchedCells(NewPolygon(chains, 0).Bounds()),
		res:   s.ResolutionUm,
	}
	for a, b := range NewPolygon(chains, 0).Edges {
		e := paintEdge{
			x0: int64(a.X) - s.OriginX, y0: int64(a.Y) - s.OriginY,
			x1: int64(b.X) - s.OriginX, y1: int64(b.Y) - s.OriginY,
		}
		if e.y0 > e.y1 {
			e.x0, e.y0, e.x1, e.y1 = e.x1, e.y1, e.x0, e.y0
		}
		e.r0 = max(p.cells.Y0, int((e.y0+p.res-1)/p.res)-1)
		e.r1 = min(p.cells.Y1-1, int(e.y1/p.res))
		p.edges = append(p.edges, e)
	}
	slices.SortStableFunc(p.edges, func(a, b paintEdge) int { return cmp.Compare(a.r0, b.r0) })
	return p
}

// steps is how much work paint will be: for each edge the rows that it passes,
// and for the polygon its rows times its columns of blocks.
func (p *paint) steps() int64 {
	n := int64(p.cells.Y1-p.cells.Y0) * int64((p.cells.X1-1)/BlockSize-p.cells.X0/BlockSize+1)
	for _, e := range p.edges {
		n += int64(e.r1 - e.r0 + 1)
	}
	return n
}

// run are columns c0 to c1; in a paint's list, those an edge touches in one row, and
// whether the edge crosses the row's lower line.
type run struct {
	c0, c1  int
	crosses bool
}

func (p *paint) paint(t *tree, v Occupancy) {
	bx0, bx1 := p.cells.X0/BlockSize, (p.cells.X1-1)/BlockSize
	masks := make([][BlockSize]uint64, bx1-bx0+1)
	var active []paintEdge
	var runs []run
	next := 0
	for row := p.cells.Y0; row < p.cells.Y1; row++ {
		for ; next < len(p.edges) && p.edges[next].r0 <= row; next++ {
			active = append(active, p.edges[next])
		}
		active = slices.DeleteFunc(active, func(e paintEdge) bool { return e.r1 < row })
		runs = runs[:0]
		for _, e := range active {
			runs = append(runs, e.touched(row, p.res))
		}
		for _, r := range fillRuns(runs) {
			c0, c1 := max(r.c0, p.cells.X0), min(r.c1, p.cells.X1-1)
			for bx := c0 / BlockSize; bx <= c1/BlockSize; bx++ {
				x := bx * BlockSize
				masks[bx-bx0][row%BlockSize] |= lowBits(c1+1-x) &^ lowBits(c0-x)
			}
		}
		if row%BlockSize == BlockSize-1 || row == p.cells.Y1-1 {
			by := row / BlockSize
			for i := range masks {
				t.editBlock(bx0+i, by, func(n *node) *node { return t.maskNode(n, bx0+i, by, &masks[i], v) })
			}
			clear(masks)
		}
	}
}

// touched are the columns whose closed cells in row the edge touches; they may
// lie beyond the floor.
func (e *paintEdge) touched(row int, res int64) run {
	lower, upper := int64(row)*res, int64(row+1)*res
	var left, right int64 // the leftmost x rounded up, the rightmost rounded down
	if e.y0 == e.y1 {
		left, right = min(e.x0, e.x1), max(e.x0, e.x1)
	} else {
		f0, c0 := e.xAt(max(e.y0, lower))
		f1, c1 := e.xAt(min(e.y1, upper))
		left, right = min(c0, c1), max(f0, f1)
	}
	return run{
		c0:      int((left+res-1)/res) - 1,
		c1:      int(right / res),
		crosses: (e.y0 > lower) != (e.y1 > lower),
	}
}

// xAt is where the edge is at height y, rounded down and up. The product takes up
// to 80 bits.
func (e *paintEdge) xAt(y int64) (down, up int64) {
	dx := e.x1 - e.x0
	hi, lo := bits.Mul64(uint64(max(dx, -dx)), uint64(y-e.y0))
	q, rem := bits.Div64(hi, lo, uint64(e.y1-e.y0))
	d, u := int64(q), int64(q)
	if rem > 0 {
		u++
	}
	if dx < 0 {
		d, u = -u, -d
	}
	return e.x0 + d, e.x0 + u
}

// fillRuns turns what the edges touch in a row into what the polygon meets: the
// touched columns and those between them that lie inside. It works in place.
func fillRuns(runs []run) []run {
	slices.SortFunc(runs, func(a, b run) int { return cmp.Compare(a.c0, b.c0) })
	out := runs[:0]
	inside := false
	for _, r := range runs {
		if n := len(out); n > 0 && (inside || r.c0 <= out[n-1].c1+1) {
			out[n-1].c1 = max(out[n-1].c1, r.c1)
		} else {
			out = append(out, run{c0: r.c0, c1: r.c1})
		}
		inside = inside != r.crosses
	}
	return out
}

// putCells writes two-bit cells of r, which lies on the floor.
func (t *tree) putCells(r CellRect, cells []byte) {
	width := int64(r.X1 - r.X0)
	for by := r.Y0 / BlockSize; by <= (r.Y1-1)/BlockSize; by++ {
		for bx := r.X0 / BlockSize; bx <= (r.X1-1)/BlockSize; bx++ {
			part := t.area(0, bx, by).Intersect(r)
			x := bx * BlockSize
			mask := lowBits(part.X1-x) &^ lowBits(part.X0-x)
			var put blockCells
			for row := part.Y0; row < part.Y1; row++ {
				at := int64(row-r.Y0)*width + int64(part.X0-r.X0)
				o, u := unpackCells(cells, at)
				put.occupied[row%BlockSize] = o << (part.X0 - x) & mask
				put.unknown[row%BlockSize] = u << (part.X0 - x) & mask
			}
			t.editBlock(bx, by, func(n *node) *node { return t.writeRows(n, bx, by, part, mask, &put) })
		}
	}
}

// writeRows replaces the cells that mask names in the rows of part by those of put.
func (t *tree) writeRows(n *node, bx, by int, part CellRect, mask uint64, put *blockCells) *node {
	old := t.writable(n, 0, bx, by)
	y0, y1 := part.Y0-by*BlockSize, part.Y1-by*BlockSize
	changed := false
	for y := y0; y < y1; y++ {
		changed = changed || old.cells.occupied[y]&mask != put.occupied[y] || old.cells.unknown[y]&mask != put.unknown[y]
		old.cells.occupied[y] = old.cells.occupied[y]&^mask | put.occupied[y]
		old.cells.unknown[y] = old.cells.unknown[y]&^mask | put.unknown[y]
	}
	if !changed {
		return n
	}
	return old
}

// appendCells appends the two-bit cells of r, which lies on the floor.
func (t *tree) appendCells(dst []byte, r CellRect) []byte {
	base := len(dst)
	dst = append(dst, make([]byte, packedLen(r))...)
	cells := dst[base:]
	width := int64(r.X1 - r.X0)
	for by := r.Y0 / BlockSize; by*BlockSize < r.Y1; by++ {
		for bx := r.X0 / BlockSize; bx*BlockSize < r.X1; bx++ {
			n := t.leaf(bx, by)
			if n.uniform() && n.fill == Free {
				continue
			}
			part := t.area(0, bx, by).Intersect(r)
			x := bx * BlockSize
			mask := lowBits(part.X1 - part.X0)
			for row := part.Y0; row < part.Y1; row++ {
				var o, u uint64
				switch {
				case n.cells != nil:
					o = n.cells.occupied[row%BlockSize] >> (part.X0 - x)
					u = n.cells.unknown[row%BlockSize] >> (part.X0 - x)
				case n.fill == Occupied:
					o = ^uint64(0)
				default:
					u = ^uint64(0)
				}
				packCells(cells, int64(row-r.Y0)*width+int64(part.X0-r.X0), o&mask, u&mask)
			}
		}
	}
	return dst
}

// unpackCells reads up to 64 two-bit cells from cell at on; beyond the end all is
// free.
func unpackCells(cells []byte, at int64) (occupied, unknown uint64) {
	var buf [24]byte
	copy(buf[:17], cells[at/4:])
	shift := at % 4 * 2
	lo, mid, hi := binary.LittleEndian.Uint64(buf[:]), binary.LittleEndian.Uint64(buf[8:]), uint64(buf[16])
	if shift > 0 {
		lo = lo>>shift | mid<<(64-shift)
		mid = mid>>shift | hi<<(64-shift)
	}
	return evenBits(lo) | evenBits(mid)<<32, evenBits(lo>>1) | evenBits(mid>>1)<<32
}

// packCells sets cells that are free so far, from cell at on.
func packCells(cells []byte, at int64, occupied, unknown uint64) {
	lo := spreadBits(occupied&0xffffffff) | spreadBits(unknown&0xffffffff)<<1
	hi := spreadBits(occupied>>32) | spreadBits(unknown>>32)<<1
	shift := at % 4 * 2
	var buf [24]byte
	binary.LittleEndian.PutUint64(buf[:], lo<<shift)
	binary.LittleEndian.PutUint64(buf[8:], hi<<shift|lo>>1>>(63-shift))
	buf[16] = byte(hi >> 1 >> (63 - shift))
	for i, v := range buf[:17] {
		if v != 0 {
			cells[at/4+int64(i)] |= v
		}
	}
}

// evenBits gathers bits 0, 2, 4 ... into bits 0, 1, 2 ...
func evenBits(x uint64) uint64 {
	x &= 0x5555555555555555
	x = (x | x>>1) & 0x3333333333333333
	x = (x | x>>2) & 0x0f0f0f0f0f0f0f0f
	x = (x | x>>4) & 0x00ff00ff00ff00ff
	x = (x | x>>8) & 0x0000ffff0000ffff
	return (x | x>>16) & 0x00000000ffffffff
}

// spreadBits is the reverse of evenBits.
func spreadBits(x uint64) uint64 {
	x = (x | x<<16) & 0x0000ffff0000ffff
	x = (x | x<<8) & 0x00ff00ff00ff00ff
	x = (x | x<<4) & 0x0f0f0f0f0f0f0f0f
	x = (x | x<<2) & 0x3333333333333333
	return (x | x<<1) & 0x5555555555555555
}
