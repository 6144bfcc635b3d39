package picture

import (
	"fmt"
	"math"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// maxLabels bounds how many stations, zones and features are named on a plan.
const maxLabels = 200

// labelsOf wants the plan's labels placed, the most wanted first. Names that
// go inside large blocks need no placing and are written at once.
func (d *drawing) labelsOf(f frame) *placer {
	p := d.placer(f)
	if o, ok := d.focus(); ok && f.area.holds(o.at) {
		p.add(label{at: f.at(o.at), gap: max(9, o.radius*f.k) + 8, class: "figure", size: figureSize, lines: []string{o.figure}})
	}
	d.tightNumbers(f, p)
	left := maxLabels
	each := func(is func(*wideberthv1.Feature) bool, draw func(*wideberthv1.Feature)) {
		for _, ft := range d.scene.Floor.Features {
			if left > 0 && is(ft) && featureBox(ft).meets(f.area) {
				draw(ft)
				left--
			}
		}
	}
	each(func(ft *wideberthv1.Feature) bool { return ft.GetStation() != nil }, func(ft *wideberthv1.Feature) {
		ps := ft.GetStation().GetPose()
		p.add(label{at: f.at(xy{ps.GetXM(), ps.GetYM()}), gap: 10, class: "label", size: labelSize, lines: []string{ft.GetName()}})
	})
	each(func(ft *wideberthv1.Feature) bool { return ft.GetZone() != nil }, func(ft *wideberthv1.Feature) {
		areaLabel(f, p, featureBox(ft), ft.GetName(), zoneRule(ft.GetZone()))
	})
	wanted := d.wantedNames()
	each(func(ft *wideberthv1.Feature) bool { return ft.GetSolid() != nil && wanted[ft.GetName()] }, func(ft *wideberthv1.Feature) {
		b := featureBox(ft)
		if ft.GetSolid().GetPolygon() != nil && d.nameInside(f, p, b, ft.GetName()) {
			return
		}
		at := f.at(d.nearFocus(b))
		p.add(label{at: at, gap: 8, class: "zone-label", size: smallSize, optional: true, lines: []string{ft.GetName()}})
	})
	return p
}

// placer starts with the marks taken and the route to be kept off.
func (d *drawing) placer(f frame) *placer {
	p := &placer{within: f.paper().grow(-3)}
	for _, ft := range d.scene.Floor.Features {
		if ps := ft.GetStation().GetPose(); ps != nil {
			q := f.at(xy{ps.GetXM(), ps.GetYM()})
			p.taken = append(p.taken, box{q.x - 6, q.y - 6, q.x + 6, q.y + 6})
		}
	}
	for _, l := range d.legs {
		for _, q := range sampled(l.pts, 6/f.k) {
			p.lines = append(p.lines, f.at(q))
		}
	}
	if o, ok := d.focus(); ok {
		q, r := f.at(o.at), max(9, o.radius*f.k)
		p.taken = append(p.taken, box{q.x - r, q.y - r, q.x + r, q.y + r})
	}
	p.ink = d.inkUnder(f)
	return p
}

// inkUnder tells about how much solid lies under a rectangle of the sheet, in
// square units: labels read better on an empty floor.
func (d *drawing) inkUnder(f frame) func(b box) float64 {
	var solids []box
	cells := cellRects(d.scene.Floor, f, blocks(d.scene.Floor))
	add := func(m box) {
		a, b := f.at(xy{m.minX, m.maxY}), f.at(xy{m.maxX, m.minY})
		solids = append(solids, box{a.x, a.y, b.x, b.y})
	}
	for _, c := range cells.rects {
		add(c)
	}
	for _, ft := range d.scene.Floor.Features {
		if ft.GetSolid() == nil {
			continue
		}
		if w := ft.GetSolid().GetPolyline(); w != nil {
			chain, half := pts(w.GetPoints()), w.GetWidthM()/2
			for _, q := range sampled(chain, max(4*half, 1)) {
				add(boundsOf([]xy{q}).grow(max(2*half, 0.5)))
			}
			continue
		}
		add(featureBox(ft))
	}
	return func(b box) float64 {
		sum := 0.0
		for _, s := range solids {
			sum += s.overlap(b)
		}
		return sum
	}
}

// nameInside writes a large block's name upon it, if it is large enough.
func (d *drawing) nameInside(f frame, p *placer, b box, name string) bool {
	mid := f.at(xy{(b.minX + b.maxX) / 2, (b.minY + b.maxY) / 2})
	w := textWidth(name, smallSize) + 8
	if b.width()*f.k < 1.4*w || b.height()*f.k < 3*smallSize || !f.area.holds(xy{b.minX, b.minY}) || !f.area.holds(xy{b.maxX, b.maxY}) {
		return false
	}
	p.taken = append(p.taken, box{mid.x - w/2, mid.y - smallSize, mid.x + w/2, mid.y + smallSize})
	d.out.text(mid.x, mid.y+4, "on-solid", `text-anchor="middle"`, name)
	return true
}

// areaLabel writes a name and what holds there inside an area, at its middle or where
// there is room.
func areaLabel(f frame, p *placer, b box, lines ...string) {
	b = b.clip(f.area)
	mid := f.at(xy{(b.minX + b.maxX) / 2, (b.minY + b.maxY) / 2})
	w := 0.0
	for _, l := range lines {
		w = max(w, textWidth(l, smallSize))
	}
	// In a long narrow area, one line.
	if b.height()*f.k < 40 && b.width()*f.k > 2*w && len(lines) == 2 {
		lines = []string{lines[0] + ": " + lines[1]}
		w = textWidth(lines[0], smallSize)
	}
	// Labels stand beside their place; half a width to the left of the middle, this
	// one's first try is the middle.
	p.add(label{at: xy{mid.x - w/2, mid.y}, class: "zone-label", size: smallSize, optional: true, loose: true, lines: lines})
}

func zoneRule(z *wideberthv1.Zone) string {
	switch {
	case z.GetClosed() != nil:
		return "closed to robots"
	case z.GetSpeedLimit() != nil:
		return fmt.Sprintf("at most %.1f m/s", z.GetSpeedLimit().GetMaxSpeedMps())
	}
	return "one way"
}

// tightNumbers puts a number at each tight leg, the one the list below gives it.
func (d *drawing) tightNumbers(f frame, p *placer) {
	for i, l := range d.tight {
		if i == maxTightListed || len(d.tight) == 1 {
			return
		}
		at := l.pts[len(l.pts)/2]
		if s := l.wire.GetSmallestAt(); s != nil {
			at = pt(s)
		}
		if !f.area.holds(at) {
			continue
		}
		p.add(label{at: f.at(at), gap: 12, lines: []string{fmt.Sprint(i + 1)}})
	}
}

// wantedNames are the solids worth naming: nearest to a tight leg, at the cause
// of a refusal, or large blocks that people go by.
func (d *drawing) wantedNames() map[string]bool {
	w := map[string]bool{}
	for _, l := range d.tight {
		w[l.wire.GetNearestFeature()] = true
	}
	for _, n := range d.scene.Refusal.GetBottleneck().GetFeatures() {
		w[n] = true
	}
	w[d.scene.Refusal.GetBlockedEnd().GetNearestFeature()] = true
	for _, ft := range d.change.came {
		w[ft.GetName()] = true
	}
	const largeM2 = 60
	for _, ft := range d.scene.Floor.Features {
		if b := featureBox(ft); ft.GetSolid().GetPolygon() != nil && b.width()*b.height() >= largeM2 {
			w[ft.GetName()] = true
		}
	}
	return w
}

// nearFocus is where a solid's name is hung: its middle, or for a long one the
// part nearest to what the sheet is about.
func (d *drawing) nearFocus(b box) xy {
	mid := xy{(b.minX + b.maxX) / 2, (b.minY + b.maxY) / 2}
	o, ok := d.focus()
	if !ok || math.Hypot(b.width(), b.height()) < 4 || b.dist(o.at) > 2 {
		return mid
	}
	return xy{max(b.minX, min(o.at.x, b.maxX)), max(b.minY, min(o.at.y, b.maxY))}
}
