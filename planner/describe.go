package planner

import (
	"cmp"
	"context"
	"iter"
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/anyangle"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/judge"
	"example.com/wideberth/planner/roadmap/cellgrid"
)

// Describing a course adds points to it: where legs meet, where clearance is
// smallest, where a speed limit begins or ends, and as many as the spacing asks for.
// An added point is rounded to whole micrometres, so that it survives being sent,
// and only where the course still keeps what it kept; else it is left as it falls. A
// rounded point, off by less than a micrometre, lengthens the course by less than
// one square micrometre over the length of the shorter piece it makes.
const (
	// leastPiece, in micrometres, is how near an added point may be to another.
	leastPiece = 100
	// roundingUm is float64's rounding of exact distances, with room to spare: a
	// clearance this little below a whole micrometre, or below a threshold, is that.
	roundingUm = 1e-6
	// roundingReach, in micrometres, is farther than any of a place's roundings.
	roundingReach = 3
)

// ClearanceShortUm is how far, in micrometres, a reported clearance may be below the
// truth: it is exact but for being rounded down to whole micrometres.
const ClearanceShortUm = 1

// piece is a straight part of a described course.
type piece struct {
	a, b geom.Point
	near clearance.Nearest // smallest clearance along it
	cost float64           // once described
}

func (p *piece) tight(below float64) bool { return p.near.Um < below-roundingUm }

// outline is a course cut up into pieces.
type outline struct {
	t      *task
	below  float64 // tight below this
	pieces []piece
}

func (t *task) outline(pts []geom.Point) *outline {
	o := &outline{t: t, below: float64(t.q.Options.TightBelowUm), pieces: make([]piece, 0, 2*len(pts)+16)}
	t.j.Rewind()
	var room [16]float64
	for i := 1; i < len(pts); i++ {
		a, b := pts[i-1], pts[i]
		w := piece{a: a, b: b, near: t.j.Segment(a, b)}
		o.pieces = append(o.pieces, w)
		cuts := t.w.rules.SpeedCuts(room[:0], a, b)
		if w.tight(o.below) {
			t.j.Focus(a, b, o.below)
			for _, s := range t.j.Tight(a, b, o.below-roundingUm) {
				cuts = append(cuts, s.From, s.To)
			}
		}
		slices.Sort(cuts)
		for _, share := range slices.Compact(cuts) {
			o.cut(len(o.pieces)-1, judge.Along(a, b, share))
		}
	}
	return o
}

// survey is for a way about to be judged and described.
func (t *task) survey(pts []geom.Point) {
	t.j.Survey(pts, float64(t.w.stopping(t.q.Body, math.Inf(1))))
}

// cut adds a point near at to piece i, if it is far enough from the piece's ends and if the
// pieces it makes are as good: they may be driven, and neither is tight unless
// the whole was.
func (o *outline) cut(i int, at geom.Point) bool {
	w := o.pieces[i]
	if geom.Dist(w.a, at) < leastPiece || geom.Dist(at, w.b) < leastPiece {
		return false
	}
	was := w.tight(o.below)
	// Where it is clear that both sides will be tight, the first rounding will do.
	both := was && o.t.j.At(at).Um < o.below-roundingReach
	var spare [2]piece // to fall back on
	found := false
	var buf [9]geom.Point
	put := buf[:0] // tight themselves, and so no side of theirs is open
	try := func(p geom.Point) (two [2]piece, ok bool) {
		two = [2]piece{{a: w.a, b: p}, {a: p, b: w.b}}
		for k := range two {
			if two[k].near, ok = o.t.j.Drive(two[k].a, two[k].b); !ok {
				break
			}
		}
		return two, ok
	}
	for p := range rounded(at) {
		if was && !both && p != at && o.t.j.Place(p).Um < o.below-roundingUm {
			put = append(put, p)
			continue
		}
		two, ok := try(p)
		if !ok {
			continue
		}
		is0, is1 := two[0].tight(o.below), two[1].tight(o.below)
		if !was && (is0 || is1) {
			continue
		}
		if was && is0 && is1 && p != at && !both {
			// One side was to be open, perhaps, and rounding made it tight.
			if !found {
				spare, found = two, true
			}
			continue
		}
		o.pieces = slices.Replace(o.pieces, i, i+1, two[0], two[1])
		return true
	}
	for k := 0; !found && k < len(put); k++ {
		spare, found = try(put[k])
	}
	if !found {
		return false
	}
	o.pieces = slices.Replace(o.pieces, i, i+1, spare[0], spare[1])
	return true
}

// roundings are the whole-micrometre places about p, nearest first, and p itself.
func roundings(p geom.Point) []geom.Point { return slices.Collect(rounded(p)) }

// rounded yields roundings one by one; mostly the first will do.
func rounded(p geom.Point) iter.Seq[geom.Point] {
	return func(yield func(geom.Point) bool) {
		r := geom.Point{X: math.Round(p.X), Y: math.Round(p.Y)}
		if !yield(r) || r == p {
			return
		}
		ps := make([]geom.Point, 0, 9)
		for dy := -1.0; dy <= 1; dy++ {
			for dx := -1.0; dx <= 1; dx++ {
				if dx != 0 || dy != 0 {
					ps = append(ps, geom.Point{X: r.X + dx, Y: r.Y + dy})
				}
			}
		}
		slices.SortStableFunc(ps, func(a, b geom.Point) int {
			return cmp.Compare(geom.Dist(a, p), geom.Dist(b, p))
		})
		for _, q := range append(ps, p) {
			if !yield(q) {
				return
			}
		}
	}
}

// space cuts pieces longer than most into equal parts.
func (o *outline) space(most float64) {
	for i := 0; i < len(o.pieces); i++ {
		p := o.pieces[i]
		n := math.Ceil(geom.Dist(p.a, p.b) / most)
		for k := 1.0; k < n; k++ {
			if o.cut(i, judge.Along(p.a, p.b, k/n)) {
				i++
			}
		}
	}
}

// mark marks where clearance is smallest in each leg of n parts. Of parts that differ by rounding
// alone it is the last: it stays ahead of a robot longest. It says no when parts from own on,
// which others share, are marked otherwise, or the route would have too many points.
func (t *task) mark(n, own int, at func(int) *part) bool {
	below, long, legs := float64(t.q.Options.TightBelowUm), 0.0, 0
	for i := 0; i < n; {
		first := i
		tight, least := at(i).tight(below), math.Inf(1)
		for ; i < n && at(i).tight(below) == tight; i++ {
			w := at(i)
			least = min(least, w.near.Um)
			long += geom.Dist(w.a, w.b)
		}
		legs++
		last := i - 1
		for at(last).near.Um > least+roundingReach {
			last--
		}
		for f := first; f < i; f++ {
			switch w := at(f); {
			case f < own:
				w.marked = f == last
			case w.marked != (f == last):
				return false
			}
		}
	}
	most := float64(t.q.Options.MaxSpacingUm)
	return most == 0 || long/most+float64(n+legs) <= MaxRoutePoints
}

// split appends the bits of a part: cut where it is marked, and as the spacing asks.
func (t *task) split(bits []bit, strip int, w *part) []bit {
	most := t.q.Options.MaxSpacingUm
	o := outline{t: t, below: float64(t.q.Options.TightBelowUm), pieces: append(t.spare[:0], w.piece)}
	if w.marked {
		o.cut(0, w.near.On)
	}
	if most > 0 {
		o.space(float64(most))
	}
	for i := range o.pieces {
		b := t.bit(&o.pieces[i])
		b.strip = strip
		bits = append(bits, b)
	}
	t.spare = o.pieces
	return bits
}

// describe turns a course into a route.
func (t *task) describe(ctx context.Context, c *course) (*Route, error) {
	if !t.j.Surveyed() {
		t.survey(c.pts)
	}
	k := &record{}
	s := &k.tail
	pieces := t.outline(c.pts).pieces
	s.parts = make([]part, len(pieces))
	for i, w := range pieces {
		s.parts[i].piece = w
	}
	if !t.mark(len(s.parts), len(s.parts), func(i int) *part { return &s.parts[i] }) {
		return nil, &RequestError{"options.max_spacing_m", "the route would have more than 100000 points: want a wider spacing"}
	}
	t.j.Rewind()
	s.bits = make([]bit, 0, len(s.parts)+8)
	for i := range s.parts {
		if ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		s.parts[i].bits = len(s.bits)
		s.bits = t.split(s.bits, 0, &s.parts[i])
	}
	t.toGoal(k)
	r := t.assemble(k)
	r.Bound = t.bound(c, r)
	t.noted(c, k, r)
	return r, nil
}

// cost is what a piece costs.
func (t *task) cost(w *piece) float64 {
	if w.near.Um >= t.j.Open() {
		return geom.Dist(w.a, w.b)
	}
	cost, _ := t.j.Weigh(w.a, w.b)
	return cost
}

// bit describes a piece.
func (t *task) bit(w *piece) bit {
	w.cost = t.cost(w)
	b := bit{
		piece: *w, at: RoutePoint{At: w.a, Heading: bearing(w.a, w.b)}, fresh: true,
		long: geom.Dist(w.a, w.b), limit: t.w.rules.SpeedLimit(w.a, w.b), sensed: t.q.Body.SensingUm == 0,
	}
	if w.a == w.b {
		b.at.Heading = t.q.Start.Heading
	}
	b.at.SpeedCeiling, b.at.SpeedCause = t.ceiling(w.a, w.b, b.at.Heading)
	b.at.ClearanceUm = t.roundedDown(t.j.Place(w.a).Um + roundingUm)
	return b
}

// toGoal sets what is said of the goal.
func (t *task) toGoal(k *record) {
	at := k.bit(k.bits() - 1).b
	k.near = t.j.Place(at)
	k.goal = RoutePoint{At: at, Heading: t.q.Goal.Heading, ClearanceUm: t.roundedDown(k.near.Um + roundingUm)}
	k.goal.SpeedCeiling, k.goal.SpeedCause = t.ceiling(at, at, k.goal.Heading)
	k.ahead = t.aheadOf(k.goal)
}

// assemble makes a route of its bits.
func (t *task) assemble(k *record) *Route {
	below := float64(t.q.Options.TightBelowUm)
	r := &Route{Start: t.q.Start, Goal: t.q.Goal, SmallestUm: math.MaxInt64}
	n := k.bits()
	pts := make([]RoutePoint, n+1)
	along := 0.0
	for i := range n {
		b := k.bit(i)
		pts[i] = b.at
		pts[i].S = along
		along += b.long
		r.CostUm += b.cost
	}
	pts[n] = k.goal
	pts[n].S = along
	r.LengthUm = along
	for i := 0; i < n; {
		first := i
		for i++; i < n && k.bit(i).tight(below) == k.bit(first).tight(below); i++ {
		}
		l := t.legOf(k, pts, first, i)
		r.Legs = append(r.Legs, l)
		r.DurationS += l.DurationS
		if l.SmallestUm < r.SmallestUm {
			r.SmallestUm, r.SmallestAt = l.SmallestUm, l.SmallestAt
		}
	}
	return r
}

// legOf is the leg of the bits from i up to j.
func (t *task) legOf(k *record, pts []RoutePoint, i, j int) Leg {
	l := Leg{Tight: k.bit(i).tight(float64(t.q.Options.TightBelowUm)), Points: pts[i : j+1 : j+1], LengthUm: pts[j].S - pts[i].S}
	l.SpeedCeiling, l.SpeedCause = t.q.Body.MaxSpeed, CauseBody
	lower := func(v float64, c SpeedCause) {
		if v < l.SpeedCeiling {
			l.SpeedCeiling, l.SpeedCause = v, c
		}
	}
	least := math.Inf(1)
	for n := i; n < j; n++ {
		b := k.bit(n)
		if b.long > 0 {
			l.DurationS += geom.Metres(b.long) / pts[n].SpeedCeiling
		}
		lower(b.limit, CauseZone)
		l.BeyondSensing = l.BeyondSensing || !b.sensed && t.beyondSensing(b.a, b.b)
		least = min(least, b.near.Um)
	}
	for n := i; n < j && !l.BeyondSensing && t.q.Body.SensingUm <= t.w.field.Cap() && k.owns(n); n++ {
		k.bit(n).sensed = true
	}
	for n := max(i, 1); n <= min(j, len(pts)-2); n++ {
		lower(pts[n].SpeedCeiling, pts[n].SpeedCause)
	}
	at := j - 1 // as task.mark
	for k.bit(at).near.Um > least+roundingReach {
		at--
	}
	b := k.bit(at)
	l.SmallestUm = t.roundedDown(least + roundingUm)
	l.SmallestAt, l.SmallestS = b.near.On, pts[at].S+geom.Dist(b.a, b.near.On)
	if b.near.Feature != nil {
		l.Nearest = b.near.Feature.Name
	}
	left, right := b.left, b.right
	if !b.roomed {
		left = t.room(&b.near, b.at.Heading+math.Pi/2)
		right = t.room(&b.near, b.at.Heading-math.Pi/2)
		if k.owns(at) {
			b.roomed, b.left, b.right = true, left, right
		}
	}
	// Nothing is nearer than the smallest clearance, to either side.
	l.LeftUm, l.RightUm = max(l.SmallestUm, left), max(l.SmallestUm, right)
	return l
}

// asideUm is how far beside a ray, in micrometres, a place may be computed that is on it.
const asideUm = 1e-3

// room is the free width from a place of clearance n along a direction, at most the floor's
// cap: mostly, to one side, it ends at what is nearest.
func (t *task) room(n *clearance.Nearest, heading float64) int64 {
	if x, y := n.At.X-n.On.X, n.At.Y-n.On.Y; n.Feature != nil || n.Border || n.Cell {
		ux, uy := math.Cos(heading), math.Sin(heading)
		if float64(ux*x)+float64(uy*y) > 0 && math.Abs(float64(ux*y)-float64(uy*x)) <= asideUm {
			return t.roundedDown(n.Um + roundingUm)
		}
	}
	return t.roundedDown(t.w.travel(t.j, n.On, heading, 0, t.w.field.Cap()))
}

// bound says how good a route is. Its lower bound is the straight distance.
func (t *task) bound(c *course, r *Route) Bound {
	b := Bound{Kind: c.kind, LowerUm: geom.Dist(t.q.Start.At, t.q.Goal.At), ClearanceShortUm: ClearanceShortUm}
	if b.Kind == RoadmapOptimum && r.CostUm < float64(c.roadmap*(1-1e-9)) {
		// The search judged cells as a whole; the path itself is tight less often.
		b.Kind = AtMostRoadmapOptimum
	}
	switch {
	case b.Kind == Straight:
	case b.Kind == AnyAngleOptimum:
		b.WidthBiasUm, b.OptimumWithinUm = meshBias, anyangle.DeltaUm
	case c.bias > 0:
		b.WidthBiasUm = c.bias
	default:
		b.WidthBiasUm = cellgrid.WidthBiasUm(t.w.frame.Res)
	}
	return b
}
