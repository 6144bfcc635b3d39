package layout

import (
	"fmt"
	"os"
	"strings"
	"testing"
)

// The description in the package's documentation is one that can be read.
func TestDocumentedDescriptionIsRead(t *testing.T) {
	doc, err := os.ReadFile("doc.go")
	if err != nil {
		t.Fatal(err)
	}
	var text strings.Builder
	for line := range strings.Lines(string(doc)) {
		if code, ok := strings.CutPrefix(line, "//\t"); ok {
			text.WriteString(code)
		}
	}
	l := mustRead(t, text.String())
	if len(l.Edits) != 1+1+3+40+1+1 || len(l.Bodies) != 1 || len(l.Changes) != 1 {
		t.Errorf("%d edits, %d bodies, %d changes", len(l.Edits), len(l.Bodies), len(l.Changes))
	}
}

func ExampleRead() {
	description := `
format: 1
floor: cold-store
width_m: 30
height_m: 20
initial: free
items:
  - wall: door-west
    width_m: 0.2
    points: [[0, 12], [13.4, 12]]
  - column: column
    at: [6, 4]
    radius_m: 0.3
    repeat: [{count: 3, step_m: [9, 0]}]
`
	l, err := Read(strings.NewReader(description), "cold-store.yaml")
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, p := range l.Patches(1, "integration", "Layout") {
		for _, e := range p.Edits {
			fmt.Println(e.GetPutFeature().GetFeature().GetName())
		}
	}

	_, err = Read(strings.NewReader(strings.Replace(description, "0.3", "wide", 1)), "cold-store.yaml")
	fmt.Println(err)
	// Output:
	// door-west
	// column-1
	// column-2
	// column-3
	// cold-store.yaml:13: cannot read text `wide`; wanted a number
}
