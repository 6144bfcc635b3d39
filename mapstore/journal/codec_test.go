package journal_test

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"hash/crc32"
	"testing"

	"example.com/wideberth/mapstore/journal"
	"pgregory.net/rapid"
)

func example() journal.Record {
	return journal.Record{
		Floor: "hall", Version: 12, Kind: journal.Patched, Base: 11, Author: "night shift",
		Reason: "spill at the tulip buckets", RequestID: "spill-7", TimeUs: 1_700_000_000_123_456,
		Payload: []byte{1, 2, 3}, Digest: [32]byte{4}, Prev: [32]byte{5},
	}.Seal()
}

// TestRecordEncodingIsFixed pins the bytes on disk: a journal written by this
// program must be read by every later one.
func TestRecordEncodingIsFixed(t *testing.T) {
	b, err := journal.EncodeRecord(example())
	if err != nil {
		t.Fatal(err)
	}
	var body []byte
	for _, n := range []uint64{12, 11, 1_700_000_000_123_456} {
		body = binary.LittleEndian.AppendUint64(body, n)
	}
	body = append(body, 2)
	body = append(append(body, 4), make([]byte, 31)...)
	body = append(append(body, 5), make([]byte, 31)...)
	for _, s := range []string{"hall", "night shift", "spill at the tulip buckets", "spill-7"} {
		body = append(binary.LittleEndian.AppendUint16(body, uint16(len(s))), s...)
	}
	body = append(body, 3, 0, 0, 0, 1, 2, 3)
	hash := sha256.Sum256(append([]byte("wideberth journal record 1\x00"), body...))
	body = append(body, hash[:]...)
	want := append([]byte("WBJ1\x01\x00\x01\x00"), binary.LittleEndian.AppendUint32(nil, uint32(len(body)))...)
	sum := crc32.Checksum(append(bytes.Clone(want), body...), crc32.MakeTable(crc32.Castagnoli))
	want = append(binary.LittleEndian.AppendUint32(want, sum), body...)
	if !bytes.Equal(b, want) {
		t.Errorf("encoding is\n%x, want\n%x", b, want)
	}
}

func TestDecodeDetectsEveryFlippedByte(t *testing.T) {
	rec, err := journal.EncodeRecord(example())
	if err != nil {
		t.Fatal(err)
	}
	snap, err := journal.EncodeSnapshot(journal.Snapshot{Floor: "hall", Version: 12, Content: []byte("content")})
	if err != nil {
		t.Fatal(err)
	}
	for name, c := range map[string]struct {
		value  []byte
		decode func([]byte) error
	}{
		"record":   {rec, func(b []byte) error { _, err := journal.DecodeRecord(b); return err }},
		"snapshot": {snap, func(b []byte) error { _, err := journal.DecodeSnapshot(b); return err }},
	} {
		if err := c.decode(c.value); err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		for i := range c.value {
			for _, flip := range []byte{1, 0x80, 0xff} {
				b := bytes.Clone(c.value)
				b[i] ^= flip
				if err := c.decode(b); !errors.Is(err, journal.ErrCorrupt) {
					t.Errorf("%s with byte %d flipped by %#x: %v", name, i, flip, err)
				}
			}
		}
		for n := range c.value {
			if err := c.decode(c.value[:n]); !errors.Is(err, journal.ErrCorrupt) {
				t.Errorf("%s cut to %d bytes: %v", name, n, err)
			}
		}
		if err := c.decode(append(bytes.Clone(c.value), 0)); !errors.Is(err, journal.ErrCorrupt) {
			t.Errorf("%s with a byte more: %v", name, err)
		}
	}
	if _, err := journal.DecodeRecord(snap); !errors.Is(err, journal.ErrCorrupt) {
		t.Errorf("a snapshot decoded as a record: %v", err)
	}
}

// withFormat is an encoded value as a program of that format would have written it.
func withFormat(b []byte, format uint16) []byte {
	b = bytes.Clone(b)
	binary.LittleEndian.PutUint16(b[6:], format)
	table := crc32.MakeTable(crc32.Castagnoli)
	sum := crc32.Update(crc32.Checksum(b[:12], table), table, b[16:])
	binary.LittleEndian.PutUint32(b[12:], sum)
	return b
}

func TestNewerFormatIsRefusedByName(t *testing.T) {
	b, err := journal.EncodeRecord(example())
	if err != nil {
		t.Fatal(err)
	}
	_, err = journal.DecodeRecord(withFormat(b, 3))
	f, ok := errors.AsType[*journal.FormatError](err)
	if !ok || !errors.Is(err, journal.ErrFormat) || f.Found != 3 || f.Known != journal.Format {
		t.Errorf("format 3: %v", err)
	}
	if errors.Is(err, journal.ErrCorrupt) {
		t.Error("a newer format is called damage")
	}
	if _, err = journal.DecodeRecord(withFormat(b, 0)); !errors.Is(err, journal.ErrCorrupt) {
		t.Errorf("format 0: %v", err)
	}
}

func TestHashCoversEveryField(t *testing.T) {
	seen := map[[32]byte]string{example().Hash: "example"}
	for name, change := range map[string]func(*journal.Record){
		"floor":   func(r *journal.Record) { r.Floor = "hal" },
		"version": func(r *journal.Record) { r.Version++ },
		"kind":    func(r *journal.Record) { r.Kind++ },
		"base":    func(r *journal.Record) { r.Base++ },
		"author":  func(r *journal.Record) { r.Author += "s" },
		"reason":  func(r *journal.Record) { r.Reason += "s" },
		"border":  func(r *journal.Record) { r.Author, r.Reason = r.Author+"s", r.Reason[1:] },
		"request": func(r *journal.Record) { r.RequestID = "" },
		"time":    func(r *journal.Record) { r.TimeUs++ },
		"payload": func(r *journal.Record) { r.Payload = []byte{1, 2} },
		"digest":  func(r *journal.Record) { r.Digest[31]++ },
		"prev":    func(r *journal.Record) { r.Prev[31]++ },
	} {
		r := example()
		change(&r)
		h := r.Seal().Hash
		if other, ok := seen[h]; ok {
			t.Errorf("%s and %s have one hash", name, other)
		}
		seen[h] = name
	}
}

// TestSpare replays many runs of snapshots: the bound and the newest are kept, and
// the gap below any version is bounded by its age.
func TestSpare(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		every := rapid.Int64Range(1, 300).Draw(t, "every")
		n := rapid.IntRange(1, 2000).Draw(t, "snapshots")
		var held []int64
		for i := range n {
			held = append(held, int64(i+1)*every)
			v, ok := journal.Spare(held)
			if ok != (len(held) > journal.KeepSnapshots) {
				t.Fatalf("%d held, spare gives %v", len(held), ok)
			}
			if !ok {
				continue
			}
			for i, h := range held {
				if h == v {
					held = append(held[:i:i], held[i+1:]...)
					break
				}
			}
			if len(held) != journal.KeepSnapshots {
				t.Fatalf("version %d, which is to go, is not held", v)
			}
		}
		head := int64(n) * every
		if held[len(held)-1] != head {
			t.Fatalf("newest held is %d, want %d", held[len(held)-1], head)
		}
		// Measured: the worst gap is a little below the age of its lower end. Were the
		// oldest snapshots simply dropped, it would grow without bound.
		below := int64(0)
		for _, h := range held {
			if age := head - below; h-below > age*9/10+every {
				t.Fatalf("gap from %d to %d at head %d: held %v", below, h, head, held)
			}
			below = h
		}
	})
}

func FuzzDecodeRecord(f *testing.F) {
	b, err := journal.EncodeRecord(example())
	if err != nil {
		f.Fatal(err)
	}
	f.Add(b)
	f.Add(withFormat(b, 2))
	f.Add(b[:len(b)-1])
	f.Fuzz(func(t *testing.T, b []byte) {
		if len(b) >= 16 { // get past the header, where the field borders are
			copy(b, "WBJ1\x01\x00")
			binary.LittleEndian.PutUint32(b[8:], uint32(len(b)-16))
			if n := len(b) - 32; n >= 16 {
				hash := sha256.Sum256(append([]byte("wideberth journal record 1\x00"), b[16:n]...))
				copy(b[n:], hash[:])
			}
			b = withFormat(b, 1)
		}
		r, err := journal.DecodeRecord(b)
		if err != nil {
			if !errors.Is(err, journal.ErrCorrupt) {
				t.Fatalf("error is neither damage nor format: %v", err)
			}
			return
		}
		again, err := journal.EncodeRecord(r)
		if err != nil || !bytes.Equal(again, b) {
			t.Fatalf("decoded and encoded again, %x became %x (%v)", b, again, err)
		}
	})
}

func FuzzDecodeSnapshot(f *testing.F) {
	b, err := journal.EncodeSnapshot(journal.Snapshot{Floor: "hall", Version: 3, Content: []byte("content")})
	if err != nil {
		f.Fatal(err)
	}
	f.Add(b)
	f.Fuzz(func(t *testing.T, b []byte) {
		if len(b) >= 16 {
			copy(b, "WBJ1\x02\x00")
			binary.LittleEndian.PutUint32(b[8:], uint32(len(b)-16))
			b = withFormat(b, 1)
		}
		s, err := journal.DecodeSnapshot(b)
		if err != nil {
			if !errors.Is(err, journal.ErrCorrupt) {
				t.Fatalf("error is neither damage nor format: %v", err)
			}
			return
		}
		again, err := journal.EncodeSnapshot(s)
		if err != nil || !bytes.Equal(again, b) {
			t.Fatalf("decoded and encoded again, %x became %x (%v)", b, again, err)
		}
	})
}
