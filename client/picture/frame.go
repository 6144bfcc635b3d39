package picture

import (
	"math"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// xy is a place in metres or in user units; which, the name beside it says.
type xy struct{ x, y float64 }

// box is a rectangle, in metres or in user units.
type box struct{ minX, minY, maxX, maxY float64 }

func (b box) width() float64  { return b.maxX - b.minX }
func (b box) height() float64 { return b.maxY - b.minY }

func (b box) grow(d float64) box { return box{b.minX - d, b.minY - d, b.maxX + d, b.maxY + d} }

func (b box) meets(o box) bool {
	return b.minX <= o.maxX && o.minX <= b.maxX && b.minY <= o.maxY && o.minY <= b.maxY
}

func (b box) holds(p xy) bool {
	return p.x >= b.minX && p.x <= b.maxX && p.y >= b.minY && p.y <= b.maxY
}

func (b box) clip(o box) box {
	return box{max(b.minX, o.minX), max(b.minY, o.minY), min(b.maxX, o.maxX), min(b.maxY, o.maxY)}
}

func (b box) overlap(o box) float64 {
	c := b.clip(o)
	if c.width() <= 0 || c.height() <= 0 {
		return 0
	}
	return c.width() * c.height()
}

// dist is how far p is from the box; 0 inside.
func (b box) dist(p xy) float64 {
	return math.Hypot(max(b.minX-p.x, 0, p.x-b.maxX), max(b.minY-p.y, 0, p.y-b.maxY))
}

func boundsOf(pts []xy) box {
	b := box{math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)}
	for _, p := range pts {
		b = box{min(b.minX, p.x), min(b.minY, p.y), max(b.maxX, p.x), max(b.maxY, p.y)}
	}
	return b
}

// frame lays an area of the floor onto the sheet.
type frame struct {
	area box     // metres
	left float64 // user units of the area's left edge
	top  float64 // user units of the area's upper edge
	k    float64 // user units a metre
	id   string  // tells the ids of one frame from another's
}

func (f frame) at(p xy) xy { return xy{f.left + (p.x-f.area.minX)*f.k, f.top + (f.area.maxY-p.y)*f.k} }

func (f frame) width() float64  { return f.area.width() * f.k }
func (f frame) height() float64 { return f.area.height() * f.k }

// paper is the frame's rectangle on the sheet.
func (f frame) paper() box { return box{f.left, f.top, f.left + f.width(), f.top + f.height()} }

// floorBox is a floor's rectangle.
func floorBox(s *wideberthv1.FloorSettings) box {
	x, y, r := s.GetOrigin().GetXM(), s.GetOrigin().GetYM(), resolution(s)
	return box{x, y, x + float64(s.GetColumns())*r, y + float64(s.GetRows())*r}
}

// planFrame is the frame of the sheet's plan.
func planFrame(area box) frame {
	k := min(planWidth/area.width(), planHeight/area.height(), maxUnitsPerM)
	return frame{area: area, left: sheetMargin, top: planTop, k: k, id: "plan"}
}

// niceLength is the longest of 1, 2 and 5 times a power of ten that is at most m.
func niceLength(m float64) float64 {
	p := math.Pow(10, math.Floor(math.Log10(m)))
	switch {
	case m >= 5*p:
		return 5 * p
	case m >= 2*p:
		return 2 * p
	}
	return p
}

func pt(p *wideberthv1.Point) xy { return xy{p.GetXM(), p.GetYM()} }

func pts(ps []*wideberthv1.Point) []xy {
	out := make([]xy, len(ps))
	for i, p := range ps {
		out[i] = pt(p)
	}
	return out
}
