package picture

import (
	"math"
	"strings"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// maxBandSamples bounds the discs that a band is made of; a long route has them
// farther apart.
const (
	maxBandSamples = 3000
	bandStepM      = 0.25
)

// leg is a leg of a route in metres.
type leg struct {
	tight bool
	pts   []xy
	wire  *wideberthv1.Leg
}

func legs(r *wideberthv1.Route) []leg {
	var out []leg
	for _, l := range r.GetLegs() {
		g := leg{tight: l.GetKind() == wideberthv1.LegKind_LEG_KIND_TIGHT, wire: l}
		for _, p := range l.GetPoints() {
			g.pts = append(g.pts, xy{p.GetXM(), p.GetYM()})
		}
		if len(g.pts) > 0 {
			out = append(out, g)
		}
	}
	return out
}

func chainLength(chain []xy) float64 {
	s := 0.0
	for i := 1; i < len(chain); i++ {
		s += math.Hypot(chain[i].x-chain[i-1].x, chain[i].y-chain[i-1].y)
	}
	return s
}

// sampled is points along a chain at most step apart, its own points included.
func sampled(chain []xy, step float64) []xy {
	var out []xy
	for i, q := range chain {
		if i > 0 {
			p := chain[i-1]
			n := int(math.Ceil(math.Hypot(q.x-p.x, q.y-p.y) / step))
			for j := 1; j < n; j++ {
				t := float64(j) / float64(n)
				out = append(out, xy{p.x + t*(q.x-p.x), p.y + t*(q.y-p.y)})
			}
		}
		out = append(out, q)
	}
	return out
}

// wide is the widest that a band is drawn, half of it: the preferred clearance of
// the route's body, or enough to show its body.
func wide(r *wideberthv1.Route) float64 {
	return max(r.GetBody().GetPreferredClearanceM(), r.GetBody().GetRadiusM()+r.GetBody().GetMarginM(), 0.1)
}

// bands draws the clearance along a route: discs that touch no solid, at most
// the preferred clearance wide, side by side.
func (d *drawing) bands(f frame) {
	step := max(bandStepM, d.scene.Route.GetLengthM()/maxBandSamples)
	most := wide(d.scene.Route)
	visible := f.area.grow(most)
	for _, tight := range []bool{false, true} {
		var b strings.Builder
		for _, l := range d.legs {
			if l.tight != tight {
				continue
			}
			for _, p := range sampled(l.pts, step) {
				if visible.holds(p) {
					if c := d.room.clearance(p, most); c > 0 {
						b.WriteString(discPath(f, p, c))
					}
				}
			}
		}
		class := "band-open"
		if tight {
			class = "band-tight"
		}
		d.out.path(b.String(), class, "")
	}
}

// routeLines draws the route over its bands: open legs as a line, tight ones
// thicker and barred.
func (d *drawing) routeLines(f frame, zoom float64) {
	if d.scene.Previous != nil {
		var all []xy
		for _, l := range legs(d.scene.Previous) {
			all = append(all, l.pts...)
		}
		d.out.path(chainPath(f, all, false), "previous", "")
	}
	width := func(w float64) string { return `stroke-width="` + num(w*zoom) + `"` }
	for _, l := range d.legs {
		d.out.path(chainPath(f, l.pts, false), "casing", width(8))
	}
	for _, l := range d.legs {
		path := chainPath(f, l.pts, false)
		if l.tight {
			d.out.path(path, "tight", width(6.5)+` data-leg="tight"`)
			d.out.path(path, "bars", width(6.5)+` stroke-dasharray="`+num(2.2*zoom)+" "+num(5.8*zoom)+`"`)
		} else {
			d.out.path(path, "open", width(3.4)+` data-leg="open"`)
		}
	}
}

// arrowEvery is how many user units lie between two arrow heads on a route.
const arrowEvery = 130.0

// arrows marks the direction of travel.
func (d *drawing) arrows(f frame) {
	var all []xy
	for _, l := range d.legs {
		all = append(all, l.pts...)
	}
	next := arrowEvery / 2
	s := 0.0
	for i := 1; i < len(all); i++ {
		p, q := f.at(all[i-1]), f.at(all[i])
		l := math.Hypot(q.x-p.x, q.y-p.y)
		for l > 0 && next <= s+l {
			t := (next - s) / l
			at, ux, uy := xy{p.x + t*(q.x-p.x), p.y + t*(q.y-p.y)}, (q.x-p.x)/l, (q.y-p.y)/l
			if f.paper().holds(at) {
				const long, half = 6.5, 5.5
				d.out.path("M"+num(at.x+long*ux)+" "+num(at.y+long*uy)+
					"L"+num(at.x-long*ux-half*uy)+" "+num(at.y-long*uy+half*ux)+
					"L"+num(at.x-0.5*long*ux)+" "+num(at.y-0.5*long*uy)+
					"L"+num(at.x-long*ux+half*uy)+" "+num(at.y-long*uy-half*ux)+"z", "arrow", "")
			}
			next += arrowEvery
		}
		s += l
	}
}

// ends draws where the route begins and ends, or where a refused one would have.
func (d *drawing) ends(f frame) {
	start, goal := d.scene.Start, d.scene.Goal
	if r := d.scene.Route; r != nil {
		start, goal = r.GetStart(), r.GetGoal()
	}
	if start != nil {
		q := f.at(xy{start.GetXM(), start.GetYM()})
		d.out.circle(q.x, q.y, 6.5, "end", "")
	}
	if goal != nil {
		q := f.at(xy{goal.GetXM(), goal.GetYM()})
		d.out.circle(q.x, q.y, 8, "goal", "")
		d.out.circle(q.x, q.y, 3, "floor", "")
	}
}
