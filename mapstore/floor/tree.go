package floor

import (
	"crypto/sha256"
	"encoding/binary"
)

// BlockSize is the side of a block in cells.
const BlockSize = 64

// blockCells are the cells of a block in two bit planes: bit x of word y. Bits
// beyond the floor's edge are zero in both.
type blockCells struct{ occupied, unknown [BlockSize]uint64 }

// node is a square of 2^level by 2^level blocks of a region quadtree. It is one of
//
//	uniform  every cell of the floor in it holds fill (kids and cells are nil)
//	mixed    four kids, lower left, lower right, upper left, upper right; nil where
//	         the square lies beyond the floor's edge
//	dense    a single block of mixed cells
//
// A sealed node is shared between versions and never written again. A node that
// is not sealed belongs to the one edit under way. Among sealed nodes the form is
// canonical: equal content, equal form, equal hash.
type node struct {
	hash   [sha256.Size]byte
	kids   *[4]*node
	cells  *blockCells
	fill   Occupancy
	sealed bool
}

// The tags that set the hashed forms apart.
const (
	tagUniform = 1
	tagMixed   = 2
	tagDense   = 3
)

var uniformNodes = func() (u [3]*node) {
	for v := range u {
		u[v] = &node{fill: Occupancy(v), sealed: true, hash: sha256.Sum256([]byte{tagUniform, byte(v)})}
	}
	return u
}()

func (n *node) uniform() bool { return n.kids == nil && n.cells == nil }

// tree is the occupancy of a floor.
type tree struct {
	root       *node
	cols, rows int
	level      int // of the root
}

func newTree(cols, rows int, fill Occupancy) tree {
	t := tree{root: uniformNodes[fill], cols: cols, rows: rows}
	for BlockSize<<t.level < max(cols, rows) {
		t.level++
	}
	return t
}

// area are the cells of the floor in the node of that level whose lower left
// block is (bx, by).
func (t *tree) area(level, bx, by int) CellRect {
	side := BlockSize << level
	x, y := bx*BlockSize, by*BlockSize
	return CellRect{x, y, x + side, y + side}.Intersect(CellRect{0, 0, t.cols, t.rows})
}

// leaf is the uniform or dense node that holds a block of the floor.
func (t *tree) leaf(bx, by int) *node {
	n := t.root
	for l := t.level - 1; l >= 0 && n.kids != nil; l-- {
		n = n.kids[bx>>l&1|by>>l&1<<1]
	}
	return n
}

func (t *tree) at(col, row int) Occupancy {
	n := t.leaf(col/BlockSize, row/BlockSize)
	if n.cells == nil {
		return n.fill
	}
	x, y := col%BlockSize, row%BlockSize
	return Occupancy(n.cells.occupied[y]>>x&1 | n.cells.unknown[y]>>x&1<<1)
}

// columnMask has a bit for each column of the floor in block column bx.
func (t *tree) columnMask(bx int) uint64 { return lowBits(t.cols - bx*BlockSize) }

// blockRows is how many rows of the floor block row by has.
func (t *tree) blockRows(by int) int { return min(BlockSize, t.rows-by*BlockSize) }

// lowBits has the lowest n bits set; n may be out of range.
func lowBits(n int) uint64 {
	switch {
	case n <= 0:
		return 0
	case n >= 64:
		return ^uint64(0)
	}
	return 1<<n - 1
}

// writable gives n itself when it belongs to the edit under way, else a copy that
// does. A uniform node is spelled out: into cells at level 0, else into kids.
func (t *tree) writable(n *node, level, bx, by int) *node {
	if !n.sealed {
		return n
	}
	w := &node{}
	switch {
	case n.kids != nil:
		kids := *n.kids
		w.kids = &kids
	case n.cells != nil:
		cells := *n.cells
		w.cells = &cells
	case level == 0:
		w.cells = &blockCells{}
		mask := t.columnMask(bx)
		for y := range t.blockRows(by) {
			w.cells.set(y, mask, n.fill)
		}
	default:
		w.kids = &[4]*node{}
		for i := range w.kids {
			kx, ky := kid(i, level, bx, by)
			if !t.area(level-1, kx, ky).IsEmpty() {
				w.kids[i] = n
			}
		}
	}
	return w
}

// kid is the lower left block of kid i.
func kid(i, level, bx, by int) (int, int) {
	half := 1 << (level - 1)
	return bx + i&1*half, by + i>>1*half
}

// set writes v to the cells of row y that mask names.
func (c *blockCells) set(y int, mask uint64, v Occupancy) {
	c.occupied[y] &^= mask
	c.unknown[y] &^= mask
	switch v {
	case Occupied:
		c.occupied[y] |= mask
	case Unknown:
		c.unknown[y] |= mask
	}
}

// holds says whether the cells of row y that mask names all are v.
func (c *blockCells) holds(y int, mask uint64, v Occupancy) bool {
	var occupied, unknown uint64
	switch v {
	case Occupied:
		occupied = mask
	case Unknown:
		unknown = mask
	}
	return c.occupied[y]&mask == occupied && c.unknown[y]&mask == unknown
}

// fillRect sets all cells of r, which lies on the floor, to v.
func (t *tree) fillRect(r CellRect, v Occupancy) {
	t.root = t.fillNode(t.root, t.level, 0, 0, r, v)
}

func (t *tree) fillNode(n *node, level, bx, by int, r CellRect, v Occupancy) *node {
	if n == nil || n.uniform() && n.fill == v {
		return n
	}
	area := t.area(level, bx, by)
	part := area.Intersect(r)
	if part.IsEmpty() {
		return n
	}
	if part == area {
		return uniformNodes[v]
	}
	if level == 0 {
		x, y := bx*BlockSize, by*BlockSize
		var masks [BlockSize]uint64
		for row := part.Y0 - y; row < part.Y1-y; row++ {
			masks[row] = lowBits(part.X1-x) &^ lowBits(part.X0-x)
		}
		return t.maskNode(n, bx, by, &masks, v)
	}
	kids := n.kids
	if kids == nil {
		kids = t.writable(n, level, bx, by).kids
	}
	var changed *node
	for i, k := range kids {
		kx, ky := kid(i, level, bx, by)
		if w := t.fillNode(k, level-1, kx, ky, r, v); w != k {
			if changed == nil {
				changed = t.writable(n, level, bx, by)
			}
			changed.kids[i] = w
		}
	}
	if changed == nil {
		return n
	}
	return changed
}

// maskNode sets the cells that masks names in a block to v.
func (t *tree) maskNode(n *node, bx, by int, masks *[BlockSize]uint64, v Occupancy) *node {
	if n.uniform() && n.fill == v {
		return n
	}
	columns, rows := t.columnMask(bx), t.blockRows(by)
	all, same := true, n.cells != nil
	for y := range rows {
		m := masks[y] & columns
		all = all && m == columns
		same = same && n.cells.holds(y, m, v)
	}
	switch {
	case same:
		return n
	case all:
		return uniformNodes[v]
	}
	w := t.writable(n, 0, bx, by)
	for y := range rows {
		w.cells.set(y, masks[y]&columns, v)
	}
	return w
}

// editBlock replaces the leaf of a block of the floor by what change makes of it.
// change gives the node back as it came when nothing changes.
func (t *tree) editBlock(bx, by int, change func(*node) *node) {
	old := t.leaf(bx, by)
	if leaf := change(old); leaf != old {
		t.root = t.replaceLeaf(t.root, t.level, 0, 0, bx, by, leaf)
	}
}

func (t *tree) replaceLeaf(n *node, level, nx, ny, bx, by int, leaf *node) *node {
	if level == 0 {
		return leaf
	}
	w := t.writable(n, level, nx, ny)
	i := bx>>(level-1)&1 | by>>(level-1)&1<<1
	kx, ky := kid(i, level, nx, ny)
	w.kids[i] = t.replaceLeaf(w.kids[i], level-1, kx, ky, bx, by, leaf)
	return w
}

// seal makes the tree canonical, hashes what is new and ends the edit.
func (t *tree) seal() { t.root = t.sealNode(t.root, t.level, 0, 0) }

func (t *tree) sealNode(n *node, level, bx, by int) *node {
	if n == nil || n.sealed {
		return n
	}
	if n.cells != nil {
		if v, ok := t.uniformCells(n.cells, bx, by); ok {
			return uniformNodes[v]
		}
		n.hash = n.cells.sum()
		n.sealed = true
		return n
	}
	var first *node
	same := true
	for i, k := range n.kids {
		kx, ky := kid(i, level, bx, by)
		k = t.sealNode(k, level-1, kx, ky)
		n.kids[i] = k
		if k == nil {
			continue
		}
		if first == nil {
			first = k
		}
		same = same && k.uniform() && k == first
	}
	if same {
		return first
	}
	n.hash = sumKids(n.kids)
	n.sealed = true
	return n
}

func (t *tree) uniformCells(c *blockCells, bx, by int) (Occupancy, bool) {
	columns := t.columnMask(bx)
	v := Occupancy(c.occupied[0]&1 | c.unknown[0]&1<<1)
	for y := range t.blockRows(by) {
		if !c.holds(y, columns, v) {
			return 0, false
		}
	}
	return v, true
}

func (c *blockCells) sum() [sha256.Size]byte {
	var buf [1 + 2*8*BlockSize]byte
	buf[0] = tagDense
	c.put(buf[1:])
	return sha256.Sum256(buf[:])
}

// put writes the planes to buf, little-endian.
func (c *blockCells) put(buf []byte) {
	for y := range BlockSize {
		binary.LittleEndian.PutUint64(buf[8*y:], c.occupied[y])
		binary.LittleEndian.PutUint64(buf[8*(BlockSize+y):], c.unknown[y])
	}
}

func sumKids(kids *[4]*node) [sha256.Size]byte {
	var buf [1 + 4*sha256.Size]byte
	buf[0] = tagMixed
	for i, k := range kids {
		if k != nil {
			copy(buf[1+i*sha256.Size:], k.hash[:])
		}
	}
	return sha256.Sum256(buf[:])
}
