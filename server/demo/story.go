package demo

import (
	"context"
	"fmt"
	"time"

	"example.com/wideberth/client"
	"example.com/wideberth/client/layout"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/testdata"
)

// Who acts in the story; names of roles, not of people.
const (
	operator = "shift-operator"
	engineer = "integration"
)

// patience bounds every step of the story: a step that takes longer has failed.
const patience = 90 * time.Second

// searchBudgetS is what searches are given, the contract's most: the story must come
// out the same on a slow machine.
const searchBudgetS = 30

// drivenBeforeM is how far the tug has come when the floor changes under it.
const drivenBeforeM = 18.0

// story is the demonstration as it goes on.
type story struct {
	client  *client.Client
	say     teller
	out     string // folder for pictures
	address string
	hall    *layout.Layout
	tug     *wideberthv1.Body
	runner  *wideberthv1.Body
	facts   facts
}

// facts are what happened, for the story's test.
type facts struct {
	Versions      []int64 // seen on the watch
	Before, After *wideberthv1.Route
	Replan        *wideberthv1.ReplanResponse
	StaleAdvice   wideberthv1.GuideState // on the old route after the change
	Hints         []*wideberthv1.Hint    // on the new route
	Runner        *wideberthv1.Route
	Refused       *wideberthv1.Refusal
	PushToPlan    time.Duration // change pushed until the new route was there
	Pictures      []string
}

// tell plays all parts in order.
func (s *story) tell(ctx context.Context) error {
	var err error
	if s.hall, err = testdata.Hall(); err != nil {
		return err
	}
	for _, b := range []struct {
		name string
		body **wideberthv1.Body
	}{{"tug", &s.tug}, {"runner", &s.runner}} {
		var ok bool
		if *b.body, ok = s.hall.Body(b.name); !ok {
			return fmt.Errorf("the hall has no body %q", b.name)
		}
	}
	set := s.hall.Settings
	s.say.line("%s: a fictional floor of %.0f m by %.0f m, %d x %d cells of %.2f m.",
		s.hall.Title, float64(set.Columns)*set.GetResolutionM(), float64(set.Rows)*set.GetResolutionM(), set.Columns, set.Rows, set.GetResolutionM())
	s.say.line("A wideberth server listens on %s, its journal in a temporary file.", s.address)
	for _, b := range []*wideberthv1.Body{s.tug, s.runner} {
		s.say.line("  %-6s  radius %.2f m, margin %.2f m: needs %.2f m of width, prefers %.2f m of clearance",
			b.Name, b.RadiusM, b.MarginM, up(2*(b.RadiusM+b.MarginM)), b.PreferredClearanceM)
	}

	head, err := s.commission(ctx)
	if err != nil {
		return err
	}
	// The watch goes on beside the story until the story ends.
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	watch := s.watch(ctx, head.Version)
	defer watch.stop()

	drive, err := s.setOut(ctx, head)
	if err != nil {
		return err
	}
	drive, err = s.floorChanges(ctx, watch, drive)
	if err != nil {
		return err
	}
	if err := s.driveOn(ctx, drive); err != nil {
		return err
	}
	if err := s.coldRoom(ctx); err != nil {
		return err
	}
	return s.close(ctx)
}

// commission creates the floor and pushes its layout.
func (s *story) commission(ctx context.Context) (*wideberthv1.VersionStamp, error) {
	ctx, cancel := context.WithTimeout(ctx, patience)
	defer cancel()
	s.say.chapter("The layout")
	created, err := s.client.CreateFloor(ctx, &wideberthv1.CreateFloorRequest{Floor: s.hall.Floor, Settings: s.hall.Settings, Author: engineer})
	if err != nil {
		return nil, fmt.Errorf("creating the floor: %w", err)
	}
	head := created.GetFloor().GetHead()
	began := time.Now()
	for _, p := range s.hall.Patches(head.GetVersion(), engineer, "Layout of the night shift") {
		pushed, err := s.client.PushPatch(ctx, &wideberthv1.PushPatchRequest{Floor: s.hall.Floor, Patch: p})
		if err != nil {
			return nil, fmt.Errorf("pushing the layout: %w", err)
		}
		head = pushed.GetVersion().GetStamp()
	}
	s.say.line("  %s created %q and pushed %d edits as version %d (digest %.12s) in %s.",
		engineer, head.GetFloor(), len(s.hall.Edits), head.GetVersion(), head.GetDigest(), took(began))
	return head, nil
}

// setOut plans the tug's route and drives its first stretch.
func (s *story) setOut(ctx context.Context, head *wideberthv1.VersionStamp) (*drive, error) {
	ctx, cancel := context.WithTimeout(ctx, patience)
	defer cancel()
	s.say.chapter("The tug is sent from dock 3 to cold room 3")
	began := time.Now()
	resp, err := s.client.Plan(ctx, &wideberthv1.PlanRequest{
		Floor: s.hall.Floor, Version: client.Pinned(head.GetVersion()), Body: s.tug, Start: at("dock-3"), Goal: at("cold-3"),
		Options: &wideberthv1.PlanOptions{TimeBudgetS: searchBudgetS},
	})
	if err != nil {
		return nil, fmt.Errorf("planning for the tug: %w", err)
	}
	route := resp.GetRoute()
	if route == nil {
		return nil, fmt.Errorf("the tug was refused: %s", resp.GetRefusal().GetExplanation())
	}
	s.facts.Before = route
	s.say.line("  Planned on version %d in %s, %d nodes opened.", route.GetCheckedAgainst().GetVersion(), took(began), resp.GetCounters().GetExpanded())
	s.route(route)
	if err := s.draw(ctx, "before.svg", scene{
		title: "The tug from dock 3 to cold room 3", caption: "Before 02:00, the night's layout", version: head.GetVersion(), route: route,
	}); err != nil {
		return nil, err
	}
	d := newDrive(route)
	d.moveTo(min(drivenBeforeM, d.length()/2))
	s.say.line("  It drives off and has come %.1f m.", d.s)
	return d, nil
}

// floorChanges pushes the change of 02:00, lets the controller learn of it and
// plan anew.
func (s *story) floorChanges(ctx context.Context, watch *watch, old *drive) (*drive, error) {
	ctx, cancel := context.WithTimeout(ctx, patience)
	defer cancel()
	change, ok := s.hall.Change(testdata.TwoOClock)
	if !ok {
		return nil, fmt.Errorf("the hall has no change %q", testdata.TwoOClock)
	}
	s.say.chapter("%s", change.Title)
	guide := s.client.Guide(ctx, &wideberthv1.GuideSetup{Route: old.route})
	defer guide.Close()
	hint, err := old.ask(ctx, guide)
	if err != nil {
		return nil, err
	}
	s.say.line("  Just before, the tug's hint says: %s.", stateWords(hint.GetState()))

	began := time.Now()
	var pushed *wideberthv1.PushPatchResponse
	for _, p := range change.Patches(old.route.GetCheckedAgainst().GetVersion(), operator) {
		if pushed, err = s.client.PushPatch(ctx, &wideberthv1.PushPatchRequest{Floor: s.hall.Floor, Patch: p}); err != nil {
			return nil, fmt.Errorf("pushing the change: %w", err)
		}
	}
	v := pushed.GetVersion()
	s.say.line("  %s pushed version %d in %s: %s.", operator, v.GetStamp().GetVersion(), took(began), v.GetReason())
	if err := watch.until(ctx, v.GetStamp().GetVersion()); err != nil {
		return nil, err
	}
	s.facts.Versions = watch.seen()
	s.say.line("  The controller's watch named it %s after the push began; it asks for a replan.", took(began))

	replan, err := s.client.Replan(ctx, &wideberthv1.ReplanRequest{
		Version:  &wideberthv1.VersionSelector{Choice: &wideberthv1.VersionSelector_AtLeast{AtLeast: v.GetStamp().GetVersion()}, MaxWaitS: 5},
		Previous: old.route, Pose: old.pose(),
	})
	if err != nil {
		return nil, fmt.Errorf("planning anew: %w", err)
	}
	s.facts.Replan, s.facts.PushToPlan = replan, time.Since(began)
	if replan.GetRoute() == nil {
		return nil, fmt.Errorf("no route after the change: %s", replan.GetRefusal().GetExplanation())
	}
	if hint, err = old.ask(ctx, guide); err != nil {
		return nil, err
	}
	s.facts.StaleAdvice = hint.GetState()
	s.say.line("  A robot still on the old route is told: %s (%s).", stateWords(hint.GetState()), hint.GetExplanation())
	route := replan.GetRoute()
	s.facts.After = route
	s.say.line("  Replan: %s, %s. %s from push to new route.", resultWords(replan), causeWords(replan), length(s.facts.PushToPlan))
	s.say.line("    rest of the old route  %6.1f m, smallest clearance %.2f m", old.left(), down(old.smallestAhead()))
	s.say.line("    new route              %6.1f m, smallest clearance %.2f m", route.GetLengthM(), down(route.GetSmallestClearanceM()))
	s.route(route)
	return newDrive(route), s.draw(ctx, "after.svg", scene{
		title: "The tug's new route to cold room 3", caption: change.Title, version: v.GetStamp().GetVersion(),
		before: old.route.GetCheckedAgainst().GetVersion(), route: route, previous: old.route,
	})
}

// driveOn drives the new route and asks for hints about its tight legs.
func (s *story) driveOn(ctx context.Context, d *drive) error {
	ctx, cancel := context.WithTimeout(ctx, patience)
	defer cancel()
	s.say.chapter("The tug drives on; hints about the tight legs")
	guide := s.client.Guide(ctx, &wideberthv1.GuideSetup{Route: d.route})
	defer guide.Close()
	s.say.line("  %7s  %-9s  %9s  %-24s  %7s  %s", "s", "state", "clearance", "nearest solid, bearing", "ceiling", "because of")
	for _, at := range d.places() {
		d.moveTo(at)
		h, err := d.ask(ctx, guide)
		if err != nil {
			return err
		}
		s.facts.Hints = append(s.facts.Hints, h)
		nearest := h.GetNearestFeature()
		if nearest == "" {
			nearest = "raster"
		}
		s.say.line("  %5.1f m  %-9s  %7.2f m  %-18s %4.0f\u00b0  %3.2f m/s  %s", d.s, stateWords(h.GetState()), down(h.GetClearanceM()),
			nearest, degrees(h.GetNearestBearingRad()), h.GetSpeedCeilingMps(), speedWords(h.GetSpeedCause()))
	}
	d.moveTo(d.length())
	s.say.line("  Bearings are counter-clockwise from +x; %.2f m of spread in the pose are off the clearances. It arrives after %.1f m.", poseSpreadM, d.length())
	return nil
}

// coldRoom asks for the room behind the narrowest door, for both bodies.
func (s *story) coldRoom(ctx context.Context) error {
	ctx, cancel := context.WithTimeout(ctx, patience)
	defer cancel()
	s.say.chapter("Cold room 1, behind a door of 0.90 m")
	ask := func(b *wideberthv1.Body) (*wideberthv1.PlanResponse, error) {
		resp, err := s.client.Plan(ctx, &wideberthv1.PlanRequest{Floor: s.hall.Floor, Body: b, Start: at("tribune"), Goal: at("cold-1"),
			Options: &wideberthv1.PlanOptions{TimeBudgetS: searchBudgetS}})
		if err != nil {
			return nil, fmt.Errorf("planning for the %s: %w", b.GetName(), err)
		}
		return resp, nil
	}
	resp, err := ask(s.runner)
	if err != nil {
		return err
	}
	if s.facts.Runner = resp.GetRoute(); s.facts.Runner == nil {
		return fmt.Errorf("the runner was refused: %s", resp.GetRefusal().GetExplanation())
	}
	s.say.line("  The runner gets a route of %.1f m, smallest clearance %.2f m at x %.2f, y %.2f.", s.facts.Runner.GetLengthM(),
		down(s.facts.Runner.GetSmallestClearanceM()), s.facts.Runner.GetSmallestAt().GetXM(), s.facts.Runner.GetSmallestAt().GetYM())
	if resp, err = ask(s.tug); err != nil {
		return err
	}
	refusal := resp.GetRefusal()
	if s.facts.Refused = refusal; refusal == nil {
		return fmt.Errorf("the tug got a route through a door it does not fit")
	}
	b := refusal.GetBottleneck()
	s.say.line("  The tug is refused: %s", refusal.GetExplanation())
	s.say.line("    narrowest place %.2f m at x %.2f, y %.2f between %s; it needs %.2f m.", down(b.GetWidthM()),
		b.GetAt().GetXM(), b.GetAt().GetYM(), list(b.GetFeatures()), up(b.GetWidthNeededM()))
	return s.draw(ctx, "refused.svg", scene{
		title: "The tug is refused at cold room 1", caption: "From the tribune, through a door of 0.90 m", version: resp.GetStamp().GetVersion(),
		refusal: refusal, body: s.tug, start: s.station("tribune"), goal: s.station("cold-1"),
	})
}

// close says who did what, where the pictures are, and what all this is not.
func (s *story) close(ctx context.Context) error {
	ctx, cancel := context.WithTimeout(ctx, patience)
	defer cancel()
	s.say.chapter("The record")
	for v, err := range s.client.ListVersions(ctx, s.hall.Floor) {
		if err != nil {
			return fmt.Errorf("reading the record: %w", err)
		}
		s.say.line("  version %d  %-15s %s", v.GetStamp().GetVersion(), v.GetAuthor(), reason(v))
	}
	s.say.chapter("Pictures")
	for _, p := range s.facts.Pictures {
		s.say.line("  %s", p)
	}
	s.say.chapter("These are planning figures, checked against the versions named. They are not a safety function:")
	s.say.line("personnel detection, stopping and speed supervision stay with the truck's safety-rated system.")
	s.say.line("People and loose loads are not on the map.")
	return nil
}

// stay says how to reach the service.
func (s *story) stay() {
	s.say.chapter("Still serving on %s until interrupted; in another window, try", s.address)
	server := ""
	if s.address != stayAddress { // which the operator's tool goes to by itself
		server = " --server " + s.address
	}
	tool := "  go run ./client/cmd/wideberth" + server
	s.say.line("%s versions %s", tool, s.hall.Floor)
	s.say.line("%s plan %s --from dock-1 --to cold-4 --radius %v --margin %v --picture route.svg", tool, s.hall.Floor, s.tug.RadiusM, s.tug.MarginM)
}
