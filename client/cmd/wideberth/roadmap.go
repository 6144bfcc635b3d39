package main

import (
	"fmt"
	"math"
	"os"
	"strconv"

	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	"example.com/wideberth/client/picture"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// partItems is how many nodes, edges and cells go on a line of JSON.
const partItems = 5000

// roadmapFlags are what roadmap was asked.
type roadmapFlags struct {
	bodyFlags
	kind, area, picture string
}

func (a *app) roadmap() *cobra.Command {
	var p roadmapFlags
	cmd := &cobra.Command{
		Use:   "roadmap FLOOR",
		Short: "Show a roadmap: its nodes, edges and cells",
		Long: "Show one of the classical representations of a floor's free space for a body, of the\n" +
			"whole floor or what meets an area: how large it is, what an engineer should know of\n" +
			"it, and how clear its edges are. The body comes from flags, or from a file with a Body\n" +
			"message in JSON, which flags go before. A roadmap too large to show is refused with\n" +
			"the limit named: ask for a smaller --area.\n\n" +
			"With --output json all of it is printed, one ShowRoadmapResponse a line: the header,\n" +
			"parts with nodes, edges and cells, the end mark.\n\n" +
			"What it prints are planning figures of a version of the map, and no safety function:\n" +
			"people and loose loads are not on the map.",
		Example: "  wideberth roadmap hall --roadmap voronoi-graph --body tug.json --picture voronoi.svg\n" +
			"  wideberth roadmap hall --roadmap grid8 --radius 0.58 --area 60,30,75,40 --picture grid.svg\n" +
			"  wideberth roadmap hall --roadmap meadow-map --radius 0.58 --output json",
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			req := &wideberthv1.ShowRoadmapRequest{Floor: args[0]}
			var err error
			if req.Roadmap, err = shown(p.kind); err != nil {
				return err
			}
			if cmd.Flags().Changed("area") {
				if req.Area, err = areaOf(p.area); err != nil {
					return err
				}
			}
			if req.Body, req.Version, err = p.read(cmd); err != nil {
				return err
			}
			return a.with(func(c *client.Client) error {
				r, err := c.ShowRoadmap(cmd.Context(), req)
				if err != nil {
					return fmt.Errorf("roadmap %s of floor %q: %w", roadmapWord(req.GetRoadmap()), args[0], err)
				}
				if a.json() {
					err = a.roadmapLines(r)
				} else {
					err = a.printRoadmap(r, req.GetArea())
				}
				if err != nil {
					return err
				}
				stamp := r.Header.GetStamp()
				a.caution(stamp.GetVersion())
				if p.picture == "" {
					return nil
				}
				return a.draw(cmd, c, stamp, p.picture, picture.Scene{
					Title: fmt.Sprintf("%s: %s", args[0], roadmapWord(req.GetRoadmap())), Roadmap: r, Part: req.GetArea(),
				})
			})
		},
	}
	f := cmd.Flags()
	f.StringVar(&p.kind, "roadmap", "", "which `roadmap`: "+shownNames+" (required)")
	f.StringVar(&p.area, "area", "", "what meets this `rectangle` alone: min_x,min_y,max_x,max_y in metres; default the whole floor")
	p.add(cmd, "on this `version`; default the head")
	p.addSensing(cmd)
	f.StringVar(&p.picture, "picture", "", "draw it over the floor as SVG into this `file`")
	return cmd
}

// addSensing gives a command --sensing.
func (p *bodyFlags) addSensing(cmd *cobra.Command) {
	cmd.Flags().Float64Var(&p.sensing, "sensing", 0, "how far the body senses walls, in `metres`: edges beyond that are flagged")
}

// draw draws a scene on the version it speaks of.
func (a *app) draw(cmd *cobra.Command, c *client.Client, stamp *wideberthv1.VersionStamp, file string, s picture.Scene) error {
	content, err := c.ReadFloor(cmd.Context(), stamp.GetFloor(), client.Pinned(stamp.GetVersion()))
	if err != nil {
		return fmt.Errorf("picture: %w", err)
	}
	s.Floor = content
	if err := writeFile(file, func(f *os.File) error { return picture.Draw(f, s) }); err != nil {
		return fmt.Errorf("picture: %w", err)
	}
	a.notef("drawn: %s", file)
	return nil
}

// roadmapLines prints a roadmap as the messages it comes in.
func (a *app) roadmapLines(r *client.Roadmap) error {
	if err := a.line(&wideberthv1.ShowRoadmapResponse{Piece: &wideberthv1.ShowRoadmapResponse_Header{Header: r.Header}}); err != nil {
		return err
	}
	nodes, edges, cells := r.Nodes, r.Edges, r.Cells
	for len(nodes)+len(edges)+len(cells) > 0 {
		part := &wideberthv1.RoadmapPart{}
		left := partItems
		part.Nodes, nodes, left = first(nodes, left)
		part.Edges, edges, left = first(edges, left)
		part.Cells, cells, _ = first(cells, left)
		if err := a.line(&wideberthv1.ShowRoadmapResponse{Piece: &wideberthv1.ShowRoadmapResponse_Part{Part: part}}); err != nil {
			return err
		}
	}
	return a.line(&wideberthv1.ShowRoadmapResponse{Piece: &wideberthv1.ShowRoadmapResponse_End{End: &wideberthv1.RoadmapEnd{
		NodeCount: int64(len(r.Nodes)), EdgeCount: int64(len(r.Edges)), CellCount: int64(len(r.Cells)),
	}}})
}

// first splits at most n off a list, and says how many of n are left.
func first[T any](all []T, n int) (head, rest []T, left int) {
	n0 := min(n, len(all))
	return all[:n0], all[n0:], n - n0
}

func (a *app) printRoadmap(r *client.Roadmap, part *wideberthv1.Area) error {
	h := r.Header
	of := func(shown int, all int64) string {
		if int64(shown) == all {
			return number(all)
		}
		return fmt.Sprintf("%d of %d", shown, all)
	}
	about := [][]string{
		{"floor", fmt.Sprintf("%s, version %d", h.GetStamp().GetFloor(), h.GetStamp().GetVersion())},
		{"roadmap", roadmapWord(h.GetRoadmap())},
		{"body", bodyText(h.GetBody())},
	}
	if part != nil {
		about = append(about, []string{"area", area(part)})
	}
	about = append(about,
		[]string{"nodes", of(len(r.Nodes), h.GetNodeCount())},
		[]string{"edges", of(len(r.Edges), h.GetEdgeCount())},
		[]string{"cells", of(len(r.Cells), h.GetCellCount())},
		[]string{"memory", bytesText(h.GetMemoryBytes())})
	for _, n := range h.GetNotes() {
		about = append(about, []string{n.GetName(), noteValue(n)})
	}
	if n, long := beyond(r.Edges); n > 0 {
		about = append(about, []string{"beyond sensing", fmt.Sprintf("%d edges, %s m", n, metres(long))})
	}
	if err := a.table(about...); err != nil {
		return err
	}
	return a.printClearance(r)
}

// printClearance counts edges and cells by how clear they are.
func (a *app) printClearance(r *client.Roadmap) error {
	steps := picture.Steps(r.Header.GetBody())
	type tally struct {
		edges, cells int64
		long         float64
	}
	sums := make([]tally, len(steps))
	for _, e := range r.Edges {
		t := &sums[picture.StepOf(steps, e.GetSmallestClearanceM())]
		t.edges++
		t.long += e.GetLengthM()
	}
	for _, c := range r.Cells {
		sums[picture.StepOf(steps, c.GetSmallestClearanceM())].cells++
	}
	rows := [][]string{{"SMALLEST CLEARANCE", "EDGES", "LENGTH", "CELLS"}}
	for i, s := range steps {
		rows = append(rows, []string{s.Words, number(sums[i].edges), metres(sums[i].long), number(sums[i].cells)})
	}
	return a.table(rows...)
}

// beyond is how many edges, and how many metres of them, leave what the body senses.
func beyond(edges []*wideberthv1.RoadmapEdge) (n int, long float64) {
	for _, e := range edges {
		if e.GetBeyondSensing() {
			n, long = n+1, long+e.GetLengthM()
		}
	}
	return n, long
}

// bodyText is a body in words, its defaults filled in.
func bodyText(b *wideberthv1.Body) string {
	s := fmt.Sprintf("radius %s m, margin %s m, preferred %s m", metres(b.GetRadiusM()), metres(b.GetMarginM()), metres(b.GetPreferredClearanceM()))
	if b.GetSensingRangeM() > 0 {
		s += fmt.Sprintf(", senses %s m", metres(b.GetSensingRangeM()))
	}
	if b.GetName() != "" {
		s = plain(b.GetName()) + ": " + s
	}
	return s
}

// noteValue is a note's figure with its unit.
func noteValue(n *wideberthv1.RoadmapNote) string {
	v := strconv.FormatFloat(n.GetValue(), 'g', 6, 64)
	if n.GetValue() == math.Trunc(n.GetValue()) && math.Abs(n.GetValue()) < 1e15 {
		v = strconv.FormatFloat(n.GetValue(), 'f', 0, 64)
	}
	switch u := n.GetUnit(); u {
	case "1", "":
	case "m2":
		v += " m²"
	default:
		v += " " + u
	}
	return v
}

// bytesText is an amount of memory.
func bytesText(n int64) string {
	switch {
	case n >= 10_000_000:
		return fmt.Sprintf("%d MB", (n+500_000)/1_000_000)
	case n >= 100_000:
		return fmt.Sprintf("%.1f MB", float64(n)/1e6)
	}
	return fmt.Sprintf("%d kB", (n+999)/1000)
}

// secondsText is how long something took.
func secondsText(s float64) string {
	switch {
	case s >= 10:
		return fmt.Sprintf("%.1f s", s)
	case s >= 1:
		return fmt.Sprintf("%.2f s", s)
	}
	return fmt.Sprintf("%.3g ms", s*1000)
}
