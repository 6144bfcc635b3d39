package layout

import (
	"slices"
	"strconv"

	"google.golang.org/protobuf/proto"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func trim(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// items turns a list of items into edits, repeats carried out.
func (b *builder) items(specs []itemSpec, path []any, change bool) []*wideberthv1.Edit {
	var out []*wideberthv1.Edit
	named := map[string]int{} // names put or removed, and by which item
	for i := range specs {
		p := at(path, i)
		it := &specs[i]
		kind, ok := b.kind(it, p)
		if !ok {
			continue
		}
		if !change && kind == "remove" {
			b.add(at(p, "remove"), "only a change can take a feature away")
			continue
		}
		places, ok := b.places(it.Repeat, at(p, "repeat"))
		if !ok {
			continue
		}
		for _, pl := range places {
			e := b.edit(it, kind, p, pl)
			if e == nil {
				break // one fault for all copies
			}
			if name := nameOf(e); name != "" {
				if first, twice := named[name]; twice {
					b.add(at(p, kind), "%q is named by items[%d] already", name, first)
					break
				}
				named[name] = i
			}
			b.edits++
			b.bytes += proto.Size(e)
			if b.edits > MaxEdits || b.bytes > MaxBytes {
				b.add(p, "more than %d edits or %d bytes of them in all, repeats included", MaxEdits, MaxBytes)
				return nil
			}
			out = append(out, e)
		}
	}
	return out
}

// nameOf is the feature that an edit puts or removes; empty for others.
func nameOf(e *wideberthv1.Edit) string {
	if n := e.GetPutFeature().GetFeature().GetName(); n != "" {
		return n
	}
	return e.GetRemoveFeature().GetName()
}

// kind is what an item is, once it has the fields of its kind and no others.
func (b *builder) kind(it *itemSpec, path []any) (string, bool) {
	said, fields := it.said()
	if len(said) != 1 {
		b.add(path, "%d kinds %v; wanted exactly one of %s", len(said), said, kindKeys)
		return "", false
	}
	k := kinds[slices.IndexFunc(kinds, func(k kindSpec) bool { return k.key == said[0] })]
	ok := true
	outlines := 0
	for _, f := range fields {
		outline := f == "rect" || f == "polygon"
		if outline && k.outline {
			outlines++
		} else if !slices.Contains(k.need, f) && !slices.Contains(k.may, f) {
			b.add(at(path, f), "a %s item does not take it", k.key)
			ok = false
		}
	}
	for _, f := range k.need {
		if !slices.Contains(fields, f) {
			b.add(at(path, f), "missing; a %s item needs it", k.key)
			ok = false
		}
	}
	if k.outline && outlines != 1 {
		b.add(path, "a %s item needs exactly one of rect and polygon", k.key)
		ok = false
	}
	if it.Holes != nil && it.Rect != nil {
		b.add(at(path, "holes"), "a rect has none; write a polygon")
		ok = false
	}
	return k.key, ok
}

// place is where one copy of an item goes and what is added to its name.
type place struct {
	dx, dy float64
	suffix string
}

// places lists the copies that repeat directives ask for, the first directive
// outermost, offsets in metres.
func (b *builder) places(specs []repeatSpec, path []any) ([]place, bool) {
	out := []place{{}}
	if len(specs) > maxRepeats {
		b.add(path, "%d directives; at most %d", len(specs), maxRepeats)
		return nil, false
	}
	for i, r := range specs {
		p := at(path, i)
		if r.Count < 1 || r.Count > MaxEdits || len(out)*r.Count > MaxEdits {
			b.add(at(p, "count"), "%d; wanted 1 to %d copies, directives multiplied", r.Count, MaxEdits)
			return nil, false
		}
		sx, sy, ok := b.pair(at(p, "step_m"), r.StepM)
		if !ok {
			return nil, false
		}
		var gx, gy float64
		if r.GapEvery != 0 || r.GapM != nil {
			if r.GapEvery < 1 {
				b.add(at(p, "gap_every"), "%d; wanted 1 or more copies between gaps", r.GapEvery)
				return nil, false
			}
			if gx, gy, ok = b.pair(at(p, "gap_m"), r.GapM); !ok {
				return nil, false
			}
		}
		next := make([]place, 0, len(out)*r.Count)
		for _, o := range out {
			for n := range r.Count {
				gaps := 0.0
				if r.GapEvery > 0 {
					gaps = float64(n / r.GapEvery)
				}
				next = append(next, place{
					dx:     o.dx + float64(n)*sx + gaps*gx,
					dy:     o.dy + float64(n)*sy + gaps*gy,
					suffix: o.suffix + "-" + strconv.Itoa(n+1),
				})
			}
		}
		out = next
	}
	return out, true
}

// edit is one copy of an item; nil after a fault.
func (b *builder) edit(it *itemSpec, kind string, path []any, pl place) *wideberthv1.Edit {
	feature := func(name string, f *wideberthv1.Feature) *wideberthv1.Edit {
		f.Name, f.Note = name+pl.suffix, it.Note
		if !b.name(at(path, kind), f.Name) {
			return nil
		}
		return &wideberthv1.Edit{Action: &wideberthv1.Edit_PutFeature{PutFeature: &wideberthv1.PutFeature{Feature: f}}}
	}
	switch kind {
	case "wall", "block", "column":
		s := b.solid(it, kind, path, pl)
		if s == nil {
			return nil
		}
		name := it.Wall
		if kind == "block" {
			name = it.Block
		} else if kind == "column" {
			name = it.Column
		}
		return feature(*name, &wideberthv1.Feature{Kind: &wideberthv1.Feature_Solid{Solid: s}})
	case "closed", "speed_limit", "one_way":
		z, name := b.zone(it, kind, path, pl)
		if z == nil {
			return nil
		}
		return feature(name, &wideberthv1.Feature{Kind: &wideberthv1.Feature_Zone{Zone: z}})
	case "station":
		pt := b.point(at(path, "at"), it.At, pl)
		h, ok := b.heading(at(path, "heading_deg"), *it.HeadingDeg)
		if pt == nil || !ok {
			return nil
		}
		if !b.onFloor(pt) {
			b.add(at(path, "at"), "(%v, %v) is not on the floor", pt.XM, pt.YM)
			return nil
		}
		return feature(*it.Station, &wideberthv1.Feature{Kind: &wideberthv1.Feature_Station{Station: &wideberthv1.Station{
			Pose: &wideberthv1.Pose{XM: pt.XM, YM: pt.YM, HeadingRad: h}}}})
	case "remove":
		name := *it.Remove + pl.suffix
		if !b.name(at(path, "remove"), name) {
			return nil
		}
		return &wideberthv1.Edit{Action: &wideberthv1.Edit_RemoveFeature{RemoveFeature: &wideberthv1.RemoveFeature{Name: name}}}
	case "clear":
		a := b.area(at(path, "clear"), it.Clear, pl)
		if a == nil {
			return nil
		}
		return &wideberthv1.Edit{Action: &wideberthv1.Edit_ClearRect{ClearRect: &wideberthv1.ClearRect{Area: a}}}
	default:
		return b.cells(it, path, pl)
	}
}
