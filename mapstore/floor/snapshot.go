package floor

import (
	"encoding/binary"
	"fmt"
)

// The content of a Map is written as: settings, then packed: the quadtree from
// its root down, each node a tag and what belongs to it (a fill, the four kids on
// the floor, or two bit planes); then the features by name.

// Encode writes the whole content for a journal snapshot. Time is linear in the
// content.
func (m *Map) Encode() []byte {
	body := m.tree.appendNode(nil, m.tree.root)
	body = binary.AppendUvarint(body, uint64(m.FeatureCount()))
	for f := range m.Features() {
		body = appendFeature(body, f)
	}
	b := appendSettings([]byte{mapFormat}, m.settings)
	b = binary.AppendUvarint(b, uint64(len(body)))
	return appendPacked(b, body)
}

func (t *tree) appendNode(b []byte, n *node) []byte {
	switch {
	case n.cells != nil:
		b = append(b, tagDense)
		at := len(b)
		b = append(b, make([]byte, 2*8*BlockSize)...)
		n.cells.put(b[at:])
	case n.kids != nil:
		b = append(b, tagMixed)
		for _, k := range n.kids {
			if k != nil {
				b = t.appendNode(b, k)
			}
		}
	default:
		b = append(b, tagUniform, byte(n.fill))
	}
	return b
}

// Decode reads what Encode wrote. Everything is checked as Apply would: a Map that
// Decode gives is a valid one whatever the bytes were, though only its digest says
// that it is the one that was written. What it allocates is bounded by what the
// input unpacks to, at most about a thousand times its size, and by the limits of
// a floor.
func Decode(data []byte) (*Map, error) {
	d := &decoder{data: data}
	d.format(mapFormat, "map")
	s := d.settings()
	size := d.uvarint()
	if d.err == nil && size > maxBody(s) {
		d.fail("content of %d bytes, wanted at most %d", size, maxBody(s))
	}
	body := d.packed(int(size))
	if err := d.done(); err != nil {
		return nil, err
	}
	m, err := New(s)
	if err != nil {
		return nil, err
	}
	b := m.edit()
	d = &decoder{data: body}
	b.tree.root = d.node(&b.tree, b.tree.level, 0, 0)
	n := d.count(MaxFeatures, 4)
	last := ""
	for i := 0; i < n && d.err == nil; i++ {
		f := d.feature()
		if d.err != nil {
			break
		}
		if f.Name <= last {
			d.fail("features out of order at %q", f.Name)
			break
		}
		last = f.Name
		if err := b.putFeature("features["+f.Name+"]", f); err != nil {
			d.fail("%s: %s", err.Path, err.Problem)
		}
	}
	if err := d.done(); err != nil {
		return nil, fmt.Errorf("content: %w", err)
	}
	return b.done(), nil
}

// maxBody is more than the content of a floor can take.
func maxBody(s Settings) uint64 {
	t := newTree(s.Columns, s.Rows, Free)
	blocks := uint64((t.cols+BlockSize-1)/BlockSize) * uint64((t.rows+BlockSize-1)/BlockSize)
	const (
		dense   = 1 + 2*8*BlockSize
		feature = 2 + MaxNameBytes + 2 + 4*MaxNoteRunes + 64 + 3*(1+MaxHoles)
		vertex  = 2 * binary.MaxVarintLen64
	)
	return blocks*dense + blocks*uint64(t.level+1) + binary.MaxVarintLen64 + MaxFeatures*feature + MaxVertices*vertex
}

func (d *decoder) node(t *tree, level, bx, by int) *node {
	switch tag := d.byte(); {
	case d.err != nil:
	case tag == tagUniform:
		if v := d.byte(); v <= byte(Unknown) && d.err == nil {
			return uniformNodes[v]
		}
		d.fail("occupancy out of range")
	case tag == tagMixed && level > 0:
		n := &node{kids: new([4]*node)}
		for i := range n.kids {
			kx, ky := kid(i, level, bx, by)
			if !t.area(level-1, kx, ky).IsEmpty() {
				n.kids[i] = d.node(t, level-1, kx, ky)
			}
		}
		return n
	case tag == tagDense && level == 0:
		return &node{cells: d.cells(t, bx, by)}
	default:
		d.fail("node of kind %d at level %d", tag, level)
	}
	return uniformNodes[Free]
}

func (d *decoder) cells(t *tree, bx, by int) *blockCells {
	c := &blockCells{}
	b := d.take(2 * 8 * BlockSize)
	if b == nil {
		return c
	}
	columns := t.columnMask(bx)
	for y := range BlockSize {
		o, u := binary.LittleEndian.Uint64(b[8*y:]), binary.LittleEndian.Uint64(b[8*(BlockSize+y):])
		if y >= t.blockRows(by) {
			columns = 0
		}
		if o&u != 0 || (o|u)&^columns != 0 {
			d.fail("cells of block (%d, %d) out of range", bx, by)
		}
		c.occupied[y], c.unknown[y] = o, u
	}
	return c
}
