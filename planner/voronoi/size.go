package voronoi

import (
	"errors"
	"fmt"
	"unsafe"
)

// The limits of a graph. Both depend on the version and the Need alone: Build and Advance
// refuse the same.
const (
	// MaxSites is how many corners and sides the solids may have, those of features counted
	// in every block that they reach into. They are counted before anything is traced. It is
	// that of five million cells of noise with one in twenty solid, or of a floor of the largest
	// size cluttered as halls are.
	MaxSites = 2_000_000
	// MaxBytes is how much memory the edges, with the sites by them, may take: 1 GiB. Sites take
	// up to 0.2 GB beside it, roads over the graph about a third of it again.
	MaxBytes = 1 << 30
)

// The limits as tests lower them.
var maxSites, maxBytes int64 = MaxSites, MaxBytes

// ErrTooLarge says that a graph would go beyond MaxSites or MaxBytes.
var ErrTooLarge = errors.New("voronoi: too much clutter for a graph of edges")

func tooManySites() error {
	return fmt.Errorf("%w: more than %d corners and sides", ErrTooLarge, maxSites)
}

func tooManyBytes() error {
	return fmt.Errorf("%w: edges of more than %d MiB", ErrTooLarge, maxBytes>>20)
}

// sites is how many there are, by block.
func (g *Graph) sites() (n int64) {
	for i := range g.cells {
		n += int64(len(g.cells[i]) + len(g.shapes[i]))
	}
	return n
}

// Bytes is about how much memory the graph takes.
func (g *Graph) Bytes() int64 {
	n := g.sites()*int64(unsafe.Sizeof(site{})) + int64(len(g.blocks))*int64(unsafe.Sizeof(block{})+64)
	for _, b := range g.blocks {
		n += b.bytes()
	}
	return n
}

// bytes is how much memory a block takes.
func (b *block) bytes() int64 {
	return int64(len(b.near))*int64(unsafe.Sizeof(site{})) + int64(len(b.arcs))*int64(unsafe.Sizeof(arc{})) +
		int64(len(b.nodes))*int64(unsafe.Sizeof(node{}))
}
