// Package anyangle finds true shortest ways of a disc on one version of a floor: over
// all directions, not those of a grid, and exactly.
//
// A Mesh is the free space for one required clearance r. The solids (raster cells,
// the closed border, vector solids, closed zones) are grown by r as convex
// polygons on whole micrometres, arcs replaced by chords outside them. What is left
// of each block of 128x128 cells is cut into trapezoids along rows or along
// columns, and trapezoids are joined while they stay convex. A corner between sides along the
// axes that stands alone is cut as if it were square, and what is free of the square is a fan of
// triangles, which a way that does not turn there never enters. Cells of two blocks
// are joined where their borders meet. Passages of no width, exactly 2r between
// sides along an axis, stay: as cells of no width or height, or as single points in
// which two cells meet.
//
// What is exact: with L*(x) the true optimum at clearance x, the way found is as
// long as the optimum in the mesh, but for rounding (1e-9 relative), and so
// L*(r) <= length <= L*(r + DeltaUm). Every point of it has clearance r. At r = 0
// the raster is taken as it is: the optimum of a point that may touch solids and slide
// along them, but not pass between two that touch in a corner.
//
// Shortest searches the mesh by intervals: Polyanya (Cui, Harabor & Grastien,
// "Compromise-free Pathfinding on a Navigation Mesh", IJCAI 2017), which
// generalizes Anya (Harabor, Grastien, Öz & Aksakalli, JAIR 56, 2016), with one
// change: an interval is kept with all the bends that see a part of it, not split
// among them (see node), which saves a dozenfold at rounded corners.
//
// Walls that slant across the raster grow into rows of teeth, and solids in a row into
// scallops. The notches between them are left out of a second, lean mesh, which is
// searched when both ends lie in it: no shortest way between such ends enters a notch.
//
// A way bends at corners of chords. Taut solves its bends again with common tangents and
// arcs, which gives the exact length, and draws it as a polyline outside the arcs.
//
// A block's cells depend on the solids near it alone. Advance makes the mesh of the next
// version from the last by cutting the blocks within reach of the change again
// and sharing the others. Noise over millions of cells makes meshes too large to keep; see
// MaxBytes.
//
// Read mesh.go first (size.go has its limit), then cut.go, slab.go, mitre.go and fan.go for the cells, join.go for portals,
// search.go, look.go, round.go and undercut.go for the search, bridge.go for the lean mesh, taut.go and corner.go
// for the bends.
package anyangle
