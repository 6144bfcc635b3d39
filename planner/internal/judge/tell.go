package judge

import "example.com/wideberth/planner/clearance"

// Tell lets the judge know what is nearest to the place n.On, from one who asked there on a
// version that is the same so near by. It is remembered as an answer of Place.
func (j *Judge) Tell(n clearance.Nearest) {
	if m := j.remember(); len(m.ends) < mostDriven {
		m.ends = append(m.ends, n)
	}
}
