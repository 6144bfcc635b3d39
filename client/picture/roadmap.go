package picture

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// How much of a roadmap is drawn: what would lie closer than an eye can tell apart is
// left out, or drawn as areas, and the sheet says so.
const (
	// edgeCover is the most of the sheet that edges of a unit's width may cover, and
	// boldCover how much those of full width may before they are drawn thinner.
	edgeCover = 0.2
	boldCover = 0.1
	// maxDrawnEdges bounds the sheet's size.
	maxDrawnEdges = 30_000
	// nodeRoom is the least room a node has, in units each way, for all to be dots.
	nodeRoom = 12.0
	// leastOutlined is how wide and tall a cell is for its outline to be drawn, in units.
	leastOutlined = 2.5
	// patchUnits is the side of the areas that stand for nodes and cells.
	patchUnits = 1.5
	// maxNotes is how many of a roadmap's notes a sheet has.
	maxNotes = 7
)

// plotted is what of a roadmap is drawn into one frame.
type plotted struct {
	steps       []Step
	present     []bool // by step, whether an edge or an area has it
	edges       []int  // of the roadmap's, those that are drawn
	cells, thin []int  // outlined, and too thin for that
	// inArea counts those that meet the frame, drawn or not.
	inArea struct{ nodes, edges, cells int }
	upToM  float64 // longer edges are not drawn; 0: all are
	width  float64 // of edges, times their step's
	medium float64 // metres, the length of an edge in the middle of the drawn ones
	dots   float64 // radius of nodes in units; 0: not drawn
	areas  bool    // nodes and cells as areas, and no edges
}

func checkRoadmap(r *client.Roadmap) error {
	bad := func(list string, i int) error { return fmt.Errorf("picture: roadmap.%s[%d]: not numbers", list, i) }
	for i, n := range r.Nodes {
		if !finite(n.GetAt().GetXM(), n.GetAt().GetYM()) {
			return bad("nodes", i)
		}
	}
	for i, e := range r.Edges {
		for _, p := range e.GetPoints() {
			if !finite(p.GetXM(), p.GetYM()) {
				return bad("edges", i)
			}
		}
	}
	for i, c := range r.Cells {
		for _, p := range c.GetRing().GetPoints() {
			if !finite(p.GetXM(), p.GetYM()) {
				return bad("cells", i)
			}
		}
	}
	return nil
}

// plot chooses what of the roadmap is drawn.
func plot(r *client.Roadmap, f frame) plotted {
	p := plotted{steps: Steps(r.Header.GetBody()), width: 1}
	p.present = make([]bool, len(p.steps))
	for i, c := range r.Cells {
		b := boundsOf(pts(c.GetRing().GetPoints()))
		if !b.meets(f.area) {
			continue
		}
		p.inArea.cells++
		if min(b.width(), b.height())*f.k >= leastOutlined {
			p.cells = append(p.cells, i)
		} else {
			p.thin = append(p.thin, i)
		}
	}
	for _, n := range r.Nodes {
		if f.area.holds(pt(n.GetAt())) {
			p.inArea.nodes++
		}
	}
	var lengths []float64
	for i, e := range r.Edges {
		if boundsOf(pts(e.GetPoints())).meets(f.area) {
			p.edges = append(p.edges, i)
			lengths = append(lengths, e.GetLengthM())
		}
	}
	p.inArea.edges = len(p.edges)
	if len(lengths) == 0 {
		return p
	}
	slices.Sort(lengths)
	p.medium = lengths[len(lengths)/2]
	if p.areas = len(lengths) > maxDrawnEdges; p.areas {
		p.edges = nil
		for _, n := range r.Nodes {
			p.present[StepOf(p.steps, n.GetClearanceM())] = true
		}
		return p
	}
	// Lines closer than ten units would run together: half of the edges' length is in such
	// as are no longer than typical.
	sum, typical := 0.0, 0.0
	for _, l := range lengths {
		sum += l
	}
	half := sum / 2
	for i := 0; half > 0 && i < len(lengths); i++ {
		typical, half = lengths[i], half-lengths[i]
	}
	room := f.width() * f.height()
	width := min(1, typical*f.k/10)
	short := lengths[len(lengths)/10]
	// The shortest say most of what is near what; those of a grid are all alike.
	left := edgeCover * room / f.k / width
	for _, l := range lengths {
		if left -= l; left < 0 && l > 2*short {
			p.upToM = l
			p.edges = slices.DeleteFunc(p.edges, func(i int) bool { return r.Edges[i].GetLengthM() >= l })
			break
		}
	}
	bold := 0.0
	for _, i := range p.edges {
		s := StepOf(p.steps, r.Edges[i].GetSmallestClearanceM())
		p.present[s] = true
		bold += r.Edges[i].GetLengthM() * f.k * p.steps[s].width
	}
	p.width = max(0.35, min(width, boldCover*room/max(bold, 1)))
	if float64(p.inArea.nodes)*nodeRoom*nodeRoom <= room {
		p.dots = max(1.2, min(2.2, short*f.k/7))
	}
	return p
}

// roadmap draws the scene's roadmap over the floor.
func (d *drawing) roadmap(f frame, zoom float64) {
	r, p := d.scene.Roadmap, d.plotted
	if zoom != 1 {
		p = plot(r, f)
	}
	if p.areas {
		d.patches(f, r, &p)
	}
	var b strings.Builder
	if !p.areas {
		for _, i := range p.thin {
			b.WriteString(chainPath(f, pts(r.Cells[i].GetRing().GetPoints()), true))
		}
		d.out.path(b.String(), "roadmap-thin", "")
		b.Reset()
	}
	for _, i := range p.cells {
		b.WriteString(chainPath(f, pts(r.Cells[i].GetRing().GetPoints()), true))
	}
	d.out.path(b.String(), "roadmap-cell", "")
	paths := make([]strings.Builder, len(p.steps))
	var blind strings.Builder
	for _, i := range p.edges {
		e := r.Edges[i]
		path := chainPath(f, pts(e.GetPoints()), false)
		paths[StepOf(p.steps, e.GetSmallestClearanceM())].WriteString(path)
		if e.GetBeyondSensing() {
			blind.WriteString(path)
		}
	}
	d.out.path(blind.String(), "blind", "")
	for i := len(paths) - 1; i >= 0; i-- { // the tightest on top
		d.out.path(paths[i].String(), p.steps[i].class, `stroke-width="`+num(p.steps[i].width*p.width)+`"`)
	}
	if p.dots == 0 {
		return
	}
	b.Reset()
	for _, n := range r.Nodes {
		if at := pt(n.GetAt()); f.area.holds(at) {
			b.WriteString(discPath(f, at, p.dots/f.k))
		}
	}
	d.out.path(b.String(), "roadmap-node", "")
}

// patches draws what lies too close to be told apart as areas of its clearance: cells
// where the roadmap has them, else nodes, each with the room up to its neighbours.
func (d *drawing) patches(f frame, r *client.Roadmap, p *plotted) {
	w, h := int(f.width()/patchUnits)+1, int(f.height()/patchUnits)+1
	patch := make([]int, w*h) // step and 1; 0 for none
	fill := func(b box, clearance float64) {
		b = b.clip(f.area)
		lo, hi := f.at(xy{b.minX, b.maxY}), f.at(xy{b.maxX, b.minY})
		s := StepOf(p.steps, clearance) + 1
		for y := max(0, int((lo.y-f.top)/patchUnits)); y < h && float64(y)*patchUnits < hi.y-f.top; y++ {
			for x := max(0, int((lo.x-f.left)/patchUnits)); x < w && float64(x)*patchUnits < hi.x-f.left; x++ {
				if o := &patch[y*w+x]; *o == 0 || *o > s {
					*o = s
				}
			}
		}
	}
	for _, c := range r.Cells {
		if b := boundsOf(pts(c.GetRing().GetPoints())); b.meets(f.area) {
			fill(b, c.GetSmallestClearanceM())
		}
	}
	if len(r.Cells) == 0 {
		for _, n := range r.Nodes {
			if at := pt(n.GetAt()); f.area.holds(at) {
				fill(boundsOf([]xy{at}).grow(p.medium/2), n.GetClearanceM())
			}
		}
	}
	paths := make([]strings.Builder, len(p.steps))
	for y := range h {
		for x := 0; x < w; {
			s, x0 := patch[y*w+x], x
			for x < w && patch[y*w+x] == s {
				x++
			}
			if s > 0 {
				run := num(float64(x-x0) * patchUnits)
				paths[s-1].WriteString("M" + num(f.left+float64(x0)*patchUnits) + " " + num(f.top+float64(y)*patchUnits) +
					"h" + run + "v" + num(patchUnits) + "h-" + run + "z")
			}
		}
	}
	for i := range paths {
		d.out.path(paths[i].String(), p.steps[i].class+"-area", "")
	}
}

// extract is the part of the floor that is drawn again, enlarged, where the sheet has
// areas alone: about the tightest node, so large that single edges can be told.
func (d *drawing) extract() (box, bool) {
	if d.scene.Roadmap == nil || !d.plotted.areas {
		return box{}, false
	}
	at, least := xy{}, math.Inf(1)
	for _, n := range d.scene.Roadmap.Nodes {
		if q := pt(n.GetAt()); n.GetClearanceM() < least && d.area.holds(q) {
			at, least = q, n.GetClearanceM()
		}
	}
	w := max(0.5, min(12, 36*d.plotted.medium))
	h := w * detailTall / detailWidth
	return box{at.x - w/2, at.y - h/2, at.x + w/2, at.y + h/2}, !math.IsInf(least, 1)
}

// roadmapSigns are the legend's rows about a roadmap.
func (d *drawing) roadmapSigns(add func(meaning string, draw func(o *svg, x, y float64))) {
	p := d.plotted
	for i, s := range p.steps {
		meaning := "clearance " + s.Words
		if !p.present[i] {
			continue
		}
		if p.areas {
			add(meaning, func(o *svg, x, y float64) { o.rect(x, y-7, signWidth, 14, s.class+"-area", "") })
		} else {
			add("edge, "+meaning, func(o *svg, x, y float64) {
				o.line(x, y, x+signWidth, y, s.class, `stroke-width="`+num(max(1, s.width*p.width))+`"`)
			})
		}
	}
	if n, _ := d.blind(); n > 0 && !p.areas {
		add("edge out of sight of all walls", func(o *svg, x, y float64) { o.line(x, y, x+signWidth, y, "blind", "") })
	}
	if p.dots > 0 {
		add("node", func(o *svg, x, y float64) { o.circle(x+signWidth/2, y, p.dots, "roadmap-node", "") })
	}
	if len(p.cells) > 0 {
		add("free cell", func(o *svg, x, y float64) { o.rect(x+4, y-7, signWidth-8, 14, "roadmap-cell", "") })
	}
	if len(p.thin) > 0 && !p.areas {
		add("free cells too thin to outline", func(o *svg, x, y float64) { o.rect(x+4, y-7, signWidth-8, 14, "roadmap-thin", "") })
	}
}

// blind is how many edges leave what the body senses, and how many metres they are.
func (d *drawing) blind() (n int, long float64) {
	for _, e := range d.scene.Roadmap.Edges {
		if e.GetBeyondSensing() {
			n, long = n+1, long+e.GetLengthM()
		}
	}
	return n, long
}

// roadmapFacts are the words about a roadmap.
func (d *drawing) roadmapFacts(head func(string), say func(string)) {
	r, p := d.scene.Roadmap, d.plotted
	h := r.Header
	head(fmt.Sprintf("%s: %d nodes, %d edges, %d cells", roadmapWords(h.GetRoadmap()), h.GetNodeCount(), h.GetEdgeCount(), h.GetCellCount()))
	if int64(len(r.Nodes)) != h.GetNodeCount() || int64(len(r.Edges)) != h.GetEdgeCount() || int64(len(r.Cells)) != h.GetCellCount() {
		say(fmt.Sprintf("In this part %d nodes, %d edges, %d cells", len(r.Nodes), len(r.Edges), len(r.Cells)))
	}
	say("Body: " + bodyWords(h.GetBody()) + fmt.Sprintf("; prefers %.2f m on either side", h.GetBody().GetPreferredClearanceM()))
	if p.areas {
		what := "Nodes"
		if len(r.Cells) > 0 {
			what = "Small cells"
		}
		say(what + " lie too close to be drawn apart: areas show their clearance. Edges are drawn enlarged alone; a smaller part of the floor shows more")
	}
	if n := p.inArea.edges - len(p.edges); n > 0 && !p.areas {
		say(fmt.Sprintf("Not drawn, so that the rest can be read: %d of %d edges, those of %.2f m and more", n, p.inArea.edges, p.upToM))
	}
	if len(p.thin) > 0 && !p.areas {
		say(fmt.Sprintf("Too thin to outline: %d of %d cells", len(p.thin), p.inArea.cells))
	}
	if p.dots == 0 && !p.areas && p.inArea.nodes > 0 {
		say("Nodes are where edges meet; too many for dots")
	}
	if h.GetRoadmap() == wideberthv1.Roadmap_ROADMAP_VORONOI_GRAPH {
		say("Where nothing is nearer than the floor's clearance cap there are no edges: it is crossed in any direction")
	}
	if n, long := d.blind(); n > 0 {
		say(fmt.Sprintf("Out of sight of all walls (no solid within %.1f m somewhere along): %d edges, %.1f m", h.GetBody().GetSensingRangeM(), n, long))
	}
	for i, n := range h.GetNotes() {
		if i == maxNotes {
			say(fmt.Sprintf("and %d more figures", len(h.GetNotes())-i))
			break
		}
		unit := n.GetUnit()
		if unit == "1" {
			unit = ""
		}
		say(strings.TrimSpace(fmt.Sprintf("%s: %.6g %s", n.GetName(), n.GetValue(), unit)))
	}
}

func roadmapWords(k wideberthv1.Roadmap) string {
	w := strings.ReplaceAll(strings.ToLower(strings.TrimPrefix(k.String(), "ROADMAP_")), "_", " ")
	return strings.ToUpper(w[:1]) + w[1:]
}
