package plainfloor

import (
	"math"

	"example.com/wideberth/mapstore/geom"
)

// oneFeature is a door in a single polygon: a wall whose two parts are joined round
// the goal along the floor's border, or a room with the goal in it, turned or not.
func (k *sketch) oneFeature() bool {
	if k.rng.IntN(2) == 0 {
		return k.room()
	}
	a, b, ok := k.arms()
	if k.rng.IntN(2) == 0 { // ends along the axis
		a[2], b[1].X = geom.Point{X: a[1].X, Y: k.y1}, b[2].X
		k.aligned = true
	}
	rim := 1.0
	if k.rng.IntN(2) == 0 {
		rim = float64(1 + k.rng.IntN(CellUm))
	}
	s := k.side
	a[3].X, b[0].X = rim, s-rim
	k.beta = apart(a, b) / 2
	return k.polygon(a[0], a[1], a[2], a[3], geom.Point{X: rim, Y: s - rim}, geom.Point{X: s - rim, Y: s - rim},
		b[0], b[1], b[2], b[3], geom.Point{X: s, Y: s}, geom.Point{X: 0, Y: s}) && ok
}

// room is a square of walls with a door, the goal inside, the start in a corner of the floor.
func (k *sketch) room() bool {
	w := k.width(false)
	const inner, wall = 1_300_000, 250_000 // half the room's side, and the walls' thickness
	x := math.Floor((inner - 100_000 - w) * (2*k.rng.Float64() - 1))
	if inner-x-w < 0 || x < -inner {
		return false
	}
	thick := float64(1 + k.rng.IntN(wall))
	o := inner + thick
	mid := geom.Point{X: math.Round(k.side/2) + float64(k.rng.IntN(200_000)), Y: math.Round(k.side/2) - float64(k.rng.IntN(200_000))}
	s, c := math.Sincos(k.rng.Float64() * 2 * math.Pi)
	if k.aligned = k.rng.IntN(3) == 0; k.aligned {
		s, c = 0, 1
	}
	on := func(px, py float64) geom.Point {
		return geom.Point{X: mid.X + math.Round(px*c-py*s), Y: mid.Y + math.Round(px*s+py*c)}
	}
	// The jambs, inside and outside, left and right of the door.
	li, lo, ri, ro := on(x, -inner), on(x, -o), on(x+w, -inner), on(x+w, -o)
	d, _, _ := geom.SegmentSegmentDist(li, lo, ri, ro)
	k.beta = d / 2
	k.goal, k.start = mid, geom.Point{X: 550_000, Y: 550_000}
	return k.polygon(lo, li, on(-inner, -inner), on(-inner, inner), on(inner, inner), on(inner, -inner), ri, ro,
		on(o, -o), on(o, o), on(-o, o), on(-o, -o))
}

// longCorridor is a corridor with bends, all of one width, or one that slants.
func (k *sketch) longCorridor() bool {
	if k.rng.IntN(3) == 0 {
		return k.slanting()
	}
	k.aligned = true
	raster := k.rng.IntN(2) == 0
	w := k.width(raster)
	k.beta = w / 2
	x := k.place(raster, w)
	y := cells(raster, k.y0)
	bends := k.rng.IntN(4)
	row := func(high, from, to float64) bool { // free from, to
		y0 := y
		y += high
		return k.rect(raster, 0, y0, from, y) && k.rect(raster, to, y0, k.side, y)
	}
	ok := true
	for range bends {
		high := cells(raster, CellUm*(0.5+3*k.rng.Float64()))
		ok = row(high, x, x+w) && ok
		next := k.place(raster, w)
		ok = row(w, min(x, next), max(x, next)+w) && ok
		x = next
	}
	long := cells(raster, CellUm+k.rng.Float64()*(0.7*k.side-y))
	return 0.7*k.side > y+CellUm && row(long, x, x+w) && ok
}

// slanting is a straight corridor of metres between two solids, its sides parallel but for
// rounding or closing by a little.
func (k *sketch) slanting() bool {
	w := k.width(false)
	k.y1 = math.Floor(k.y0 + k.side*(0.15+0.15*k.rng.Float64()))
	x := k.place(false, w)
	lean := math.Round((k.y1 - k.y0) * (2*k.rng.Float64() - 1))
	if k.rng.IntN(3) == 0 { // all but along the axis
		lean = float64(k.rng.IntN(2001) - 1000)
	}
	closing := 0.0
	if k.rng.IntN(2) == 0 {
		closing = math.Round(w * 0.2 * (2*k.rng.Float64() - 1))
	}
	if x+lean < CellUm || x+w+lean+closing > k.side-CellUm || x+w > k.side-CellUm {
		return false
	}
	a := []geom.Point{{X: 0, Y: k.y0}, {X: x, Y: k.y0}, {X: x + lean, Y: k.y1}, {X: 0, Y: k.y1}}
	b := []geom.Point{{X: k.side, Y: k.y1}, {X: x + w + lean + closing, Y: k.y1}, {X: x + w, Y: k.y0}, {X: k.side, Y: k.y0}}
	k.beta = apart(a, b) / 2
	return k.polygon(a...) && k.polygon(b...)
}

// shadowed is a door with a third solid near it.
func (k *sketch) shadowed() bool {
	switch k.rng.IntN(3) {
	case 0:
		return k.postInDoor()
	case 1:
		return k.discBehindDoor()
	}
	return k.wallBehindDoor()
}

// wallBehindDoor puts a wall across behind a door along an axis, as far away as the door is wide,
// or less, or more: the way turns aside at once.
func (k *sketch) wallBehindDoor() bool {
	k.aligned = true
	raster := k.rng.IntN(2) == 0
	w, d := k.width(raster), 0.0
	switch k.rng.IntN(3) {
	case 0:
		d = w
	case 1:
		d = k.width(raster)
	default:
		d = w + float64(k.rng.IntN(3)-1)*cells(raster, 1+float64(k.rng.IntN(1000)))
	}
	x := k.place(raster, w)
	k.y0 = cells(raster, k.y0)
	k.y1 = k.y0 + cells(raster, 2*CellUm*(0.5+k.rng.Float64()))
	ok := k.wall(raster, x, w)
	k.beta = min(w, d) / 2
	y := k.y1 + d
	l, r := cells(raster, x-CellUm*20*k.rng.Float64()), cells(raster, x+w+CellUm*20*k.rng.Float64())
	const aside = 2*MostBetaUm + 100_000 // room to pass it by on either side
	if d < 1 || l < aside || r > k.side-aside {
		return false
	}
	return ok && k.rect(raster, l, y, r, y+cells(raster, CellUm*(0.6+4*k.rng.Float64())))
}

// discBehindDoor puts a post behind, or before, a door along an axis, with some more room
// between it and either jamb than in the door.
func (k *sketch) discBehindDoor() bool {
	k.aligned = true
	w := k.width(false)
	x := k.place(false, w)
	radius := float64(1 + k.rng.IntN(200_000))
	q := math.Ceil(math.Sqrt((w+radius+10_000)*(w+radius+10_000)-w*w/4)) + float64(k.rng.IntN(50_000))
	y := k.y1 + q
	if k.rng.IntN(2) == 0 {
		y = k.y0 - q
	}
	k.disc(geom.Point{X: math.Round(x + w/2), Y: y}, radius)
	const room = MostBetaUm + 100_000
	return k.wall(false, x, w) && y-radius > k.start.Y+room && y+radius < k.goal.Y-room
}

// postInDoor stands a post between the parts of a wall, so that there is a passage on either
// side of it: the nearest places of the two parts have the post between them.
func (k *sketch) postInDoor() bool {
	a, b, ok := k.arms()
	near, p, q := math.Inf(1), geom.Point{}, geom.Point{}
	for i := range a {
		for j := range b {
			if d, on, other := geom.SegmentSegmentDist(a[i], a[(i+1)%4], b[j], b[(j+1)%4]); d < near {
				near, p, q = d, on, other
			}
		}
	}
	if near < 10 || !ok {
		return false
	}
	t := 0.1 + 0.8*k.rng.Float64()
	c := geom.Point{X: math.Round(p.X + t*(q.X-p.X)), Y: math.Round(p.Y + t*(q.Y-p.Y))}
	radius := 1 + math.Floor(near*0.8*min(t, 1-t)*k.rng.Float64())
	to := func(ring []geom.Point) float64 {
		d, _ := geom.BorderDist([][]geom.Point{ring}, c)
		return d - radius
	}
	k.beta = max(to(a), to(b)) / 2
	k.disc(c, radius)
	return k.polygon(a...) && k.polygon(b...)
}
