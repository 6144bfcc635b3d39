// Package cells cuts the free space of one version of a floor, for a body's clearance,
// into vertical trapezoids, exactly: the ground under the roadmaps of exact cells and of
// meadows.
//
// Solids (raster cells, features, closed zones) are grown by their clearance. Sides move
// out, by exactly r along an axis, else by r and at most 3 µm; arcs become chords outside
// them, no corner of which stands off by more than the Space's chord. The outlines'
// corners are whole micrometres, and from there on all decisions are exact. A
// place is free where no outline covers it.
//
// From every corner of the free space's border upright walls go up and down until they
// meet an obstacle (Latombe, "Robot Motion Planning", 1991, chapter 5; LaValle, "Planning
// Algorithms", 2006, §6.2.2). Where outlines cross, the wall stands on the last whole
// micrometre before. Passages of no width are cells, too: of no height between level
// sides, of no width ("slits") between upright ones. At clearance 0 there are
// none, as a point may not pass between two solids that touch; nor where
// zones are to be kept at no distance.
//
// The floor is swept in strips one block of cells wide and as high as the floor, each of
// which depends on the solids within reach of it alone. Advance sweeps the strips that a change
// touches and shares the others. Cells that go on beyond a strip's side are put together again,
// so that they are those of the whole floor.
//
// Read edge.go, grow.go and raster.go for the outlines, sweep.go, slab.go and slit.go for
// the cells, space.go for the whole.
package cells
