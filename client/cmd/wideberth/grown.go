package main

import (
	"fmt"

	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	"example.com/wideberth/client/picture"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// mostOutlines is how many outlines the table lists.
const mostOutlines = 20

func (a *app) grown() *cobra.Command {
	var p struct {
		bodyFlags
		picture string
	}
	cmd := &cobra.Command{
		Use:   "grown FLOOR",
		Short: "Show the solids grown for a body",
		Long: "Show the outline of everything a body's centre must stay out of: the solids grown by\n" +
			"its radius and margin, closed zones by its radius; its area and perimeter and, where\n" +
			"the floor's border is closed, how much of the floor is free. The body is as for plan.\n\n" +
			"With --output json every outline is printed with its straight pieces and arcs, one\n" +
			"ShowGrownSolidsResponse a line, the summary last.\n\n" +
			"What it prints are planning figures of a version of the map, and no safety function:\n" +
			"people and loose loads are not on the map.",
		Example: "  wideberth grown hall --radius 0.58 --margin 0.07 --picture grown.svg\n" +
			"  wideberth grown hall --body tug.json --output json",
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			req := &wideberthv1.ShowGrownSolidsRequest{Floor: args[0]}
			var err error
			if req.Body, req.Version, err = p.read(cmd); err != nil {
				return err
			}
			return a.with(func(c *client.Client) error {
				g, err := c.ShowGrownSolids(cmd.Context(), req)
				if err != nil {
					return fmt.Errorf("grown solids of floor %q: %w", args[0], err)
				}
				if a.json() {
					err = a.grownLines(g)
				} else {
					err = a.printGrown(g)
				}
				if err != nil {
					return err
				}
				stamp := g.Summary.GetStamp()
				a.caution(stamp.GetVersion())
				if p.picture == "" {
					return nil
				}
				return a.draw(cmd, c, stamp, p.picture, picture.Scene{
					Title: fmt.Sprintf("%s: solids grown by %s m", args[0], metres(g.Summary.GetGrownByM())), Grown: g,
				})
			})
		},
	}
	p.add(cmd, "on this `version`; default the head")
	cmd.Flags().StringVar(&p.picture, "picture", "", "draw it over the floor as SVG into this `file`")
	return cmd
}

// grownLines prints grown solids as the messages they come in.
func (a *app) grownLines(g *client.Grown) error {
	for _, o := range g.Outlines {
		if err := a.line(&wideberthv1.ShowGrownSolidsResponse{Piece: &wideberthv1.ShowGrownSolidsResponse_Outline{Outline: o}}); err != nil {
			return err
		}
	}
	return a.line(&wideberthv1.ShowGrownSolidsResponse{Piece: &wideberthv1.ShowGrownSolidsResponse_Summary{Summary: g.Summary}})
}

func (a *app) printGrown(g *client.Grown) error {
	s := g.Summary
	about := [][]string{
		{"floor", fmt.Sprintf("%s, version %d", s.GetStamp().GetFloor(), s.GetStamp().GetVersion())},
		{"body", bodyText(s.GetBody())},
		{"grown by", metres(s.GetGrownByM()) + " m"},
		{"area", metres(s.GetAreaM2()) + " m2"},
	}
	if s.GetFreeAreaM2() > 0 {
		about = append(about, []string{"free of the floor", metres(s.GetFreeAreaM2()) + " m2"})
	}
	about = append(about,
		[]string{"perimeter", metres(s.GetPerimeterM()) + " m"},
		[]string{"outlines", number(s.GetOutlineCount())})
	if err := a.table(about...); err != nil {
		return err
	}
	rows := [][]string{{"OUTLINE", "ABOUT", "AREA", "PERIMETER", "PIECES", "ARCS", "FROM"}}
	for i, o := range g.Outlines {
		if i == mostOutlines {
			rows = append(rows, []string{fmt.Sprintf("and %d more: --output json has all", len(g.Outlines)-i)})
			break
		}
		about, arcs := "grown", 0
		if o.GetAreaM2() < 0 {
			about = "free"
		}
		for _, q := range o.GetPieces() {
			if q.GetRadiusM() > 0 {
				arcs++
			}
		}
		from := "-"
		if len(o.GetPieces()) > 0 {
			from = at(o.GetPieces()[0].GetFrom())
		}
		rows = append(rows, []string{number(int64(i + 1)), about, metres(o.GetAreaM2()) + " m2", metres(o.GetPerimeterM()) + " m",
			number(int64(len(o.GetPieces()))), number(int64(arcs)), from})
	}
	return a.table(rows...)
}
