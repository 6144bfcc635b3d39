package floor

import (
	"encoding/binary"

	"example.com/wideberth/mapstore/geom"
)

// The versions of the encodings, the first byte of each. A reader refuses any other.
const (
	settingsFormat = 1
	editsFormat    = 1
	mapFormat      = 1
)

func (d *decoder) format(want byte, what string) {
	if got := d.byte(); d.err == nil && got != want {
		d.fail("%s format %d, this program reads %d", what, got, want)
	}
}

// EncodeSettings writes settings for the journal.
func EncodeSettings(s Settings) []byte { return appendSettings([]byte{settingsFormat}, s) }

// DecodeSettings reads what EncodeSettings wrote, and validates it.
func DecodeSettings(data []byte) (Settings, error) {
	d := &decoder{data: data}
	d.format(settingsFormat, "settings")
	s := d.settings()
	if err := d.done(); err != nil {
		return Settings{}, err
	}
	return s, nil
}

func appendSettings(b []byte, s Settings) []byte {
	for _, v := range [...]int64{s.ResolutionUm, int64(s.Columns), int64(s.Rows), s.OriginX, s.OriginY, s.CapUm} {
		b = binary.AppendVarint(b, v)
	}
	flags := byte(s.Initial) << 2
	if s.UnknownIsFree {
		flags |= 1
	}
	if s.OpenBorder {
		flags |= 2
	}
	return append(b, flags)
}

func (d *decoder) settings() Settings {
	var v [6]int64
	for i := range v {
		v[i] = d.varint()
	}
	flags := d.byte()
	s := Settings{
		ResolutionUm: v[0], Columns: int(v[1]), Rows: int(v[2]), OriginX: v[3], OriginY: v[4], CapUm: v[5],
		UnknownIsFree: flags&1 != 0, OpenBorder: flags&2 != 0, Initial: Occupancy(flags >> 2),
	}
	if d.err == nil {
		if err := s.Validate(); err != nil {
			d.fail("settings: %v", err)
		}
	}
	if d.err != nil {
		return Settings{}
	}
	return s
}

// appendFeature writes what a feature of its kind means, and nothing else. Its
// hash is the feature's part in the digest.
func appendFeature(b []byte, f *Feature) []byte {
	b = appendBytes(b, f.Name)
	b = appendBytes(b, f.Note)
	b = append(b, byte(f.Kind))
	if f.Kind == Station {
		b = appendPoints(b, []geom.Point{f.At})
		return appendFloat(b, f.Heading)
	}
	if f.Kind == Solid {
		b = append(b, byte(f.Shape.Kind))
	}
	b = appendChains(b, f.Shape.Chains)
	switch f.Kind {
	case Solid:
		for _, v := range [...]int64{f.WidthUm, f.RadiusUm, f.ToleranceUm} {
			b = binary.AppendUvarint(b, uint64(v))
		}
	case SpeedLimitZone:
		b = appendFloat(b, f.SpeedMps)
	case OneWayZone:
		b = appendFloat(b, f.Heading)
	}
	return b
}

func (d *decoder) feature() *Feature {
	f := &Feature{Name: d.string(MaxNameBytes), Note: d.string(4 * MaxNoteRunes), Kind: FeatureKind(d.byte())}
	switch f.Kind {
	case Station:
		if p := d.points(1); p != nil {
			f.At = p[0]
		}
		f.Heading = d.float()
	case Solid:
		kind := ShapeKind(d.byte())
		chains := d.chains()
		f.WidthUm, f.RadiusUm, f.ToleranceUm = d.length(), d.length(), d.length()
		f.Shape = Shape{Kind: kind, Chains: chains, Grow: f.grow(kind)}
	case ClosedZone, SpeedLimitZone, OneWayZone:
		f.Shape = NewPolygon(d.chains(), 0)
		switch f.Kind {
		case SpeedLimitZone:
			f.SpeedMps = d.float()
		case OneWayZone:
			f.Heading = d.float()
		}
	default:
		d.fail("feature kind %d", f.Kind)
	}
	return f
}

// grow is how far the core of a solid of that kind is grown.
func (f *Feature) grow(kind ShapeKind) float64 {
	switch kind {
	case Polyline:
		return float64(f.WidthUm)/2 + float64(f.ToleranceUm)
	case Disc:
		return float64(f.RadiusUm) + float64(f.ToleranceUm)
	}
	return float64(f.ToleranceUm)
}

func (d *decoder) length() int64 {
	v := d.uvarint()
	if v >= 1<<53 {
		d.fail("length out of range")
		return 0
	}
	return int64(v)
}

// EncodeEdits writes edits that Apply accepted for the journal.
func EncodeEdits(edits []Edit) []byte {
	b := binary.AppendUvarint([]byte{editsFormat}, uint64(len(edits)))
	for i := range edits {
		b = appendEdit(b, &edits[i])
	}
	return b
}

func appendEdit(b []byte, e *Edit) []byte {
	b = append(b, byte(e.Kind))
	switch e.Kind {
	case PutFeature:
		return appendFeature(b, e.Feature)
	case RemoveFeature:
		return appendBytes(b, e.Name)
	case PaintPolygon:
		return append(appendChains(b, e.Shape.Chains), byte(e.Fill))
	}
	for _, v := range [...]int{e.Rect.X0, e.Rect.Y0, e.Rect.X1, e.Rect.Y1} {
		b = binary.AppendUvarint(b, uint64(v))
	}
	switch e.Kind {
	case PaintRect:
		b = append(b, byte(e.Fill))
	case PaintCells:
		b = appendPacked(b, e.Cells)
	}
	return b
}

// DecodeEdits reads what EncodeEdits wrote. It checks the form only: Apply says
// whether the edits can be carried out. What it allocates is bounded by the input,
// cells by what a patch may write.
func DecodeEdits(data []byte) ([]Edit, error) {
	d := &decoder{data: data}
	d.format(editsFormat, "edits")
	n := d.count(MaxEdits, 2)
	edits := make([]Edit, 0, min(n, 1024))
	var cells int64
	for i := 0; i < n && d.err == nil; i++ {
		edits = append(edits, d.edit(&cells))
	}
	if err := d.done(); err != nil {
		return nil, err
	}
	return edits, nil
}

func (d *decoder) edit(cells *int64) Edit {
	e := Edit{Kind: EditKind(d.byte())}
	switch e.Kind {
	case PutFeature:
		e.Feature = d.feature()
		return e
	case RemoveFeature:
		e.Name = d.string(MaxNameBytes)
		return e
	case PaintPolygon:
		e.Shape = NewPolygon(d.chains(), 0)
		e.Fill = Occupancy(d.byte())
		return e
	case PaintRect, PaintCells, ClearRect:
	default:
		d.fail("edit kind %d", e.Kind)
		return e
	}
	for _, v := range [...]*int{&e.Rect.X0, &e.Rect.Y0, &e.Rect.X1, &e.Rect.Y1} {
		u := d.uvarint()
		if u > MaxSide {
			d.fail("cell %d, wanted at most %d", u, MaxSide)
			return e
		}
		*v = int(u)
	}
	switch e.Kind {
	case PaintRect:
		e.Fill = Occupancy(d.byte())
	case PaintCells:
		*cells += e.Rect.Count()
		if *cells > MaxPatchCells {
			d.fail("%d cells, wanted at most %d", *cells, MaxPatchCells)
			return e
		}
		e.Cells = d.packed(packedLen(e.Rect))
	}
	return e
}

func packedLen(r CellRect) int { return int((r.Count() + 3) / 4) }
