package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"text/tabwriter"
	"time"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

type writer = io.Writer

// notef writes a line for people to stderr.
func (a *app) notef(format string, args ...any) {
	fmt.Fprintf(a.stderr, format+"\n", args...)
}

// json says whether data is to be printed as JSON.
func (a *app) json() bool { return a.output == "json" }

// message prints a message of the contract as JSON, with the contract's field names
// and zeroes written out.
func (a *app) message(m proto.Message) error {
	b, err := compact(m)
	if err != nil {
		return err
	}
	var out bytes.Buffer
	if err := json.Indent(&out, b, "", "  "); err != nil {
		return err
	}
	out.WriteByte('\n')
	_, err = a.stdout.Write(out.Bytes())
	return err
}

// line prints a message on a line of its own.
func (a *app) line(m proto.Message) error {
	b, err := compact(m)
	if err != nil {
		return err
	}
	_, err = a.stdout.Write(append(b, '\n'))
	return err
}

// compact is the message in JSON without the space that protojson varies.
func compact(m proto.Message) ([]byte, error) {
	b, err := protojson.MarshalOptions{UseProtoNames: true, EmitDefaultValues: true}.Marshal(m)
	if err != nil {
		return nil, err
	}
	var out bytes.Buffer
	err = json.Compact(&out, b)
	return out.Bytes(), err
}

// object prints a value of our own as indented JSON.
func (a *app) object(v any) error {
	b, err := json.MarshalIndent(v, "", "  ")
	if err != nil {
		return err
	}
	_, err = a.stdout.Write(append(b, '\n'))
	return err
}

// table prints rows in columns.
func (a *app) table(rows ...[]string) error {
	t := tabwriter.NewWriter(a.stdout, 0, 0, 2, ' ', 0)
	for _, r := range rows {
		if _, err := io.WriteString(t, strings.TrimRight(strings.Join(r, "\t"), "\t")+"\n"); err != nil {
			return err
		}
	}
	return t.Flush()
}

// metres writes a length to the millimetre.
func metres(m float64) string { return strconv.FormatFloat(m, 'f', 3, 64) }

// down writes a clearance or a width to the millimetre, rounded down, so that what
// is printed is never more than what was answered. Answers are whole micrometres.
func down(m float64) string {
	mm := math.Floor(math.Round(m*1e6) / 1e3)
	return strconv.FormatFloat(mm/1e3, 'f', 3, 64)
}

// up writes a length that is needed to the millimetre, rounded up.
func up(m float64) string {
	mm := math.Ceil(math.Round(m*1e6) / 1e3)
	return strconv.FormatFloat(mm/1e3, 'f', 3, 64)
}

func at(p *wideberthv1.Point) string {
	return metres(p.GetXM()) + "," + metres(p.GetYM())
}

func area(r *wideberthv1.Area) string {
	if r == nil {
		return "nothing"
	}
	return fmt.Sprintf("%s,%s to %s,%s", metres(r.GetMinXM()), metres(r.GetMinYM()), metres(r.GetMaxXM()), metres(r.GetMaxYM()))
}

func number(n int64) string { return strconv.FormatInt(n, 10) }

// when writes a time in UTC, to the second.
func when(t *timestamppb.Timestamp) string {
	if t == nil {
		return "-"
	}
	return t.AsTime().UTC().Format(time.RFC3339)
}

// word is an enum's value without its type's prefix, in lower case.
func word(value fmt.Stringer, prefix string) string {
	return strings.ReplaceAll(strings.ToLower(strings.TrimPrefix(value.String(), prefix)), "_", " ")
}

// plain keeps text that others wrote on one line and free of control characters.
func plain(s string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r >= 0x7f && r < 0xa0 {
			return ' '
		}
		return r
	}, s)
}

// readAll reads at most limit bytes; more is an error.
func readAll(r io.Reader, limit int64) ([]byte, error) {
	data, err := io.ReadAll(io.LimitReader(r, limit+1))
	if err != nil {
		return nil, err
	}
	if int64(len(data)) > limit {
		return nil, fmt.Errorf("larger than %d bytes", limit)
	}
	return data, nil
}
