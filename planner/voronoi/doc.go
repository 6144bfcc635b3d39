// Package voronoi has the generalized Voronoi edges of one version of a floor, exactly: the
// places that have two or more nearest places on the solids. A robot that keeps to
// them is in the middle of whatever it passes through. On them rest the roomy
// preferences, balanced and clearest, and what is known of bottlenecks.
//
// The edges are the generalized Voronoi graph of Choset & Burdick ("Sensor-Based
// Exploration: The Hierarchical Generalized Voronoi Graph", 2000) for the convex pieces of
// the solids: raster cells, vector solids with their exact outlines, closed zones where
// asked for, and a closed border. Where two pieces meet they have the same nearest place,
// and there is no edge; in a concave corner there is one, into the corner. The set
// does not depend on how solids are cut into pieces. A discrete map of this kind with
// updates where the floor changes is due to Lau, Sprunk & Burgard (2013); here nothing is
// discrete: edges are lines, parabolas and hyperbolas between corners and sides.
//
// Where the border is open it is itself an edge: beside it a robot has the most
// room there is.
//
// # How the edges are found
//
// A block of 64x64 cells gathers the sites (corners and sides) that may be nearest in
// it. It is cut in four again and again, dropping in each box the sites that another one
// is nearer than throughout, until a box has a few. Then each pair's curve is cut at all
// places that are equally far from a third site (the problem of Apollonius, in closed
// form), and the parts at which none is nearer are kept. Nothing is sampled: an edge is
// found however short it is, down to joinUm.
//
// # What is exact
//
// Clearance along an edge is right to about 1e-5 µm, the place of a branch point to joinUm,
// on floors of a few hundred metres with cells of centimetres. Where outlines have sides of a few
// micrometres, too short to be told from their ends at a distance, edges may have gaps of that size. Edges are traced where
// clearance is from leastUm to Need.MostUm (and a millimetre more); ends within joinUm of
// one another are one. Graph.Advance gives the very same edges as Build, and Roads.Advance
// the very same roads as NewRoads, down to the numbers of their nodes.
//
// # What is too large
//
// A graph takes some 500 bytes for each corner or side of the solids: 3 MB for a million
// cells of a cluttered hall, 200 MB for as many of noise. Beyond MaxSites or MaxBytes there
// is none (ErrTooLarge).
//
// # Reading the source
//
// size.go has the limits, site.go and curve.go the elements, outline.go those of a feature,
// triple.go the branch points, trace.go and hidden.go a block's edges, block.go and join.go
// their topology, graph.go and advance.go the whole. On them are edge.go (edges and gates for
// the reader), pave.go and roads.go (edges and the open floor for one preferred clearance, by
// block and together), widest.go (bottlenecks), enter.go (how ends get there), path.go,
// search.go and net.go (balanced and clearest) and draw.go (polylines).
package voronoi
