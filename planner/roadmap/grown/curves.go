package grown

import (
	"math"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/roadmap"
	"example.com/wideberth/planner/roadmap/internal/solids"
)

// element is a side of a solid, or the middle of a disc: all nearer to it than rho is in
// the grown solid. Places are relative to the floor's lower left corner.
type element struct {
	a, b       geom.Point
	rho, exact float64 // while crossings are looked for, and truly
	box        geom.Rect
}

// curve is a side moved out, or an arc about a corner, before it is cut. An arc begins at
// angle from and turns by long radians, at most a quarter; for a side long is its length.
type curve struct {
	arc        bool
	zone       bool
	a, b       geom.Point // the ends; of a side moved out
	p, q       geom.Point // the side itself; p is an arc's centre
	rho, exact float64
	from, long float64
	hull       [3]geom.Point // an arc lies in this triangle, a side in its first two points
	box        geom.Rect
	next       int32 // the curve that begins where this one ends; -1 behind a reflex corner
	prev       int32
	dropped    bool
	cuts       []cutAt
}

// set is all that is cut and linked.
type set struct {
	m      *floor.Map
	origin geom.Point
	h      float64
	slack  float64
	elems  []element
	curves []curve
	areas  [][][]geom.Point // polygons, for places deep inside
	boxes  []geom.Rect      // of areas
	raster *solids.Raster
	joints []joint

	grid grid
}

// sides is how many sides solids have.
func sides(all []solids.Solid) (n int) {
	for i := range all {
		for _, c := range all[i].Chains {
			n += len(c)
		}
	}
	return n
}

// add takes in all solids.
func (s *set) add(need roadmap.Need, all []solids.Solid) {
	outward := need.ClearanceUm == 0
	n := 0
	for i := range all {
		for _, c := range all[i].Chains {
			n += max(2, len(c))
		}
	}
	s.elems = make([]element, 0, n)
	s.curves = make([]curve, 0, 5*n/2)
	for i := range all {
		v := &all[i]
		exact := v.GrowUm + float64(need.ClearanceUm)
		if v.Zone {
			exact = v.GrowUm + float64(need.ZoneUm)
		}
		shift := s.slack * (1 + float64(v.Key>>16)/0x1p16) / 2
		rho := exact - shift
		if outward || rho <= 0 {
			rho = exact + shift
		}
		if v.Raster != nil {
			s.raster = v.Raster
		}
		var chains [][]geom.Point
		for _, c := range v.Chains {
			local := make([]geom.Point, len(c))
			for k, p := range c {
				local[k] = geom.Point{X: p.X - s.origin.X, Y: p.Y - s.origin.Y}
			}
			chains = append(chains, local)
			s.addChain(local, rho, exact, v.Zone)
		}
		if v.Area && v.Raster == nil {
			s.areas = append(s.areas, chains)
			s.boxes = append(s.boxes, geom.BoundsOf(chains[0]...))
		}
	}
	s.grid = newGrid(s)
}

// addChain adds the sides and arcs of a closed chain.
func (s *set) addChain(c []geom.Point, rho, exact float64, zone bool) {
	n := len(c)
	if n == 1 {
		s.addElement(c[0], c[0], rho, exact)
		k := int32(len(s.curves))
		for i := range int32(4) {
			s.addArc(c[0], float64(i)*(math.Pi/2), math.Pi/2, rho, exact, zone)
			if i > 0 {
				s.chain(k+i-1, k+i)
			}
		}
		s.chain(k+3, k)
		return
	}
	first, last := int32(len(s.curves)), int32(-1)
	joined := true
	for i, p := range c {
		q, r := c[(i+1)%n], c[(i+2)%n]
		if n != 2 || i == 0 {
			s.addElement(p, q, rho, exact)
		}
		nx, ny := normal(p, q)
		k := int32(len(s.curves))
		a := geom.Point{X: p.X + float64(rho*nx), Y: p.Y + float64(rho*ny)}
		b := geom.Point{X: q.X + float64(rho*nx), Y: q.Y + float64(rho*ny)}
		s.curves = append(s.curves, curve{
			a: a, b: b, p: p, q: q, rho: rho, exact: exact, long: geom.Dist(p, q), zone: zone,
			hull: [3]geom.Point{a, b, b}, box: geom.BoundsOf(a, b), next: -1, prev: -1,
		})
		if i > 0 && joined {
			s.chain(last, k)
		}
		last = k
		turn := geom.Orient(p, q, r)
		joined = turn > 0 || n == 2 || turn == 0 && float64((q.X-p.X)*(r.X-q.X))+float64((q.Y-p.Y)*(r.Y-q.Y)) > 0
		if n == 2 || turn > 0 {
			mx, my := normal(q, r)
			angle := math.Pi
			if n != 2 {
				angle = math.Atan2(float64(nx*my)-float64(ny*mx), float64(nx*mx)+float64(ny*my))
			}
			from := math.Atan2(ny, nx)
			last = int32(len(s.curves))
			if angle > math.Pi/2 { // so that the hull of an arc is small
				s.addArc(q, from, angle/2, rho, exact, zone)
				s.addArc(q, from+angle/2, angle/2, rho, exact, zone)
				s.chain(k, last)
				s.chain(last, last+1)
				last++
			} else {
				s.addArc(q, from, angle, rho, exact, zone)
				s.chain(k, last)
			}
		}
	}
	if joined {
		s.chain(last, first)
	}
}

func (s *set) chain(k, next int32) {
	s.curves[k].next, s.curves[next].prev = next, k
}

// normal is the unit vector to the right of pq.
func normal(p, q geom.Point) (x, y float64) {
	d := geom.Dist(p, q)
	return (q.Y - p.Y) / d, (p.X - q.X) / d
}

func (s *set) addElement(a, b geom.Point, rho, exact float64) {
	s.elems = append(s.elems, element{a: a, b: b, rho: rho, exact: exact, box: geom.BoundsOf(a, b).Grow(rho)})
}

func (s *set) addArc(c geom.Point, from, turn, rho, exact float64, zone bool) {
	v := curve{arc: true, zone: zone, p: c, q: c, rho: rho, exact: exact, from: from, long: turn, next: -1, prev: -1}
	v.a, v.b = v.at(0), v.at(turn)
	sn, cs := math.Sincos(from + turn/2)
	far := rho / math.Cos(turn/2)
	v.hull = [3]geom.Point{v.a, v.b, {X: c.X + float64(far*cs), Y: c.Y + float64(far*sn)}}
	v.box = geom.BoundsOf(v.hull[:]...)
	s.curves = append(s.curves, v)
}

// at is the place at t along the curve.
func (v *curve) at(t float64) geom.Point {
	if v.arc {
		sn, cs := math.Sincos(v.from + t)
		return geom.Point{X: v.p.X + float64(v.rho*cs), Y: v.p.Y + float64(v.rho*sn)}
	}
	u := t / v.long
	return geom.Point{X: v.a.X + float64(u*(v.b.X-v.a.X)), Y: v.a.Y + float64(u*(v.b.Y-v.a.Y))}
}

// param is where along the curve a place of its carrier is: for arcs in (-pi, pi] about
// their middle.
func (v *curve) param(p geom.Point) float64 {
	if v.arc {
		t := math.Atan2(p.Y-v.p.Y, p.X-v.p.X) - v.from - v.long/2
		return math.Remainder(t, 2*math.Pi) + v.long/2
	}
	return (float64((p.X-v.a.X)*(v.b.X-v.a.X)) + float64((p.Y-v.a.Y)*(v.b.Y-v.a.Y))) / v.long
}

// holdsHull says whether the open grown element holds the whole curve.
func (e *element) holdsHull(v *curve, tol float64) bool {
	if !e.box.Contains(v.hull[0]) {
		return false
	}
	for _, p := range v.hull {
		if d, _ := geom.SegmentDist(p, e.a, e.b); d >= e.rho-tol {
			return false
		}
	}
	return true
}
