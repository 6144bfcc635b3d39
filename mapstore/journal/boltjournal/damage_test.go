package boltjournal_test

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/boltjournal"
	"example.com/wideberth/mapstore/journal/journaltest"
	bolt "go.etcd.io/bbolt"
)

func open(t *testing.T, path string) *boltjournal.Journal {
	t.Helper()
	j, err := boltjournal.Open(path, boltjournal.Options{})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { j.Close() })
	return j
}

// filled makes a journal of two floors with n records each, a request id on every
// second one, and a snapshot half-way, and closes it.
func filled(t *testing.T, n int) (path string, recs map[string][]journal.Record) {
	t.Helper()
	path = filepath.Join(t.TempDir(), "floors.journal")
	j := open(t, path)
	recs = map[string][]journal.Record{}
	for _, floor := range []string{"dock", "hall"} {
		var prev journal.Record
		for v := 1; v <= n; v++ {
			r := journaltest.Next(floor, prev)
			if v%2 == 0 {
				r.RequestID = fmt.Sprintf("id-%d", v)
			}
			prev = r.Seal()
			if err := j.Append(t.Context(), prev); err != nil {
				t.Fatal(err)
			}
			recs[floor] = append(recs[floor], prev)
		}
		half := recs[floor][n/2-1]
		if err := j.PutSnapshot(t.Context(), journal.Snapshot{
			Floor: floor, Version: half.Version, Digest: half.Digest, Content: []byte("content of " + floor)}); err != nil {
			t.Fatal(err)
		}
	}
	if err := j.Close(); err != nil {
		t.Fatal(err)
	}
	return path, recs
}

// readAll reads everything and compares it with what was appended. It gives the
// first error; a difference without an error fails the test.
func readAll(t *testing.T, path string, recs map[string][]journal.Record) error {
	t.Helper()
	j, err := boltjournal.Open(path, boltjournal.Options{})
	if err != nil {
		return err
	}
	defer j.Close()
	var errs []error
	ids, err := j.Floors(t.Context())
	errs = append(errs, err)
	if err == nil && len(ids) != len(recs) {
		// A damaged name of a floor: what is kept under it must not pass for its own.
		for _, id := range ids {
			if recs[id] == nil {
				_, err := j.Head(t.Context(), id)
				errs = append(errs, err)
			}
		}
	}
	for floor, want := range recs {
		head, err := j.Head(t.Context(), floor)
		errs = append(errs, err)
		if err == nil && head == 0 {
			// The floor's name was damaged; the other name must be refused.
			for _, id := range ids {
				if recs[id] == nil {
					_, err := j.Head(t.Context(), id)
					errs = append(errs, err)
				}
			}
			if errors.Join(errs...) == nil {
				t.Errorf("floor %s is gone without an error", floor)
			}
			continue
		}
		if err == nil && head != int64(len(want)) {
			t.Errorf("head of %s is %d, want %d, without an error", floor, head, len(want))
		}
		n := 0
		err = journal.Walk(t.Context(), j, floor, 1, 0, func(r *journal.Record) error {
			if n >= len(want) || r.Hash != want[n].Hash || !bytes.Equal(r.Payload, want[n].Payload) || r.Reason != want[n].Reason {
				t.Errorf("record %d of %s is another one, without an error", n+1, floor)
			}
			n++
			return nil
		})
		errs = append(errs, err)
		if err == nil && n != len(want) {
			t.Errorf("%d records of %s, want %d, without an error", n, floor, len(want))
		}
		for _, r := range want {
			if r.RequestID == "" {
				continue
			}
			v, err := j.Find(t.Context(), floor, r.RequestID)
			errs = append(errs, err)
			if err == nil && v != r.Version {
				t.Errorf("request id %q of %s leads to %d, want %d, without an error", r.RequestID, floor, v, r.Version)
			}
		}
		s, ok, err := j.Latest(t.Context(), floor, int64(len(want)))
		errs = append(errs, err)
		if ok && string(s.Content) != "content of "+floor { // one that is gone costs time, nothing else
			t.Errorf("snapshot of %s is %q, without an error", floor, s.Content)
		}
	}
	return errors.Join(errs...)
}

// TestFlippedBytesNeverChangeRecords flips bytes all over a journal file. What is
// read afterwards is what was appended, or an error: never anything else.
func TestFlippedBytesNeverChangeRecords(t *testing.T) {
	path, recs := filled(t, 4)
	if err := readAll(t, path, recs); err != nil {
		t.Fatal(err)
	}
	whole, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	step := 29
	if os.Getenv("WIDEBERTH_SLOW") != "" {
		step = 1
	}
	damaged := filepath.Join(t.TempDir(), "damaged.journal")
	tried, detected := 0, 0
	for i := 0; i < len(whole); i += step {
		if whole[i] == 0 && i%7 != 0 {
			continue // mostly unused room
		}
		b := bytes.Clone(whole)
		b[i] ^= 1 << (i % 8)
		if err := os.WriteFile(damaged, b, 0o600); err != nil {
			t.Fatal(err)
		}
		tried++
		if err := readAll(t, damaged, recs); err != nil {
			detected++
			if !strings.Contains(err.Error(), damaged) {
				t.Errorf("byte %d: the error does not name the file: %v", i, err)
			}
		}
		if t.Failed() {
			t.Fatalf("with byte %d of %d flipped", i, len(whole))
		}
	}
	t.Logf("%d bytes flipped: %d detected, %d without effect, 0 changed", tried, detected, tried-detected)
	if detected == 0 {
		t.Error("no flip hit anything")
	}
}

// edit changes the file behind the journal's back.
func edit(t *testing.T, path string, fn func(floor func(id, part string) *bolt.Bucket) error) {
	t.Helper()
	db, err := bolt.Open(path, 0o600, nil)
	if err != nil {
		t.Fatal(err)
	}
	if err := db.Update(func(tx *bolt.Tx) error {
		return fn(func(id, part string) *bolt.Bucket {
			b := tx.Bucket([]byte("floors")).Bucket([]byte(id))
			if part == "" {
				return b
			}
			return b.Bucket([]byte(part))
		})
	}); err != nil {
		t.Fatal(err)
	}
	if err := db.Close(); err != nil {
		t.Fatal(err)
	}
}

func key(v int64) []byte { return binary.BigEndian.AppendUint64(nil, uint64(v)) }

// TestDamageIsNamed damages a floor of eight records in ways that bbolt's pages do
// not notice, and wants the floor refused, the place named, and the other floor
// untouched.
func TestDamageIsNamed(t *testing.T) {
	flip := func(b *bolt.Bucket, k []byte) error {
		v := bytes.Clone(b.Get(k))
		v[len(v)-40] ^= 4
		return b.Put(k, v)
	}
	for _, c := range []struct {
		name    string
		damage  func(floor func(id, part string) *bolt.Bucket) error
		good    int64 // the newest version up to which all records check out
		headBad bool  // whether Head notices
		words   string
	}{
		{"NewestRecord", func(f func(id, part string) *bolt.Bucket) error { return flip(f("hall", "records"), key(8)) },
			7, true, "version 8, the newest: record: checksum is"},
		{"MiddleRecord", func(f func(id, part string) *bolt.Bucket) error { return flip(f("hall", "records"), key(5)) },
			4, false, "version 5, with 3 newer behind it: record: checksum is"},
		{"NewestGone", func(f func(id, part string) *bolt.Bucket) error { return f("hall", "records").Delete(key(8)) },
			7, true, "version 8, the newest: the record is missing"},
		{"MiddleGone", func(f func(id, part string) *bolt.Bucket) error { return f("hall", "records").Delete(key(5)) },
			4, false, "version 5, with 3 newer behind it: the record is missing"},
		{"RecordOfAnotherFloor", func(f func(id, part string) *bolt.Bucket) error {
			return f("hall", "records").Put(key(5), bytes.Clone(f("dock", "records").Get(key(5))))
		}, 4, false, `version 5, with 3 newer behind it: the record says that it is version 5 of floor "dock"`},
		{"RecordOfAnotherChain", func(f func(id, part string) *bolt.Bucket) error {
			r, err := journal.DecodeRecord(f("hall", "records").Get(key(5)))
			if err != nil {
				return err
			}
			r.Reason = "forged"
			b, err := journal.EncodeRecord(r.Seal())
			if err != nil {
				return err
			}
			return f("hall", "records").Put(key(5), b)
		}, 5, false, "version 6, with 2 newer behind it: the record is chained to another record than version 5"},
		{"NewestReplaced", func(f func(id, part string) *bolt.Bucket) error {
			r, err := journal.DecodeRecord(f("hall", "records").Get(key(8)))
			if err != nil {
				return err
			}
			r.Reason = "forged"
			b, err := journal.EncodeRecord(r.Seal())
			if err != nil {
				return err
			}
			return f("hall", "records").Put(key(8), b)
		}, 7, true, "version 8, the newest: the record is not the one that was appended last"},
		{"RecordBehindTheNewest", func(f func(id, part string) *bolt.Bucket) error {
			return f("hall", "records").Put(key(9), bytes.Clone(f("hall", "records").Get(key(8))))
		}, 8, true, "there is a record behind the newest"},
		{"Head", func(f func(id, part string) *bolt.Bucket) error { return flip(f("hall", ""), []byte("head")) },
			0, true, "the entry that names the newest version has a wrong checksum"},
		{"RequestIDGone", func(f func(id, part string) *bolt.Bucket) error {
			return f("hall", "requests").Delete([]byte("id-4"))
		}, 0, true, "the request ids are not those that were appended: 3 are kept, 4 were"},
		{"RequestIDMoved", func(f func(id, part string) *bolt.Bucket) error {
			return f("hall", "requests").Put([]byte("id-4"), key(5))
		}, 0, true, "the request ids are not those that were appended"},
	} {
		t.Run(c.name, func(t *testing.T) {
			path, recs := filled(t, 8)
			edit(t, path, c.damage)
			j := open(t, path)
			_, err := j.Head(t.Context(), "hall")
			if c.headBad != errors.Is(err, journal.ErrCorrupt) {
				t.Errorf("head: %v", err)
			}
			good, err := journal.Verify(t.Context(), j, "hall")
			if good != c.good || !errors.Is(err, journal.ErrCorrupt) {
				t.Errorf("verify: good up to %d, %v; want %d", good, err, c.good)
			}
			if err == nil || !strings.Contains(err.Error(), c.words) ||
				!strings.Contains(err.Error(), path) || !strings.Contains(err.Error(), `floor "hall"`) {
				t.Errorf("error is %q, want the path, the floor and %q", err, c.words)
			}
			if good, err := journal.Verify(t.Context(), j, "dock"); good != 8 || err != nil {
				t.Errorf("the other floor: good up to %d, %v", good, err)
			}
			if c.headBad {
				next := journaltest.Next("hall", recs["hall"][7])
				if err := j.Append(t.Context(), next); !errors.Is(err, journal.ErrCorrupt) {
					t.Errorf("appending to a floor with damage at its end: %v", err)
				}
			}
		})
	}
}

func TestDamagedSnapshotNamesItsVersion(t *testing.T) {
	path, recs := filled(t, 8)
	edit(t, path, func(f func(id, part string) *bolt.Bucket) error {
		b := f("hall", "snapshots")
		v := bytes.Clone(b.Get(key(4)))
		v[len(v)-1] ^= 1
		return b.Put(key(4), v)
	})
	j := open(t, path)
	_, _, err := j.Latest(t.Context(), "hall", 8)
	c, ok := errors.AsType[*journal.CorruptError](err)
	if !ok || c.Version != 4 || c.Floor != "hall" || c.File != path {
		t.Errorf("latest: %v", err)
	}
	if good, err := journal.Verify(t.Context(), j, "hall"); good != 8 || !errors.Is(err, journal.ErrCorrupt) {
		t.Errorf("verify: good up to %d, %v", good, err)
	}
	// Records are unharmed, and a new snapshot mends it.
	if err := j.PutSnapshot(t.Context(), journal.Snapshot{Floor: "hall", Version: 4, Digest: recs["hall"][3].Digest}); err != nil {
		t.Fatal(err)
	}
	if good, err := journal.Verify(t.Context(), j, "hall"); good != 8 || err != nil {
		t.Errorf("verify: good up to %d, %v", good, err)
	}
}

// TestDamagedLeadingPage damages the newer of the two pages that name the file's
// state. bbolt alone would go back by one commit without a word.
func TestDamagedLeadingPage(t *testing.T) {
	path, recs := filled(t, 4)
	j := open(t, path)
	if err := j.Append(t.Context(), journaltest.Next("hall", recs["hall"][3])); err != nil {
		t.Fatal(err)
	}
	if err := j.Close(); err != nil {
		t.Fatal(err)
	}
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	newer, transaction := 0, func(page int) uint64 { return binary.NativeEndian.Uint64(b[page*os.Getpagesize()+64:]) }
	if transaction(1) > transaction(0) {
		newer = 1
	}
	b[newer*os.Getpagesize()+64] ^= 1
	if err := os.WriteFile(path, b, 0o600); err != nil {
		t.Fatal(err)
	}
	_, err = boltjournal.Open(path, boltjournal.Options{})
	if !errors.Is(err, boltjournal.ErrLostCommit) || !errors.Is(err, journal.ErrCorrupt) || !strings.Contains(err.Error(), path) {
		t.Fatalf("open: %v", err)
	}
	j, err = boltjournal.Open(path, boltjournal.Options{AcceptLostCommit: true})
	if err != nil {
		t.Fatal(err)
	}
	defer j.Close()
	if head, err := j.Head(t.Context(), "hall"); head != 4 || err != nil {
		t.Errorf("opened as it is, the head is %d, %v; want 4, the newest but one", head, err)
	}
	if err := j.Accepted(); !errors.Is(err, boltjournal.ErrLostCommit) || !strings.Contains(err.Error(), path) {
		t.Errorf("accepted %v, want the damage and the file", err)
	}
}

// TestCutOffFile cuts a journal at every page: never a panic, never other records.
func TestCutOffFile(t *testing.T) {
	path, recs := filled(t, 4)
	whole, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	cut := filepath.Join(t.TempDir(), "cut.journal")
	for n := 1; n < len(whole); n += 4096 {
		if err := os.WriteFile(cut, whole[:n], 0o600); err != nil {
			t.Fatal(err)
		}
		err := readAll(t, cut, recs)
		if err != nil && !errors.Is(err, journal.ErrCorrupt) && !errors.Is(err, boltjournal.ErrNotJournal) {
			t.Errorf("cut to %d bytes: %v", n, err)
		}
		if err == nil && n < len(whole)/4 {
			t.Errorf("cut to %d of %d bytes: no error", n, len(whole))
		}
	}
}

func TestNewerFilesAreRefused(t *testing.T) {
	path, _ := filled(t, 2)
	db, err := bolt.Open(path, 0o600, nil)
	if err != nil {
		t.Fatal(err)
	}
	v := append([]byte("wideberth journal\x00"), 7, 0, 0, 0)
	v = binary.LittleEndian.AppendUint32(v, crc32.Checksum(v, crc32.MakeTable(crc32.Castagnoli)))
	if err := db.Update(func(tx *bolt.Tx) error { return tx.Bucket([]byte("wideberth")).Put([]byte("format"), v) }); err != nil {
		t.Fatal(err)
	}
	if err := db.Close(); err != nil {
		t.Fatal(err)
	}
	_, err = boltjournal.Open(path, boltjournal.Options{})
	f, ok := errors.AsType[*journal.FormatError](err)
	if !ok || f.Found != 7 || f.Known != 1 || f.File != path {
		t.Errorf("format 7: %v", err)
	}
}
