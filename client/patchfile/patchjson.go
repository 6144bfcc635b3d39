package patchfile

import (
	"bytes"
	"encoding/json"
	"regexp"
	"strconv"
	"strings"
	"unicode/utf8"

	"google.golang.org/protobuf/encoding/protojson"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func readPatch(data []byte, fault faultFunc) (*wideberthv1.Patch, error) {
	patch := &wideberthv1.Patch{}
	if err := protojson.Unmarshal(data, patch); err != nil {
		path, problem := locate(data, err.Error())
		return nil, fault(path, "%s", problem)
	}
	if len(patch.GetEdits()) == 0 {
		return nil, fault("edits", "empty, want at least one")
	}
	return patch, nil
}

// position is where protojson's messages say what they are about.
var position = regexp.MustCompile(`\(line (\d+):(\d+)\):?\s*`)

// locate turns a message of protojson into the path of the value it is about and
// what is wrong there.
func locate(data []byte, message string) (path, problem string) {
	// protojson varies the space after its prefix so that nobody compares messages.
	problem = strings.TrimLeft(strings.TrimPrefix(message, "proto:"), " \u00a0")
	m := position.FindStringSubmatchIndex(problem)
	if m == nil { // the file ends too soon: there is no place to name but its end
		return pathAt(data, len(data)), problem
	}
	line, errLine := strconv.Atoi(problem[m[2]:m[3]])
	column, errColumn := strconv.Atoi(problem[m[4]:m[5]])
	if errLine != nil || errColumn != nil {
		return "", problem
	}
	where := "line " + problem[m[2]:m[3]] + ", column " + problem[m[4]:m[5]]
	problem = strings.TrimSpace(problem[:m[0]]+problem[m[1]:]) + " (" + where + ")"
	return pathAt(data, offsetOf(data, line, column)), problem
}

// offsetOf is the byte at a line and a column, both from 1, columns in characters.
func offsetOf(data []byte, line, column int) int {
	offset := 0
	for ; line > 1; line-- {
		i := bytes.IndexByte(data[offset:], '\n')
		if i < 0 {
			return len(data)
		}
		offset += i + 1
	}
	for ; column > 1 && offset < len(data); column-- {
		_, n := utf8.DecodeRune(data[offset:])
		offset += n
	}
	return offset
}

// pathAt is the path of the last value or name that begins at or before an offset, as
// far as the JSON can be read. Linear in offset.
func pathAt(data []byte, offset int) string {
	type level struct {
		array bool
		index int
		name  string
		named bool // a name was read and its value not yet
	}
	var stack []level
	path := func() string {
		var b strings.Builder
		for _, l := range stack {
			switch {
			case l.array && l.index < 0: // before its first value
			case l.array:
				b.WriteString("[" + strconv.Itoa(l.index) + "]")
			case l.name != "":
				if b.Len() > 0 {
					b.WriteByte('.')
				}
				b.WriteString(l.name)
			}
		}
		return b.String()
	}
	dec := json.NewDecoder(bytes.NewReader(data))
	for {
		tok, err := dec.Token()
		if err != nil {
			return path()
		}
		top := len(stack) - 1
		delim, isDelim := tok.(json.Delim)
		closing := isDelim && (delim == '}' || delim == ']')
		switch {
		case closing:
			stack = stack[:top]
			continue
		case top >= 0 && !stack[top].array && !stack[top].named:
			stack[top].name, _ = tok.(string)
			stack[top].named = true
		case top >= 0 && stack[top].array:
			stack[top].index++
		case top >= 0:
			stack[top].named = false
		}
		if int(dec.InputOffset()) > offset {
			return path()
		}
		if isDelim {
			stack = append(stack, level{array: delim == '[', index: -1})
		}
	}
}
