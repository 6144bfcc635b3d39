// Package spare keeps scratch memory from one use to the next. Unlike a sync.Pool it keeps it
// over garbage collections: a search that finds its memory gone spends longer on getting
// it anew than on searching. So it keeps a few pieces only.
package spare

import "sync/atomic"

// Most is how many pieces a Shelf keeps.
const Most = 8

// Shelf keeps up to Most pieces of scratch memory. The zero value is empty, and it is safe for any
// number of callers.
type Shelf[T any] struct{ slots [Most]atomic.Pointer[T] }

// Get is a piece that was put there, or else a new one.
func (s *Shelf[T]) Get() *T {
	for i := range s.slots {
		if p := s.slots[i].Load(); p != nil && s.slots[i].CompareAndSwap(p, nil) {
			return p
		}
	}
	return new(T)
}

// Put keeps a piece that the caller uses no more, if there is room.
func (s *Shelf[T]) Put(p *T) {
	for i := range s.slots {
		if s.slots[i].Load() == nil && s.slots[i].CompareAndSwap(nil, p) {
			return
		}
	}
}
