package planner_test

import (
	"context"
	"testing"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/planner"
)

// reportMending reports the time of fresh plans over that of replans in a session that mended
// the route (plan/dstar), both over the 8-connected grid without straightening, which is the
// same for both: a pallet of 0.8 m by 1.2 m is put down 2 m ahead of a robot that has driven a
// fifth of its way, and cleared away when it has replanned. plan/dstar-blocked is of the
// first of the two alone: a pallet blocks most aisles, and the way round is long.
// mended-share is how many replans mended; the others tried to and searched anew.
func reportMending(b *testing.B, p *prepared) {
	ctx := context.Background()
	var fresh, mend [2]time.Duration
	n, mended := 0, 0
	for _, k := range p.tasks[:min(len(p.tasks), 40)] {
		q := k.q
		q.Options.Roadmap, q.Options.KeepRoadmapPath = planner.Grid8, true
		var s planner.Session
		a, err := p.w.PlanIn(ctx, &s, q)
		if err != nil {
			b.Fatal(err)
		}
		if a.Route == nil || a.Route.LengthUm < 20*m {
			continue
		}
		at := along(a.Route, 0.2+2*m/a.Route.LengthUm)
		v, err := p.w.Advance(ctx, newMapFrom(b, p.m, []floor.Edit{solidBox("pallet", at.X/m-0.4, at.Y/m-0.6, at.X/m+0.4, at.Y/m+0.6)}))
		if err != nil {
			b.Fatal(err)
		}
		for i, w := range []*planner.World{v, p.w} { // put down, cleared away
			r := again(a.Route, p.m, q, along(a.Route, 0.2))
			if i == 1 {
				r.OldBody.RadiusUm++ // another question: the old route, clear again, is not kept
			}
			t0 := time.Now()
			got, err := w.ReplanIn(ctx, &s, r)
			t1 := time.Now()
			if err != nil {
				b.Fatal(err)
			}
			want, err := w.Plan(ctx, r.Request)
			if err != nil {
				b.Fatal(err)
			}
			mend[i], fresh[i] = mend[i]+t1.Sub(t0), fresh[i]+time.Since(t1)
			if got.Route == nil || want.Route == nil {
				break
			}
			if got.Route.CostUm > want.Route.CostUm*(1+1e-9) {
				b.Fatalf("mended costs %f, planned anew %f", got.Route.CostUm, want.Route.CostUm)
			}
			if n++; got.Mended {
				mended++
			}
		}
		s.Release()
	}
	b.ReportMetric(float64(fresh[0]+fresh[1])/float64(mend[0]+mend[1]), "plan/dstar")
	b.ReportMetric(float64(fresh[0])/float64(mend[0]), "plan/dstar-blocked")
	b.ReportMetric(float64(mended)/float64(n), "mended-share")
}
