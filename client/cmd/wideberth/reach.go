package main

import (
	"cmp"
	"context"
	"fmt"
	"slices"

	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// allStations is what --to takes for every station of the floor.
const allStations = "all"

// reachFlags are what reach was asked.
type reachFlags struct {
	questionFlags
	from, to    []string
	totalBudget float64
	routes      bool
}

func (a *app) reach() *cobra.Command {
	var p reachFlags
	cmd := &cobra.Command{
		Use:   "reach FLOOR",
		Short: "Ask how far it is to many places, or from many",
		Long: "Ask for a route from every --from to every --to, all on one version, and print what\n" +
			"they come to, the cheapest first, and why there is no route where there is none.\n" +
			"Places and the body are as for plan; --to all stands for every station of the floor\n" +
			"that is no --from. At most 1,000 pairs.\n\n" +
			"The exit code is 0 when there is a route for every pair, and 6 when one is refused\n" +
			"or time ran out for it. With --output json the answers are printed as they come,\n" +
			"one PlanManyResponse a line: the header, each pair, the end mark.\n\n" +
			"What it prints are planning figures, checked against a version of the map, and no\n" +
			"safety function: people and loose loads are not on the map.",
		Example: "  wideberth reach hall --from dock-1 --to cold-1 --to cold-2 --radius 0.58\n" +
			"  wideberth reach hall --from dock-1 --to all --body tug.json\n" +
			"  wideberth reach hall --from 12,8 --from 40,8 --to cold-3 --radius 0.58   # which truck is nearer",
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			req, err := p.request(cmd, args[0])
			if err != nil {
				return err
			}
			if p.routes && !a.json() {
				return usagef("--routes is for --output json")
			}
			return a.with(func(c *client.Client) error {
				if slices.Contains(p.to, allStations) {
					if err := p.everywhere(cmd.Context(), c, req); err != nil {
						return err
					}
				}
				r := reached{app: a, flags: &p, req: req}
				for answer, err := range c.PlanMany(cmd.Context(), req) {
					if err != nil {
						return fmt.Errorf("reach on floor %q: %w", args[0], err)
					}
					if err := r.take(answer); err != nil {
						return err
					}
				}
				if err := r.finish(); err != nil {
					return err
				}
				a.caution(r.header.GetStamp().GetVersion())
				if r.end.RefusalCount > 0 {
					return errRefused
				}
				return nil
			})
		},
	}
	f := cmd.Flags()
	f.StringArrayVar(&p.from, "from", nil, "where to start: a `place`; may be given again (required)")
	f.StringArrayVar(&p.to, "to", nil, "where to go: a `place`, or all; may be given again (required)")
	p.add(cmd)
	f.Lookup("time-budget").Usage = "how many `seconds` the search for one pair may take; 0 asks for the server's own"
	f.Float64Var(&p.totalBudget, "total-budget", 0, "how many `seconds` all pairs may take; 0 asks for 60")
	f.BoolVar(&p.routes, "routes", false, "with --output json: the whole routes")
	return cmd
}

// request makes the request that the flags ask for; goals that are all stations are
// filled in by everywhere.
func (p *reachFlags) request(cmd *cobra.Command, floor string) (*wideberthv1.PlanManyRequest, error) {
	one, err := p.question(cmd, floor)
	if err != nil {
		return nil, err
	}
	req := &wideberthv1.PlanManyRequest{
		Floor: floor, Version: one.GetVersion(), Body: one.GetBody(), Options: one.GetOptions(), TimeBudgetS: p.totalBudget,
	}
	if p.routes {
		req.Detail = wideberthv1.PairDetail_PAIR_DETAIL_ROUTE
	}
	if req.Starts, err = places("from", p.from); err != nil {
		return nil, err
	}
	if slices.Contains(p.to, allStations) {
		if len(p.to) > 1 {
			return nil, usagef("--to all stands for every station, want no other --to beside it")
		}
		return req, nil
	}
	req.Goals, err = places("to", p.to)
	return req, err
}

// places reads a flag that may be given again, at least once.
func places(flag string, texts []string) ([]*wideberthv1.Place, error) {
	if len(texts) == 0 {
		texts = []string{""} // place says what is missing
	}
	var out []*wideberthv1.Place
	for _, text := range texts {
		p, err := place(flag, text)
		if err != nil {
			return nil, err
		}
		out = append(out, p)
	}
	return out, nil
}

// everywhere makes all stations that are no starts the goals, on the version that has them.
func (p *reachFlags) everywhere(ctx context.Context, c *client.Client, req *wideberthv1.PlanManyRequest) error {
	stamp, stations, err := c.Stations(ctx, req.GetFloor(), req.GetVersion())
	if err != nil {
		return fmt.Errorf("stations of floor %q: %w", req.GetFloor(), err)
	}
	p.to = nil
	for _, s := range stations {
		if !slices.Contains(p.from, s.GetName()) {
			p.to = append(p.to, s.GetName())
		}
	}
	if len(p.to) == 0 {
		return fmt.Errorf("floor %q has no station to go to on version %d", req.GetFloor(), stamp.GetVersion())
	}
	req.Version = client.Pinned(stamp.GetVersion())
	req.Goals, err = places("to", p.to)
	return err
}

// reached gathers answers: for a table to be sorted, or to be printed as they come.
type reached struct {
	*app
	flags  *reachFlags
	req    *wideberthv1.PlanManyRequest
	header *wideberthv1.PlanManyHeader
	ways   []way
	end    wideberthv1.PlanManyEnd
}

// way is what a pair's route comes to, or why there is none.
type way struct {
	start, goal int
	summary     *wideberthv1.RouteSummary // nil: refused
	refusal     *wideberthv1.Refusal
}

func (r *reached) take(m client.ManyAnswer) error {
	if r.header == nil {
		r.header = m.Header
		if r.json() {
			if err := r.line(&wideberthv1.PlanManyResponse{Part: &wideberthv1.PlanManyResponse_Header{Header: m.Header}}); err != nil {
				return err
			}
		}
	}
	w := way{start: int(m.Answer.GetStartIndex()), goal: int(m.Answer.GetGoalIndex()), summary: m.Answer.GetSummary(), refusal: m.Answer.GetRefusal()}
	switch {
	case w.summary != nil, m.Answer.GetRoute() != nil:
		r.end.RouteCount++
	default:
		r.end.RefusalCount++
		if w.refusal.GetReason() == wideberthv1.RefusalReason_REFUSAL_REASON_OUT_OF_TIME {
			r.end.OutOfTimeCount++
		}
	}
	if r.json() {
		return r.line(&wideberthv1.PlanManyResponse{Part: &wideberthv1.PlanManyResponse_Answer{Answer: m.Answer}})
	}
	r.ways = append(r.ways, w)
	return nil
}

// finish prints the table, or the end mark.
func (r *reached) finish() error {
	if r.json() {
		return r.line(&wideberthv1.PlanManyResponse{Part: &wideberthv1.PlanManyResponse_End{End: &r.end}})
	}
	stamp := r.header.GetStamp()
	about := [][]string{
		{"floor", fmt.Sprintf("%s, version %d", stamp.GetFloor(), stamp.GetVersion())},
		{"routes", fmt.Sprintf("%d of %d", r.end.GetRouteCount(), r.header.GetPairCount())},
	}
	if err := r.table(about...); err != nil {
		return err
	}
	slices.SortFunc(r.ways, func(a, b way) int {
		refused := func(w way) int {
			if w.summary == nil {
				return 1
			}
			return 0
		}
		return cmp.Or(refused(a)-refused(b), cmp.Compare(a.summary.GetCostM(), b.summary.GetCostM()), a.start-b.start, a.goal-b.goal)
	})
	rows := [][]string{{"FROM", "TO", "COST", "LENGTH", "TIME", "SMALLEST", "REMARK"}}
	for _, w := range r.ways {
		row := []string{r.flags.from[w.start], r.flags.to[w.goal]}
		if s := w.summary; s != nil {
			row = append(row, metres(s.GetCostM()), metres(s.GetLengthM()), fmt.Sprintf("%.1f s", s.GetDurationS()), down(s.GetSmallestClearanceM()), or(cutShort(s.GetBound()), "-"))
		} else {
			row = append(row, "-", "-", "-", "-", word(w.refusal.GetReason(), "REFUSAL_REASON_")+": "+plain(w.refusal.GetExplanation()))
		}
		rows = append(rows, row)
	}
	return r.table(rows...)
}
