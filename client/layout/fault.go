package layout

import (
	"fmt"
	"strings"

	"go.yaml.in/yaml/v3"
)

// maxFaults is how many faults one error lists; a file that is wrong all over is
// not described line by line.
const maxFaults = 20

// Fault is one thing wrong with a description.
type Fault struct {
	File    string // as given to Read
	Line    int    // counted from 1; 0 when no line can be named
	Field   string // path of the field, e.g. "items[3].points[2]"; may be empty
	Problem string // the value and what was wanted
}

func (f Fault) String() string {
	var b strings.Builder
	b.WriteString(f.File)
	if f.Line > 0 {
		fmt.Fprintf(&b, ":%d", f.Line)
	}
	if f.Field != "" {
		b.WriteString(": ")
		b.WriteString(f.Field)
	}
	b.WriteString(": ")
	b.WriteString(f.Problem)
	return b.String()
}

// Error is a description that cannot be used. It lists up to 20 faults, in the
// order they were found, one a line.
type Error struct {
	Faults []Fault
	// More is how many further faults were found and are not listed.
	More int
}

func (e *Error) Error() string {
	lines := make([]string, 0, len(e.Faults)+1)
	for _, f := range e.Faults {
		lines = append(lines, f.String())
	}
	if e.More > 0 {
		lines = append(lines, fmt.Sprintf("and %d more", e.More))
	}
	return strings.Join(lines, "\n")
}

// faults gathers what is wrong while a description is read. Paths are lists of
// keys (string) and indexes (int), so that the line can be found in the tree.
type faults struct {
	file string
	root *yaml.Node
	err  Error
}

func (f *faults) add(path []any, format string, args ...any) {
	f.addAt(f.line(path), fieldName(path), fmt.Sprintf(format, args...))
}

func (f *faults) addAt(line int, field, problem string) {
	if len(f.err.Faults) == maxFaults {
		f.err.More++
		return
	}
	f.err.Faults = append(f.err.Faults, Fault{File: f.file, Line: line, Field: field, Problem: problem})
}

// result is nil when nothing was wrong.
func (f *faults) result() error {
	if len(f.err.Faults) == 0 {
		return nil
	}
	return &f.err
}

// line is the line of the deepest part of path that is in the file: a missing
// field is reported where its item begins.
func (f *faults) line(path []any) int {
	n := f.root
	line := 0
	for i := 0; n != nil; i++ {
		if n.Kind == yaml.AliasNode {
			n = n.Alias
		}
		if n.Kind == yaml.DocumentNode && len(n.Content) == 1 {
			n = n.Content[0]
		}
		if n.Line > 0 {
			line = n.Line
		}
		if i == len(path) {
			break
		}
		n = child(n, path[i])
	}
	return line
}

func child(n *yaml.Node, step any) *yaml.Node {
	switch step := step.(type) {
	case string:
		if n.Kind == yaml.MappingNode {
			for i := 0; i+1 < len(n.Content); i += 2 {
				if n.Content[i].Value == step {
					return n.Content[i+1]
				}
			}
		}
	case int:
		if n.Kind == yaml.SequenceNode && step < len(n.Content) {
			return n.Content[step]
		}
	}
	return nil
}

func fieldName(path []any) string {
	var b strings.Builder
	for _, step := range path {
		switch step := step.(type) {
		case string:
			if b.Len() > 0 {
				b.WriteByte('.')
			}
			b.WriteString(step)
		case int:
			fmt.Fprintf(&b, "[%d]", step)
		}
	}
	return b.String()
}

// at is a path with more steps; it never shares memory with the path it came from.
func at(path []any, steps ...any) []any {
	out := make([]any, 0, len(path)+len(steps))
	return append(append(out, path...), steps...)
}
