package planner

import (
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
)

// Body is what moves: a disc about its reference point. Lengths are whole
// micrometres; speeds m/s, braking m/s², times s.
type Body struct {
	Name        string
	RadiusUm    int64 // half the width at its widest, load included
	MarginUm    int64 // kept free beyond the radius
	PreferredUm int64 // the wide berth; at least Required
	MaxSpeed    float64
	Braking     float64
	Reaction    float64
	SensingUm   int64 // 0: not said
}

// Required is the clearance the body's centre needs: radius plus margin.
func (b Body) Required() int64 { return b.RadiusUm + b.MarginUm }

// Pose is a place and the direction faced there, radians in (-pi, pi].
type Pose struct {
	At      geom.Point
	Heading float64
}

// Preference is what a route should be.
type Preference uint8

// The preferences.
const (
	// Balanced: metres below the preferred clearance cost more, and are driven in the middle,
	// along Voronoi edges. An end with less goes straight away from its nearest solid first.
	Balanced Preference = iota
	// Shortest: as short as the required clearance allows.
	Shortest
	// Clearest: the largest smallest clearance there is, up to the floor's cap, then the shortest
	// along Voronoi edges and where there is the cap. What the ends themselves leave is not
	// counted; closed zones are, as solids that are the margin farther off. By no named roadmap.
	Clearest
)

// Roadmap is which roadmap is searched.
type Roadmap uint8

// The roadmaps.
const (
	Auto Roadmap = iota
	Grid4
	Grid8
	Quadtree
	ConvexCells // any-angle optima over convex cells; for Shortest alone
	// The classical roadmaps, for Shortest alone; they obey no one-way zone.
	VisibilityGraph
	MeadowMap
	VoronoiGraph
	ExactCells
)

// Options say how to plan. The zero value is a balanced plan on the default roadmap
// with TightWeight 0; callers fill in the defaults they document.
type Options struct {
	Preference      Preference
	Roadmap         Roadmap
	KeepRoadmapPath bool // no straightening
	// TightWeight is what a metre of a balanced route costs more where clearance is below the
	// preferred one.
	TightWeight  float64
	TightBelowUm int64 // a leg is tight where clearance is below this
	MaxSpacingUm int64 // most distance between two route points; 0: no bound
}

// Request asks for a route for Body from Start to Goal.
type Request struct {
	Body        Body
	Start, Goal Pose
	Options     Options
}

// Counters say how much a search did.
type Counters struct{ Expanded, Queued, SightChecks, ExactChecks int64 }

// SpeedCause says why an advised speed ceiling is what it is.
type SpeedCause uint8

// The causes.
const (
	CauseBody SpeedCause = iota + 1
	CauseZone
	CauseRoom
)

// RoutePoint is a point of a route. There is one wherever the route bends, a leg begins,
// clearance is smallest in a leg, or a speed limit zone begins or ends.
type RoutePoint struct {
	At           geom.Point
	Heading      float64 // of travel leaving this point; at the goal, the goal's own
	S            float64 // micrometres along the route from its start
	ClearanceUm  int64   // rounded down, at most the floor's cap
	SpeedCeiling float64 // m/s
	SpeedCause   SpeedCause
}

// Leg is a stretch of a route that is tight throughout or open throughout. The
// last point of a leg is the first of the next.
type Leg struct {
	Tight           bool
	Points          []RoutePoint
	LengthUm        float64
	DurationS       float64
	SmallestUm      int64      // smallest clearance, rounded down, at most the cap
	SmallestAt      geom.Point // of places that differ by 3 µm at most, by rounding, the last
	SmallestS       float64
	LeftUm, RightUm int64  // free width at SmallestAt, from the centre line, at most the cap
	Nearest         string // feature nearest at SmallestAt; "" for a cell or the border
	SpeedCeiling    float64
	SpeedCause      SpeedCause
	BeyondSensing   bool // somewhere no solid is within the body's sensing range
}

// BoundKind says what is known of how good a route is.
type BoundKind uint8

// The kinds of bound.
const (
	// RoadmapOptimum: its cost is the least over the searched roadmap; for balanced over
	// Voronoi edges and the open floor, bent edges being drawn by chords, which are up to
	// 3.4e-4 shorter. Clearest: its smallest clearance is the largest, its length the least.
	RoadmapOptimum       BoundKind = iota + 1
	AtMostRoadmapOptimum           // straightened: at most that
	Straight                       // the straight line: nothing is shorter
	AnyAngleOptimum                // no way that keeps OptimumWithinUm more from solids and closed zones is shorter
)

// Bound says how good a route is and what the roadmap may have missed.
type Bound struct {
	Kind             BoundKind
	LowerUm          float64 // no route whatever is shorter
	WidthBiasUm      int64   // a passage up to this much wider than 2·Required may be missed
	ClearanceShortUm int64   // reported clearances are at most this much below the truth
	OptimumWithinUm  int64   // AnyAngleOptimum, and where the gap is from one; else 0
	// CutShort is set when the time budget ran out and this is the best checked route by
	// then. No route that keeps OptimumWithinUm more costs less than CostUm / (1 + GapShare);
	// how much more room a clearest one might have is not said.
	CutShort bool
	GapShare float64
}

// Route is a checked way from Start to Goal.
type Route struct {
	Start, Goal Pose
	Legs        []Leg
	LengthUm    float64
	DurationS   float64
	// CostUm is what the preference minimises. Shortest and clearest: the length. Balanced: a
	// metre costs 1 + TightWeight where clearance is below PreferredUm, told apart
	// to a millimetre (judge.TightResolution), else 1.
	CostUm     float64
	SmallestUm int64
	SmallestAt geom.Point
	Bound      Bound
}

// RefusalReason says why there is no route.
type RefusalReason uint8

// The reasons.
const (
	StartBlocked RefusalReason = iota + 1
	GoalBlocked
	NoPassage
	OutOfTime
)

// BlockedEnd describes an end that cannot be stood on.
type BlockedEnd struct {
	At          geom.Point
	ClearanceUm int64
	RequiredUm  int64
	ClosedZone  string // "" when clearance is the cause
	Nearest     string
	HasFree     bool // whether NearestFree was found within twice the cap
	NearestFree geom.Point
	DistanceUm  float64
	Bearing     float64
}

// Bottleneck is the narrowest place on the widest way. WidthUm below NeededUm is
// what is in the way, unless Zone is; on a named roadmap WidthUm may reach NeededUm:
// the body fits, but cells taken as a whole miss the passage (Bound.WidthBiasUm).
type Bottleneck struct {
	Exists       bool
	At           geom.Point
	WidthUm      int64 // rounded down
	WidthShortUm int64 // how far WidthUm may be short of the truth
	NeededUm     int64
	Features     []string
	Zone         string
}

// Refusal says why there is no route.
type Refusal struct {
	Reason     RefusalReason
	Blocked    *BlockedEnd // StartBlocked, GoalBlocked
	Bottleneck *Bottleneck // NoPassage
}

// Answer is a route or a refusal, never both, never neither.
type Answer struct {
	Route    *Route
	Refusal  *Refusal
	Counters Counters
}

// ReplanRequest asks what becomes of a route that is being driven.
type ReplanRequest struct {
	Previous    []geom.Point // the old route's points in order, two or more
	Old         *floor.Map   // the version it was checked against; nil when not held any more
	OldBody     Body
	OldGoal     Pose
	OldOptions  Options
	OldBound    BoundKind // what was said of the old route; 0 when not known
	Request     Request   // the question now; Request.Start is the robot's pose
	SwitchShare float64   // keep the old route unless a new one is cheaper by more than this share
}

// ReplanCause says why an old route was not kept.
type ReplanCause uint8

// The causes. The zero value means it was kept.
const (
	Cut ReplanCause = iota + 1
	Cheaper
	QuestionChanged
	OffRoute
	VersionGone
)

// ReplanAnswer is the answer to a ReplanRequest. Kept says whether Answer.Route
// is the old route trimmed to the pose, Mended whether it is a new one that was found by
// repairing the session's search.
type ReplanAnswer struct {
	Answer
	Kept   bool
	Mended bool
	Cause  ReplanCause
	CutS   float64 // where a change cuts the old route, micrometres along it
}

// GuideSetup is what a guided robot drives by.
type GuideSetup struct {
	Body         Body
	Route        []geom.Point // two or more
	HintBelowUm  int64
	QuietAboveUm int64
	OffRouteUm   int64
}

// GuideReport is where a guided robot says it is.
type GuideReport struct {
	Pose     Pose
	SpreadUm int64
	Speed    float64 // m/s along the heading
	Hinting  bool    // whether hints were on at the last report
	Stale    bool    // whether a newer version touches the rest of the route
}

// GuideState is what to make of a robot's surroundings.
type GuideState uint8

// The states. The zero value means hold.
const (
	Hold GuideState = iota
	Clear
	Hinting
	ReplanAdvised
)

// Rejoin is where to go back to the route.
type Rejoin struct {
	At       geom.Point
	S        float64
	OffRoute float64
	Bearing  float64
	Clear    bool
}

// Hint is the advice for one report.
type Hint struct {
	State        GuideState
	Hinting      bool // to be handed back with the next report
	Explanation  string
	ClearanceUm  int64
	Bearing      float64 // to the nearest solid, floor frame
	Nearest      string
	FreeTravelUm int64
	SpeedCeiling float64
	SpeedCause   SpeedCause
	Rejoin       *Rejoin
}
