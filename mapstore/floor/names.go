package floor

import (
	"cmp"
	"crypto/sha256"
	"encoding/binary"
	"slices"
	"strings"
)

// entry is a feature with what is worth keeping of it.
type entry struct {
	feature  *Feature
	hash     [sha256.Size]byte
	vertices int
}

func newEntry(f *Feature) *entry {
	return &entry{f, sha256.Sum256(appendFeature(nil, f)), f.Shape.Vertices()}
}

// nameNode is a node of a persistent radix tree over feature names (Morrison's
// PATRICIA, 1968, by bytes). Its form depends on the names alone, not on the order
// they came in, so its hash is a digest of the set; a version shares with the one
// before all nodes but those on the paths to the names it changed, of which there
// are at most MaxNameBytes a name. A nameNode is never written after it was made.
type nameNode struct {
	label    string      // bytes of the name between the parent and here
	entry    *entry      // of the name that ends here, or nil
	kids     []*nameNode // by first byte of label
	hash     [sha256.Size]byte
	count    int // entries in and below
	vertices int // of them
}

func newNameNode(label string, e *entry, kids []*nameNode) *nameNode {
	n := &nameNode{label: label, entry: e, kids: kids}
	h := sha256.New()
	var num [8]byte
	text := func(s string) {
		binary.LittleEndian.PutUint64(num[:], uint64(len(s)))
		h.Write(num[:])
		h.Write([]byte(s))
	}
	text(label)
	if e != nil {
		n.count, n.vertices = 1, e.vertices
		text(string(e.hash[:]))
	} else {
		text("")
	}
	for _, k := range kids {
		n.count += k.count
		n.vertices += k.vertices
		h.Write(k.hash[:])
	}
	h.Sum(n.hash[:0])
	return n
}

// kid finds the kid that starts with byte c.
func (n *nameNode) kid(c byte) (int, bool) {
	return slices.BinarySearchFunc(n.kids, c, func(k *nameNode, c byte) int { return cmp.Compare(k.label[0], c) })
}

// get is the entry of a name, or nil.
func (n *nameNode) get(name string) *entry {
	for n != nil {
		rest, ok := strings.CutPrefix(name, n.label)
		if !ok {
			return nil
		}
		if rest == "" {
			return n.entry
		}
		i, ok := n.kid(rest[0])
		if !ok {
			return nil
		}
		n, name = n.kids[i], rest
	}
	return nil
}

// put gives the tree in which name stands for e. n may be nil.
func (n *nameNode) put(name string, e *entry) *nameNode {
	if n == nil {
		return newNameNode(name, e, nil)
	}
	l := commonPrefix(name, n.label)
	rest := name[l:]
	if l < len(n.label) {
		tail := newNameNode(n.label[l:], n.entry, n.kids)
		if rest == "" {
			return newNameNode(name, e, []*nameNode{tail})
		}
		kids := []*nameNode{tail, newNameNode(rest, e, nil)}
		if rest[0] < tail.label[0] {
			kids[0], kids[1] = kids[1], kids[0]
		}
		return newNameNode(name[:l], nil, kids)
	}
	if rest == "" {
		return newNameNode(n.label, e, n.kids)
	}
	i, ok := n.kid(rest[0])
	kids := slices.Clone(n.kids)
	if ok {
		kids[i] = kids[i].put(rest, e)
	} else {
		kids = slices.Insert(kids, i, newNameNode(rest, e, nil))
	}
	return newNameNode(n.label, n.entry, kids)
}

// remove gives the tree without name, which is in it; nil when nothing is left.
func (n *nameNode) remove(name string) *nameNode {
	rest := name[len(n.label):]
	if rest == "" {
		return joinNameNode(n.label, nil, n.kids)
	}
	i, _ := n.kid(rest[0])
	kids := slices.Clone(n.kids)
	if k := kids[i].remove(rest); k != nil {
		kids[i] = k
	} else {
		kids = slices.Delete(kids, i, i+1)
	}
	return joinNameNode(n.label, n.entry, kids)
}

// joinNameNode makes a node, or its only kid in its place when no name ends in it.
func joinNameNode(label string, e *entry, kids []*nameNode) *nameNode {
	if e == nil {
		switch len(kids) {
		case 0:
			return nil
		case 1:
			return newNameNode(label+kids[0].label, kids[0].entry, kids[0].kids)
		}
	}
	return newNameNode(label, e, kids)
}

func commonPrefix(a, b string) int {
	n := min(len(a), len(b))
	for i := range n {
		if a[i] != b[i] {
			return i
		}
	}
	return n
}

// walk yields all entries by name. n may be nil.
func (n *nameNode) walk(yield func(*entry) bool) bool {
	if n == nil {
		return true
	}
	if n.entry != nil && !yield(n.entry) {
		return false
	}
	for _, k := range n.kids {
		if !k.walk(yield) {
			return false
		}
	}
	return true
}

// diffNames calls found for every entry that differs between two trees, in no
// particular order, and skips what they share. aCut and bCut are how many bytes of
// the roots' labels are already matched. Either root may be nil.
func diffNames(a *nameNode, aCut int, b *nameNode, bCut int, found func(before, after *entry)) {
	switch {
	case a == b && aCut == bCut:
		return
	case a == nil:
		b.walk(func(e *entry) bool { found(nil, e); return true })
		return
	case b == nil:
		a.walk(func(e *entry) bool { found(e, nil); return true })
		return
	}
	aLabel, bLabel := a.label[aCut:], b.label[bCut:]
	l := commonPrefix(aLabel, bLabel)
	switch {
	case l == len(aLabel) && l == len(bLabel):
		if aCut == bCut && a.hash == b.hash {
			return
		}
		diffEntries(a.entry, b.entry, found)
		i, j := 0, 0
		for i < len(a.kids) || j < len(b.kids) {
			switch {
			case j == len(b.kids) || i < len(a.kids) && a.kids[i].label[0] < b.kids[j].label[0]:
				diffNames(a.kids[i], 0, nil, 0, found)
				i++
			case i == len(a.kids) || b.kids[j].label[0] < a.kids[i].label[0]:
				diffNames(nil, 0, b.kids[j], 0, found)
				j++
			default:
				diffNames(a.kids[i], 0, b.kids[j], 0, found)
				i++
				j++
			}
		}
	case l == len(aLabel): // b lies below a
		diffEntries(a.entry, nil, found)
		matched := false
		for _, k := range a.kids {
			if k.label[0] == bLabel[l] {
				matched = true
				diffNames(k, 0, b, bCut+l, found)
			} else {
				diffNames(k, 0, nil, 0, found)
			}
		}
		if !matched {
			diffNames(nil, 0, b, 0, found)
		}
	case l == len(bLabel): // a lies below b
		diffNames(b, bCut, a, aCut, func(before, after *entry) { found(after, before) })
	default:
		diffNames(a, 0, nil, 0, found)
		diffNames(nil, 0, b, 0, found)
	}
}

func diffEntries(a, b *entry, found func(before, after *entry)) {
	if a == b || a != nil && b != nil && a.hash == b.hash {
		return
	}
	found(a, b)
}
