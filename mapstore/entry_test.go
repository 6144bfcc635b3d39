package mapstore

import (
	"bytes"
	"errors"
	"testing"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/mapstore/journal"
)

// FuzzDecodeEntry decodes payloads: what is accepted means what it says, and nothing
// panics.
func FuzzDecodeEntry(f *testing.F) {
	for _, e := range []entry{
		{touched: geom.EmptyRect(), body: []byte("settings")},
		{edits: 3, touched: geom.Rect{Max: geom.Point{X: 1_500_000, Y: 1}}, body: []byte("edits")},
		{restored: 4, touched: geom.EmptyRect()},
	} {
		f.Add(e.encode(), e.restored > 0)
	}
	f.Add([]byte{2}, false)
	f.Add([]byte{1, 0x80}, false)
	f.Fuzz(func(t *testing.T, payload []byte, restored bool) {
		r := journal.Record{Floor: "hall", Version: 9, Kind: journal.Patched, Payload: payload}
		if restored {
			r.Kind = journal.Restored
		}
		e, err := decodeEntry(&r)
		if err != nil {
			if !errors.Is(err, journal.ErrCorrupt) && !errors.Is(err, journal.ErrFormat) {
				t.Fatalf("error is neither damage nor format: %v", err)
			}
			return
		}
		r.Payload = e.encode()
		again, err := decodeEntry(&r)
		if err != nil || again.edits != e.edits || again.restored != e.restored || again.touched != e.touched || !bytes.Equal(again.body, e.body) {
			t.Fatalf("encoded again, %+v became %+v, %v", e, again, err)
		}
		if (e.restored > 0) != restored || e.restored >= r.Version || e.edits < 0 {
			t.Fatalf("accepted %+v for %+v", e, r)
		}
	})
}
