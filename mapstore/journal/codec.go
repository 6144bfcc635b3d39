package journal

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"hash/crc32"
)

// Format is the number of the encoding that EncodeRecord and EncodeSnapshot write,
// and the newest that the decoders read.
const Format = 1

// Every stored value starts with the same header, in every format:
//
//	bytes  0..3   magic "WBJ1"
//	bytes  4..5   what it is: 1 record, 2 snapshot
//	bytes  6..7   format
//	bytes  8..11  length of the body
//	bytes 12..15  CRC-32C of bytes 0..11 and the body
//
// Numbers are little-endian. The checksum is looked at before the format, so that
// a flipped bit is called damage and not a newer format. The body of a record is
//
//	version, base, time   8 bytes each
//	kind                  1
//	digest, previous hash 32 each
//	floor, author, reason, request id: 2 bytes of length and the text
//	payload               4 bytes of length and the bytes
//	hash                  32
//
// and of a snapshot: version 8, digest 32, floor (2 + text), content (4 + bytes).
// There is one encoding of each value, so decoding and encoding again gives the
// same bytes.
const (
	magic       = "WBJ1"
	headerBytes = 16

	isRecord   = 1
	isSnapshot = 2
)

// hashPrefix keeps record hashes apart from every other use of SHA-256.
const hashPrefix = "wideberth journal record 1\x00"

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// Seal gives r with Hash set to the SHA-256 over its other fields.
func (r Record) Seal() Record {
	r.Hash = hashOf(r.appendFields(nil))
	return r
}

func hashOf(fields []byte) [32]byte {
	h := sha256.New()
	h.Write([]byte(hashPrefix))
	h.Write(fields)
	return [32]byte(h.Sum(nil))
}

func (r *Record) checkBounds() error {
	switch {
	case r.Floor == "":
		return fmt.Errorf("%w: floor is empty", ErrInvalid)
	case r.Version < 1:
		return fmt.Errorf("%w: version is %d, wanted 1 or more", ErrInvalid, r.Version)
	case r.Kind < Created || r.Kind > Restored:
		return fmt.Errorf("%w: kind is %d, wanted %d to %d", ErrInvalid, r.Kind, Created, Restored)
	case len(r.Payload) > MaxPayloadBytes:
		return fmt.Errorf("%w: payload has %d bytes, at most %d are kept", ErrInvalid, len(r.Payload), MaxPayloadBytes)
	}
	for _, t := range []struct{ name, text string }{
		{"floor", r.Floor}, {"author", r.Author}, {"reason", r.Reason}, {"request id", r.RequestID},
	} {
		if len(t.text) > MaxTextBytes {
			return fmt.Errorf("%w: %s has %d bytes, at most %d are kept", ErrInvalid, t.name, len(t.text), MaxTextBytes)
		}
	}
	return nil
}

func (r *Record) appendFields(b []byte) []byte {
	b = binary.LittleEndian.AppendUint64(b, uint64(r.Version))
	b = binary.LittleEndian.AppendUint64(b, uint64(r.Base))
	b = binary.LittleEndian.AppendUint64(b, uint64(r.TimeUs))
	b = append(b, byte(r.Kind))
	b = append(b, r.Digest[:]...)
	b = append(b, r.Prev[:]...)
	for _, t := range []string{r.Floor, r.Author, r.Reason, r.RequestID} {
		b = binary.LittleEndian.AppendUint16(b, uint16(len(t)))
		b = append(b, t...)
	}
	b = binary.LittleEndian.AppendUint32(b, uint32(len(r.Payload)))
	return append(b, r.Payload...)
}

// EncodeRecord is a record as it is stored. The error is an ErrInvalid when a field is
// out of bounds or r is not sealed: no journal takes it then.
func EncodeRecord(r Record) ([]byte, error) {
	if err := r.checkBounds(); err != nil {
		return nil, err
	}
	text := len(r.Floor) + len(r.Author) + len(r.Reason) + len(r.RequestID)
	b := make([]byte, headerBytes, headerBytes+133+text+len(r.Payload))
	b = r.appendFields(b)
	if hashOf(b[headerBytes:]) != r.Hash {
		return nil, fmt.Errorf("%w: hash is not that of the record; seal it", ErrInvalid)
	}
	return putHeader(append(b, r.Hash[:]...), isRecord), nil
}

// DecodeRecord reads what EncodeRecord wrote and checks checksum and hash. The
// error is a *CorruptError or a *FormatError. The record shares no memory with b.
// It allocates no more than b is long.
func DecodeRecord(b []byte) (Record, error) {
	d, err := openHeader(b, isRecord)
	if err != nil {
		return Record{}, err
	}
	body := d.rest
	r := Record{Version: d.int64(), Base: d.int64(), TimeUs: d.int64()}
	if k := d.take(1); k != nil {
		r.Kind = Kind(k[0])
	}
	r.Digest, r.Prev = d.hash(), d.hash()
	r.Floor, r.Author, r.Reason, r.RequestID = d.text(), d.text(), d.text(), d.text()
	r.Payload = d.bytes()
	fields := body[:len(body)-len(d.rest)]
	r.Hash = d.hash()
	if err := d.end(); err != nil {
		return Record{}, err
	}
	if hashOf(fields) != r.Hash {
		return Record{}, &CorruptError{Floor: r.Floor, Version: r.Version, What: "hash does not match the record"}
	}
	if err := r.checkBounds(); err != nil {
		return Record{}, &CorruptError{Floor: r.Floor, Version: r.Version, What: err.Error()}
	}
	return r, nil
}

// Check says whether a journal may take s; the error is an ErrInvalid.
func (s *Snapshot) Check() error {
	switch {
	case s.Floor == "" || len(s.Floor) > MaxTextBytes:
		return fmt.Errorf("%w: floor has %d bytes, wanted 1 to %d", ErrInvalid, len(s.Floor), MaxTextBytes)
	case s.Version < 1:
		return fmt.Errorf("%w: version is %d, wanted 1 or more", ErrInvalid, s.Version)
	case len(s.Content) > MaxSnapshotBytes:
		return fmt.Errorf("%w: content has %d bytes, at most %d are kept", ErrInvalid, len(s.Content), MaxSnapshotBytes)
	}
	return nil
}

// EncodeSnapshot is a snapshot as it is stored. The error is an ErrInvalid, as from
// Snapshot.Check.
func EncodeSnapshot(s Snapshot) ([]byte, error) {
	if err := s.Check(); err != nil {
		return nil, err
	}
	b := make([]byte, headerBytes, headerBytes+46+len(s.Floor)+len(s.Content))
	b = binary.LittleEndian.AppendUint64(b, uint64(s.Version))
	b = append(b, s.Digest[:]...)
	b = binary.LittleEndian.AppendUint16(b, uint16(len(s.Floor)))
	b = append(b, s.Floor...)
	b = binary.LittleEndian.AppendUint32(b, uint32(len(s.Content)))
	return putHeader(append(b, s.Content...), isSnapshot), nil
}

// DecodeSnapshot reads what EncodeSnapshot wrote and checks the checksum. Whether
// the content has the digest is for the reader of the content to check. Errors and
// memory are as for DecodeRecord.
func DecodeSnapshot(b []byte) (Snapshot, error) {
	d, err := openHeader(b, isSnapshot)
	if err != nil {
		return Snapshot{}, err
	}
	s := Snapshot{Version: d.int64(), Digest: d.hash(), Floor: d.text(), Content: d.bytes()}
	if err := d.end(); err != nil {
		return Snapshot{}, err
	}
	if err := s.Check(); err != nil {
		return Snapshot{}, &CorruptError{Floor: s.Floor, Version: s.Version, What: err.Error()}
	}
	return s, nil
}

// putHeader fills in the first headerBytes of b.
func putHeader(b []byte, what uint16) []byte {
	copy(b, magic)
	binary.LittleEndian.PutUint16(b[4:], what)
	binary.LittleEndian.PutUint16(b[6:], Format)
	binary.LittleEndian.PutUint32(b[8:], uint32(len(b)-headerBytes))
	binary.LittleEndian.PutUint32(b[12:], checksum(b))
	return b
}

func checksum(b []byte) uint32 {
	return crc32.Update(crc32.Checksum(b[:12], castagnoli), castagnoli, b[headerBytes:])
}

// openHeader checks the header and gives a decoder of the body.
func openHeader(b []byte, what uint16) (*decoder, error) {
	name := "record"
	if what == isSnapshot {
		name = "snapshot"
	}
	bad := func(format string, args ...any) (*decoder, error) {
		return nil, &CorruptError{What: name + ": " + fmt.Sprintf(format, args...)}
	}
	if len(b) < headerBytes {
		return bad("%d bytes, shorter than a header", len(b))
	}
	if string(b[:4]) != magic {
		return bad("starts with %q, wanted %q", b[:4], magic)
	}
	if n := binary.LittleEndian.Uint32(b[8:]); uint64(n) != uint64(len(b)-headerBytes) {
		return bad("body has %d bytes, its header says %d", len(b)-headerBytes, n)
	}
	if stored, sum := binary.LittleEndian.Uint32(b[12:]), checksum(b); stored != sum {
		return bad("checksum is %08x, its header says %08x", sum, stored)
	}
	if got := binary.LittleEndian.Uint16(b[4:]); got != what {
		return bad("is of kind %d, wanted %d", got, what)
	}
	f := binary.LittleEndian.Uint16(b[6:])
	if f > Format {
		return nil, &FormatError{What: name, Found: int(f), Known: Format}
	}
	if f == 0 {
		return bad("format 0 was never written")
	}
	return &decoder{name: name, rest: b[headerBytes:]}, nil
}

// decoder takes a body apart. After the first shortage everything it gives is zero
// and end reports it.
type decoder struct {
	name  string
	rest  []byte
	short bool
}

func (d *decoder) take(n int) []byte {
	if d.short || n > len(d.rest) {
		d.short = true
		return nil
	}
	b := d.rest[:n:n]
	d.rest = d.rest[n:]
	return b
}

func (d *decoder) int64() int64 {
	if b := d.take(8); b != nil {
		return int64(binary.LittleEndian.Uint64(b))
	}
	return 0
}

func (d *decoder) hash() (h [32]byte) {
	copy(h[:], d.take(32))
	return h
}

func (d *decoder) text() string {
	if b := d.take(2); b != nil {
		return string(d.take(int(binary.LittleEndian.Uint16(b))))
	}
	return ""
}

func (d *decoder) bytes() []byte {
	if b := d.take(4); b != nil {
		return append([]byte(nil), d.take(int(binary.LittleEndian.Uint32(b)))...)
	}
	return nil
}

func (d *decoder) end() error {
	if d.short {
		return &CorruptError{What: d.name + ": ends within a field"}
	}
	if len(d.rest) > 0 {
		return &CorruptError{What: fmt.Sprintf("%s: %d bytes after the last field", d.name, len(d.rest))}
	}
	return nil
}
