package spare_test

import (
	"runtime"
	"sync"
	"sync/atomic"
	"testing"

	"example.com/wideberth/planner/internal/spare"
)

// TestNoPieceIsHadTwice has many callers get and put pieces at once: none is in two hands.
func TestNoPieceIsHadTwice(t *testing.T) {
	type piece struct{ held atomic.Bool }
	var s spare.Shelf[piece]
	var wg sync.WaitGroup
	for range 4 * spare.Most {
		wg.Go(func() {
			for range 2000 {
				p := s.Get()
				if p.held.Swap(true) {
					t.Error("a piece was given to two callers")
					return
				}
				runtime.Gosched()
				p.held.Store(false)
				s.Put(p)
			}
		})
	}
	wg.Wait()
}

// TestPiecesOutliveCollections puts pieces back and finds them after two garbage collections, as
// many as there is room for.
func TestPiecesOutliveCollections(t *testing.T) {
	var s spare.Shelf[[64]byte]
	put := map[*[64]byte]bool{}
	for range 2 * spare.Most {
		p := new([64]byte)
		put[p] = true
		s.Put(p)
	}
	runtime.GC()
	runtime.GC()
	known := 0
	for range 2 * spare.Most {
		if put[s.Get()] {
			known++
		}
	}
	if known != spare.Most {
		t.Errorf("%d of %d pieces were kept, want %d", known, 2*spare.Most, spare.Most)
	}
}
