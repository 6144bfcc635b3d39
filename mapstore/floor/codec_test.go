package floor

import (
	"bytes"
	"compress/flate"
	"encoding/binary"
	"errors"
	"math"
	"runtime"
	"slices"
	"testing"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"

	"example.com/wideberth/mapstore/geom"
)

func TestSettingsRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := drawSettings().Draw(t, "settings")
		got, err := DecodeSettings(EncodeSettings(s))
		if err != nil || got != s {
			t.Fatalf("%+v became %+v, %v", s, got, err)
		}
	})
}

// Edits come back as they were, field by field.
func TestEditsRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		m := newModel(drawSettings().Draw(t, "settings"))
		var edits []Edit
		for range rapid.IntRange(0, 6).Draw(t, "n") {
			e := drawEdit(m).Draw(t, "edit")
			m.apply(e)
			edits = append(edits, e)
		}
		data := EncodeEdits(edits)
		got, err := DecodeEdits(data)
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(edits, got); len(edits) > 0 && d != "" {
			t.Fatalf("(-before +after):\n%s", d)
		}
		for n := range len(data) {
			if _, err := DecodeEdits(data[:n]); !errors.Is(err, ErrEncoding) {
				t.Fatalf("the first %d of %d bytes: %v", n, len(data), err)
			}
		}
		if _, err := DecodeEdits(append(data, 0)); !errors.Is(err, ErrEncoding) {
			t.Fatalf("a byte too many: %v", err)
		}
	})
}

func TestNewerFormatsAreRefusedByName(t *testing.T) {
	for what, c := range map[string]struct {
		data   []byte
		decode func([]byte) error
	}{
		"settings": {EncodeSettings(hall), func(b []byte) error { _, err := DecodeSettings(b); return err }},
		"edits":    {EncodeEdits(nil), func(b []byte) error { _, err := DecodeEdits(b); return err }},
		"map":      {mustNew(t, hall).Encode(), func(b []byte) error { _, err := Decode(b); return err }},
	} {
		if err := c.decode(c.data); err != nil {
			t.Errorf("%s: %v", what, err)
		}
		c.data[0] = 2
		want := "floor: damaged or foreign encoding: byte 1: " + what + " format 2, this program reads 1"
		if err := c.decode(c.data); err == nil || err.Error() != want {
			t.Errorf("%s: %v, wanted %s", what, err, want)
		}
		if err := c.decode(nil); !errors.Is(err, ErrEncoding) {
			t.Errorf("%s of no bytes: %v", what, err)
		}
	}
}

// Content that Encode never writes is refused or made canonical.
func TestDecodeChecksContent(t *testing.T) {
	s := Settings{ResolutionUm: 1000, Columns: 100, Rows: 50, CapUm: 1000}
	encode := func(body []byte) []byte {
		b := appendSettings([]byte{mapFormat}, s)
		return appendPacked(binary.AppendUvarint(b, uint64(len(body))), body)
	}
	dense := func(change func(c *blockCells)) []byte {
		var c blockCells
		change(&c)
		b := make([]byte, 1024)
		c.put(b)
		return append([]byte{tagDense}, b...)
	}
	free := []byte{tagUniform, byte(Free)}
	cat := func(parts ...[]byte) []byte { return slices.Concat(parts...) }
	feature := func(f *Feature) []byte { return appendFeature(nil, f) }
	station := func(name string) []byte { return feature(&Feature{Name: name, Kind: Station}) }
	for _, c := range []struct {
		name string
		body []byte
		ok   bool
	}{
		{"all free", cat(free, []byte{0}), true},
		{"two equal kids, not canonical", cat([]byte{tagMixed}, free, free, []byte{0}), true},
		{"a dense block of one value, not canonical", cat([]byte{tagMixed}, dense(func(*blockCells) {}), free, []byte{0}), true},
		{"occupancy 3", []byte{tagUniform, 3, 0}, false},
		{"dense above a block", cat(dense(func(*blockCells) {}), []byte{0}), false},
		{"mixed below a block", cat([]byte{tagMixed, tagMixed}, free, free, free, free, free, []byte{0}), false},
		{"unknown tag", []byte{9, 0}, false},
		{"both planes", cat([]byte{tagMixed}, dense(func(c *blockCells) { c.occupied[0], c.unknown[0] = 1, 1 }), free, []byte{0}), false},
		{"cells right of the floor", cat([]byte{tagMixed}, free, dense(func(c *blockCells) { c.occupied[0] = 1 << 36 }), []byte{0}), false},
		{"cells above the floor", cat([]byte{tagMixed}, free, dense(func(c *blockCells) { c.unknown[50] = 1 }), []byte{0}), false},
		{"the last cell on the floor", cat([]byte{tagMixed}, free, dense(func(c *blockCells) { c.unknown[49] = 1 << 35 }), []byte{0}), true},
		{"two features", cat(free, []byte{2}, station("a"), station("b")), true},
		{"out of order", cat(free, []byte{2}, station("b"), station("a")), false},
		{"twice", cat(free, []byte{2}, station("a"), station("a")), false},
		{"a name that is none", cat(free, []byte{1}, station("A")), false},
		{"off the floor", cat(free, []byte{1}, feature(&Feature{Name: "a", Kind: Station, At: geom.Point{X: 100_001}})), false},
		{"a bow tie", cat(free, []byte{1}, feature(&Feature{Name: "a", Kind: ClosedZone, Shape: NewPolygon([][]geom.Point{pts(0, 0, 9, 9, 9, 0, 0, 9)}, 0)})), false},
		{"a heading that is none", cat(free, []byte{1}, feature(&Feature{Name: "a", Kind: Station, Heading: math.NaN()})), false},
		{"bytes too many", cat(free, []byte{0, 0}), false},
	} {
		m, err := Decode(encode(c.body))
		if (err == nil) != c.ok || err != nil && !errors.Is(err, ErrEncoding) {
			t.Errorf("%s: %v", c.name, err)
		}
		if err == nil && m.FeatureCount() == 0 && m.At(99, 49) == Free && m.Digest() != mustNew(t, s).Digest() {
			t.Errorf("%s: the digest is not that of the content", c.name)
		}
	}
}

// A small stream that says it is large, or that unpacks to more than it may, takes
// no more memory than what it may hold.
func TestDecodersDoNotExplode(t *testing.T) {
	pack := func(n int) []byte {
		var buf bytes.Buffer
		w, _ := flate.NewWriter(&buf, flate.BestSpeed)
		zero := make([]byte, 1<<20)
		for ; n > 0; n -= len(zero) {
			if _, err := w.Write(zero); err != nil {
				t.Fatal(err)
			}
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		return appendBytes([]byte{1}, buf.Bytes())
	}
	bomb := pack(32 << 20) // unpacks to 32 MiB
	rect := func(x1, y1 uint64) []byte {
		b := []byte{editsFormat, 1, byte(PaintCells), 0, 0}
		return binary.AppendUvarint(binary.AppendUvarint(b, x1), y1)
	}
	huge := binary.AppendUvarint(nil, math.MaxUint64)
	for name, data := range map[string][]byte{
		"cells that unpack to more":         slices.Concat(rect(64, 64), bomb),
		"cells that unpack to less":         slices.Concat(rect(16_384, 16_384), pack(1<<20)),
		"more cells than a patch may write": slices.Concat(rect(65_536, 65_536), bomb),
		"an edit count":                     slices.Concat([]byte{editsFormat}, huge),
		"many edits in few bytes":           append(binary.AppendUvarint([]byte{editsFormat}, MaxEdits), 1, 1, 1),
		"a name's length":                   slices.Concat([]byte{editsFormat, 1, byte(RemoveFeature)}, huge),
		"a chain's length":                  slices.Concat([]byte{editsFormat, 1, byte(PaintPolygon), 1}, huge),
	} {
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		_, err := DecodeEdits(data)
		runtime.ReadMemStats(&after)
		if !errors.Is(err, ErrEncoding) {
			t.Errorf("%s: %v", name, err)
		}
		if took := after.TotalAlloc - before.TotalAlloc; took > 12<<20 {
			t.Errorf("%s: took %d bytes", name, took)
		}
	}
	small := appendSettings([]byte{mapFormat}, Settings{ResolutionUm: 1000, Columns: 1, Rows: 1, CapUm: 1000})
	for name, data := range map[string][]byte{
		"content larger than a floor's":   slices.Concat(small, huge, bomb),
		"content larger than it says":     slices.Concat(small, []byte{100}, bomb),
		"content that is no DEFLATE data": slices.Concat(small, []byte{100, 1, 3, 0xff, 0xff, 0xff}),
	} {
		if _, err := Decode(data); !errors.Is(err, ErrEncoding) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func FuzzDecodeEdits(f *testing.F) {
	f.Add(EncodeEdits(nil))
	f.Add(EncodeEdits([]Edit{
		put(disc("a", 1e6, 1e6, 5)),
		{Kind: RemoveFeature, Name: "a"},
		{Kind: PaintRect, Rect: CellRect{1, 2, 3, 4}, Fill: Unknown},
		{Kind: PaintCells, Rect: CellRect{0, 0, 5, 1}, Cells: []byte{0x12, 1}},
		{Kind: PaintCells, Rect: CellRect{0, 0, 64, 64}, Cells: make([]byte, 1024)},
		{Kind: ClearRect, Rect: CellRect{0, 0, 400, 300}},
		{Kind: PaintPolygon, Fill: Occupied, Shape: NewPolygon([][]geom.Point{pts(0, 0, 1e6, 0, 0, 1e6)}, 0)},
		put(&Feature{Name: "z", Note: "n", Kind: OneWayZone, Heading: 1, Shape: NewPolygon([][]geom.Point{pts(0, 0, 9, 0, 9, 9)}, 0)}),
		put(&Feature{Name: "v", Kind: SpeedLimitZone, SpeedMps: 1, Shape: NewPolygon([][]geom.Point{pts(0, 0, 9, 0, 9, 9)}, 0)}),
		put(&Feature{Name: "s", Kind: Station, Heading: -1}),
	}))
	m, err := New(hall)
	if err != nil {
		f.Fatal(err)
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		edits, err := DecodeEdits(data)
		if err != nil {
			if !errors.Is(err, ErrEncoding) {
				t.Fatal(err)
			}
			return
		}
		again, err := DecodeEdits(EncodeEdits(edits))
		if err != nil || !cmp.Equal(edits, again) {
			t.Fatalf("not the same after another round: %v\n%s", err, cmp.Diff(edits, again))
		}
		next, err := m.Apply(edits)
		var ee *EditError
		if err != nil && (!errors.As(err, &ee) || ee.Problem == "" || ee.Index >= len(edits)) {
			t.Fatalf("refused with %v", err)
		}
		if err == nil {
			if back, err := Decode(next.Encode()); err != nil || back.Digest() != next.Digest() {
				t.Fatalf("content changed by its encoding: %v", err)
			}
		}
	})
}

func FuzzDecode(f *testing.F) {
	m := mustNew(f, Settings{ResolutionUm: 1000, Columns: 100, Rows: 70, CapUm: 1000})
	f.Add(m.Encode())
	m = mustApply(f, m, Edit{Kind: PaintRect, Rect: CellRect{1, 2, 70, 60}, Fill: Unknown}, put(disc("a", 50_000, 50_000, 5)),
		put(&Feature{Name: "s", Kind: Station, Heading: -1}))
	f.Add(m.Encode())
	// Not packed, so that the fuzzer reaches the content.
	body := m.tree.appendNode(nil, m.tree.root)
	body = binary.AppendUvarint(body, uint64(m.FeatureCount()))
	for x := range m.Features() {
		body = appendFeature(body, x)
	}
	raw := binary.AppendUvarint(appendSettings([]byte{mapFormat}, m.settings), uint64(len(body)))
	f.Add(appendBytes(append(raw, 0), body))
	f.Fuzz(func(t *testing.T, data []byte) {
		m, err := Decode(data)
		if err != nil {
			if !errors.Is(err, ErrEncoding) {
				t.Fatal(err)
			}
			return
		}
		back, err := Decode(m.Encode())
		if err != nil || back.Digest() != m.Digest() || !Diff(m, back).IsEmpty() {
			t.Fatalf("not the same after another round: %v", err)
		}
	})
}
