package demo

import (
	"context"
	"fmt"
	"math"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// drive is a robot on its route, moved by hand: the story's clock is its own.
type drive struct {
	route    *wideberthv1.Route
	points   []*wideberthv1.RoutePoint // of all legs, in order
	s        float64                   // metres along the route
	clock    float64                   // seconds, the robot's own
	sequence int64                     // of the last report
}

func newDrive(r *wideberthv1.Route) *drive {
	d := &drive{route: r}
	for _, l := range r.GetLegs() {
		d.points = append(d.points, l.GetPoints()...)
	}
	return d
}

func (d *drive) length() float64 { return d.route.GetLengthM() }

func (d *drive) left() float64 { return d.length() - d.s }

// segment is the piece of the route that s lies on.
func (d *drive) segment() (from, to *wideberthv1.RoutePoint) {
	for i := 1; i < len(d.points); i++ {
		from, to = d.points[i-1], d.points[i]
		if to.GetSM() > d.s && to.GetSM() > from.GetSM() {
			break
		}
	}
	return from, to
}

// moveTo drives on to s, no faster than the lowest ceiling of the legs it is on.
func (d *drive) moveTo(s float64) {
	for _, l := range d.route.GetLegs() {
		from := l.GetPoints()[0].GetSM()
		if way := min(s, from+l.GetLengthM()) - max(d.s, from); way > 0 && l.GetLengthM() > 0 {
			d.clock += way / l.GetLengthM() * l.GetDurationS()
		}
	}
	d.s = max(d.s, min(s, d.length()))
}

// pose is where the robot is, facing along its route.
func (d *drive) pose() *wideberthv1.Pose {
	a, b := d.segment()
	t := 0.0
	if l := b.GetSM() - a.GetSM(); l > 0 {
		t = max(0, min(1, (d.s-a.GetSM())/l))
	}
	dx, dy := b.GetXM()-a.GetXM(), b.GetYM()-a.GetYM()
	return &wideberthv1.Pose{XM: a.GetXM() + t*dx, YM: a.GetYM() + t*dy, HeadingRad: math.Atan2(dy, dx) + 0}
}

// smallestAhead is the smallest clearance on what is left of the route, told by
// the legs not yet left behind.
func (d *drive) smallestAhead() float64 {
	smallest := math.Inf(1)
	for _, l := range d.route.GetLegs() {
		if l.GetPoints()[0].GetSM()+l.GetLengthM() > d.s {
			smallest = min(smallest, l.GetSmallestClearanceM())
		}
	}
	return smallest
}

// What the robot reports of itself beside its pose.
const (
	poseSpreadM = 0.02
	reportedMps = 0.5
)

// ask reports where the robot is and waits for the hint to that report.
func (d *drive) ask(ctx context.Context, g *client.Guide) (*wideberthv1.Hint, error) {
	d.sequence++
	if err := g.Report(&wideberthv1.GuideReport{
		Sequence: d.sequence, StampS: d.clock, Pose: d.pose(), PositionSpreadM: poseSpreadM, SpeedMps: reportedMps,
	}); err != nil {
		return nil, err
	}
	for {
		h, err := g.Next(ctx)
		if err != nil {
			return nil, fmt.Errorf("waiting for a hint: %w", err)
		}
		if h.GetSequence() == d.sequence {
			return h, nil
		}
	}
}

const (
	maxPlaces  = 12  // hints asked for, at most
	leastApart = 0.3 // metres between two of them
)

// places are where to ask for hints: before, at the tightest point of, and after
// each tight leg still ahead.
func (d *drive) places() []float64 {
	var out []float64
	for _, l := range d.route.GetLegs() {
		if l.GetKind() != wideberthv1.LegKind_LEG_KIND_TIGHT {
			continue
		}
		from := l.GetPoints()[0].GetSM()
		for _, s := range []float64{from - 1.5, from + 0.5, l.GetSmallestSM(), from + l.GetLengthM() + 1.5} {
			if s > d.s && s < d.length() && (len(out) == 0 || s > out[len(out)-1]+leastApart) && len(out) < maxPlaces {
				out = append(out, s)
			}
		}
	}
	return out
}
