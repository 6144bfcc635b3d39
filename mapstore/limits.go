package mapstore

import (
	"fmt"
	"strings"
	"unicode/utf8"

	"example.com/wideberth/mapstore/floor"
)

// The limits of a store and of what it is given.
const (
	MaxFloors         = 1_000 // floors of one store
	MaxFloorIDBytes   = 63
	MaxAuthorRunes    = 100
	MaxReasonRunes    = 500
	MaxRequestIDBytes = 64
	MaxVersionsPage   = 1_000 // records that Versions gives at a time
	MaxConflicts      = 20    // conflicts that a StaleBaseError lists

	// WatchBacklog is how far a watch may fall behind and still be given every
	// version; one that is further behind is given the head.
	WatchBacklog = 64
)

// The defaults of Options.
const (
	DefaultKeepVersions  = 1_000
	DefaultSnapshotEvery = 200
)

// ArgumentError says what is wrong with an argument. Nothing was changed.
type ArgumentError struct {
	Field   string // in the contract's words, e.g. "patch.author"
	Problem string // value and wanted range
}

// Error names the field and the problem.
func (e *ArgumentError) Error() string { return e.Field + ": " + e.Problem }

func wrong(field, format string, args ...any) error {
	return &ArgumentError{field, fmt.Sprintf(format, args...)}
}

// cut shortens a value for an error message.
func cut(s string) string {
	const most = 80
	if len(s) > most {
		s = strings.ToValidUTF8(s[:most], "") + "..."
	}
	return s
}

func checkFloorID(id string) error {
	ok := len(id) >= 1 && len(id) <= MaxFloorIDBytes
	for i := 0; i < len(id) && ok; i++ {
		c := id[i]
		ok = 'a' <= c && c <= 'z' || i > 0 && (c == '-' || '0' <= c && c <= '9')
	}
	if !ok {
		return wrong("floor", "%q, wanted 1 to %d of a-z, 0-9, '-', first a letter", cut(id), MaxFloorIDBytes)
	}
	return nil
}

func checkText(field, text string, most int) error {
	if !utf8.ValidString(text) {
		return wrong(field, "%q is not UTF-8", cut(text))
	}
	if n := utf8.RuneCountInString(text); n < 1 || n > most {
		return wrong(field, "%d characters, wanted 1 to %d", n, most)
	}
	return nil
}

func checkRequestID(id string) error {
	if len(id) > MaxRequestIDBytes {
		return wrong("request_id", "%d characters, wanted at most %d", len(id), MaxRequestIDBytes)
	}
	for i := range len(id) {
		if id[i] < ' ' || id[i] > '~' {
			return wrong("request_id", "%q, wanted printable ASCII", id)
		}
	}
	return nil
}

// check is what can be said about a patch without its floor.
func (p *Patch) check() error {
	if p.Base < 1 {
		return wrong("patch.base_version", "%d, wanted 1 or more", p.Base)
	}
	if err := checkText("patch.author", p.Author, MaxAuthorRunes); err != nil {
		return err
	}
	if err := checkText("patch.reason", p.Reason, MaxReasonRunes); err != nil {
		return err
	}
	if n := len(p.Edits); n < 1 || n > floor.MaxEdits {
		return wrong("patch.edits", "%d edits, wanted 1 to %d", n, floor.MaxEdits)
	}
	return checkRequestID(p.RequestID)
}

func (r *Restore) check() error {
	if r.Version < 1 {
		return wrong("restored_version", "%d, wanted 1 or more", r.Version)
	}
	if r.Base < 1 {
		return wrong("base_version", "%d, wanted 1 or more", r.Base)
	}
	if err := checkText("author", r.Author, MaxAuthorRunes); err != nil {
		return err
	}
	if err := checkText("reason", r.Reason, MaxReasonRunes); err != nil {
		return err
	}
	return checkRequestID(r.RequestID)
}
