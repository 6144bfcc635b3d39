package picture

import (
	"example.com/wideberth/mapstore/floor"
)

// signs are the rows of the legend: what this sheet has, nothing else.
func (d *drawing) signs() []sign {
	var out []sign
	add := func(meaning string, draw func(o *svg, x, y float64)) { out = append(out, sign{meaning, draw}) }
	swatch := func(class string) func(o *svg, x, y float64) {
		return func(o *svg, x, y float64) { o.rect(x, y-7, signWidth, 14, class, "") }
	}
	hasOpen := len(d.tight) < len(d.legs)
	if hasOpen {
		add("route, with its wide berth", func(o *svg, x, y float64) {
			o.rect(x, y-8, signWidth, 16, "band-open", "")
			o.line(x, y, x+signWidth, y, "open", `stroke-width="3.4"`)
		})
	}
	if len(d.tight) > 0 {
		add("tight leg: less than that, expect hints", func(o *svg, x, y float64) {
			o.rect(x, y-8, signWidth, 16, "band-tight", "")
			o.line(x, y, x+signWidth, y, "tight", `stroke-width="6.5"`)
			o.line(x, y, x+signWidth, y, "bars", `stroke-width="6.5" stroke-dasharray="2.2 5.8"`)
		})
	}
	if d.scene.Previous != nil {
		add("the route before", func(o *svg, x, y float64) { o.line(x, y, x+signWidth, y, "previous", "") })
	}
	if _, ok := d.focus(); ok {
		meaning := "smallest clearance"
		if d.scene.Route == nil {
			meaning = "where it does not fit"
		}
		add(meaning, func(o *svg, x, y float64) { o.circle(x+signWidth/2, y, 8, "smallest", "") })
	}
	if _, ok := d.focus(); ok && d.body() != nil {
		add("body, and with its margin (enlarged)", func(o *svg, x, y float64) {
			o.circle(x+signWidth/2, y, 6, "body", "")
			o.circle(x+signWidth/2, y, 9, "needs", "")
		})
	}
	if d.scene.Route != nil || d.scene.Start != nil || d.scene.Goal != nil {
		add("start, goal", startGoal)
	}
	if d.scene.Roadmap != nil {
		d.roadmapSigns(add)
	}
	if d.scene.Grown != nil {
		add("grown: no place for the centre", func(o *svg, x, y float64) {
			o.rect(x, y-7, signWidth, 14, "grown", "")
			o.rect(x, y-7, signWidth, 14, "grown-line", "")
		})
	}
	if d.scene.Before != nil {
		add("came since the version before", swatch("added"))
		add("went since the version before", swatch("removed"))
	}
	has := d.present()
	if has.solids {
		add("solid feature", swatch("solid"))
	}
	if has.occupied {
		add("solid in the survey's raster", swatch("raster"))
	}
	if has.unknown {
		meaning := "never seen: counts as solid"
		if d.scene.Floor.Settings.GetUnknownIsFree() {
			meaning = "never seen: counts as free here"
		}
		add(meaning, swatch("unknown"))
	}
	if has.closed {
		add("closed to robots", swatch("closed"))
	}
	if has.speed {
		add("speed limit", swatch("speed"))
	}
	if has.oneway {
		add("one way", func(o *svg, x, y float64) {
			o.raw(`<path d="M%s %sh28m-6 -5l6 5l-6 5" fill="none" stroke="%s" stroke-width="1.3"/>`, num(x+8), num(y), onewayColour)
		})
	}
	if has.stations {
		add("station and its heading", func(o *svg, x, y float64) {
			o.line(x+signWidth/2, y, x+signWidth/2+11, y, "tick", "")
			o.rect(x+signWidth/2-4.5, y-4.5, 9, 9, "station", "")
		})
	}
	return out
}

func startGoal(o *svg, x, y float64) {
	o.circle(x+8, y, 6, "end", "")
	o.circle(x+signWidth-8, y, 7.5, "goal", "")
	o.circle(x+signWidth-8, y, 3, "floor", "")
}

// kinds is which kinds of thing are on the drawn part of the floor.
type kinds struct{ solids, closed, speed, oneway, stations, occupied, unknown bool }

func (d *drawing) present() kinds {
	var k kinds
	for _, ft := range d.scene.Floor.Features {
		if !featureBox(ft).meets(d.area) {
			continue
		}
		k.solids = k.solids || ft.GetSolid() != nil
		k.stations = k.stations || ft.GetStation() != nil
		k.closed = k.closed || ft.GetZone().GetClosed() != nil
		k.speed = k.speed || ft.GetZone().GetSpeedLimit() != nil
		k.oneway = k.oneway || ft.GetZone().GetOneWay() != nil
	}
	c := d.scene.Floor
	for row := range int(c.Settings.GetRows()) {
		for col := range int(c.Settings.GetColumns()) {
			switch c.At(col, row) {
			case floor.Occupied:
				k.occupied = true
			case floor.Unknown:
				k.unknown = true
			}
		}
		if k.occupied && k.unknown {
			break
		}
	}
	return k
}
