package mapstore_test

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/boltjournal"
	"example.com/wideberth/mapstore/journal/memjournal"
	bolt "go.etcd.io/bbolt"
)

// twoFloors makes a journal file with floors dock and hall of n versions each and gives
// their digests.
func twoFloors(t *testing.T, n, snapshotEvery int) (path string, digests map[string][][32]byte) {
	t.Helper()
	r := seeded(t)
	path, digests = boltPath(t), map[string][][32]byte{}
	j := openBolt(t, path)
	s := openStore(t, j, mapstore.Options{})
	must(t, s.Close())
	s = openStore(t, j, mapstore.Options{SnapshotEvery: 1 << 30})
	for _, id := range []string{"dock", "hall"} {
		create(t, s, id)
		for v := 1; v <= n; v++ {
			if v > 1 {
				push(t, s, id, randomEdits(r, head(t, s, id).Map)...)
			}
			h := head(t, s, id)
			digests[id] = append(digests[id], h.Info.Digest)
			if v%snapshotEvery == 0 {
				must(t, j.PutSnapshot(t.Context(), journal.Snapshot{
					Floor: id, Version: h.Info.Version, Digest: h.Info.Digest, Content: h.Map.Encode()}))
			}
		}
	}
	must(t, s.Close())
	must(t, j.Close())
	return path, digests
}

// damage changes one value of a floor's part in a journal file.
func damage(t *testing.T, path, id, part string, version int64, change func(value []byte) []byte) {
	t.Helper()
	db, err := bolt.Open(path, 0o600, nil)
	must(t, err)
	must(t, db.Update(func(tx *bolt.Tx) error {
		b := tx.Bucket([]byte("floors")).Bucket([]byte(id)).Bucket([]byte(part))
		k := binary.BigEndian.AppendUint64(nil, uint64(version))
		return b.Put(k, change(bytes.Clone(b.Get(k))))
	}))
	must(t, db.Close())
}

func flip(b []byte) []byte { b[len(b)/2] ^= 1; return b }

// wantServed sees that a floor is served, with the digests that it had.
func wantServed(t *testing.T, s *mapstore.Store, id string, digests [][32]byte) {
	t.Helper()
	if h := head(t, s, id); h.Info.Version != int64(len(digests)) {
		t.Fatalf("head of %s is %d, want %d", id, h.Info.Version, len(digests))
	}
	for i, d := range digests {
		snap, err := s.At(t.Context(), id, int64(i+1))
		must(t, err)
		if snap.Info.Digest != d || snap.Map.Digest() != d {
			t.Errorf("version %d of %s is another one", i+1, id)
		}
	}
}

func TestDamagedRecordRefusesItsFloor(t *testing.T) {
	for _, c := range []struct {
		name    string
		version int64
		words   []string
	}{
		{"newest", 12, []string{"version 12, the newest", "records 1 to 11 read well"}},
		{"middle", 10, []string{"version 10, with 2 newer behind it", "records 1 to 9 read well"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			path, digests := twoFloors(t, 12, 8)
			damage(t, path, "hall", "records", c.version, flip)
			j := openBolt(t, path)
			s, rec, err := mapstore.Open(t.Context(), j, mapstore.Options{})
			must(t, err)
			defer s.Close()
			if rec.Floors != 1 || rec.Versions != 12 || !slices.Equal(rec.Refused, []string{"hall"}) || len(rec.Notes) != 1 {
				t.Errorf("recovery is %+v", rec)
			}
			for _, w := range append(c.words, `floor "hall" is refused`, path, "checksum", "Restore the journal from a backup") {
				if !strings.Contains(strings.Join(rec.Notes, "\n"), w) {
					t.Errorf("notes %q do not say %q", rec.Notes, w)
				}
			}
			wantServed(t, s, "dock", digests["dock"])
			push(t, s, "dock", trolley("t", 1_000_000, 1_000_000))

			_, err = s.Head("hall")
			wantErr(t, "head", err, journal.ErrCorrupt)
			_, _, err = s.Push(t.Context(), "hall", patch(11, trolley("t", 1_000_000, 1_000_000)))
			wantErr(t, "push", err, journal.ErrCorrupt)
			_, err = s.CreateFloor(t.Context(), "hall", hall, "surveyor", "")
			wantErr(t, "creating it anew", err, journal.ErrCorrupt)
			must(t, s.Sync(t.Context()))
			if list := s.Floors(); len(list) != 1 || list[0].ID != "dock" {
				t.Errorf("floors are %+v", list)
			}
			if n, err := j.Read(t.Context(), "hall", c.version-2, 2); err != nil || len(n) != 2 {
				t.Errorf("opening changed what can be read: %d, %v", len(n), err)
			}
		})
	}
}

// TestDamageBelowASnapshot leaves the head as it is: only versions that cannot be
// rebuilt without the damaged record are refused.
func TestDamageBelowASnapshot(t *testing.T) {
	path, digests := twoFloors(t, 20, 8)
	damage(t, path, "hall", "records", 10, flip)
	s, rec, err := mapstore.Open(t.Context(), openBolt(t, path), mapstore.Options{})
	must(t, err)
	defer s.Close()
	if rec.Floors != 2 || len(rec.Notes) != 0 {
		t.Errorf("recovery is %+v", rec)
	}
	for v := int64(1); v <= 20; v++ {
		snap, err := s.At(t.Context(), "hall", v)
		if bad := v >= 10 && v < 16; bad && !errors.Is(err, journal.ErrCorrupt) || !bad && err != nil {
			t.Errorf("version %d: %v", v, err)
		}
		if err == nil && snap.Map.Digest() != digests["hall"][v-1] {
			t.Errorf("version %d is another one", v)
		}
	}
	push(t, s, "hall", trolley("t", 1_000_000, 1_000_000))
}

func TestDamagedSnapshotIsPassedOver(t *testing.T) {
	for name, change := range map[string]func([]byte) []byte{
		"damaged": flip,
		"of another content": func(b []byte) []byte {
			s, err := journal.DecodeSnapshot(b)
			must(t, err)
			s.Content = s.Content[:len(s.Content)-1]
			b, err = journal.EncodeSnapshot(s)
			must(t, err)
			return b
		},
	} {
		t.Run(name, func(t *testing.T) {
			path, digests := twoFloors(t, 20, 8)
			damage(t, path, "hall", "snapshots", 16, change)
			j := openBolt(t, path)
			s, rec, err := mapstore.Open(t.Context(), j, mapstore.Options{})
			must(t, err)
			if rec.Floors != 2 || len(rec.Notes) != 1 || !strings.Contains(rec.Notes[0], "passed over, an older one is used") ||
				!strings.Contains(rec.Notes[0], "version 16") || rec.Replayed != 4+12 {
				t.Errorf("recovery is %+v", rec)
			}
			wantServed(t, s, "hall", digests["hall"])
			for { // until there is one that takes the damaged one's place
				if snap, _, err := j.Latest(t.Context(), "hall", 20); err == nil && snap.Version == 20 {
					break
				}
				time.Sleep(time.Millisecond)
			}
			must(t, s.Close())
			s, rec, err = mapstore.Open(t.Context(), j, mapstore.Options{})
			must(t, err)
			defer s.Close()
			if len(rec.Notes) != 0 || rec.Replayed != 4 /* of dock */ {
				t.Errorf("the next recovery is %+v", rec)
			}
			wantServed(t, s, "hall", digests["hall"])
		})
	}
}

// TestRecordThatDoesNotReplayIsRefused appends records that check out, but do not
// give the content that they name.
func TestRecordThatDoesNotReplayIsRefused(t *testing.T) {
	disk := new(memjournal.Storage)
	s := openStore(t, disk.Open(), mapstore.Options{})
	create(t, s, "hall")
	v := push(t, s, "hall", trolley("t", 1_000_000, 1_000_000))
	j := disk.Open()
	recs, err := j.Read(t.Context(), "hall", 2, 1)
	must(t, err)
	good := recs[0]
	for name, change := range map[string]func(*journal.Record){
		"digest":   func(r *journal.Record) { r.Digest[0] ^= 1 },
		"payload":  func(r *journal.Record) { r.Payload = nil },
		"edits":    func(r *journal.Record) { r.Payload = r.Payload[:len(r.Payload)-1] },
		"kind":     func(r *journal.Record) { r.Kind = journal.Created },
		"restores": func(r *journal.Record) { r.Kind = journal.Restored },
	} {
		disk := new(memjournal.Storage)
		create(t, openStore(t, disk.Open(), mapstore.Options{Now: v.Time.Local}), "hall")
		r := good
		first, err := disk.Open().Read(t.Context(), "hall", 1, 1)
		must(t, err)
		r.Prev = first[0].Hash
		follower := openStore(t, disk.Open(), mapstore.Options{})
		change(&r)
		must(t, disk.Open().Append(t.Context(), r.Seal()))
		s, rec, err := mapstore.Open(t.Context(), disk.Open(), mapstore.Options{})
		must(t, err)
		defer s.Close()
		if !slices.Equal(rec.Refused, []string{"hall"}) {
			t.Errorf("%s: recovery is %+v", name, rec)
		}
		wantErr(t, name+": a store that follows", follower.Sync(t.Context()), journal.ErrCorrupt)
		if h := head(t, follower, "hall"); h.Info.Version != 1 {
			t.Errorf("%s: a store that follows took it", name)
		}
	}
}

func TestNewerFormatsAreNotOpened(t *testing.T) {
	disk := new(memjournal.Storage)
	j := disk.Open()
	must(t, j.Append(t.Context(), journal.Record{Floor: "hall", Version: 1, Kind: journal.Created, Payload: []byte{9}}.Seal()))
	_, _, err := mapstore.Open(t.Context(), j, mapstore.Options{})
	wantErr(t, "a payload of format 9", err, journal.ErrFormat)
	if err == nil || !strings.Contains(err.Error(), "format 9") || !strings.Contains(err.Error(), "up to 1") || !strings.Contains(err.Error(), `"hall"`) {
		t.Errorf("error is %v", err)
	}
}

// TestFlippedBytesNeverChangeTheMap flips bytes all over a journal file and opens a
// store on it: every version that it gives is the one it was.
func TestFlippedBytesNeverChangeTheMap(t *testing.T) {
	path, digests := twoFloors(t, 6, 4)
	whole, err := os.ReadFile(path)
	must(t, err)
	step := 53
	if slow {
		step = 1
	}
	damaged := filepath.Join(t.TempDir(), "damaged.journal")
	tried, refused := 0, 0
	for i := 0; i < len(whole); i += step {
		if whole[i] == 0 && i%7 != 0 {
			continue // mostly unused room
		}
		b := bytes.Clone(whole)
		b[i] ^= 1 << (i % 8)
		must(t, os.WriteFile(damaged, b, 0o600))
		tried++
		if err := openedAgain(t, damaged, digests); err != nil {
			refused++
			if !strings.Contains(err.Error(), damaged) {
				t.Errorf("the error does not name the file: %v", err)
			}
		}
		if t.Failed() {
			t.Fatalf("with byte %d of %d flipped", i, len(whole))
		}
	}
	t.Logf("%d bytes flipped: %d refused or noted, %d without effect, 0 changed", tried, refused, tried-refused)
}

// openedAgain gives what a store on a journal file complains of; another content fails
// the test.
func openedAgain(t *testing.T, path string, digests map[string][][32]byte) error {
	j, err := boltjournal.Open(path, boltjournal.Options{})
	if err != nil {
		return err
	}
	defer j.Close()
	s, rec, err := mapstore.Open(t.Context(), j, mapstore.Options{KeepVersions: 2, SnapshotEvery: 1 << 30})
	if err != nil {
		return err
	}
	defer s.Close()
	var errs []error
	for _, n := range rec.Notes {
		errs = append(errs, errors.New(n))
	}
	for id, want := range digests {
		h, err := s.Head(id)
		if err != nil {
			if !slices.Contains(rec.Refused, id) {
				t.Errorf("floor %s is gone without a word: %v", id, err)
			}
			continue
		}
		if h.Info.Version != int64(len(want)) {
			t.Errorf("head of %s is %d, want %d", id, h.Info.Version, len(want))
		}
		for i, d := range want {
			snap, err := s.At(t.Context(), id, int64(i+1))
			if err != nil {
				errs = append(errs, fmt.Errorf("version %d: %w", i+1, err))
			} else if snap.Info.Digest != d || snap.Map.Digest() != d {
				t.Errorf("version %d of %s is another one", i+1, id)
			}
		}
	}
	return errors.Join(errs...)
}
