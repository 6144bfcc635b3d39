package picture

import "math"

// placer finds room for labels. Labels are placed one by one, what is added first
// best, then moved again while that makes the whole better.
type placer struct {
	within box
	taken  []box // marks: not to be written over
	lines  []xy  // points of the route, user units: better not
	ink    func(b box) float64
	labels []*label
}

// label is text, or a number in a ring, that belongs to a place on the sheet.
type label struct {
	at       xy
	gap      float64 // from at to the label's nearest edge
	class    string
	size     float64 // of the font; 0 for a ring
	lines    []string
	optional bool // better left out than in the way
	loose    bool // of an area: no leader however far

	w, h float64
	box  box
	far  bool // a leader is wanted
	cost float64
}

// Labels are tried in rings about their place, in these directions, the first
// the best.
var (
	ringSteps  = []float64{0, 10, 20, 34, 52, 80}
	directions = []xy{{1, 0}, {-1, 0}, {0, -1}, {0, 1}, {1, -1}, {1, 1}, {-1, -1}, {-1, 1}, {0.5, -1}, {-0.5, -1}, {0.5, 1}, {-0.5, 1}}
)

// What a label may cover costs by the square unit: another label or a mark,
// what is off the sheet, solids; by the point: the route; and by the unit of
// distance.
const (
	coverLabel = 100.0
	coverOff   = 200.0
	coverRoute = 40.0
	coverInk   = 0.5
	perUnit    = 6.0
	// noRoom is what makes an optional label better left out.
	noRoom = 1500.0
	// leaderFrom is the ring from which on a label has a leader.
	leaderFrom = 20.0
	// moves is how often all labels are placed anew; it settles after two or three.
	moves = 3
)

// ringRadius is that of a number in a ring.
const ringRadius = 9.0

// add wants a label placed.
func (p *placer) add(l label) {
	if l.size == 0 {
		l.w, l.h = 2*ringRadius, 2*ringRadius
	}
	for _, line := range l.lines {
		if l.size > 0 {
			l.w = max(l.w, textWidth(line, l.size)*classWidth(l.class))
			l.h += 1.2 * l.size
		}
	}
	p.labels = append(p.labels, &l)
}

// settle places all labels.
func (p *placer) settle() {
	for range moves {
		for _, l := range p.labels {
			l.cost = math.Inf(1)
			for _, ring := range ringSteps {
				for i, dir := range directions {
					p.try(l, ring, dir, float64(i))
				}
			}
		}
	}
}

// try puts a label at one place if that is better than where it is.
func (p *placer) try(l *label, ring float64, dir xy, bias float64) {
	gap := l.gap + ring
	c := xy{l.at.x + dir.x*(gap+l.w/2), l.at.y + dir.y*(gap+l.h/2)}
	b := box{c.x - l.w/2, c.y - l.h/2, c.x + l.w/2, c.y + l.h/2}
	cost := ring*perUnit + bias + coverOff*(l.w*l.h-b.overlap(p.within))
	for _, t := range p.taken {
		cost += coverLabel * b.overlap(t)
	}
	for _, o := range p.labels {
		if o != l && o.box != (box{}) {
			cost += coverLabel * b.overlap(o.box)
		}
	}
	if cost >= l.cost {
		return
	}
	for _, q := range p.lines {
		if b.grow(3).holds(q) {
			cost += coverRoute
		}
	}
	if cost < l.cost && p.ink != nil {
		cost += coverInk * p.ink(b)
	}
	if cost < l.cost {
		l.box, l.far, l.cost = b, ring >= leaderFrom && !l.loose, cost
	}
}

// drawLabels settles and writes them.
func (d *drawing) drawLabels(p *placer) {
	p.settle()
	for _, l := range p.labels {
		if l.optional && l.cost > noRoom {
			continue
		}
		b := l.box
		mid := (b.minX + b.maxX) / 2
		if l.far {
			d.out.line(l.at.x, l.at.y, max(b.minX, min(l.at.x, b.maxX)), max(b.minY, min(l.at.y, b.maxY)), "leader", "")
		}
		if l.size == 0 {
			y := (b.minY + b.maxY) / 2
			d.out.circle(mid, y, ringRadius, "chip", "")
			d.out.text(mid, y+4.3, "number", "", l.lines[0])
			continue
		}
		for i, line := range l.lines {
			// Text is set from its base line, a quarter of its size above its foot.
			d.out.text(mid, b.minY+l.size*(1.2*float64(i)+0.95), l.class, `text-anchor="middle"`, line)
		}
	}
}
