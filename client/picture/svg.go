package picture

import (
	"bytes"
	"encoding/xml"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// svg gathers a document. Its methods escape what they are given.
type svg struct{ buf bytes.Buffer }

// raw writes markup of this package's own.
func (o *svg) raw(format string, args ...any) {
	fmt.Fprintf(&o.buf, format, args...)
	o.buf.WriteByte('\n')
}

// text writes one line of text; extra holds further attributes.
func (o *svg) text(x, y float64, class, extra, s string) {
	o.raw(`<text x="%s" y="%s" class="%s"%s>%s</text>`, num(x), num(y), class, attrs(extra), esc(s))
}

func (o *svg) line(x1, y1, x2, y2 float64, class, extra string) {
	o.raw(`<line x1="%s" y1="%s" x2="%s" y2="%s" class="%s"%s/>`, num(x1), num(y1), num(x2), num(y2), class, attrs(extra))
}

func (o *svg) rect(x, y, w, h float64, class, extra string) {
	o.raw(`<rect x="%s" y="%s" width="%s" height="%s" class="%s"%s/>`, num(x), num(y), num(w), num(h), class, attrs(extra))
}

func (o *svg) circle(x, y, r float64, class, extra string) {
	o.raw(`<circle cx="%s" cy="%s" r="%s" class="%s"%s/>`, num(x), num(y), num(r), class, attrs(extra))
}

// path writes nothing when there is nothing to draw.
func (o *svg) path(d, class, extra string) {
	if d != "" {
		o.raw(`<path d="%s" class="%s"%s/>`, d, class, attrs(extra))
	}
}

func attrs(extra string) string {
	if extra == "" {
		return ""
	}
	return " " + extra
}

// esc makes text fit for XML, in content and in attributes alike.
func esc(s string) string {
	var b bytes.Buffer
	if err := xml.EscapeText(&b, []byte(s)); err != nil {
		return ""
	}
	return b.String()
}

// num writes a coordinate to a hundredth of a unit.
func num(v float64) string {
	v = math.Round(v*100) / 100
	if v == 0 {
		return "0" // never -0
	}
	return strconv.FormatFloat(v, 'f', -1, 64)
}

// em is how wide a character is in the fonts asked for, in its font's size. It
// errs to the wide side.
func em(r rune) float64 {
	switch {
	case strings.ContainsRune(" iljtfI.,:;'|!()[]/-", r):
		return 0.38
	case strings.ContainsRune("mwMW%@", r):
		return 0.95
	case r >= 'A' && r <= 'Z':
		return 0.7
	default:
		return 0.62
	}
}

// textWidth is about how wide a line is at a font size.
func textWidth(s string, size float64) float64 {
	w := 0.0
	for _, r := range s {
		w += em(r)
	}
	return w * size
}

// classWidth is how much wider a class of text is than the plain one.
func classWidth(class string) float64 {
	if class == "figure" { // bold
		return 1.12
	}
	return 1
}

// cut shortens a line to a width, marking that it did.
func cut(s string, size, width float64) string {
	if textWidth(s, size) <= width {
		return s
	}
	w := em('.') * 3 * size
	for i, r := range s {
		w += em(r) * size
		if w > width {
			return s[:i] + "..."
		}
	}
	return s
}

// wrap breaks text into lines of a width, at spaces, at most so many.
func wrap(s string, size, width float64, most int) []string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(s) {
		next := word
		if line != "" {
			next = line + " " + word
		}
		if line != "" && textWidth(next, size) > width {
			if len(lines) == most-1 {
				return append(lines, cut(line+" "+word+" ...", size, width))
			}
			lines = append(lines, line)
			line = word
			continue
		}
		line = next
	}
	if line != "" {
		lines = append(lines, cut(line, size, width))
	}
	return lines
}
