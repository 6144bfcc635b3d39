package anyangle

import (
	"fmt"
	"unsafe"
)

// MaxBytes is how much memory the cells and portals of a mesh may take, those of its lean
// twin included: 512 MiB, and up to a fifth more for the room that growing lists leave. It is that
// of three and a half million cells of noise with one in twenty solid; as many cells of a hall take about a
// hundredth. What would take more is refused with ErrTooLarge.
const MaxBytes = 512 << 20

// maxBytes is MaxBytes, or less in tests.
var maxBytes int64 = MaxBytes

// sizeError is the ErrTooLarge of a mesh.
type sizeError struct{ most int64 }

func (e *sizeError) Error() string {
	return fmt.Sprintf("anyangle: too much clutter for a mesh: more than %d MiB", e.most>>20)
}

func (e *sizeError) Is(target error) bool { return target == ErrTooLarge }

// bytes is about how much memory a cut takes once it is joined: two portals a link.
func (c *cut) bytes() int64 {
	contacts := 0
	for _, l := range c.contact {
		contacts += len(l)
	}
	return int64(len(c.cells))*int64(unsafe.Sizeof(cell{})+unsafe.Sizeof(span{})+4) +
		int64(len(c.rows))*int64(unsafe.Sizeof(row{})) +
		int64(len(c.links))*int64(unsafe.Sizeof(link{})+2*unsafe.Sizeof(portal{})) +
		int64(len(c.fan))*int64(unsafe.Sizeof(triangle{})) + int64(len(c.corners))*int64(unsafe.Sizeof(pt{})) +
		int64(len(c.joints))*int64(unsafe.Sizeof(joint{})+2*unsafe.Sizeof(portal{})) +
		int64(contacts)*int64(unsafe.Sizeof(contact{})) + int64(len(c.rounds))*int64(unsafe.Sizeof(round{}))
}

// bytesOf is about how much memory a block takes, in the mesh and in the lean one.
func bytesOf(own, lean *cut) int64 {
	n := own.bytes()
	if lean != own {
		n += lean.bytes()
	}
	return n
}
