package rules

import (
	"reflect"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Differs says whether what a feature covers, or as what, is not the same.
func Differs(f floor.FeatureChange) bool {
	b, a := f.Before, f.After
	return b == nil || a == nil || a.Kind != b.Kind || !reflect.DeepEqual(a.Shape, b.Shape)
}

// ClosedChanges are the bounds of the closed zones that differ, before and after.
func ClosedChanges(c floor.Change) []geom.Rect {
	var out []geom.Rect
	for _, fc := range c.Features {
		if !Differs(fc) {
			continue
		}
		for _, f := range [2]*floor.Feature{fc.Before, fc.After} {
			if f != nil && f.Kind == floor.ClosedZone {
				out = append(out, f.Shape.Bounds())
			}
		}
	}
	return out
}

// OneWayChanges are the bounds of the one-way zones that r and old do not share, in r and
// in old: outside them the same steps are allowed. Time is linear in the number of zones.
func (r *Rules) OneWayChanges(old *Rules) []geom.Rect {
	if r == old {
		return nil
	}
	var out []geom.Rect
	a, b := r.oneWay, old.oneWay
	for len(a) > 0 || len(b) > 0 { // both by name
		switch {
		case len(b) == 0 || len(a) > 0 && a[0].f.Name < b[0].f.Name:
			out, a = append(out, a[0].bounds), a[1:]
		case len(a) == 0 || b[0].f.Name < a[0].f.Name:
			out, b = append(out, b[0].bounds), b[1:]
		default:
			x, y := a[0].f, b[0].f
			if x != y && (x.Heading != y.Heading || !reflect.DeepEqual(x.Shape, y.Shape)) {
				out = append(out, a[0].bounds, b[0].bounds)
			}
			a, b = a[1:], b[1:]
		}
	}
	return out
}
