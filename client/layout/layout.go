package layout

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"regexp"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"
	"google.golang.org/protobuf/proto"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// What a description may hold. They bound the memory and time of reading one
// that was not written with care.
const (
	// MaxFileBytes is the size of a file.
	MaxFileBytes = 1 << 20
	// MaxEdits is how many edits a description makes, repeats and changes included.
	MaxEdits = 100_000
	// MaxBytes is the size of all edits on the wire: polygons repeat, too.
	MaxBytes = 64 << 20
)

const (
	formatVersion = 1         // of the file; another is refused
	maxRepeats    = 3         // directives in one item
	maxChanges    = 100       // named changes in one file
	maxBodies     = 100       // bodies in one file
	maxNames      = 100       // characters of a title, a name of a change
	maxReason     = 500       // characters, as in the contract
	maxCoordM     = 1_000_000 // metres from the origin, far beyond any floor
)

// The bounds of one patch: the contract's own on edits, and a size that leaves room
// below gRPC's default limit of 4 MiB a message.
const (
	patchEdits = 10_000
	patchBytes = 2 << 20
)

// Layout is a floor's description: what to create it with and what to push.
// It shares nothing with what it was read from.
type Layout struct {
	// Floor is the floor's id.
	Floor string
	// Title is for people; may be empty.
	Title string
	// Settings are what the floor is created with.
	Settings *wideberthv1.FloorSettings
	// Edits are the layout itself, in the file's order.
	Edits []*wideberthv1.Edit
	// Bodies are what moves there, in the file's order, names unique.
	Bodies []*wideberthv1.Body
	// Changes are named patches, in the file's order, names unique.
	Changes []Change
}

// Change is a named patch, to be pushed when its time has come.
type Change struct {
	Name   string // unique in its file
	Title  string // for people; may be empty
	Reason string // goes into the patch
	Edits  []*wideberthv1.Edit
}

// Body is the body of that name.
func (l *Layout) Body(name string) (*wideberthv1.Body, bool) {
	for _, b := range l.Bodies {
		if b.GetName() == name {
			return b, true
		}
	}
	return nil, false
}

// Change is the change of that name.
func (l *Layout) Change(name string) (*Change, bool) {
	for i := range l.Changes {
		if l.Changes[i].Name == name {
			return &l.Changes[i], true
		}
	}
	return nil, false
}

// Patches are the layout's edits as patches that fit a message, in order. The
// first has baseVersion as its base, each further one the version after.
func (l *Layout) Patches(baseVersion int64, author, reason string) []*wideberthv1.Patch {
	return split(l.Edits, baseVersion, author, reason)
}

// Patches are the change's edits as patches that fit a message, in order; nearly
// always one. The first has baseVersion as its base, each further one the version after.
func (c *Change) Patches(baseVersion int64, author string) []*wideberthv1.Patch {
	return split(c.Edits, baseVersion, author, c.Reason)
}

func split(edits []*wideberthv1.Edit, base int64, author, reason string) []*wideberthv1.Patch {
	var out []*wideberthv1.Patch
	for len(edits) > 0 {
		n, size := 0, 0
		for n < len(edits) && n < patchEdits {
			size += proto.Size(edits[n]) + 8 // tag and length
			if n > 0 && size > patchBytes {
				break
			}
			n++
		}
		out = append(out, &wideberthv1.Patch{BaseVersion: base, Author: author, Reason: reason, Edits: edits[:n:n]})
		edits, base = edits[n:], base+1
	}
	return out
}

// ReadFile reads the description in a file. A fault in it is an *Error.
func ReadFile(path string) (*Layout, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return Read(f, path)
}

// Read reads a description; name is what faults call it. A fault is an *Error;
// any other error is r's own.
func Read(r io.Reader, name string) (*Layout, error) {
	data, err := io.ReadAll(io.LimitReader(r, MaxFileBytes+1))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	f := &faults{file: name}
	if len(data) > MaxFileBytes {
		f.addAt(0, "", fmt.Sprintf("more than %d bytes; a floor's description may have at most that many", MaxFileBytes))
		return nil, f.result()
	}
	spec := parse(data, f)
	if err := f.result(); err != nil {
		return nil, err
	}
	l := build(spec, f)
	if err := f.result(); err != nil {
		return nil, err
	}
	return l, nil
}

// parse turns the bytes into the file's words. Unknown keys, doubled keys and
// wrong types are faults.
func parse(data []byte, f *faults) *fileSpec {
	var root yaml.Node
	if err := yaml.Unmarshal(data, &root); err != nil {
		f.addYAML(err)
		return nil
	}
	if len(root.Content) == 0 {
		f.addAt(0, "", "nothing in it; a floor's description begins with format: 1")
		return nil
	}
	f.root = &root
	dec := yaml.NewDecoder(bytes.NewReader(data))
	dec.KnownFields(true)
	var spec fileSpec
	if err := dec.Decode(&spec); err != nil {
		f.addYAML(err)
		return nil
	}
	var more yaml.Node
	if err := dec.Decode(&more); !errors.Is(err, io.EOF) {
		f.addAt(more.Line, "", "a second document begins; a file describes one floor")
	}
	return &spec
}

// The decoder's messages name Go types, which are no help to who wrote the file.
var (
	yamlLine  = regexp.MustCompile(`^(?:yaml: )?line (\d+): (?s:(.*))$`)
	goTypes   = regexp.MustCompile(` (?:in type|into) \*?\[*\]*[\w.\[\]*]+$`)
	yamlTypes = strings.NewReplacer("!!str", "text", "!!int", "whole number", "!!float", "number",
		"!!seq", "list", "!!map", "mapping", "!!bool", "yes/no", "!!null", "nothing")
)

func (f *faults) addYAML(err error) {
	messages := []string{err.Error()}
	var te *yaml.TypeError
	if errors.As(err, &te) {
		messages = te.Errors
	}
	for _, m := range messages {
		line := 0
		if parts := yamlLine.FindStringSubmatch(m); parts != nil {
			line, _ = strconv.Atoi(parts[1])
			m = parts[2]
		}
		m = strings.TrimPrefix(m, "yaml: ")
		if kind := wanted(m); kind != "" {
			m = goTypes.ReplaceAllString(m, "; wanted "+kind)
		} else {
			m = goTypes.ReplaceAllString(m, "")
		}
		m = strings.Replace(m, "cannot unmarshal ", "cannot read ", 1)
		m = strings.Replace(m, "not found", "is not one this file may have", 1)
		f.addAt(line, "", yamlTypes.Replace(m))
	}
}

// wanted says in words what the decoder's message wanted, or nothing when it
// does not end in a type it wanted.
func wanted(m string) string {
	_, typ, ok := strings.Cut(m, " into ")
	if !ok {
		return ""
	}
	switch {
	case strings.HasPrefix(typ, "[]"):
		return "a list"
	case strings.HasSuffix(typ, "float64"):
		return "a number"
	case strings.HasSuffix(typ, "int"):
		return "a whole number"
	case strings.HasSuffix(typ, "bool"):
		return "true or false"
	case strings.HasSuffix(typ, "string"):
		return "text"
	default:
		return "a mapping"
	}
}

// finite says whether v is a number that can be a length on a floor.
func finite(v float64) bool { return !math.IsNaN(v) && math.Abs(v) <= maxCoordM }
