package anyangle

import (
	"context"
	"unsafe"

	"example.com/wideberth/mapstore/geom"
)

// ShortestWithin is Shortest for one who has no use for a way longer than mostUm: ok is
// false then as well, and the search ends as soon as that is certain.
func (g *Mesh) ShortestWithin(ctx context.Context, start, goal geom.Point, mostUm float64) (way Way, ok bool, err error) {
	if err := ctx.Err(); err != nil {
		return Way{}, false, err
	}
	s := scratch.Get()
	s.most = mostUm + tieUm
	defer func() {
		s.g = nil // an idle search keeps no version alive
		if s.bytes() <= mostKept {
			scratch.Put(s)
		}
	}()
	// A goal behind a notch of the lean mesh needs the full one, and so does a way
	// that the lean one does not have.
	lean, ok, err := s.run(ctx, g.lean, start, goal)
	if ok || err != nil || s.gaveUp {
		return lean, ok && lean.LengthUm <= s.most, err
	}
	way, ok, err = s.run(ctx, g, start, goal)
	way.Expanded += lean.Expanded
	way.Queued += lean.Queued
	return way, ok && way.LengthUm <= s.most, err
}

// mostKept is how many bytes of memory a search may have for them to be kept for the next one.
const mostKept = 32 << 20

// bytes is about how much memory the search has.
func (s *search) bytes() uintptr {
	size := func(n int, one uintptr) uintptr { return uintptr(n) * one }
	entries := cap(s.table.entries) + cap(s.table.spare) + cap(s.visited.entries) + cap(s.visited.spare)
	return size(cap(s.nodes), unsafe.Sizeof(node{})) + size(cap(s.queue.items), unsafe.Sizeof(item{})) +
		size(cap(s.roots), unsafe.Sizeof(root{})) + size(entries, unsafe.Sizeof(entry{})) +
		size(cap(s.notes), unsafe.Sizeof(portalNote{})) + size(cap(s.cells)+cap(s.spare)+cap(s.best), 4) +
		size(cap(s.base), unsafe.Sizeof(reached{}))
}
