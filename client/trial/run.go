package trial

import (
	"context"
	"crypto/sha256"
	"encoding/csv"
	"encoding/hex"
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"time"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/client"
	"example.com/wideberth/mapstore/floor"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// author is who the trial's versions are by.
const author = "wideberth trial"

// Options say how to plan. The zero value asks the service for its own choice.
type Options struct {
	Roadmap wideberthv1.Roadmap
	Points  Points
	// Straighten asks for straightened routes instead of the roadmap's own path.
	Straighten bool
	// TimeBudgetS bounds each search; 0 asks for the server's own bound.
	TimeBudgetS float64
}

// Points say which places a problem's cells stand for.
type Points uint8

// The places.
const (
	Centres  Points = iota // the cells' middles
	Vertices               // the cells' top left corners
)

// Answer is what came of one problem.
type Answer struct {
	Solved   bool
	Length   float64       // metres, which are cells
	Took     time.Duration // of the call, at the client
	Expanded int64
}

// Summary is a trial's outcome, as it is printed in JSON.
type Summary struct {
	Queries int `json:"queries"`
	Solved  int `json:"solved"`
	// MaxAbsError is the largest difference between a length and the listed
	// optimum, in cells. Null when nothing was solved.
	MaxAbsError *float64 `json:"max_abs_error"`
	// MaxRelError is the largest difference by the listed optimum, problems whose
	// optimum is 0 left out. Null when there is none.
	MaxRelError *float64 `json:"max_rel_error"`
	// MeanRatio is the mean of length by listed optimum, problems whose optimum is 0
	// left out. Null when there is none.
	MeanRatio *float64 `json:"mean_ratio"`
	// P50Us and P95Us are percentiles (nearest rank) of the calls' wall time at the
	// client, in microseconds, solved or not.
	P50Us float64 `json:"p50_us"`
	P95Us float64 `json:"p95_us"`
	// ExpandedP50 is the median (nearest rank) of the nodes expanded.
	ExpandedP50 int64 `json:"expanded_p50"`
}

// Run loads the grid as a floor of the service and plans every problem on it, one
// after the other, after one plan that is not timed. The floor's id comes from
// the grid's content, so a second run on the same server finds it there. Give up
// with ctx. The answers are in the problems' order.
func Run(ctx context.Context, c *client.Client, g *Grid, problems []Problem, o Options) ([]Answer, error) {
	stamp, err := load(ctx, c, g)
	if err != nil {
		return nil, fmt.Errorf("trial: loading the map: %w", err)
	}
	if len(problems) > 0 { // the server may have to make the version ready
		if _, err := plan(ctx, c, g, stamp, problems[0], o); err != nil {
			return nil, err
		}
	}
	answers := make([]Answer, len(problems))
	for i, p := range problems {
		if answers[i], err = plan(ctx, c, g, stamp, p, o); err != nil {
			return nil, err
		}
	}
	return answers, nil
}

func plan(ctx context.Context, c *client.Client, g *Grid, stamp *wideberthv1.VersionStamp, p Problem, o Options) (Answer, error) {
	req := &wideberthv1.PlanRequest{
		Floor:   stamp.GetFloor(),
		Version: client.Pinned(stamp.GetVersion()),
		Body:    &wideberthv1.Body{Name: "point"},
		Start:   place(g.at(o.Points, p.StartX, p.StartY)),
		Goal:    place(g.at(o.Points, p.GoalX, p.GoalY)),
		Options: &wideberthv1.PlanOptions{
			Preference:      wideberthv1.Preference_PREFERENCE_SHORTEST,
			Roadmap:         o.Roadmap,
			KeepRoadmapPath: !o.Straighten,
			TimeBudgetS:     o.TimeBudgetS,
		},
	}
	begin := time.Now()
	resp, err := c.Plan(ctx, req)
	took := time.Since(begin)
	if err != nil {
		return Answer{}, fmt.Errorf("trial: problem in line %d: %w", p.Line, err)
	}
	return Answer{
		Solved:   resp.GetRoute() != nil,
		Length:   resp.GetRoute().GetLengthM(),
		Took:     took,
		Expanded: resp.GetCounters().GetExpanded(),
	}, nil
}

// Centre is the middle of a cell of the grid's frame, in metres of the floor's: x
// right, y up from the lower left corner.
func (g *Grid) Centre(x, y int) *wideberthv1.Point {
	return &wideberthv1.Point{XM: float64(x) + 0.5, YM: float64(g.Height-1-y) + 0.5}
}

// Vertex is the top left corner of a cell of the grid's frame, in metres of the floor's.
func (g *Grid) Vertex(x, y int) *wideberthv1.Point {
	return &wideberthv1.Point{XM: float64(x), YM: float64(g.Height - y)}
}

func (g *Grid) at(p Points, x, y int) *wideberthv1.Point {
	if p == Vertices {
		return g.Vertex(x, y)
	}
	return g.Centre(x, y)
}

func place(p *wideberthv1.Point) *wideberthv1.Place {
	return &wideberthv1.Place{Where: &wideberthv1.Place_Pose{Pose: &wideberthv1.Pose{XM: p.GetXM(), YM: p.GetYM()}}}
}

// cells are the floor's cells at two bits, from the lowest row, which is the grid's last.
func (g *Grid) cells() []byte {
	out := make([]byte, (g.Width*g.Height+3)/4)
	i := 0
	for y := g.Height - 1; y >= 0; y-- {
		for x := range g.Width {
			if !g.Free(x, y) {
				out[i>>2] |= byte(floor.Occupied) << (2 * (i & 3))
			}
			i++
		}
	}
	return out
}

// load makes the grid's floor, or finds it, and gives the version that holds the grid.
func load(ctx context.Context, c *client.Client, g *Grid) (*wideberthv1.VersionStamp, error) {
	cells := g.cells()
	sum := sha256.New()
	fmt.Fprintf(sum, "%d %d\n", g.Width, g.Height)
	sum.Write(cells)
	id := "trial-" + hex.EncodeToString(sum.Sum(nil)[:8])
	made, err := c.CreateFloor(ctx, &wideberthv1.CreateFloorRequest{
		Floor: id,
		Settings: &wideberthv1.FloorSettings{
			ResolutionM: proto.Float64(1), Columns: int32(g.Width), Rows: int32(g.Height),
			OpenBorder: true, InitialOccupancy: wideberthv1.Occupancy_OCCUPANCY_FREE,
		},
		Author: author,
	})
	if err != nil {
		return nil, err
	}
	head := made.GetFloor().GetHead()
	have, err := c.ReadFloor(ctx, id, client.Pinned(head.GetVersion()))
	if err != nil {
		return nil, err
	}
	if len(have.Features) > 0 {
		return nil, fmt.Errorf("floor %q has features, by another hand: nothing on it can be compared", id)
	}
	if slices.Equal(have.Cells, cells) {
		return head, nil
	}
	v, err := c.LoadCells(ctx, client.CellLoad{
		Floor: id, Base: head.GetVersion(), Author: author, Reason: "benchmark map",
		Rect: &wideberthv1.CellRect{Columns: int32(g.Width), Rows: int32(g.Height)}, Cells: cells,
	})
	return v.GetStamp(), err
}

// Summarize compares answers with their problems' optimum.
func Summarize(problems []Problem, answers []Answer) Summary {
	s := Summary{Queries: len(answers)}
	var worst, relative, ratios float64
	compared := 0
	us := make([]float64, 0, len(answers))
	expanded := make([]int64, 0, len(answers))
	for i, a := range answers {
		us = append(us, microseconds(a.Took))
		expanded = append(expanded, a.Expanded)
		if !a.Solved {
			continue
		}
		s.Solved++
		best := problems[i].Length
		wrong := math.Abs(a.Length - best)
		if problems[i].AtMost {
			wrong = max(0, a.Length-best)
		}
		worst = max(worst, wrong)
		if best > 0 {
			relative = max(relative, wrong/best)
			ratios += a.Length / best
			compared++
		}
	}
	if s.Solved > 0 {
		s.MaxAbsError = &worst
	}
	if compared > 0 {
		mean := ratios / float64(compared)
		s.MeanRatio, s.MaxRelError = &mean, &relative
	}
	s.P50Us, s.P95Us = rank(us, 50), rank(us, 95)
	s.ExpandedP50 = rank(expanded, 50)
	return s
}

// rank is the nearest-rank percentile; 0 of nothing.
func rank[T float64 | int64](v []T, percent int) T {
	if len(v) == 0 {
		return 0
	}
	v = slices.Sorted(slices.Values(v))
	return v[(len(v)*percent+99)/100-1]
}

// microseconds keeps one decimal: clocks tell no more.
func microseconds(d time.Duration) float64 {
	return math.Round(float64(d.Nanoseconds())/100) / 10
}

// WriteCSV writes a line an answer, in order: its index from 0, its length in cells
// (empty when unsolved), its time in microseconds, and the nodes expanded.
func WriteCSV(w io.Writer, answers []Answer) error {
	out := csv.NewWriter(w)
	rows := [][]string{{"index", "length", "us", "expanded"}}
	for i, a := range answers {
		length := ""
		if a.Solved {
			length = strconv.FormatFloat(a.Length, 'g', -1, 64)
		}
		rows = append(rows, []string{
			strconv.Itoa(i), length, strconv.FormatFloat(microseconds(a.Took), 'f', 1, 64), strconv.FormatInt(a.Expanded, 10),
		})
	}
	return out.WriteAll(rows)
}
