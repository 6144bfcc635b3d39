package picture

import (
	"fmt"
	"math"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// drawing is one sheet being drawn.
type drawing struct {
	scene    Scene
	out      svg
	area     box // metres, the part of the floor drawn
	legs     []leg
	tight    []leg // of legs, those that are
	room     room
	change   change
	patterns int
	plotted  plotted // of the roadmap, what the plan has
	coarse   float64 // side in metres of a raster cell as drawn
}

func newDrawing(s Scene) *drawing {
	d := &drawing{scene: s, area: floorBox(s.Floor.Settings), legs: legs(s.Route)}
	if p := s.Part; p != nil {
		if part := d.area.clip(box{p.MinXM, p.MinYM, p.MaxXM, p.MaxYM}); part.width() > 0 && part.height() > 0 {
			d.area = part
		}
	}
	for _, l := range d.legs {
		if l.tight {
			d.tight = append(d.tight, l)
		}
	}
	if len(d.legs) > 0 {
		var all []xy
		for _, l := range d.legs {
			all = append(all, l.pts...)
		}
		d.room = newRoom(s.Floor, boundsOf(all), wide(s.Route))
	}
	if s.Before != nil {
		d.change = compare(s.Before, s.Floor)
	}
	return d
}

// sheet draws everything.
func (d *drawing) sheet() {
	plan := planFrame(d.area)
	if d.scene.Roadmap != nil {
		d.plotted = plot(d.scene.Roadmap, plan)
	}
	panels := d.panels(plan.top + plan.height() + panelGap)
	height := panels.bottom + 66
	d.out.raw(`<?xml version="1.0" encoding="UTF-8"?>`)
	d.out.raw(`<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %s %s" width="%s" height="%s" role="img">`,
		num(sheetWidth), num(height), num(sheetWidth), num(height))
	d.out.raw(`<title>%s</title>`, esc(d.title()))
	d.out.raw(`<desc>%s</desc>`, esc(d.summary()))
	d.out.raw("<style>%s</style>", esc(styleSheet))
	d.out.raw("<defs>%s</defs>", patterns)
	d.out.rect(0, 0, sheetWidth, height, "paper", "")
	d.out.text(sheetMargin, 44, "title", "", cut(d.title(), titleSize*1.1, planWidth))
	d.out.text(sheetMargin, 70, "caption", "", cut(d.scene.Caption, 15, planWidth))
	d.plan(plan, 1)
	d.drawLabels(d.labelsOf(plan))
	d.drawPanels(panels, plan)
	d.foot(height)
	d.out.raw("</svg>")
}

func (d *drawing) title() string {
	if d.scene.Title != "" {
		return d.scene.Title
	}
	return "Floor " + d.scene.Floor.Stamp.GetFloor()
}

// plan draws the floor and what is on it into a frame, without labels.
func (d *drawing) plan(f frame, zoom float64) {
	d.out.raw(`<clipPath id="clip-%s"><rect x="%s" y="%s" width="%s" height="%s"/></clipPath>`,
		f.id, num(f.left), num(f.top), num(f.width()), num(f.height()))
	d.out.raw(`<g id="%s" clip-path="url(#clip-%s)">`, f.id, f.id)
	d.out.rect(f.left, f.top, f.width(), f.height(), "floor", "")
	shown := func(ft *wideberthv1.Feature) bool { return featureBox(ft).meets(f.area) }
	if len(d.legs) > 0 {
		d.bands(f)
	}
	for _, ft := range d.scene.Floor.Features {
		if ft.GetZone() != nil && shown(ft) {
			d.zone(f, ft.GetZone())
		}
	}
	if d.scene.Grown != nil {
		d.out.path(grownPath(f, d.scene), "grown", "")
	}
	unknown := cellRects(d.scene.Floor, f, unknownCell(d.scene.Floor))
	d.out.path(boxesPath(f, unknown.rects), "unknown", "")
	occupied := cellRects(d.scene.Floor, f, solidCell(d.scene.Floor))
	d.out.path(boxesPath(f, occupied.rects), "raster", "")
	if zoom == 1 {
		d.coarse = max(unknown.cellM, occupied.cellM)
	}
	for _, ft := range d.scene.Floor.Features {
		if ft.GetSolid() != nil && shown(ft) {
			d.solidShape(f, ft.GetSolid())
		}
	}
	if d.scene.Before != nil {
		d.changes(f)
	}
	if d.scene.Grown != nil {
		d.out.path(grownPath(f, d.scene), "grown-line", "")
	}
	if d.scene.Roadmap != nil {
		d.roadmap(f, zoom)
	}
	d.routeLines(f, zoom)
	if zoom == 1 {
		d.arrows(f)
	}
	for _, ft := range d.scene.Floor.Features {
		if ft.GetStation() != nil && shown(ft) {
			d.station(f, ft.GetStation().GetPose())
		}
	}
	d.ends(f)
	d.focusMark(f, zoom)
	d.out.raw("</g>")
	d.out.rect(f.left, f.top, f.width(), f.height(), "frame", "")
}

// focus is the place that a sheet is most about: the route's smallest clearance, or
// where it was refused. The figure is what to write there, short where a heading
// says already what it is.
type focus struct {
	at            xy
	radius        float64 // metres, how large to mark it
	figure, short string
}

func (d *drawing) focus() (focus, bool) {
	if r := d.scene.Route; r != nil && r.GetSmallestAt() != nil {
		c := metres(r.GetSmallestClearanceM())
		return focus{pt(r.GetSmallestAt()), r.GetSmallestClearanceM(), "smallest clearance " + c, c}, true
	}
	if b := d.scene.Refusal.GetBottleneck(); b.GetExists() && b.GetAt() != nil {
		words := metres(b.GetWidthM()) + " wide, " + metres(b.GetWidthNeededM()) + " needed"
		return focus{pt(b.GetAt()), b.GetWidthM() / 2, words, words}, true
	}
	if e := d.scene.Refusal.GetBlockedEnd(); e.GetAt() != nil {
		words := "clearance " + metres(e.GetClearanceM()) + ", " + metres(e.GetRequiredClearanceM()) + " needed"
		return focus{pt(e.GetAt()), e.GetClearanceM(), words, words}, true
	}
	return focus{}, false
}

// body is what the sheet's route or refusal is about; nil when that is not said.
func (d *drawing) body() *wideberthv1.Body {
	if d.scene.Route != nil {
		return d.scene.Route.GetBody()
	}
	return d.scene.Body
}

// focusMark draws the focus: on the plan a ring, enlarged the body itself.
func (d *drawing) focusMark(f frame, zoom float64) {
	o, ok := d.focus()
	if !ok || !finite(o.at.x, o.at.y, o.radius) {
		return
	}
	q := f.at(o.at)
	if zoom == 1 {
		d.out.circle(q.x, q.y, max(9, o.radius*f.k), "smallest", "")
		return
	}
	d.out.circle(q.x, q.y, o.radius*f.k, "smallest", "")
	if b := d.body(); b != nil {
		d.out.circle(q.x, q.y, b.GetRadiusM()*f.k, "body", "")
		d.out.circle(q.x, q.y, (b.GetRadiusM()+b.GetMarginM())*f.k, "needs", "")
	}
	d.out.circle(q.x, q.y, 2.5, "scale", "")
}

// metres writes a length as the service rounded it: never more than it is.
func metres(m float64) string {
	return fmt.Sprintf("%.2f m", math.Floor(m*100+1e-6)/100)
}
