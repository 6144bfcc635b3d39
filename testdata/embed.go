// Package testdata holds the demonstration floor: a fictional cut-flower auction
// hall on its night shift. The tests, the demonstration and the README all use
// this one description. The go tool leaves directories of this name out of
// ./..., so it is imported by its path.
package testdata

import (
	"bytes"
	_ "embed"

	"example.com/wideberth/client/layout"
)

//go:embed auction-hall.yaml
var hallYAML []byte

// HallFile is what faults in the hall's description are reported under.
const HallFile = "testdata/auction-hall.yaml"

// TwoOClock is the name of the hall's change: the west aisle is shut, the east one
// pinched.
const TwoOClock = "two-o-clock"

// Hall is the auction hall's floor, read anew at each call.
func Hall() (*layout.Layout, error) { return layout.Read(bytes.NewReader(hallYAML), HallFile) }

// HallYAML is the description itself.
func HallYAML() []byte { return bytes.Clone(hallYAML) }
