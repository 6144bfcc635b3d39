package mapstore

import (
	"encoding/binary"
	"fmt"
	"math"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/mapstore/journal"
)

// entryFormat is the encoding of a record's payload that this program writes, and
// the newest that it reads.
const entryFormat = 1

// entry is the payload of a record: what the version's VersionInfo says beyond the
// record's own fields, and the body: settings of a created version, edits of a
// patched one, nothing for a restored one. The touched rectangle is kept because
// working it out takes the content of the version before.
//
// Encoded: format (1 byte), edit count, restored version (uvarints), 1 and four
// float64 of the touched rectangle or 0 when it is empty, the body.
type entry struct {
	edits    int
	restored int64
	touched  geom.Rect
	body     []byte
}

func (e *entry) encode() []byte {
	b := make([]byte, 0, 56+len(e.body))
	b = append(b, entryFormat)
	b = binary.AppendUvarint(b, uint64(e.edits))
	b = binary.AppendUvarint(b, uint64(e.restored))
	if e.touched.IsEmpty() {
		b = append(b, 0)
	} else {
		b = append(b, 1)
		for _, v := range [...]float64{e.touched.Min.X, e.touched.Min.Y, e.touched.Max.X, e.touched.Max.Y} {
			b = binary.LittleEndian.AppendUint64(b, math.Float64bits(v))
		}
	}
	return append(b, e.body...)
}

// decodeEntry reads r's payload. The entry's body is a part of it.
func decodeEntry(r *journal.Record) (entry, error) {
	bad := func(what string) (entry, error) {
		return entry{}, &journal.CorruptError{Floor: r.Floor, Version: r.Version, What: "payload: " + what}
	}
	b := r.Payload
	if len(b) == 0 {
		return bad("empty")
	}
	if b[0] > entryFormat {
		return entry{}, &journal.FormatError{What: "payload", Found: int(b[0]), Known: entryFormat}
	}
	if b[0] == 0 {
		return bad("format 0 was never written")
	}
	b = b[1:]
	var n [2]uint64
	for i := range n {
		v, size := binary.Uvarint(b)
		if size <= 0 || v > math.MaxInt64 {
			return bad("ends within a field")
		}
		n[i], b = v, b[size:]
	}
	e := entry{edits: int(n[0]), restored: int64(n[1]), touched: geom.EmptyRect()}
	if len(b) < 1 {
		return bad("ends within a field")
	}
	has := b[0]
	b = b[1:]
	if has != 0 {
		if len(b) < 32 {
			return bad("ends within a field")
		}
		f := func(i int) float64 { return math.Float64frombits(binary.LittleEndian.Uint64(b[8*i:])) }
		e.touched = geom.Rect{Min: geom.Point{X: f(0), Y: f(1)}, Max: geom.Point{X: f(2), Y: f(3)}}
		b = b[32:]
	}
	e.body = b
	if has > 1 || (has == 1) == e.touched.IsEmpty() || n[0] > floor.MaxEdits {
		return bad("a field is out of range")
	}
	if (r.Kind == journal.Restored) != (e.restored > 0) || e.restored >= r.Version {
		return bad(fmt.Sprintf("restores version %d", e.restored))
	}
	return e, nil
}

// infoOf is the VersionInfo of a record.
func infoOf(r *journal.Record, e *entry) VersionInfo {
	return VersionInfo{
		Floor: r.Floor, Version: r.Version, Digest: r.Digest, Kind: r.Kind, Base: r.Base,
		Author: r.Author, Reason: r.Reason, RequestID: r.RequestID,
		Time:      time.UnixMicro(r.TimeUs).UTC(),
		EditCount: e.edits, Touched: e.touched, Restored: e.restored,
	}
}

// replay carries out a patched or created record on the content before it and checks
// the digest of what comes of it.
func replay(r *journal.Record, e *entry, before *floor.Map) (*floor.Map, error) {
	bad := func(format string, args ...any) error {
		return &journal.CorruptError{Floor: r.Floor, Version: r.Version, What: fmt.Sprintf(format, args...)}
	}
	var m *floor.Map
	switch r.Kind {
	case journal.Created:
		set, err := floor.DecodeSettings(e.body)
		if err != nil {
			return nil, bad("settings: %v", err)
		}
		if m, err = floor.New(set); err != nil {
			return nil, bad("settings: %v", err)
		}
	case journal.Patched:
		edits, err := floor.DecodeEdits(e.body)
		if err != nil {
			return nil, bad("edits: %v", err)
		}
		if m, err = before.Apply(edits); err != nil {
			return nil, bad("edits cannot be carried out: %v", err)
		}
	default:
		return nil, bad("kind %d cannot be carried out", r.Kind)
	}
	if err := sameDigest(r, m); err != nil {
		return nil, err
	}
	return m, nil
}

func sameDigest(r *journal.Record, m *floor.Map) error {
	if d := m.Digest(); d != r.Digest {
		return &journal.CorruptError{Floor: r.Floor, Version: r.Version,
			What: fmt.Sprintf("carrying out the record gives content with digest %x, it says %x", d[:8], r.Digest[:8])}
	}
	return nil
}
