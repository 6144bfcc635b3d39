package picture

import (
	"fmt"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Step is a range of clearance that is drawn, and counted, as one.
type Step struct {
	FromM float64 // the step holds what is from here to the next one's
	Words string
	class string
	width float64
}

// Steps are the ranges of clearance that matter to a body, defaults filled in: from what
// it requires half way to what it prefers, up to that, up to twice that, and beyond. A
// range that would be empty is left out.
func Steps(b *wideberthv1.Body) []Step {
	need := b.GetRadiusM() + b.GetMarginM()
	wanted := max(need, b.GetPreferredClearanceM())
	from := []float64{0, (need + wanted) / 2, wanted, 2 * wanted}
	var out []Step
	for i, m := range from {
		switch {
		case i < len(from)-1 && from[i+1] <= m, len(out) > 0 && m <= out[len(out)-1].FromM:
			continue
		}
		out = append(out, Step{FromM: m, class: fmt.Sprint("step-", i), width: [...]float64{2.6, 2, 1.6, 1.6}[i]})
	}
	for i := range out {
		switch {
		case len(out) == 1:
			out[i].Words = "any"
		case i == 0:
			out[i].Words = fmt.Sprintf("below %.3g m", out[1].FromM)
		case i == len(out)-1:
			out[i].Words = fmt.Sprintf("%.3g m and more", out[i].FromM)
		default:
			out[i].Words = fmt.Sprintf("%.3g to %.3g m", out[i].FromM, out[i+1].FromM)
		}
	}
	return out
}

// StepOf is which step a clearance falls in.
func StepOf(steps []Step, clearanceM float64) int {
	i := len(steps) - 1
	for i > 0 && clearanceM < steps[i].FromM {
		i--
	}
	return i
}
