package picture

import (
	"fmt"
	"strings"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// maxTightListed is how many tight legs the list below the plan holds.
const maxTightListed = 10

// Below the plan stand three panels: what the signs mean, what was found in
// words, and the focus enlarged.
const (
	legendWidth = 322.0
	detailWidth = 370.0
	detailTall  = 280.0
	lineHeight  = 20.0
	signWidth   = 44.0
)

type panels struct {
	top, bottom float64
	signs       []sign
	facts       []fact
	detail      *frame
}

// sign is a row of the legend: a little drawing and its meaning.
type sign struct {
	meaning string
	draw    func(o *svg, x, y float64) // x left, y the row's middle
}

// fact is a row of the words: with a head, or of a table.
type fact struct {
	head bool
	text string
	chip string // number in a ring before the text
}

// panels works out what stands below the plan and how far down that reaches.
func (d *drawing) panels(top float64) panels {
	p := panels{top: top, signs: d.signs(), facts: d.facts()}
	if o, ok := d.focus(); ok && finite(o.at.x, o.at.y) {
		half := 6.0
		if b := d.body(); b != nil {
			half = max(3, 5*(b.GetRadiusM()+b.GetMarginM()))
		}
		w, h := 2*half, 2*half*detailTall/detailWidth
		p.detail = &frame{
			area: box{o.at.x - w/2, o.at.y - h/2, o.at.x + w/2, o.at.y + h/2},
			left: sheetWidth - sheetMargin - detailWidth, top: top + 24, k: detailWidth / w, id: "detail",
		}
	}
	if b, ok := d.extract(); ok {
		p.detail = &frame{area: b, left: sheetWidth - sheetMargin - detailWidth, top: top + 24, k: detailWidth / b.width(), id: "detail"}
	}
	rows := max(float64(len(p.signs)), float64(len(p.facts)))
	p.bottom = top + 58 + rows*lineHeight
	if p.detail != nil {
		p.bottom = max(p.bottom, p.detail.top+detailTall+24)
	}
	return p
}

func (d *drawing) drawPanels(p panels, plan frame) {
	d.axesAndScale(p, plan)
	y := p.top + 58
	for _, s := range p.signs {
		s.draw(&d.out, sheetMargin, y)
		d.out.text(sheetMargin+signWidth+10, y+5, "legend", "", s.meaning)
		y += lineHeight
	}
	x := sheetMargin + legendWidth + panelGap
	y = p.top + 14
	for _, f := range p.facts {
		class := "fact"
		if f.head {
			class = "head"
		}
		dx := 0.0
		if f.chip != "" {
			d.out.circle(x+9, y-5, ringRadius, "chip", "")
			d.out.text(x+9, y-0.7, "number", "", f.chip)
			dx = 26
		}
		d.out.text(x+dx, y, class, "", f.text)
		y += lineHeight
	}
	if p.detail != nil {
		head := "Enlarged: the smallest clearance"
		if d.scene.Roadmap != nil {
			head = "Enlarged: at the tightest node"
		} else if d.scene.Route == nil {
			head = "Enlarged: where it does not fit"
		}
		d.out.text(p.detail.left, p.top+14, "head", "", head)
		d.plan(*p.detail, 2.2)
		d.detailLabels(*p.detail)
		bar := niceLength(p.detail.area.width() / 3)
		d.scaleBar(p.detail.left+p.detail.width()-bar*p.detail.k-12, p.detail.top+p.detail.height()-12, bar, p.detail.k, "scale-bar-detail")
	}
}

// factsWidth is how wide the words may be.
func (d *drawing) factsWidth() float64 {
	w := planWidth - legendWidth - panelGap
	_, enlarged := d.extract()
	if _, ok := d.focus(); ok || enlarged {
		w -= detailWidth + panelGap
	}
	return w
}

// axesAndScale draws the frame's directions and the scale bar.
func (d *drawing) axesAndScale(p panels, plan frame) {
	x, y := sheetMargin+4, p.top+30
	d.out.raw(`<g id="axes">`)
	d.out.path(fmt.Sprintf("M%s %sV%sM%s %sH%s", num(x), num(y), num(y-26), num(x), num(y), num(x+26)), "leader", "")
	d.out.path(fmt.Sprintf("M%s %sl-4 8h8zM%s %sl-8 -4v8z", num(x), num(y-32), num(x+32), num(y)), "scale", "")
	d.out.text(x+36, y+4, "small", "", "x")
	d.out.text(x+7, y-24, "small", "", "y")
	d.out.raw("</g>")
	bar := niceLength(min(plan.area.width()/3, 170/plan.k))
	d.scaleBar(x+84, y, bar, plan.k, "scale-bar")
}

// scaleBar draws a bar of a length in metres, its left end at x.
func (d *drawing) scaleBar(x, y, lengthM, k float64, id string) {
	w := lengthM * k
	d.out.raw(`<g id="%s" data-length-m="%s">`, id, num(lengthM))
	d.out.rect(x-9, y-23, w+18, 31, "plate", "")
	d.out.rect(x, y-2, w, 4, "scale", "")
	d.out.rect(x, y-5, 1.6, 10, "scale", "")
	d.out.rect(x+w-1.6, y-5, 1.6, 10, "scale", "")
	d.out.text(x+w/2, y-9, "label", `text-anchor="middle"`, num(lengthM)+" m")
	d.out.raw("</g>")
}

// detailLabels names what stands about the focus.
func (d *drawing) detailLabels(f frame) {
	p := d.placer(f)
	paper := f.paper()
	p.taken = append(p.taken, box{paper.maxX - f.width()/3 - 30, paper.maxY - 40, paper.maxX, paper.maxY}) // the scale bar's
	if o, ok := d.focus(); ok {
		mark := o.radius
		if b := d.body(); b != nil {
			mark = max(mark, b.GetRadiusM()+b.GetMarginM())
		}
		p.add(label{at: f.at(o.at), gap: mark*f.k + 6, class: "figure", size: figureSize, lines: []string{o.short}})
	}
	near := f.area
	wanted := d.wantedNames()
	for _, ft := range d.scene.Floor.Features {
		b := featureBox(ft)
		if ft.GetSolid() == nil || !wanted[ft.GetName()] || !b.meets(near.grow(-0.3)) {
			continue
		}
		b = b.clip(near)
		mid := xy{(b.minX + b.maxX) / 2, (b.minY + b.maxY) / 2}
		p.add(label{at: f.at(mid), gap: 4, class: "label", size: labelSize, optional: true, lines: []string{ft.GetName()}})
	}
	for _, ft := range d.scene.Floor.Features {
		if ps := ft.GetStation().GetPose(); ps != nil && near.holds(xy{ps.GetXM(), ps.GetYM()}) {
			p.add(label{at: f.at(xy{ps.GetXM(), ps.GetYM()}), gap: 8, class: "label", size: labelSize, optional: true, lines: []string{ft.GetName()}})
		}
	}
	d.drawLabels(p)
}

// foot says which version this is and what it is not.
func (d *drawing) foot(height float64) {
	d.out.line(sheetMargin, height-52, sheetWidth-sheetMargin, height-52, "rule", "")
	st := d.scene.Floor.Stamp
	d.out.text(sheetMargin, height-33, "small", "", fmt.Sprintf("Floor %s, version %d, digest %s", st.GetFloor(), st.GetVersion(), st.GetDigest()))
	d.out.text(sheetMargin, height-15, "small", "", caution(d.version()))
}

// version is what the sheet's answer speaks of.
func (d *drawing) version() int64 {
	if r := d.scene.Route; r.GetCheckedAgainst().GetVersion() > 0 {
		return r.GetCheckedAgainst().GetVersion()
	}
	return d.scene.Floor.Stamp.GetVersion()
}

// caution is on every sheet.
func caution(version int64) string {
	return fmt.Sprintf("Planning figure, checked against version %d; not a safety function. People and loose loads are not on the map.", version)
}

func (d *drawing) summary() string {
	var parts []string
	for _, f := range d.facts() {
		if !f.head {
			parts = append(parts, f.text)
		}
	}
	return strings.Join(append(parts, caution(d.version())), ". ")
}

// facts are the words beside the legend.
func (d *drawing) facts() []fact {
	var out []fact
	say := func(text string) {
		for _, l := range wrap(text, bodySize, d.factsWidth(), 5) {
			out = append(out, fact{text: l})
		}
	}
	head := func(text string) { out = append(out, fact{head: true, text: text}) }
	if b := d.body(); b != nil {
		head(bodyWords(b))
	}
	if r := d.scene.Route; r != nil {
		say(fmt.Sprintf("Route %.1f m, about %.0f s at the advised speed ceilings", r.GetLengthM(), r.GetDurationS()))
		say("Smallest clearance " + metres(r.GetSmallestClearanceM()) + " at " + placeWords(r.GetSmallestAt()))
		if r.GetBound().GetCutShort() {
			say("The time budget ran out: the best route found by then")
		}
		d.tightFacts(&out)
	}
	if r := d.scene.Refusal; r != nil {
		head("No route: " + reasonWords(r.GetReason()))
		say(r.GetExplanation())
		if b := r.GetBottleneck(); b.GetExists() {
			say("Narrowest " + metres(b.GetWidthM()) + " at " + placeWords(b.GetAt()) + "; " + metres(b.GetWidthNeededM()) + " needed")
			if len(b.GetFeatures()) > 0 {
				say("Between " + few(b.GetFeatures()))
			}
		}
	}
	if d.scene.Before != nil {
		head(fmt.Sprintf("Changed since version %d", d.scene.Before.Stamp.GetVersion()))
		for _, l := range d.changeLines() {
			say(l)
		}
	}
	if d.scene.Roadmap != nil {
		d.roadmapFacts(head, say)
	}
	if d.scene.Grown != nil {
		grownFacts(d.scene.Grown, head, say)
	}
	if len(out) == 0 {
		st := d.scene.Floor.Settings
		head(fmt.Sprintf("%.1f m by %.1f m, cells of %s m", floorBox(st).width(), floorBox(st).height(), num(resolution(st))))
		say(fmt.Sprintf("%d features", len(d.scene.Floor.Features)))
	}
	return out
}

func (d *drawing) tightFacts(out *[]fact) {
	if len(d.tight) == 0 {
		*out = append(*out, fact{text: "No tight leg"})
		return
	}
	*out = append(*out, fact{head: true, text: fmt.Sprintf("Tight legs: %d (s, clearance, ceiling, nearest)", len(d.tight))})
	for i, l := range d.tight {
		if i == maxTightListed {
			*out = append(*out, fact{text: fmt.Sprintf("and %d more", len(d.tight)-i)})
			return
		}
		from := l.wire.GetPoints()[0].GetSM()
		text := fmt.Sprintf("%.1f to %.1f m: %s, %.1f m/s", from, from+l.wire.GetLengthM(),
			metres(l.wire.GetSmallestClearanceM()), l.wire.GetSpeedCeilingMps())
		if n := l.wire.GetNearestFeature(); n != "" {
			text += ", " + n
		}
		*out = append(*out, fact{text: cut(text, bodySize, d.factsWidth()-26), chip: fmt.Sprint(i + 1)})
	}
}

func bodyWords(b *wideberthv1.Body) string {
	name := b.GetName()
	if name == "" {
		name = "body"
	}
	need := b.GetRadiusM() + b.GetMarginM()
	return fmt.Sprintf("%s: radius %.2f m, margin %.2f m, needs %.2f m of width", name, b.GetRadiusM(), b.GetMarginM(), 2*need)
}

func placeWords(p *wideberthv1.Point) string {
	if p == nil {
		return "a place not said"
	}
	return fmt.Sprintf("x %.2f, y %.2f", p.GetXM(), p.GetYM())
}

func reasonWords(r wideberthv1.RefusalReason) string {
	switch r {
	case wideberthv1.RefusalReason_REFUSAL_REASON_START_BLOCKED:
		return "the start is blocked"
	case wideberthv1.RefusalReason_REFUSAL_REASON_GOAL_BLOCKED:
		return "the goal is blocked"
	case wideberthv1.RefusalReason_REFUSAL_REASON_NO_PASSAGE:
		return "every way is too narrow or closed"
	case wideberthv1.RefusalReason_REFUSAL_REASON_OUT_OF_TIME:
		return "the search ran out of time"
	}
	return "reason not said"
}
