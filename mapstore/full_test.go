package mapstore_test

import (
	"errors"
	"fmt"
	"os"
	"os/exec"
	"syscall"
	"testing"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
)

// TestFullDisk runs a process whose files may not grow beyond a limit, which it lifts
// later: pushes are refused meanwhile, reads are not, and nothing is lost.
func TestFullDisk(t *testing.T) {
	path := boltPath(t)
	cmd := exec.Command(os.Args[0])
	cmd.Env = append(os.Environ(), fmt.Sprintf("%s=full %s", childEnv, path))
	if out, err := cmd.CombinedOutput(); err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	s := openStore(t, openBolt(t, path), mapstore.Options{})
	if _, err := s.Head("hall"); err != nil {
		t.Error(err)
	}
}

func fullChild(path string) error {
	j, err := openJournal(path)
	if err != nil {
		return err
	}
	s, _, err := mapstore.Open(background, j, mapstore.Options{SnapshotEvery: 5})
	if err != nil {
		return err
	}
	if _, err := s.CreateFloor(background, "hall", hall, "surveyor", ""); err != nil {
		return err
	}
	limit := func(n uint64) error {
		var old syscall.Rlimit
		if err := syscall.Getrlimit(syscall.RLIMIT_FSIZE, &old); err != nil {
			return err
		}
		return syscall.Setrlimit(syscall.RLIMIT_FSIZE, &syscall.Rlimit{Cur: n, Max: old.Max})
	}
	cells := make([]byte, 50*100/4) // does not pack
	for i := range cells {
		cells[i] = byte(i*i>>3) & 0x55
	}
	acked := int64(1)
	pushOne := func() error {
		v, _, err := s.Push(background, "hall", patch(acked,
			floor.Edit{Kind: floor.PaintCells, Rect: floor.CellRect{X0: 0, Y0: 0, X1: 50, Y1: 100}, Cells: cells},
			trolley(fmt.Sprintf("trolley-%d", acked), 1_000_000, 1_000_000)))
		if err == nil {
			acked = v.Version
			cells[int(acked)%len(cells)] ^= 0x11
		}
		return err
	}
	var old syscall.Rlimit
	if err := syscall.Getrlimit(syscall.RLIMIT_FSIZE, &old); err != nil {
		return err
	}
	for round := range uint64(3) {
		info, err := os.Stat(path)
		if err != nil {
			return err
		}
		if err := limit(uint64(info.Size()) + 10_000*round); err != nil {
			return err
		}
		for err = nil; err == nil && acked < 5_000; {
			err = pushOne()
		}
		if !errors.Is(err, mapstore.ErrJournal) {
			return fmt.Errorf("round %d: after %d versions a full disk gives %w", round, acked, err)
		}
		for range 3 { // still full
			if err := pushOne(); !errors.Is(err, mapstore.ErrJournal) {
				return fmt.Errorf("round %d: on a full disk a push gives %w", round, err)
			}
			h, err := s.Head("hall")
			if err != nil || h.Info.Version != acked {
				return fmt.Errorf("round %d: the head is %+v, %w, want version %d", round, h, err, acked)
			}
			if _, err := s.Edits(background, "hall", acked); err != nil {
				return fmt.Errorf("round %d: reading the journal: %w", round, err)
			}
		}
		if err := limit(old.Cur); err != nil {
			return err
		}
		for range 3 {
			if err := pushOne(); err != nil {
				return fmt.Errorf("round %d: with room again: %w", round, err)
			}
		}
	}
	if err := s.Close(); err != nil {
		return err
	}
	again, rec, err := mapstore.Open(background, j, mapstore.Options{})
	if err != nil || len(rec.Notes) > 0 {
		return fmt.Errorf("opened again: %q, %w", rec.Notes, err)
	}
	if h, err := again.Head("hall"); err != nil || h.Info.Version != acked {
		return fmt.Errorf("opened again, the head is %+v, %w, want version %d", h, err, acked)
	}
	return errors.Join(again.Close(), j.Close())
}
