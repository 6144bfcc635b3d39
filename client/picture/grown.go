package picture

import (
	"fmt"
	"math"
	"strings"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func checkGrown(g *client.Grown) error {
	for i, o := range g.Outlines {
		for j, p := range o.GetPieces() {
			if !finite(p.GetFrom().GetXM(), p.GetFrom().GetYM(), p.GetCenter().GetXM(), p.GetCenter().GetYM(), p.GetRadiusM()) || p.GetRadiusM() < 0 {
				return fmt.Errorf("picture: grown.outlines[%d].pieces[%d]: not numbers", i, j)
			}
		}
	}
	return nil
}

// grownPath is what is grown over, for filling by the even-odd rule: where the floor's
// border is closed, no outline goes about the floor itself.
func grownPath(f frame, s Scene) string {
	var b strings.Builder
	if !s.Floor.Settings.GetOpenBorder() {
		all := floorBox(s.Floor.Settings)
		b.WriteString(chainPath(f, []xy{{all.minX, all.minY}, {all.maxX, all.minY}, {all.maxX, all.maxY}, {all.minX, all.maxY}}, true))
	}
	for _, o := range s.Grown.Outlines {
		outlineLoop(&b, f, o.GetPieces())
	}
	return b.String()
}

// outlineLoop writes one outline: straight pieces and arcs.
func outlineLoop(b *strings.Builder, f frame, pieces []*wideberthv1.GrownPiece) {
	for i, p := range pieces {
		from, to := pt(p.GetFrom()), pt(pieces[(i+1)%len(pieces)].GetFrom())
		q := f.at(from)
		if i == 0 {
			b.WriteString("M" + num(q.x) + " " + num(q.y))
		}
		r := p.GetRadiusM()
		end := f.at(to)
		if r == 0 {
			b.WriteString("L" + num(end.x) + " " + num(end.y))
			continue
		}
		c := pt(p.GetCenter())
		if len(pieces) == 1 { // a whole circle, by way of its far side
			far := f.at(xy{2*c.x - from.x, 2*c.y - from.y})
			b.WriteString(arcTo(r*f.k, false, far))
		}
		turn := math.Mod(math.Atan2(to.y-c.y, to.x-c.x)-math.Atan2(from.y-c.y, from.x-c.x)+4*math.Pi, 2*math.Pi)
		b.WriteString(arcTo(r*f.k, len(pieces) > 1 && turn > math.Pi, end))
	}
	if len(pieces) > 0 {
		b.WriteByte('z')
	}
}

// arcTo goes on by an arc that turns counter-clockwise on the floor, and so on the sheet.
func arcTo(r float64, large bool, end xy) string {
	flag := "0"
	if large {
		flag = "1"
	}
	return "A" + num(r) + " " + num(r) + " 0 " + flag + " 0 " + num(end.x) + " " + num(end.y)
}

// grownFacts are the words about grown solids.
func grownFacts(g *client.Grown, head, say func(string)) {
	s := g.Summary
	head(fmt.Sprintf("Solids grown by %.3f m", s.GetGrownByM()))
	say("Body: " + bodyWords(s.GetBody()))
	say(fmt.Sprintf("Grown over: %.2f m2, with %.2f m of outline in %d pieces", s.GetAreaM2(), s.GetPerimeterM(), s.GetOutlineCount()))
	if s.GetFreeAreaM2() > 0 {
		say(fmt.Sprintf("Free of the floor: %.2f m2", s.GetFreeAreaM2()))
	}
	for _, o := range g.Outlines {
		for _, p := range o.GetPieces() {
			if p.GetZone() {
				say("Closed zones are grown by the radius alone")
				return
			}
		}
	}
}
