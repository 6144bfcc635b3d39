package main

import (
	"fmt"
	"math"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	"example.com/wideberth/client/picture"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// planFlags are what plan was asked.
type planFlags struct {
	questionFlags
	from, to, picture string
}

// questionFlags are for what body a route is, what it should be, and on which version.
type questionFlags struct {
	bodyFlags
	preference, roadmap                string
	tightWeight, budget, spacing       float64
	shortest, balanced, clearest, keep bool
}

// bodyFlags are a body and the version it is on.
type bodyFlags struct {
	body                               string
	radius, margin, preferred, sensing float64
	version                            int64
}

func (a *app) plan() *cobra.Command {
	var p planFlags
	cmd := &cobra.Command{
		Use:   "plan FLOOR",
		Short: "Ask for a route",
		Long: "Ask for a route and print its legs: how long, how tight and where. Ends are stations,\n" +
			"or x,y or x,y,heading in metres and radians. The body comes from flags, or from a\n" +
			"file with a Body message in JSON, which flags go before.\n\n" +
			"What it prints is a planning figure, checked against a version of the map, and no\n" +
			"safety function: people and loose loads are not on the map.",
		Example: "  wideberth plan hall --from dock-3 --to cold-3 --radius 0.58 --margin 0.07\n" +
			"  wideberth plan hall --from 12,8 --to cold-3 --body tug.json --picture route.svg\n" +
			"  wideberth plan hall --from dock-3 --to cold-3 --radius 0.58 --version 41   # as it was then",
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			req, err := p.request(cmd, args[0])
			if err != nil {
				return err
			}
			return a.with(func(c *client.Client) error {
				resp, err := c.Plan(cmd.Context(), req)
				if err != nil {
					return fmt.Errorf("plan on floor %q: %w", args[0], err)
				}
				if a.json() {
					err = a.message(resp)
				} else {
					err = a.printPlan(resp)
				}
				if err != nil {
					return err
				}
				a.caution(resp.GetStamp().GetVersion())
				if p.picture != "" {
					if err := a.drawPlan(cmd, c, p, req, resp); err != nil {
						return fmt.Errorf("picture: %w", err)
					}
				}
				if resp.GetRoute() == nil {
					return errRefused
				}
				return nil
			})
		},
	}
	f := cmd.Flags()
	f.StringVar(&p.from, "from", "", "where to start: a `place` (required)")
	f.StringVar(&p.to, "to", "", "where to go: a `place` (required)")
	p.add(cmd)
	f.StringVar(&p.picture, "picture", "", "draw the answer as SVG into this `file`")
	return cmd
}

// add gives a command the flags.
func (p *questionFlags) add(cmd *cobra.Command) {
	p.bodyFlags.add(cmd, "plan on this `version`; default the head")
	f := cmd.Flags()
	f.StringVar(&p.preference, "preference", "balanced", "what the route should be: "+preferenceNames)
	f.BoolVar(&p.shortest, "shortest", false, "the same as --preference shortest")
	f.BoolVar(&p.balanced, "balanced", false, "the same as --preference balanced")
	f.BoolVar(&p.clearest, "clearest", false, "the same as --preference clearest")
	f.Float64Var(&p.tightWeight, "tight-weight", 0, "balanced: how much more a metre below the preferred clearance costs; 0 asks for 1")
	f.StringVar(&p.roadmap, "roadmap", "auto", "which roadmap to search: "+roadmapNames+"; convex-cells and those after it for --shortest alone, auto alone for --clearest")
	f.BoolVar(&p.keep, "keep-roadmap-path", false, "the roadmap's own path, without straightening")
	f.Float64Var(&p.spacing, "max-spacing", 0, "the most `metres` between two points; 0 sends points where they matter")
	f.Float64Var(&p.budget, "time-budget", 0, "how many `seconds` the answer may take; when they run out it is the best route found by then; 0 asks for the server's own bound")
	cmd.MarkFlagsMutuallyExclusive("shortest", "balanced", "clearest", "preference")
}

// add gives a command the flags.
func (p *bodyFlags) add(cmd *cobra.Command, version string) {
	f := cmd.Flags()
	f.StringVar(&p.body, "body", "", "read the body from this `file`")
	f.Float64Var(&p.radius, "radius", 0, "half the body's width, load included, in `metres`")
	f.Float64Var(&p.margin, "margin", 0, "kept free beyond the radius, in `metres`")
	f.Float64Var(&p.preferred, "preferred", 0, "clearance to keep where the floor allows, in `metres`")
	f.Int64Var(&p.version, "version", 0, version)
}

// read gives the body and the version that the flags name; a nil selector for the head.
func (p *bodyFlags) read(cmd *cobra.Command) (body *wideberthv1.Body, version *wideberthv1.VersionSelector, err error) {
	given := cmd.Flags().Changed
	body = &wideberthv1.Body{}
	if p.body != "" {
		if body, err = readBody(p.body); err != nil {
			return nil, nil, err
		}
	} else if !given("radius") {
		return nil, nil, usagef("--radius or --body is missing: it is for a body")
	}
	for _, f := range []struct {
		name string
		from float64
		to   *float64
	}{{"radius", p.radius, &body.RadiusM}, {"margin", p.margin, &body.MarginM}, {"preferred", p.preferred, &body.PreferredClearanceM}, {"sensing", p.sensing, &body.SensingRangeM}} {
		if given(f.name) {
			*f.to = f.from
		}
	}
	if given("version") {
		if p.version < 1 {
			return nil, nil, usagef("--version is %d, want 1 or more", p.version)
		}
		version = client.Pinned(p.version)
	}
	return body, version, nil
}

// caution says beside every answer what it is not.
func (a *app) caution(version int64) {
	a.notef("A planning figure, checked against version %d of the map and no safety function: people and\n"+
		"loose loads are not on the map; detecting people, stopping and supervising speed stay with the truck.", version)
}

// request makes the request that the flags ask for.
func (p *planFlags) request(cmd *cobra.Command, floor string) (*wideberthv1.PlanRequest, error) {
	start, err := place("from", p.from)
	if err != nil {
		return nil, err
	}
	goal, err := place("to", p.to)
	if err != nil {
		return nil, err
	}
	req, err := p.question(cmd, floor)
	if err != nil {
		return nil, err
	}
	req.Start, req.Goal = start, goal
	return req, nil
}

// question makes a request without its ends.
func (p *questionFlags) question(cmd *cobra.Command, floor string) (*wideberthv1.PlanRequest, error) {
	preference := p.preference
	switch {
	case p.shortest:
		preference = "shortest"
	case p.clearest:
		preference = "clearest"
	}
	pref, err := choice("preference", preference, "PREFERENCE_", wideberthv1.Preference_value, preferenceNames)
	if err != nil {
		return nil, err
	}
	road, err := roadmap(p.roadmap)
	if err != nil {
		return nil, err
	}
	body, version, err := p.bodyFlags.read(cmd)
	if err != nil {
		return nil, err
	}
	return &wideberthv1.PlanRequest{
		Floor: floor, Version: version, Body: body,
		Options: &wideberthv1.PlanOptions{
			Preference: wideberthv1.Preference(pref), Roadmap: road, KeepRoadmapPath: p.keep,
			TightWeight: p.tightWeight, TimeBudgetS: p.budget, MaxSpacingM: p.spacing,
		},
	}, nil
}

func (a *app) printPlan(resp *wideberthv1.PlanResponse) error {
	stamp := resp.GetStamp()
	on := []string{"floor", fmt.Sprintf("%s, version %d", stamp.GetFloor(), stamp.GetVersion())}
	if r := resp.GetRefusal(); r != nil {
		return a.table(append([][]string{on}, refusalRows(r)...)...)
	}
	r := resp.GetRoute()
	about := [][]string{on,
		{"route", r.GetRouteId()},
		{"length", metres(r.GetLengthM()) + " m"},
		{"time", fmt.Sprintf("%.1f s at the advised speed ceilings", r.GetDurationS())},
		{"smallest clearance", fmt.Sprintf("%s m at %s", down(r.GetSmallestClearanceM()), at(r.GetSmallestAt()))},
		{"none is shorter than", down(r.GetBound().GetLowerBoundM()) + " m"},
	}
	if more := r.GetBound().GetOptimumWithinM(); more > 0 {
		about = append(about, []string{"any-angle optimum", fmt.Sprintf("none that keeps %s m more is shorter", up(more))})
	}
	if bias := r.GetBound().GetWidthBiasM(); bias > 0 {
		about = append(about, []string{"may have missed", fmt.Sprintf("passages up to %s m wider than needed", up(bias))})
	}
	if words := cutShort(r.GetBound()); words != "" {
		about = append(about, []string{"cut short", words})
	}
	about = append(about, []string{"nodes opened", number(resp.GetCounters().GetExpanded())})
	if err := a.table(about...); err != nil {
		return err
	}
	rows := [][]string{{"LEG", "KIND", "LENGTH", "SMALLEST", "AT", "LEFT", "RIGHT", "CEILING", "CAUSE", "NEAREST"}}
	for i, l := range r.GetLegs() {
		kind := word(l.GetKind(), "LEG_KIND_")
		if l.GetBeyondSensing() {
			kind += ", beyond sensing"
		}
		rows = append(rows, []string{
			number(int64(i + 1)), kind, metres(l.GetLengthM()),
			down(l.GetSmallestClearanceM()), at(l.GetSmallestAt()),
			down(l.GetLeftRoomM()), down(l.GetRightRoomM()),
			fmt.Sprintf("%.2f m/s", l.GetSpeedCeilingMps()), word(l.GetSpeedCause(), "SPEED_CAUSE_"),
			or(l.GetNearestFeature(), "-"),
		})
	}
	return a.table(rows...)
}

// cutShort says how good a route is that the time budget cut short; empty for others.
func cutShort(b *wideberthv1.Bound) string {
	if !b.GetCutShort() {
		return ""
	}
	return fmt.Sprintf("time ran out; at most %.1f %% dearer than the best there may be", math.Ceil(b.GetGapShare()*1000)/10)
}

func refusalRows(r *wideberthv1.Refusal) [][]string {
	rows := [][]string{
		{"refused", word(r.GetReason(), "REFUSAL_REASON_")},
		{"because", plain(r.GetExplanation())},
	}
	if e := r.GetBlockedEnd(); e != nil {
		rows = append(rows,
			[]string{"at", at(e.GetAt())},
			[]string{"clearance there", down(e.GetClearanceM()) + " m"},
			[]string{"clearance needed", up(e.GetRequiredClearanceM()) + " m"})
		if e.GetClosedZone() != "" {
			rows = append(rows, []string{"closed zone", e.GetClosedZone()})
		}
		if e.GetNearestFeature() != "" {
			rows = append(rows, []string{"nearest feature", e.GetNearestFeature()})
		}
		if e.GetNearestFree() != nil {
			rows = append(rows, []string{"nearest free place", fmt.Sprintf("%s, %s m away", at(e.GetNearestFree()), metres(e.GetDistanceM()))})
		}
	}
	if b := r.GetBottleneck(); b != nil {
		if !b.GetExists() && b.GetZone() == "" {
			rows = append(rows, []string{"bottleneck", "there is no way, however narrow"})
		}
		if b.GetExists() {
			rows = append(rows,
				[]string{"bottleneck", at(b.GetAt())},
				[]string{"width there", down(b.GetWidthM()) + " m"},
				[]string{"width needed", up(b.GetWidthNeededM()) + " m"})
		}
		if len(b.GetFeatures()) > 0 {
			rows = append(rows, []string{"between", strings.Join(b.GetFeatures(), " and ")})
		}
		if b.GetZone() != "" {
			rows = append(rows, []string{"closed by zone", b.GetZone()})
		}
	}
	if s := r.GetRetryAfterS(); s > 0 {
		rows = append(rows, []string{"ask again after", fmt.Sprintf("%.1f s", s)})
	}
	return rows
}

// drawPlan draws the answer on the version it was made on.
func (a *app) drawPlan(cmd *cobra.Command, c *client.Client, p planFlags, req *wideberthv1.PlanRequest, resp *wideberthv1.PlanResponse) error {
	content, err := c.ReadFloor(cmd.Context(), req.GetFloor(), client.Pinned(resp.GetStamp().GetVersion()))
	if err != nil {
		return err
	}
	scene := picture.Scene{
		Title:   req.GetFloor() + ": " + p.from + " to " + p.to,
		Floor:   content,
		Route:   resp.GetRoute(),
		Refusal: resp.GetRefusal(),
		Body:    req.GetBody(),
		Start:   poseOf(content, req.GetStart()),
		Goal:    poseOf(content, req.GetGoal()),
	}
	if err := writeFile(p.picture, func(f *os.File) error { return picture.Draw(f, scene) }); err != nil {
		return err
	}
	a.notef("drawn: %s", p.picture)
	return nil
}

// poseOf is where a place is on a version; nil when it has no such station.
func poseOf(content *client.FloorContent, p *wideberthv1.Place) *wideberthv1.Pose {
	if p.GetPose() != nil {
		return p.GetPose()
	}
	for _, f := range content.Features {
		if f.GetName() == p.GetStation() {
			return f.GetStation().GetPose()
		}
	}
	return nil
}
