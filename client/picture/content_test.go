package picture

import (
	"cmp"
	"math"
	"slices"
	"testing"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/client"
	"example.com/wideberth/client/layout"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/testdata"
)

// content carries edits out on a floor, plainly and only as far as the hall
// needs it, so that these tests lean on no service.
func content(t testing.TB, set *wideberthv1.FloorSettings, version int64, edits ...[]*wideberthv1.Edit) *client.FloorContent {
	t.Helper()
	c := &client.FloorContent{
		Stamp:    &wideberthv1.VersionStamp{Floor: "auction-hall", Version: version, Digest: "00ff"},
		Settings: set,
		Cells:    make([]byte, (int(set.GetColumns())*int(set.GetRows())+3)/4),
	}
	if set.GetInitialOccupancy() != wideberthv1.Occupancy_OCCUPANCY_FREE {
		t.Fatal("these tests begin with a free floor")
	}
	paint := func(c0, r0, c1, r1 int, v byte) {
		for row := max(0, r0); row < min(r1, int(set.GetRows())); row++ {
			for col := max(0, c0); col < min(c1, int(set.GetColumns())); col++ {
				i := row*int(set.GetColumns()) + col
				c.Cells[i>>2] = c.Cells[i>>2]&^(3<<(2*(i&3))) | v<<(2*(i&3))
			}
		}
	}
	features := map[string]*wideberthv1.Feature{}
	for _, e := range slices.Concat(edits...) {
		switch a := e.GetAction().(type) {
		case *wideberthv1.Edit_PutFeature:
			features[a.PutFeature.GetFeature().GetName()] = proto.CloneOf(a.PutFeature.GetFeature())
		case *wideberthv1.Edit_RemoveFeature:
			delete(features, a.RemoveFeature.GetName())
		case *wideberthv1.Edit_ClearRect:
			r, k := a.ClearRect.GetArea(), resolution(set)
			paint(int(math.Floor(r.MinXM/k+1e-6)), int(math.Floor(r.MinYM/k+1e-6)), int(math.Ceil(r.MaxXM/k-1e-6)), int(math.Ceil(r.MaxYM/k-1e-6)), 0)
		case *wideberthv1.Edit_PaintOccupancy:
			r := a.PaintOccupancy.GetRect()
			if r == nil {
				t.Fatal("these tests paint rectangles")
			}
			q := r.GetRect()
			paint(int(q.Column), int(q.Row), int(q.Column+q.Columns), int(q.Row+q.Rows), byte(r.GetOccupancy()-1))
		}
	}
	for _, f := range features {
		c.Features = append(c.Features, f)
	}
	slices.SortFunc(c.Features, func(a, b *wideberthv1.Feature) int { return cmp.Compare(a.GetName(), b.GetName()) })
	return c
}

// hall is the auction hall before and after its change.
func hall(t testing.TB) (l *layout.Layout, before, after *client.FloorContent) {
	t.Helper()
	l, err := testdata.Hall()
	if err != nil {
		t.Fatal(err)
	}
	ch, ok := l.Change(testdata.TwoOClock)
	if !ok {
		t.Fatalf("no change %q", testdata.TwoOClock)
	}
	return l, content(t, l.Settings, 2, l.Edits), content(t, l.Settings, 3, l.Edits, ch.Edits)
}

// routeOver makes a route message over points, each leg tight or not, clearances
// measured on the floor.
func routeOver(c *client.FloorContent, body *wideberthv1.Body, legs ...[]xy) *wideberthv1.Route {
	r := &wideberthv1.Route{Body: body, CheckedAgainst: c.Stamp, SmallestClearanceM: math.Inf(1), ValidForS: 10}
	s := 0.0
	for _, chain := range legs {
		l := &wideberthv1.Leg{Kind: wideberthv1.LegKind_LEG_KIND_OPEN, SmallestClearanceM: math.Inf(1), SpeedCeilingMps: body.GetMaxSpeedMps()}
		about := newRoom(c, boundsOf(chain), 5)
		for i, p := range chain {
			if i > 0 {
				s += math.Hypot(p.x-chain[i-1].x, p.y-chain[i-1].y)
			}
			l.Points = append(l.Points, &wideberthv1.RoutePoint{XM: p.x, YM: p.y, SM: s, ClearanceM: about.clearance(p, 5)})
		}
		for _, p := range sampled(chain, 0.1) {
			if v := about.clearance(p, 5); v < l.SmallestClearanceM {
				l.SmallestClearanceM, l.SmallestAt = v, &wideberthv1.Point{XM: p.x, YM: p.y}
			}
		}
		l.LengthM = chainLength(chain)
		if l.SmallestClearanceM < body.GetPreferredClearanceM() {
			l.Kind = wideberthv1.LegKind_LEG_KIND_TIGHT
		}
		if l.SmallestClearanceM < r.SmallestClearanceM {
			r.SmallestClearanceM, r.SmallestAt = l.SmallestClearanceM, l.SmallestAt
		}
		r.Legs = append(r.Legs, l)
		r.LengthM += l.LengthM
	}
	first, last := legs[0][0], legs[len(legs)-1][len(legs[len(legs)-1])-1]
	r.Start, r.Goal = &wideberthv1.Pose{XM: first.x, YM: first.y}, &wideberthv1.Pose{XM: last.x, YM: last.y}
	r.DurationS = r.LengthM / body.GetMaxSpeedMps()
	return r
}

var toColdRoom = [][]xy{
	{{36, 8}, {35.45, 16}, {35.45, 49}, {39, 54}, {61.5, 62}, {63.2, 64.9}},
	{{63.2, 64.9}, {63.2, 67.1}},
	{{63.2, 67.1}, {63.2, 71}},
}
