package picture

import (
	"fmt"
	"math"
	"strings"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// featureBox is a rectangle in metres that holds a feature.
func featureBox(f *wideberthv1.Feature) box {
	switch {
	case f.GetSolid() != nil:
		s := f.GetSolid()
		grow := s.GetSurveyToleranceM()
		switch {
		case s.GetPolygon() != nil:
			return boundsOf(pts(s.GetPolygon().GetOuter().GetPoints())).grow(grow)
		case s.GetPolyline() != nil:
			return boundsOf(pts(s.GetPolyline().GetPoints())).grow(grow + s.GetPolyline().GetWidthM()/2)
		default:
			return boundsOf([]xy{pt(s.GetDisc().GetCenter())}).grow(grow + s.GetDisc().GetRadiusM())
		}
	case f.GetZone() != nil:
		return boundsOf(pts(f.GetZone().GetArea().GetOuter().GetPoints()))
	default:
		p := f.GetStation().GetPose()
		return boundsOf([]xy{{p.GetXM(), p.GetYM()}})
	}
}

// chainPath is a chain of points as a path, closed or not.
func chainPath(f frame, chain []xy, closed bool) string {
	var b strings.Builder
	for i, p := range chain {
		q := f.at(p)
		if i == 0 {
			b.WriteByte('M')
		} else {
			b.WriteByte('L')
		}
		b.WriteString(num(q.x) + " " + num(q.y))
	}
	if closed && len(chain) > 0 {
		b.WriteByte('z')
	}
	return b.String()
}

func polygonPath(f frame, p *wideberthv1.Polygon) string {
	d := chainPath(f, pts(p.GetOuter().GetPoints()), true)
	for _, h := range p.GetHoles() {
		d += chainPath(f, pts(h.GetPoints()), true)
	}
	return d
}

func discPath(f frame, c xy, r float64) string {
	q, u := f.at(c), num(r*f.k)
	return fmt.Sprintf("M%s %sa%s %s 0 1 0 %s 0a%s %s 0 1 0 -%s 0z", num(q.x-r*f.k), num(q.y), u, u, num(2*r*f.k), u, u, num(2*r*f.k))
}

// solidShape draws a solid's outline, filled.
func (d *drawing) solidShape(f frame, s *wideberthv1.Solid) {
	if t := s.GetSurveyToleranceM(); t > 0 {
		d.solidTolerance(f, s, t)
	}
	switch {
	case s.GetPolygon() != nil:
		d.out.path(polygonPath(f, s.GetPolygon()), "solid", "")
	case s.GetPolyline() != nil:
		d.out.path(chainPath(f, pts(s.GetPolyline().GetPoints()), false), "solid-line",
			`stroke-width="`+num(max(0.6, s.GetPolyline().GetWidthM()*f.k))+`"`)
	case s.GetDisc() != nil:
		d.out.path(discPath(f, pt(s.GetDisc().GetCenter()), s.GetDisc().GetRadiusM()), "solid", "")
	}
}

// solidTolerance draws how far the solid is grown by its survey's tolerance.
func (d *drawing) solidTolerance(f frame, s *wideberthv1.Solid, t float64) {
	switch {
	case s.GetPolygon() != nil:
		d.out.path(polygonPath(f, s.GetPolygon()), "tolerance", `stroke-width="`+num(2*t*f.k)+`"`)
	case s.GetPolyline() != nil:
		d.out.path(chainPath(f, pts(s.GetPolyline().GetPoints()), false), "tolerance",
			`stroke-width="`+num((s.GetPolyline().GetWidthM()+2*t)*f.k)+`"`)
	case s.GetDisc() != nil:
		d.out.path(discPath(f, pt(s.GetDisc().GetCenter()), s.GetDisc().GetRadiusM()), "tolerance", `stroke-width="`+num(2*t*f.k)+`"`)
	}
}

// outlinePath is a feature's outline for hatching; a wall becomes its rectangles.
func outlinePath(f frame, ft *wideberthv1.Feature) string {
	switch {
	case ft.GetSolid().GetPolygon() != nil:
		return polygonPath(f, ft.GetSolid().GetPolygon())
	case ft.GetSolid().GetDisc() != nil:
		return discPath(f, pt(ft.GetSolid().GetDisc().GetCenter()), ft.GetSolid().GetDisc().GetRadiusM())
	case ft.GetSolid().GetPolyline() != nil:
		var b strings.Builder
		chain, half := pts(ft.GetSolid().GetPolyline().GetPoints()), ft.GetSolid().GetPolyline().GetWidthM()/2
		for i := 1; i < len(chain); i++ {
			p, q := chain[i-1], chain[i]
			l := math.Hypot(q.x-p.x, q.y-p.y)
			if l == 0 {
				continue
			}
			nx, ny := -(q.y-p.y)/l*half, (q.x-p.x)/l*half
			b.WriteString(chainPath(f, []xy{{p.x + nx, p.y + ny}, {q.x + nx, q.y + ny}, {q.x - nx, q.y - ny}, {p.x - nx, p.y - ny}}, true))
		}
		return b.String()
	case ft.GetZone() != nil:
		return polygonPath(f, ft.GetZone().GetArea())
	}
	return ""
}

// zone draws where a rule holds. A one-way zone's arrows follow its heading, so
// each has a pattern of its own.
func (d *drawing) zone(f frame, z *wideberthv1.Zone) {
	path := polygonPath(f, z.GetArea())
	switch {
	case z.GetClosed() != nil:
		d.out.path(path, "closed", "")
	case z.GetSpeedLimit() != nil:
		d.out.path(path, "speed", "")
	case z.GetOneWay() != nil:
		d.patterns++
		id := fmt.Sprintf("oneway-%d", d.patterns)
		turn := -z.GetOneWay().GetHeadingRad() * 180 / math.Pi
		d.out.raw(`<pattern id="%s" width="26" height="14" patternUnits="userSpaceOnUse" patternTransform="rotate(%s)">`+
			`<path d="M3 7H17M12 3L17 7L12 11" fill="none" stroke="%s" stroke-width="1.3" opacity="0.75"/></pattern>`,
			id, num(turn), onewayColour)
		d.out.path(path, "oneway", `fill="url(#`+id+`)"`)
	}
}

// station draws where a robot stands and which way it faces.
func (d *drawing) station(f frame, p *wideberthv1.Pose) {
	q := f.at(xy{p.GetXM(), p.GetYM()})
	const size = 4.5
	sin, cos := math.Sincos(p.GetHeadingRad())
	d.out.line(q.x, q.y, q.x+2.4*size*cos, q.y-2.4*size*sin, "tick", "")
	d.out.rect(q.x-size, q.y-size, 2*size, 2*size, "station", "")
}
