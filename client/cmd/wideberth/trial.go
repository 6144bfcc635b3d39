package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"strconv"

	"github.com/spf13/cobra"

	"example.com/wideberth/client/trial"
)

func (a *app) trial() *cobra.Command {
	var (
		mapPath, scenPath, optPath, road, points, perQuery string
		limit                                              int
		straighten                                         bool
	)
	cmd := &cobra.Command{
		Use:   "trial",
		Short: "Run the open grid benchmark and compare with its optima",
		Long: "Run the scenario of an open grid benchmark (N. Sturtevant, IEEE TCIAIG 4(2), 2012)\n" +
			"through the service and compare every length with the listed optimum, or with the\n" +
			"any-angle optimum (--roadmap shortest --points vertex --optimum FILE). Without\n" +
			"--server it starts a server of its own inside this process, with a store that\n" +
			"goes with it. Times are of the Plan call at the client.",
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if mapPath == "" || scenPath == "" {
				return usagef("--map and --scen are both needed")
			}
			if limit < 0 {
				return usagef("--limit is %d, want 0 or more", limit)
			}
			o, err := trialOptions(road, points)
			if err != nil {
				return err
			}
			o.Straighten = o.Straighten || straighten
			grid, err := trial.ReadGridFile(mapPath)
			if err != nil {
				return err
			}
			problems, err := trial.ReadProblemsFile(scenPath, grid)
			if err != nil {
				return err
			}
			if optPath != "" {
				problems, err = trial.ReadOptimaFile(optPath, problems)
			} else if road == roadShortest {
				problems = trial.UpperBounds(problems)
			}
			if err != nil {
				return err
			}
			if limit > 0 && limit < len(problems) {
				problems = problems[:limit]
			}
			addr, stop := a.server, func() error { return nil }
			if !cmd.Flags().Changed("server") { // not the variable: a trial adds a floor
				if addr, stop, err = trial.Embedded(cmd.Context()); err != nil {
					return fmt.Errorf("starting a server: %w", err)
				}
			}
			answers, err := a.runTrial(cmd.Context(), addr, grid, problems, o)
			if err = errors.Join(err, stop()); err != nil {
				return err
			}
			if perQuery != "" {
				if err := writeFile(perQuery, func(f *os.File) error { return trial.WriteCSV(f, answers) }); err != nil {
					return err
				}
			}
			s := trial.Summarize(problems, answers)
			if a.json() {
				err = a.object(s)
			} else {
				err = a.printTrial(s)
			}
			if err == nil && s.Solved < s.Queries {
				err = fmt.Errorf("%d of %d problems were not solved", s.Queries-s.Solved, s.Queries)
			}
			return err
		},
	}
	f := cmd.Flags()
	f.StringVar(&mapPath, "map", "", "the benchmark's map `file` (required)")
	f.StringVar(&scenPath, "scen", "", "its scenario `file` (required)")
	f.StringVar(&optPath, "optimum", "", "compare with the any-angle optima in this CSV `file`, not with the scenario's lengths")
	f.StringVar(&road, "roadmap", "grid8", "which roadmap to search: "+roadmapNames+", or shortest for the any-angle optimum; the scenario's lengths are grid8's, and no more than upper bounds to shortest")
	f.StringVar(&points, "points", "centre", "which `place` of a cell a problem means: its centre, or its top left vertex as any-angle optima have it")
	f.BoolVar(&straighten, "straighten", false, "straightened routes instead of the roadmap's own path")
	f.IntVar(&limit, "limit", 0, "only the first so many problems; 0 for all")
	f.StringVar(&perQuery, "per-query", "", "write index, length, us and expanded of every query into this CSV `file`")
	return cmd
}

// roadShortest asks for what the service answers as shortest, on no roadmap by name.
const roadShortest = "shortest"

func trialOptions(road, points string) (o trial.Options, err error) {
	switch points {
	case "centre":
	case "vertex":
		o.Points = trial.Vertices
	default:
		return o, usagef("--points is %q, want centre or vertex", points)
	}
	if road == roadShortest {
		o.Straighten = true // keep_roadmap_path would ask for a grid's path
		return o, nil
	}
	o.Roadmap, err = roadmap(road)
	return o, err
}

func (a *app) runTrial(ctx context.Context, addr string, g *trial.Grid, problems []trial.Problem, o trial.Options) (answers []trial.Answer, err error) {
	c, err := a.connectTo(addr)
	if err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, c.Close()) }()
	return trial.Run(ctx, c, g, problems, o)
}

func (a *app) printTrial(s trial.Summary) error {
	maybe := func(v *float64, digits int) string {
		if v == nil {
			return "-"
		}
		return strconv.FormatFloat(*v, 'g', digits, 64)
	}
	return a.table(
		[]string{"queries", number(int64(s.Queries))},
		[]string{"solved", number(int64(s.Solved))},
		[]string{"largest error", maybe(s.MaxAbsError, 3) + " cells"},
		[]string{"largest relative error", maybe(s.MaxRelError, 3)},
		[]string{"mean ratio", maybe(s.MeanRatio, 9)},
		[]string{"median call", fmt.Sprintf("%.1f us", s.P50Us)},
		[]string{"95th percentile", fmt.Sprintf("%.1f us", s.P95Us)},
		[]string{"median expanded", number(s.ExpandedP50)},
	)
}
