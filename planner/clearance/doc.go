// Package clearance holds the exact clearance of one version of a floor: how far
// each place is from the nearest solid, up to the floor's cap.
//
// A Field is built from a floor.Map (Build), or advanced from the field of another
// version with work proportional to what changed (Advance); both give the same
// bits. It answers for points (At), segments (Segment, SegmentClear), whole cells
// (CellClear, ClearBits) and squares of a quadtree that serves every body (Root).
//
// Solids are the raster cells that block under the floor's policy, as closed
// squares, the solid features with their exact outlines, and, unless the floor's
// border is open, everything beyond it. Two solids that touch at a corner close
// the gap between them.
//
// # How it is exact
//
// The raster part is kept on the lattice's vertices. The nearest point of a
// lattice square to a vertex is itself a vertex, so squared distances in cells are
// whole numbers, and a value is floor(sqrt(d²)·resolution) in integer
// arithmetic. Vector solids lower the values of the vertices around them, each
// evaluated from its outline. So a value is never above the true distance and less
// than a micrometre below it, but for geom.RelativeError where outlines are oblique.
//
// Clearance is 1-Lipschitz: it changes by at most the distance moved. Values at
// vertices therefore bound it everywhere; bounds are tried first, and only where
// they do not decide are the solids themselves measured. What is measured is
// exact at any resolution; a fine raster only makes it faster.
//
// # Reading the source
//
// raster.go has the distance transform, solid.go the index of vector solids, vector.go
// their part in the values, build.go and advance.go put them together, cell.go and
// node.go answer for cells and squares, query.go, segment.go and travel.go for places,
// vicinity.go and gather.go for many of them next to one another.
package clearance
