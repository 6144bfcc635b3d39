package picture

import (
	"bufio"
	"fmt"
	"io"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Comparison is a sheet of several routes between the same two places, each in a
// panel of its own over the same part of the floor.
type Comparison struct {
	Title string
	// Floor is the version drawn. Required.
	Floor *client.FloorContent
	// Body is what the routes are for; nil where that is not said.
	Body *wideberthv1.Body
	// OptimumM is the length of the shortest way of all; 0 where there is none.
	OptimumM float64
	// Start and Goal are drawn in each panel, also in one without a route; nil where that
	// is not said.
	Start, Goal *wideberthv1.Pose
	Panels      []Panel
}

// Panel is one route of a comparison.
type Panel struct {
	Name    string
	Figures []string // lines below it
	Route   *wideberthv1.Route
	Missing string               // why there is no route
	Refusal *wideberthv1.Refusal // draws where it does not fit; may be nil
}

// MaxPanels is how many panels a sheet may have.
const MaxPanels = 24

const (
	panelAcross  = 20.0 // between panels
	signColumns  = 3
	panelHead    = 24.0
	figureLine   = 16.0
	aroundM      = 4.0 // shown about the routes
	panelTallest = 460.0
)

// DrawComparison writes the comparison as an SVG document. Errors are as for Draw.
func DrawComparison(w io.Writer, c Comparison) error {
	base := Scene{Title: c.Title, Floor: c.Floor}
	if err := base.validate(); err != nil {
		return err
	}
	if n := len(c.Panels); n < 1 || n > MaxPanels {
		return fmt.Errorf("picture: panels: %d, wanted 1 to %d", n, MaxPanels)
	}
	for i, p := range c.Panels {
		if err := checkRoute(fmt.Sprintf("panels[%d].route", i), p.Route); err != nil {
			return err
		}
	}
	bw := bufio.NewWriter(w)
	d := newDrawing(base)
	d.comparison(c)
	if _, err := d.out.buf.WriteTo(bw); err != nil {
		return err
	}
	return bw.Flush()
}

// routesArea is the part of the floor that the routes are on; all of it without any.
func (c *Comparison) routesArea() box {
	all := floorBox(c.Floor.Settings)
	var at []xy
	for _, p := range c.Panels {
		for _, l := range legs(p.Route) {
			at = append(at, l.pts...)
		}
	}
	if len(at) == 0 {
		return all
	}
	b := boundsOf(at).grow(aroundM)
	// Not much taller than wide, nor the other way round.
	if b.width() < 0.6*b.height() {
		b = box{b.minX - (0.6*b.height()-b.width())/2, b.minY, b.maxX + (0.6*b.height()-b.width())/2, b.maxY}
	}
	if b.height() < 0.4*b.width() {
		b = box{b.minX, b.minY - (0.4*b.width()-b.height())/2, b.maxX, b.maxY + (0.4*b.width()-b.height())/2}
	}
	return b.clip(all)
}

func (d *drawing) comparison(c Comparison) {
	d.area = c.routesArea()
	columns := 3
	if d.area.height() > d.area.width() {
		columns = 4
	}
	wide := (planWidth - panelAcross*float64(columns-1)) / float64(columns)
	k := min(wide/d.area.width(), panelTallest/d.area.height(), maxUnitsPerM)
	first := frame{area: d.area, left: 0, top: 0, k: k, id: "base"}
	lines := 1
	for _, p := range c.Panels {
		lines = max(lines, len(p.Figures))
	}
	pitch := panelHead + first.height() + float64(lines)*figureLine + 26
	rows := (len(c.Panels) + columns - 1) / columns
	signs := d.comparisonSigns(c)
	legend := planTop + 8 + float64(rows)*pitch + 10
	legendRows := (len(signs) + signColumns - 1) / signColumns
	height := legend + float64(legendRows)*lineHeight + 46 + 66
	d.out.raw(`<?xml version="1.0" encoding="UTF-8"?>`)
	d.out.raw(`<svg xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink" viewBox="0 0 %s %s" width="%s" height="%s" role="img">`,
		num(sheetWidth), num(height), num(sheetWidth), num(height))
	d.out.raw(`<title>%s</title>`, esc(d.title()))
	d.out.raw("<style>%s</style>", esc(styleSheet))
	d.out.raw("<defs>%s</defs>", patterns)
	// The floor once, for all panels.
	d.out.raw(`<defs>`)
	d.plan(first, 1)
	d.out.raw(`</defs>`)
	d.out.rect(0, 0, sheetWidth, height, "paper", "")
	d.out.text(sheetMargin, 44, "title", "", cut(d.title(), titleSize*1.1, planWidth))
	d.out.text(sheetMargin, 70, "caption", "", cut(c.caption(), 15, planWidth))
	for i, p := range c.Panels {
		left := sheetMargin + float64(i%columns)*(wide+panelAcross)
		top := planTop + 8 + float64(i/columns)*pitch
		f := first
		f.left, f.top, f.id = left, top+panelHead, fmt.Sprint("panel-", i)
		d.panel(f, wide, p, c.Start, c.Goal)
	}
	for i, s := range signs {
		x := sheetMargin + float64(i%signColumns)*planWidth/signColumns
		y := legend + 8 + float64(i/signColumns)*lineHeight
		s.draw(&d.out, x, y)
		d.out.text(x+signWidth+10, y+5, "legend", "", s.meaning)
	}
	bar := niceLength(min(d.area.width()/3, 170/k))
	d.scaleBar(sheetMargin+10, legend+float64(legendRows)*lineHeight+34, bar, k, "scale-bar")
	d.foot(height)
	d.out.raw("</svg>")
}

func (c *Comparison) caption() string {
	s := ""
	if c.Body != nil {
		s = bodyWords(c.Body) + ". "
	}
	if c.OptimumM > 0 {
		return s + fmt.Sprintf("Shortest way over all directions: %.3f m", c.OptimumM)
	}
	return s + "There is no way over all directions"
}

// panel draws one route.
func (d *drawing) panel(f frame, wide float64, p Panel, start, goal *wideberthv1.Pose) {
	d.out.text(f.left, f.top-8, "head", "", cut(p.Name, bodySize*1.1, wide))
	d.out.raw(`<clipPath id="clip-%s"><rect x="%s" y="%s" width="%s" height="%s"/></clipPath>`,
		f.id, num(f.left), num(f.top), num(f.width()), num(f.height()))
	d.out.raw(`<g id="%s" clip-path="url(#clip-%s)">`, f.id, f.id)
	d.out.raw(`<use xlink:href="#base" href="#base" x="%s" y="%s"/>`, num(f.left), num(f.top))
	one := &drawing{scene: Scene{Floor: d.scene.Floor, Route: p.Route, Start: start, Goal: goal}, area: d.area, legs: legs(p.Route)}
	one.routeLines(f, 0.7)
	one.ends(f)
	if p.Route == nil && p.Refusal != nil {
		one.scene.Refusal = p.Refusal
		one.focusMark(f, 1)
	}
	d.out.buf.Write(one.out.buf.Bytes())
	d.out.raw("</g>")
	d.out.rect(f.left, f.top, f.width(), f.height(), "frame", "")
	if p.Route == nil {
		lines := wrap(p.Missing, bodySize, f.width()-40, 5)
		y := f.top + f.height()/2 - float64(len(lines))*lineHeight/2
		d.out.rect(f.left+10, y-8, f.width()-20, float64(len(lines))*lineHeight+16, "plate", "")
		for i, l := range lines {
			d.out.text(f.left+f.width()/2, y+14+float64(i)*lineHeight, "fact", `text-anchor="middle"`, l)
		}
	}
	for i, l := range p.Figures {
		d.out.text(f.left, f.top+f.height()+figureLine*(float64(i)+1), "small", "", cut(l, smallSize, wide))
	}
}

// comparisonSigns are the legend's rows.
func (d *drawing) comparisonSigns(c Comparison) []sign {
	routes, tight, focus := false, false, false
	for _, p := range c.Panels {
		routes = routes || p.Route != nil
		focus = focus || p.Route == nil && (p.Refusal.GetBottleneck().GetExists() || p.Refusal.GetBlockedEnd().GetAt() != nil)
		for _, l := range legs(p.Route) {
			tight = tight || l.tight
		}
	}
	var out []sign
	if routes {
		out = append(out, sign{"route", func(o *svg, x, y float64) { o.line(x, y, x+signWidth, y, "open", `stroke-width="2.4"`) }})
	}
	if tight {
		out = append(out, sign{"tight leg: below the preferred clearance", func(o *svg, x, y float64) {
			o.line(x, y, x+signWidth, y, "tight", `stroke-width="4.6"`)
			o.line(x, y, x+signWidth, y, "bars", `stroke-width="4.6" stroke-dasharray="1.5 4.1"`)
		}})
	}
	if focus {
		out = append(out, sign{"where it does not fit", func(o *svg, x, y float64) { o.circle(x+signWidth/2, y, 8, "smallest", "") }})
	}
	if routes || c.Start != nil || c.Goal != nil {
		out = append(out, sign{"start, goal", startGoal})
	}
	return append(out, d.signs()...)
}
