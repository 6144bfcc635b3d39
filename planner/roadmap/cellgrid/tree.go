package cellgrid

import (
	"math"
	"strconv"

	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/roadmap"
)

// Tree is what the clearance quadtree of a version comes to for one clearance.
type Tree struct {
	ByLevel []int64 // nodes of 2^level cells a side, inner ones and leaves
	Nodes   int64
	// MixedShare is the share of the floor's area in cells that are not clear as a whole
	// but may be in part, as far as their vertices tell: what whole cells lose, at most.
	MixedShare float64
}

// Count goes down the clearance quadtree: a node is cut in four until all of its cells
// are clear, or none is.
func Count(f *clearance.Field, um int64) Tree {
	root := f.Root()
	var four [4]clearance.Node
	for root.Children(&four) == 1 { // squares of which only one quarter is on the floor
		root = four[0]
	}
	t := Tree{ByLevel: make([]int64, root.Level+1)}
	mixed, h := 0, float64(f.Map().Settings().ResolutionUm)
	kids := func(n clearance.Node, do func(clearance.Node)) {
		var four [4]clearance.Node
		for i := range n.Children(&four) {
			do(four[i])
		}
	}
	// Cells of a node none of which is clear as a whole.
	var lost func(n clearance.Node)
	lost = func(n clearance.Node) {
		switch {
		case um <= 0 || float64(n.Max)+h/math.Sqrt2 < float64(um):
		case n.Level == 0:
			mixed++
		default:
			kids(n, lost)
		}
	}
	var visit func(n clearance.Node)
	visit = func(n clearance.Node) {
		t.Nodes++
		t.ByLevel[n.Level]++
		switch n.Kind(um) {
		case clearance.Mixed:
			kids(n, visit)
		case clearance.Blocked:
			lost(n)
		}
	}
	visit(root)
	s := f.Map().Settings()
	t.MixedShare = float64(mixed) / float64(s.Columns*s.Rows)
	return t
}

// WidthBiasUm is by how much, in micrometres, a passage may be wider than a body needs and
// still be missed where cells are free only as a whole. A curve down the middle of
// a passage passes through a chain of cells that share sides, and no point of
// those is farther from the curve than a cell's diagonal: with a diagonal more
// of clearance on either side they are all free. Passages along the axes need only
// one cell on either side.
func WidthBiasUm(res float64) int64 { return int64(math.Ceil(2 * math.Sqrt2 * res)) }

func (c *Cells) notes() []roadmap.Note {
	notes := []roadmap.Note{{Name: "width bias", Value: geom.Metres(float64(WidthBiasUm(c.frame.Res))), Unit: "m"}}
	if c.kind == Quadtree {
		t := Count(c.field, c.need.ClearanceUm)
		notes = append(notes, roadmap.Note{Name: "share of area in mixed cells", Value: t.MixedShare, Unit: "1"})
		for level, n := range t.ByLevel {
			side := strconv.Itoa(1 << level)
			notes = append(notes, roadmap.Note{Name: "tree nodes of " + side + " cells a side", Value: float64(n), Unit: "1"})
		}
	}
	return notes
}
