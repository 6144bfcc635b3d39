package server

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"hash"
	"math"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner"
)

// routeIDBytes of the hash make a route's id: 16 bytes tell apart any number of
// routes that a site will ever see.
const routeIDBytes = 16

// routeID names a route by what it answers and what it is: the floor, the content it
// was checked against, the question, and the points. The body's name and the time
// budget are no part of the question.
func routeID(v mapstore.VersionInfo, q planner.Request, r *planner.Route) string {
	h := idHash{sha256.New()}
	h.text("wideberth route 1")
	h.text(v.Floor)
	h.Write(v.Digest[:])
	b, o := q.Body, q.Options
	h.ints(b.RadiusUm, b.MarginUm, b.PreferredUm, b.SensingUm)
	h.floats(b.MaxSpeed, b.Braking, b.Reaction)
	keep := int64(0)
	if o.KeepRoadmapPath {
		keep = 1
	}
	h.ints(int64(o.Preference), int64(o.Roadmap), keep, o.TightBelowUm, o.MaxSpacingUm)
	h.floats(o.TightWeight)
	h.pose(q.Start)
	h.pose(q.Goal)
	for _, leg := range r.Legs {
		h.ints(int64(len(leg.Points)))
		for _, p := range leg.Points {
			h.point(p.At)
		}
	}
	return hex.EncodeToString(h.Sum(nil)[:routeIDBytes])
}

// idHash writes values into a hash, each at a fixed length or with its length.
type idHash struct{ hash.Hash }

func (h idHash) ints(vs ...int64) {
	for _, v := range vs {
		var b [8]byte
		binary.BigEndian.PutUint64(b[:], uint64(v))
		h.Write(b[:])
	}
}

func (h idHash) floats(vs ...float64) {
	for _, v := range vs {
		h.ints(int64(math.Float64bits(v + 0))) // -0 counts as 0
	}
}

func (h idHash) text(s string) {
	h.ints(int64(len(s)))
	h.Write([]byte(s))
}

func (h idHash) point(p geom.Point) { h.floats(p.X, p.Y) }

func (h idHash) pose(p planner.Pose) {
	h.point(p.At)
	h.floats(p.Heading)
}
