package journal

import "fmt"

// CorruptError says what was found damaged. errors.Is(err, ErrCorrupt) holds.
type CorruptError struct {
	File    string // empty for a journal without files
	Floor   string // empty when the damage is not in one floor's part
	Version int64  // of the record or snapshot; 0 when the damage is in neither
	Newest  int64  // the floor's newest version as far as it is known, else 0
	What    string // what does not check out, in words
}

// Error names file, floor, version and damage, and tells damage in the newest
// record from damage further back.
func (e *CorruptError) Error() string {
	s := "journal damaged"
	if e.File != "" {
		s += fmt.Sprintf(", file %q", e.File)
	}
	if e.Floor != "" {
		s += fmt.Sprintf(", floor %q", e.Floor)
	}
	switch {
	case e.Version == 0:
	case e.Newest == 0:
		s += fmt.Sprintf(", version %d", e.Version)
	case e.Version == e.Newest:
		s += fmt.Sprintf(", version %d, the newest", e.Version)
	case e.Version < e.Newest:
		s += fmt.Sprintf(", version %d, with %d newer behind it", e.Version, e.Newest-e.Version)
	default:
		s += fmt.Sprintf(", version %d, above the newest, %d", e.Version, e.Newest)
	}
	return s + ": " + e.What
}

// Is makes the error an ErrCorrupt.
func (e *CorruptError) Is(target error) bool { return target == ErrCorrupt }

// FormatError says that something was written by a newer program. errors.Is(err,
// ErrFormat) holds.
type FormatError struct {
	File  string // empty when not known
	What  string // "file", "record" or "snapshot"
	Found int    // the format found
	Known int    // the newest format that this program reads
}

// Error names both formats.
func (e *FormatError) Error() string {
	s := fmt.Sprintf("journal: %s has format %d, this program reads formats up to %d; use a newer program", e.What, e.Found, e.Known)
	if e.File != "" {
		s += fmt.Sprintf(" (file %q)", e.File)
	}
	return s
}

// Is makes the error an ErrFormat.
func (e *FormatError) Is(target error) bool { return target == ErrFormat }
