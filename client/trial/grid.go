package trial

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"os"
	"strconv"
	"strings"

	"example.com/wideberth/mapstore/floor"
)

// Limits of the files read.
const (
	// MaxCells is how many cells a map may have, four times the benchmark's largest.
	MaxCells = 1 << 26
	// MaxProblems is how many problems a scenario may have.
	MaxProblems = 1_000_000
	// maxLine is how long a line may be: a row of the widest floor and its end.
	maxLine = floor.MaxSide + 2
)

// FileError says what is wrong with a file and where.
type FileError struct {
	File    string // as it was named by the caller
	Line    int    // counted from 1
	Problem string
}

func (e *FileError) Error() string { return fmt.Sprintf("%s:%d: %s", e.File, e.Line, e.Problem) }

// Grid is a map of the benchmark: cells that are free or blocked, (0, 0) at the top
// left, y down. It keeps the file's own frame; see Centre for the floor's.
type Grid struct {
	Width, Height int
	free          []bool // row by row from the top
}

// Free says whether a cell of the grid's frame is free. Outside it none is.
func (g *Grid) Free(x, y int) bool {
	return x >= 0 && y >= 0 && x < g.Width && y < g.Height && g.free[y*g.Width+x]
}

// ReadGridFile reads the map in a file.
func ReadGridFile(path string) (*Grid, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer func() { _ = f.Close() }() // it was only read
	return ReadGrid(f, path)
}

// ReadGrid reads a map of type octile: the header lines "type octile", "height H",
// "width W" and "map", then H rows of W characters. '.', 'G' and 'S' are free, every
// other character is blocked. name is what faults call it; a fault is a
// *FileError.
func ReadGrid(r io.Reader, name string) (*Grid, error) {
	in := newLines(r, name)
	var g Grid
	for _, key := range []string{"type", "height", "width", "map"} {
		line, err := in.next()
		if err != nil {
			return nil, err
		}
		word, rest, _ := strings.Cut(strings.TrimSpace(line), " ")
		rest = strings.TrimSpace(rest)
		if word != key {
			return nil, in.fault("%q, want %q", word, key)
		}
		switch key {
		case "type":
			if rest != "octile" {
				return nil, in.fault("type %q, want octile", rest)
			}
		case "height":
			g.Height, err = in.count(key, rest, floor.MaxSide)
		case "width":
			g.Width, err = in.count(key, rest, floor.MaxSide)
		}
		if err != nil {
			return nil, err
		}
	}
	if g.Width*g.Height > MaxCells {
		return nil, in.fault("%d x %d cells, want at most %d", g.Width, g.Height, MaxCells)
	}
	for range g.Height { // memory grows with what is there, not with what was announced
		line, err := in.next()
		if err != nil {
			return nil, err
		}
		if len(line) != g.Width {
			return nil, in.fault("a row of %d characters, want %d", len(line), g.Width)
		}
		for i := range len(line) {
			c := line[i]
			g.free = append(g.free, c == '.' || c == 'G' || c == 'S')
		}
	}
	return &g, in.end()
}

// lines reads a file line by line and knows where it is.
type lines struct {
	s    *bufio.Scanner
	name string
	n    int
}

func newLines(r io.Reader, name string) *lines {
	s := bufio.NewScanner(r)
	s.Buffer(nil, maxLine)
	return &lines{s: s, name: name}
}

func (l *lines) fault(format string, args ...any) error {
	return &FileError{File: l.name, Line: l.n, Problem: fmt.Sprintf(format, args...)}
}

// more reads the next line; false at the end of the file or when it cannot be read.
func (l *lines) more() bool {
	l.n++
	return l.s.Scan()
}

func (l *lines) text() string { return strings.TrimSuffix(l.s.Text(), "\r") }

// failed is why there is no next line; nil at the end of the file.
func (l *lines) failed() error {
	if errors.Is(l.s.Err(), bufio.ErrTooLong) {
		return l.fault("a line of more than %d characters", maxLine)
	}
	if err := l.s.Err(); err != nil {
		return fmt.Errorf("%s: %w", l.name, err)
	}
	return nil
}

// next is the next line; that there is none is a fault.
func (l *lines) next() (string, error) {
	if l.more() {
		return l.text(), nil
	}
	if err := l.failed(); err != nil {
		return "", err
	}
	return "", l.fault("the file ends too soon")
}

// end checks that nothing but blank lines is left.
func (l *lines) end() error {
	for l.more() {
		if strings.TrimSpace(l.text()) != "" {
			return l.fault("%.20q after the last row", l.text())
		}
	}
	return l.failed()
}

// count reads a whole number from 1 to most.
func (l *lines) count(what, text string, most int) (int, error) {
	n, err := strconv.Atoi(text)
	if err != nil || n < 1 || n > most {
		return 0, l.fault("%s %.20q, want a whole number from 1 to %d", what, text, most)
	}
	return n, nil
}
