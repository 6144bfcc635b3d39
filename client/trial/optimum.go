package trial

import (
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
)

// The columns of a file of any-angle optima.
var optimumColumns = []string{"index", "start_x", "start_y", "goal_x", "goal_y", "octile_length", "any_angle_length"}

// ReadOptimaFile reads the any-angle optima in a file.
func ReadOptimaFile(path string, problems []Problem) ([]Problem, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer func() { _ = f.Close() }() // it was only read
	return ReadOptima(f, path, problems)
}

// ReadOptima gives the problems with their any-angle optimum for Length. It reads
// comma-separated values under the header index, start_x, start_y, goal_x, goal_y,
// octile_length, any_angle_length: a line for each problem, in order, index from 0, with
// the problem's ends. octile_length is not looked at. name is what faults call the
// file; a fault is a *FileError.
func ReadOptima(r io.Reader, name string, problems []Problem) ([]Problem, error) {
	in := newLines(r, name)
	line, err := in.next()
	if err != nil {
		return nil, err
	}
	if !slices.Equal(strings.Split(line, ","), optimumColumns) {
		return nil, in.fault("%.90q, want %q", line, strings.Join(optimumColumns, ","))
	}
	out := slices.Clone(problems)
	for i := range out {
		p := &out[i]
		if line, err = in.next(); err != nil {
			return nil, err
		}
		fields := strings.Split(line, ",")
		if len(fields) != len(optimumColumns) {
			return nil, in.fault("%d fields, want %d", len(fields), len(optimumColumns))
		}
		for k, want := range []int{i, p.StartX, p.StartY, p.GoalX, p.GoalY} {
			if n, err := strconv.Atoi(fields[k]); err != nil || n != want {
				return nil, in.fault("%s %.20q, the scenario's is %d", optimumColumns[k], fields[k], want)
			}
		}
		p.Length, err = strconv.ParseFloat(fields[len(fields)-1], 64)
		if err != nil || p.Length < 0 || math.IsNaN(p.Length) || math.IsInf(p.Length, 0) {
			return nil, in.fault("any_angle_length %.20q, want a number, 0 or more", fields[len(fields)-1])
		}
	}
	return out, in.end()
}

// UpperBounds gives the problems with their Length as no more than an upper bound on the
// optimum: what a scenario's octile optimum is to routes in any direction.
func UpperBounds(problems []Problem) []Problem {
	out := slices.Clone(problems)
	for i := range out {
		out[i].AtMost = true
	}
	return out
}
