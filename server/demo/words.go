package demo

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"time"

	"example.com/wideberth/client"
	"example.com/wideberth/client/picture"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// at is a station as a route's end.
func at(station string) *wideberthv1.Place {
	return &wideberthv1.Place{Where: &wideberthv1.Place_Station{Station: station}}
}

// station is a station's pose in the hall's description.
func (s *story) station(name string) *wideberthv1.Pose {
	for _, e := range s.hall.Edits {
		if f := e.GetPutFeature().GetFeature(); f.GetName() == name {
			return f.GetStation().GetPose()
		}
	}
	return nil
}

// route says what a route is like, and lists its tight legs.
func (s *story) route(r *wideberthv1.Route) {
	s.say.line("  Route of %.1f m, %.0f s at the advised speed ceilings; smallest clearance %.2f m at x %.2f, y %.2f.", r.GetLengthM(), r.GetDurationS(),
		down(r.GetSmallestClearanceM()), r.GetSmallestAt().GetXM(), r.GetSmallestAt().GetYM())
	for _, l := range r.GetLegs() {
		if l.GetKind() != wideberthv1.LegKind_LEG_KIND_TIGHT {
			continue
		}
		near := "the raster"
		if l.GetNearestFeature() != "" {
			near = l.GetNearestFeature()
		}
		from := l.GetPoints()[0].GetSM()
		s.say.line("    tight from s = %.1f to %.1f m: %.2f m of clearance by %s", from, from+l.GetLengthM(), down(l.GetSmallestClearanceM()), near)
	}
}

// scene is a picture of the story.
type scene struct {
	title, caption string
	version        int64
	before         int64 // 0: no comparison
	route          *wideberthv1.Route
	previous       *wideberthv1.Route
	refusal        *wideberthv1.Refusal
	body           *wideberthv1.Body
	start, goal    *wideberthv1.Pose
}

// draw reads the floor back from the service and writes a picture.
func (s *story) draw(ctx context.Context, name string, sc scene) error {
	floor, err := s.client.ReadFloor(ctx, s.hall.Floor, client.Pinned(sc.version))
	if err != nil {
		return fmt.Errorf("reading version %d: %w", sc.version, err)
	}
	var before *client.FloorContent
	if sc.before > 0 {
		if before, err = s.client.ReadFloor(ctx, s.hall.Floor, client.Pinned(sc.before)); err != nil {
			return fmt.Errorf("reading version %d: %w", sc.before, err)
		}
	}
	path := filepath.Join(s.out, name)
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	err = picture.Draw(f, picture.Scene{
		Title: sc.title, Caption: sc.caption, Floor: floor, Before: before, Route: sc.route, Previous: sc.previous,
		Refusal: sc.refusal, Body: sc.body, Start: sc.start, Goal: sc.goal,
	})
	if closed := f.Close(); err == nil {
		err = closed
	}
	if err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	s.facts.Pictures = append(s.facts.Pictures, path)
	return nil
}

// took is the time since then, for reading.
func took(since time.Time) string { return length(time.Since(since)) }

// length is a time for reading.
func length(d time.Duration) string {
	switch {
	case d < 10*time.Millisecond:
		return d.Round(100 * time.Microsecond).String()
	case d < time.Second:
		return d.Round(time.Millisecond).String()
	default:
		return d.Round(10 * time.Millisecond).String()
	}
}

// down cuts a clearance to centimetres: printed, it is never more than it is.
func down(m float64) float64 { return math.Floor(m*100+1e-6) / 100 }

// up raises a width that is needed to centimetres: printed, it is never less than it is.
func up(m float64) float64 { return math.Ceil(m*100-1e-6) / 100 }

func degrees(rad float64) float64 { return rad * 180 / math.Pi }

func list(names []string) string {
	if len(names) == 0 {
		return "raster or border"
	}
	return strings.Join(names, " and ")
}

func reason(v *wideberthv1.Version) string {
	if v.GetReason() == "" {
		return "created"
	}
	return v.GetReason()
}

func stateWords(s wideberthv1.GuideState) string {
	switch s {
	case wideberthv1.GuideState_GUIDE_STATE_CLEAR:
		return "clear"
	case wideberthv1.GuideState_GUIDE_STATE_HINTING:
		return "hinting"
	case wideberthv1.GuideState_GUIDE_STATE_REPLAN_ADVISED:
		return "replan advised"
	}
	return "hold" // and whatever this program does not know
}

func speedWords(c wideberthv1.SpeedCause) string {
	switch c {
	case wideberthv1.SpeedCause_SPEED_CAUSE_BODY:
		return "the tug's own"
	case wideberthv1.SpeedCause_SPEED_CAUSE_ZONE:
		return "a zone"
	case wideberthv1.SpeedCause_SPEED_CAUSE_ROOM:
		return "room ahead"
	}
	return "not said"
}

func resultWords(r *wideberthv1.ReplanResponse) string {
	switch r.GetResult() {
	case wideberthv1.ReplanResult_REPLAN_RESULT_KEPT:
		return "the old route is kept"
	case wideberthv1.ReplanResult_REPLAN_RESULT_NEW:
		return "a new route"
	case wideberthv1.ReplanResult_REPLAN_RESULT_MENDED:
		return "a new route, mended from the old search"
	case wideberthv1.ReplanResult_REPLAN_RESULT_REFUSED:
		return "no route any more"
	}
	return "not said"
}

func causeWords(r *wideberthv1.ReplanResponse) string {
	switch r.GetCause() {
	case wideberthv1.ReplanCause_REPLAN_CAUSE_CUT:
		return fmt.Sprintf("because the change cuts the old one at s = %.1f m", r.GetCutSM())
	case wideberthv1.ReplanCause_REPLAN_CAUSE_CHEAPER:
		return "because a cheaper one was found"
	case wideberthv1.ReplanCause_REPLAN_CAUSE_QUESTION_CHANGED:
		return "because the question changed"
	case wideberthv1.ReplanCause_REPLAN_CAUSE_OFF_ROUTE:
		return "because the robot is off its route"
	case wideberthv1.ReplanCause_REPLAN_CAUSE_VERSION_GONE:
		return "because the old version is not held any more"
	}
	return "for no cause but the asking"
}
