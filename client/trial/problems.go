package trial

import (
	"io"
	"math"
	"os"
	"strconv"
	"strings"
)

// Problem is one query of a scenario, in the grid's frame.
type Problem struct {
	Line           int // of the file, from 1
	StartX, StartY int
	GoalX, GoalY   int
	Length         float64 // the listed optimum, in cells
	AtMost         bool    // Length is an upper bound on the optimum: only more is an error
}

// ReadProblemsFile reads the scenario in a file.
func ReadProblemsFile(path string, g *Grid) ([]Problem, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer func() { _ = f.Close() }() // it was only read
	return ReadProblems(f, path, g)
}

// The nine fields of a scenario's line.
const (
	fieldWidth  = 2
	fieldStart  = 4
	fieldLength = 8
	fieldCount  = 9
)

// ReadProblems reads a scenario for a grid: the line "version 1", then a line a
// problem of nine fields: bucket, map, width, height, start x, start y, goal x,
// goal y, optimal length. Bucket and map are not looked at; width and height must
// be the grid's, and the ends must lie on it. name is what faults call it; a
// fault is a *FileError.
func ReadProblems(r io.Reader, name string, g *Grid) ([]Problem, error) {
	in := newLines(r, name)
	line, err := in.next()
	if err != nil {
		return nil, err
	}
	if v, ok := strings.CutPrefix(strings.TrimSpace(line), "version "); !ok || (v != "1" && v != "1.0") {
		return nil, in.fault("%.20q, want \"version 1\"", line)
	}
	var out []Problem
	for in.more() {
		if strings.TrimSpace(in.text()) == "" {
			continue
		}
		if len(out) == MaxProblems {
			return nil, in.fault("more than %d problems", MaxProblems)
		}
		p, err := problem(in, g)
		if err != nil {
			return nil, err
		}
		out = append(out, p)
	}
	if err := in.failed(); err != nil {
		return nil, err
	}
	if len(out) == 0 {
		return nil, in.fault("no problem in it")
	}
	return out, nil
}

// problem reads the line that in is at.
func problem(in *lines, g *Grid) (Problem, error) {
	fields := strings.Fields(in.text())
	if strings.Contains(in.text(), "\t") { // a map's name may hold spaces
		fields = strings.Split(in.text(), "\t")
	}
	if len(fields) != fieldCount {
		return Problem{}, in.fault("%d fields, want %d", len(fields), fieldCount)
	}
	p := Problem{Line: in.n}
	for i, size := range []int{g.Width, g.Height} {
		if n, err := strconv.Atoi(fields[fieldWidth+i]); err != nil || n != size {
			return Problem{}, in.fault("%s %.20q, the map's is %d", [...]string{"width", "height"}[i], fields[fieldWidth+i], size)
		}
	}
	for i, to := range []*int{&p.StartX, &p.StartY, &p.GoalX, &p.GoalY} {
		size := [...]int{g.Width, g.Height}[i%2]
		n, err := strconv.Atoi(fields[fieldStart+i])
		if err != nil || n < 0 || n >= size {
			what := [...]string{"start x", "start y", "goal x", "goal y"}[i]
			return Problem{}, in.fault("%s %.20q, want a whole number from 0 to %d", what, fields[fieldStart+i], size-1)
		}
		*to = n
	}
	length, err := strconv.ParseFloat(strings.TrimSpace(fields[fieldLength]), 64)
	if err != nil || length < 0 || math.IsNaN(length) || math.IsInf(length, 0) {
		return Problem{}, in.fault("optimal length %.20q, want a number, 0 or more", fields[fieldLength])
	}
	p.Length = length
	return p, nil
}
