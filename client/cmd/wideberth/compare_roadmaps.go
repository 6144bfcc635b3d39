package main

import (
	"cmp"
	"fmt"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	"example.com/wideberth/client/picture"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// compareFlags are what compare-roadmaps was asked.
type compareFlags struct {
	bodyFlags
	kinds   []string
	budget  float64
	picture string
}

func (a *app) compareRoadmaps() *cobra.Command {
	var p compareFlags
	cmd := &cobra.Command{
		Use:   "compare-roadmaps FLOOR FROM TO",
		Short: "Compare the roadmaps between two places",
		Long: "Ask every roadmap for its own way between two places, not straightened, and print what\n" +
			"it comes to and what the roadmap costs to have: the length and its ratio to the\n" +
			"shortest way over all directions at the same clearance; the smallest clearance but for\n" +
			"the stretches by which the ends are left, and the mean; nodes, edges, cells and\n" +
			"memory of the whole roadmap; the time to make it, to bring it up to date with a solid\n" +
			"of 1 m by 1 m in the middle of the shortest way (which is not pushed), and to search it.\n" +
			"Times are of the server as busy as it is. Places and the body are as for plan.\n\n" +
			"The exit code is 0 when a roadmap has a way, and 6 when none has.\n\n" +
			"What it prints are planning figures, checked against a version of the map, and no\n" +
			"safety function: people and loose loads are not on the map.",
		Example: "  wideberth compare-roadmaps hall dock-3 cold-3 --body tug.json --picture ways.svg\n" +
			"  wideberth compare-roadmaps hall dock-3 12,8 --radius 0.58 --roadmap quadtree --roadmap exact-cells",
		Args: cobra.ExactArgs(3),
		RunE: func(cmd *cobra.Command, args []string) error {
			req, err := p.request(cmd, args)
			if err != nil {
				return err
			}
			return a.with(func(c *client.Client) error {
				resp, err := c.CompareRoadmaps(cmd.Context(), req)
				if err != nil {
					return fmt.Errorf("compare roadmaps of floor %q: %w", args[0], err)
				}
				if a.json() {
					err = a.message(resp)
				} else {
					err = a.printComparison(resp)
				}
				if err != nil {
					return err
				}
				a.caution(resp.GetStamp().GetVersion())
				if p.picture != "" {
					if err := a.drawComparison(cmd, c, p.picture, args, req, resp); err != nil {
						return fmt.Errorf("picture: %w", err)
					}
				}
				for _, r := range resp.GetRows() {
					if r.GetRoute() != nil {
						return nil
					}
				}
				return errRefused
			})
		},
	}
	f := cmd.Flags()
	f.StringArrayVar(&p.kinds, "roadmap", nil, "compare this `roadmap`: "+shownNames+"; may be given again; default all")
	p.add(cmd, "on this `version`; default the head")
	f.Float64Var(&p.budget, "time-budget", 0, "how many `seconds` all of it may take; 0 asks for 60")
	f.StringVar(&p.picture, "picture", "", "draw the ways side by side as SVG into this `file`")
	return cmd
}

func (p *compareFlags) request(cmd *cobra.Command, args []string) (*wideberthv1.CompareRoadmapsRequest, error) {
	req := &wideberthv1.CompareRoadmapsRequest{Floor: args[0], TimeBudgetS: p.budget}
	var err error
	if req.Start, err = placeArg("FROM", args[1]); err != nil {
		return nil, err
	}
	if req.Goal, err = placeArg("TO", args[2]); err != nil {
		return nil, err
	}
	for _, text := range p.kinds {
		k, err := shown(text)
		if err != nil {
			return nil, err
		}
		req.Roadmaps = append(req.Roadmaps, k)
	}
	req.Body, req.Version, err = p.read(cmd)
	return req, err
}

// outcome is why a roadmap has no way; empty when it has one.
func outcome(r *wideberthv1.RoadmapComparison) string {
	switch {
	case r.GetRoute() != nil:
		return ""
	case r.GetUnfit() != "":
		return "unfit: " + plain(r.GetUnfit())
	}
	f := r.GetRefusal()
	return strings.TrimSuffix(word(f.GetReason(), "REFUSAL_REASON_")+": "+plain(f.GetExplanation()), ": ")
}

func (a *app) printComparison(resp *wideberthv1.CompareRoadmapsResponse) error {
	optimum := "none"
	if resp.GetOptimumM() > 0 {
		optimum = metres(resp.GetOptimumM()) + " m"
	}
	if err := a.table(
		[]string{"floor", fmt.Sprintf("%s, version %d", resp.GetStamp().GetFloor(), resp.GetStamp().GetVersion())},
		[]string{"body", bodyText(resp.GetBody())},
		[]string{"shortest way", optimum},
	); err != nil {
		return err
	}
	rows := [][]string{{"ROADMAP", "LENGTH", "RATIO", "SMALLEST", "MEAN", "NODES", "EDGES", "CELLS", "MEMORY", "BUILD", "UPDATE", "SEARCH", "REMARK"}}
	for _, r := range resp.GetRows() {
		row := []string{roadmapWord(r.GetRoadmap())}
		if route := r.GetRoute(); route != nil {
			ratio := "-"
			if r.GetLengthRatio() > 0 {
				ratio = fmt.Sprintf("%.4f", r.GetLengthRatio())
			}
			row = append(row, metres(route.GetLengthM()), ratio, down(r.GetInnerSmallestClearanceM()), down(r.GetMeanClearanceM()))
		} else {
			row = append(row, "-", "-", "-", "-")
		}
		if r.GetMemoryBytes() > 0 {
			row = append(row, number(r.GetNodeCount()), number(r.GetEdgeCount()), number(r.GetCellCount()), bytesText(r.GetMemoryBytes()))
		} else {
			row = append(row, "-", "-", "-", "-")
		}
		for _, s := range []float64{r.GetBuildS(), r.GetUpdateS(), r.GetSearchS()} {
			row = append(row, cmp.Or(took(s), "-"))
		}
		rows = append(rows, append(row, or(outcome(r), "-")))
	}
	return a.table(rows...)
}

// sizeText is how large a roadmap is, in few letters.
func sizeText(r *wideberthv1.RoadmapComparison) string {
	s := short(r.GetNodeCount()) + " nodes, " + short(r.GetEdgeCount()) + " edges"
	if r.GetCellCount() > 0 {
		s += ", " + short(r.GetCellCount()) + " cells"
	}
	return s
}

// short writes a large number in thousands or millions.
func short(n int64) string {
	switch {
	case n >= 1_000_000:
		return fmt.Sprintf("%.1f M", float64(n)/1e6)
	case n >= 10_000:
		return fmt.Sprintf("%.0f k", float64(n)/1e3)
	}
	return number(n)
}

// took is a time that was measured; empty when it was not.
func took(s float64) string {
	if s <= 0 {
		return ""
	}
	return secondsText(s)
}

// drawComparison draws the ways on the version they are on.
func (a *app) drawComparison(cmd *cobra.Command, c *client.Client, file string, args []string, req *wideberthv1.CompareRoadmapsRequest, resp *wideberthv1.CompareRoadmapsResponse) error {
	content, err := c.ReadFloor(cmd.Context(), req.GetFloor(), client.Pinned(resp.GetStamp().GetVersion()))
	if err != nil {
		return err
	}
	s := picture.Comparison{Title: args[0] + ": " + args[1] + " to " + args[2], Floor: content, Body: resp.GetBody(), OptimumM: resp.GetOptimumM(),
		Start: poseOf(content, req.GetStart()), Goal: poseOf(content, req.GetGoal())}
	for _, r := range resp.GetRows() {
		panel := picture.Panel{Name: roadmapWord(r.GetRoadmap()), Route: r.GetRoute(), Missing: outcome(r), Refusal: r.GetRefusal()}
		if route := r.GetRoute(); route != nil {
			panel.Figures = append(panel.Figures,
				fmt.Sprintf("%s m, %.4f of the shortest", metres(route.GetLengthM()), r.GetLengthRatio()),
				fmt.Sprintf("clearance %s m, on average %s m", down(r.GetInnerSmallestClearanceM()), down(r.GetMeanClearanceM())))
		}
		if r.GetMemoryBytes() > 0 {
			panel.Figures = append(panel.Figures,
				sizeText(r),
				fmt.Sprintf("%s, build %s", bytesText(r.GetMemoryBytes()), or(took(r.GetBuildS()), "-")),
				fmt.Sprintf("update %s, search %s", or(took(r.GetUpdateS()), "-"), or(took(r.GetSearchS()), "-")))
		}
		s.Panels = append(s.Panels, panel)
	}
	if err := writeFile(file, func(f *os.File) error { return picture.DrawComparison(f, s) }); err != nil {
		return err
	}
	a.notef("drawn: %s", file)
	return nil
}
