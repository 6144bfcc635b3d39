package mapstore_test

import (
	"bufio"
	"encoding/hex"
	"errors"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/memjournal"
)

// TestLaw1VersionNeverChanges reads versions while others are pushed, and again when
// they have left memory: each always has the content that it had at first.
func TestLaw1VersionNeverChanges(t *testing.T) {
	r := seeded(t)
	s, _ := memory(t, mapstore.Options{KeepVersions: 10, SnapshotEvery: 7})
	const n = 120
	var mu sync.Mutex
	first := []*mapstore.Snapshot{head(t, s, "hall")} // version i+1
	written := [][]byte{first[0].Map.Encode()}
	done := make(chan struct{})
	var wg sync.WaitGroup
	for range 3 {
		seed := r.Uint64()
		wg.Go(func() {
			r := rand.New(rand.NewPCG(seed, 1))
			for {
				select {
				case <-done:
					return
				default:
				}
				mu.Lock()
				i := r.IntN(len(first))
				want, content := first[i], written[i]
				mu.Unlock()
				got, err := s.At(t.Context(), "hall", int64(i+1))
				if err != nil {
					t.Errorf("version %d: %v", i+1, err)
					return
				}
				if got.Info != want.Info || got.Map.Digest() != want.Info.Digest || string(got.Map.Encode()) != string(content) {
					t.Errorf("version %d is another one now", i+1)
					return
				}
			}
		})
	}
	for range n {
		grow(t, s, "hall", r, 1)
		h := head(t, s, "hall")
		mu.Lock()
		first, written = append(first, h), append(written, h.Map.Encode())
		mu.Unlock()
	}
	close(done)
	wg.Wait()
	for i, snap := range first { // those held all the while, too
		if string(snap.Map.Encode()) != string(written[i]) {
			t.Errorf("the snapshot of version %d that was held has changed", i+1)
		}
	}
}

// noSnapshots hides a journal's snapshots, so that everything is carried out from
// version 1.
type noSnapshots struct{ journal.Journal }

func (noSnapshots) Latest(_ ctx, _ string, _ int64) (s journal.Snapshot, ok bool, err error) {
	return s, false, nil
}

// TestLaw2OrderDecides opens one journal in several ways: every version has the same
// record and content in each.
func TestLaw2OrderDecides(t *testing.T) {
	r := seeded(t)
	disk := new(memjournal.Storage)
	j := disk.Open()
	s := openStore(t, j, mapstore.Options{SnapshotEvery: 9})
	for _, id := range []string{"hall", "dock"} {
		create(t, s, id)
		grow(t, s, id, r, 150)
		// Snapshots are written in the background, and Close gives up what is not
		// written yet.
		for ok := false; !ok; time.Sleep(time.Millisecond) {
			var err error
			_, ok, err = j.Latest(t.Context(), id, 151)
			must(t, err)
		}
	}
	must(t, s.Close())

	replayed := openStore(t, noSnapshots{disk.Open()}, mapstore.Options{})
	fromSnapshots, rec, err := mapstore.Open(t.Context(), disk.Open(), mapstore.Options{KeepVersions: 1, SnapshotEvery: 1_000,
		Now: func() time.Time { return time.Time{} }}) // the clock decides nothing
	must(t, err)
	defer fromSnapshots.Close()
	if rec.Replayed >= 2*150 {
		t.Errorf("%d records were carried out, so no snapshot was used", rec.Replayed)
	}
	for _, id := range []string{"hall", "dock"} {
		wantSame(t, id, replayed, fromSnapshots)
	}

	// A second writer's store that follows along comes to the same.
	grow(t, replayed, "hall", r, 20)
	must(t, fromSnapshots.Sync(t.Context()))
	wantSame(t, "hall", replayed, fromSnapshots)
}

const (
	childEnv     = "WIDEBERTH_TEST_CHILD" // the child's job: see child
	crashWriters = 4
)

var crashFloors = []string{"hall", "dock"}

// crashPatch is the patch that a request id of the crash test stands for, whoever
// asks. Writers touch names and cells of their own, so all of them can be rebased.
func crashPatch(requestID string, base int64) mapstore.Patch {
	var run, w, i int
	if _, err := fmt.Sscanf(requestID, "%d/%d/%d", &run, &w, &i); err != nil {
		panic(err)
	}
	r := rand.New(rand.NewPCG(uint64(run), uint64(w<<32+i)))
	x := w*50 + r.IntN(40)
	p := patch(base,
		trolley(fmt.Sprintf("w%d-%d", w, r.IntN(5)), 1_000_000+r.Int64N(3_000_000), 1_000_000+r.Int64N(2_000_000)),
		paint(x, r.IntN(80), x+1+r.IntN(9), 80+r.IntN(80), floor.Occupancy(r.IntN(3))))
	p.RequestID, p.AllowRebase = requestID, true
	return p
}

// crashChild pushes from several goroutines until it is killed, and writes each
// acknowledgement to file descriptor 3.
func crashChild(path string, run int) error {
	acks := os.NewFile(3, "acks")
	j, err := openJournal(path)
	if err != nil {
		return err
	}
	s, rec, err := mapstore.Open(background, j, mapstore.Options{SnapshotEvery: 7, KeepVersions: 50})
	if err != nil {
		return err
	}
	if len(rec.Notes) > 0 {
		return fmt.Errorf("found at open: %q", rec.Notes)
	}
	errs := make(chan error)
	for w := range crashWriters {
		go func() {
			errs <- func() error {
				id := crashFloors[w%len(crashFloors)]
				if _, err := s.CreateFloor(background, id, hall, "surveyor", ""); err != nil {
					return err
				}
				for i := 0; ; i++ {
					h, err := s.Head(id)
					if err != nil {
						return err
					}
					p := crashPatch(fmt.Sprintf("%d/%d/%d", run, w, i), h.Info.Version)
					v, repeated, err := s.Push(background, id, p)
					if err != nil || repeated {
						return fmt.Errorf("push %s: repeated %v, %w", p.RequestID, repeated, err)
					}
					if _, err := fmt.Fprintf(acks, "%s %d %x %s\n", id, v.Version, v.Digest, p.RequestID); err != nil {
						return err
					}
				}
			}()
		}()
	}
	return <-errs
}

// ack is an acknowledgement that the child wrote.
type ack struct {
	floor     string
	version   int64
	digest    [32]byte
	requestID string
}

func readAcks(t *testing.T, f *os.File, into chan<- []ack) {
	var acks []ack
	for in := bufio.NewScanner(f); in.Scan(); {
		field := strings.Fields(in.Text())
		if len(field) != 4 {
			t.Errorf("acknowledgement %q", in.Text())
			break
		}
		v, _ := strconv.ParseInt(field[1], 10, 64)
		a := ack{floor: field[0], version: v, requestID: field[3]}
		if n, err := hex.Decode(a.digest[:], []byte(field[2])); n != 32 || err != nil {
			t.Errorf("acknowledgement %q", in.Text())
		}
		acks = append(acks, a)
	}
	f.Close()
	into <- acks
}

// TestLaw3AcknowledgedIsDurable kills a process that pushes from several goroutines,
// at random moments, and looks at what is left: every version that was acknowledged,
// with its digest and its request id, and nothing that is not whole.
//
// A killed process leaves what it wrote to the system's cache, so this shows the
// order of things and not the syncing; a power cut is for other tests.
func TestLaw3AcknowledgedIsDurable(t *testing.T) {
	r := seeded(t)
	kills := 100
	if slow {
		kills = 1_000
	}
	path := boltPath(t)
	known := map[string][][32]byte{} // digests by floor and version, as found after each kill
	acked, unacked, lost, half, empty := 0, 0, 0, 0, 0
	for run := range kills {
		acks := killedRun(t, r, path, run)
		acked += len(acks)
		if len(acks) == 0 {
			empty++
		}

		j := openBolt(t, path)
		s, rec, err := mapstore.Open(t.Context(), j, mapstore.Options{SnapshotEvery: 1_000_000})
		must(t, err)
		if len(rec.Notes) > 0 {
			half++
			t.Errorf("kill %d: found at open: %q", run, rec.Notes)
		}
		wasAcked := map[string]bool{}
		next := map[string]int{} // by writer: the number of its first push without an acknowledgement
		for _, a := range acks {
			wasAcked[fmt.Sprint(a.floor, a.version)] = true
			next[a.requestID[:strings.LastIndex(a.requestID, "/")]]++
		}
		for _, id := range crashFloors {
			if _, err := s.Floor(id); errors.Is(err, mapstore.ErrNoFloor) && known[id] == nil {
				continue // killed before it was made
			}
			h := head(t, s, id)
			if good, err := journal.Verify(t.Context(), j, id); good != h.Info.Version || err != nil {
				half++
				t.Errorf("kill %d: %s checks out up to %d of %d: %v", run, id, good, h.Info.Version, err)
			}
			// What was found after an earlier kill, or acknowledged since, is still there.
			var digests [][32]byte
			for v := h.Info.Version; v > 0; {
				page, err := s.Versions(t.Context(), id, v+1, 1_000)
				must(t, err)
				for _, info := range page {
					digests = append(digests, info.Digest)
					if v--; info.Version > int64(len(known[id])) && info.Kind == journal.Patched && !wasAcked[fmt.Sprint(id, info.Version)] {
						unacked++
						cut := strings.LastIndex(info.RequestID, "/")
						if n, _ := strconv.Atoi(info.RequestID[cut+1:]); n != next[info.RequestID[:cut]] {
							half++
							t.Errorf("kill %d: version %d of %s was never under way: %s", run, info.Version, id, info.RequestID)
						}
						next[info.RequestID[:cut]] = -1 // one for each writer at most
					}
				}
			}
			reverse(digests)
			for i, d := range known[id] {
				if i >= len(digests) || digests[i] != d {
					lost++
					t.Errorf("kill %d: version %d of %s is gone or another one", run, i+1, id)
				}
			}
			for _, a := range acks {
				if a.floor == id && (a.version > int64(len(digests)) || digests[a.version-1] != a.digest) {
					lost++
					t.Errorf("kill %d: acknowledged version %d of %s is gone or another one", run, a.version, id)
				}
			}
			known[id] = digests
			if h.Map.Digest() != digests[len(digests)-1] {
				half++
				t.Errorf("kill %d: the head of %s has other content than its record says", run, id)
			}
		}
		if t.Failed() {
			t.FailNow()
		}
		if len(acks) > 0 {
			askAgain(t, s, acks[r.IntN(len(acks))])
			askAgain(t, s, acks[len(acks)-1])
		}
		must(t, s.Close())
		must(t, j.Close())
	}
	// Once more from version 1, without any snapshot.
	j := openBolt(t, path)
	replayed := openStore(t, noSnapshots{j}, mapstore.Options{KeepVersions: 1 << 20})
	versions := 0
	for id, digests := range known {
		for i, d := range digests {
			snap, err := replayed.At(t.Context(), id, int64(i+1))
			must(t, err)
			if snap.Map.Digest() != d {
				lost++
				t.Errorf("carried out from version 1, version %d of %s is another one", i+1, id)
			}
			versions++
		}
	}
	t.Logf("%d kills (%d before the first acknowledgement), %d versions, %d acknowledged, %d under way and whole; lost=%d half=%d",
		kills, empty, versions, acked, unacked, lost, half)
	if acked < kills {
		t.Errorf("%d pushes were acknowledged before %d kills, so they were hardly tried", acked, kills)
	}
}

// killedRun runs the child and kills it, some time after it started or, mostly, some
// time after its first acknowledgement.
func killedRun(t *testing.T, r *rand.Rand, path string, run int) []ack {
	t.Helper()
	read, write, err := os.Pipe()
	must(t, err)
	cmd := exec.Command(os.Args[0])
	cmd.Env = append(os.Environ(), fmt.Sprintf("%s=crash %d %s", childEnv, run, path))
	cmd.ExtraFiles = []*os.File{write}
	var stderr strings.Builder
	cmd.Stderr = &stderr
	must(t, cmd.Start())
	write.Close()
	acks := make(chan []ack, 1)
	if r.IntN(5) > 0 {
		// The first acknowledgement is there when the pipe has something to read.
		first := make([]byte, 1)
		if n, _ := read.Read(first); n == 1 {
			rest, w, err := os.Pipe()
			must(t, err)
			from := read
			go func() {
				w.Write(first)
				from.WriteTo(w)
				from.Close()
				w.Close()
			}()
			read = rest
		}
	}
	go readAcks(t, read, acks)
	time.Sleep(time.Duration(r.Int64N(int64(80 * time.Millisecond))))
	cmd.Process.Kill()
	if err := cmd.Wait(); stderr.Len() > 0 {
		t.Fatalf("kill %d: the process said %q (%v)", run, stderr.String(), err)
	}
	return <-acks
}

// askAgain sends an acknowledged push again.
func askAgain(t *testing.T, s *mapstore.Store, a ack) {
	t.Helper()
	before := head(t, s, a.floor).Info.Version
	page, err := s.Versions(t.Context(), a.floor, a.version+1, 1)
	must(t, err)
	v, repeated, err := s.Push(t.Context(), a.floor, crashPatch(a.requestID, page[0].Base))
	if err != nil || !repeated || v.Version != a.version || v.Digest != a.digest || head(t, s, a.floor).Info.Version != before {
		t.Errorf("request id %s again gives version %d, repeated %v, %v; want the first answer, %d", a.requestID, v.Version, repeated, err, a.version)
	}
}
