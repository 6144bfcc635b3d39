// Package planner answers how a body gets from here to there on one version of a
// floor, and what to make of where a robot is on its way.
//
// A World is one version made ready: NewWorld from scratch, Advance from the world of
// another version with work proportional to what changed. Its methods are pure: no
// clock, no network, no disk, no logging; the same question gets the same answer, at
// any time, from any number of goroutines.
//
//	w, err := planner.NewWorld(ctx, snapshot.Map)
//	a, err := w.Plan(ctx, planner.Request{Body: body, Start: s, Goal: g, Options: o})
//	// a.Route or a.Refusal, never both, never neither
//
// # How a plan is made
//
// The two ends are judged exactly (clearance.Field.At, zones). If the straight way is
// clear and nothing can be cheaper, it is the route. Shortest is the any-angle optimum,
// found over a mesh of convex cells (package anyangle; optimum.go), as long as that goes
// against no one-way zone. Else, and for balanced, a roadmap is searched whose nodes are
// cells, or quadtree leaves of cells, that keep the required clearance as a whole; ends join it by straight pieces that are clear. Auto is then the 8-connected grid. The
// path found is straightened by exact lines of sight (package pull): bends are
// pulled to corners, and a corner is cut as often as that saves a fiftieth of a cell.
// Tight stretches of balanced routes then go to the middle between what is on their sides
// (path relaxation; pull.Relax), as long as the whole costs no more than the roadmap's path.
//
// Balanced counts a metre the more, up to 1 + TightWeight times, the less clearance there is
// below the preferred one (Route.CostUm). The search judges a cell by the least clearance
// in it; CostUm counts what is true of the route itself, and is never more.
//
// Whole cells miss passages up to 2·sqrt 2 cells wider than the body needs
// (Bound.WidthBiasUm). With Auto and straightening, a search that finds nothing goes on to
// the widest chain of cells joined by exactly clear pieces and takes it when it is wide
// enough; a named roadmap keeps its bias, and its refusal then shows a Bottleneck
// no narrower than needed.
//
// A required clearance of 0 means a point: it may touch solids, slide along them and turn at
// their corners, but not pass between two that touch (package touch).
//
// Before it is given, every route is gone over by package check, which shares
// nothing with any of this. Should they disagree, the answer is a *CheckError.
//
// # Which structure answers what
//
//	question                          structure                         cost
//	how much room is here             clearance.Field: vertices,        about 1 µs at 1 m from
//	                                  features in blocks                what is nearest
//	may it drive straight here        the same, walked (SegmentClear)   under 1 µs a metre in the open
//	which cells are free              mask.Mask: a bit a cell           once a version and body;
//	                                  by block of 64x64                 unchanged blocks carried over
//	is the goal connected at all      mask regions: parts of blocks,    once a version and body, all
//	                                  joined across borders             blocks; then a look-up
//	the cheapest way over cells       A* over cells, a queue of         about 0.1 µs a cell opened
//	                                  stacks by key
//	the same on a grid that was named D* Lite, kept in a Session        half as much again; mending, several
//	                                                                    times that a cell, of few cells
//	the same where halls are wide     A* over quadtree leaves           about 1 µs a node opened
//	how wide the widest way is        best first by clearance           about 1 µs a cell opened
//	the shortest way in any direction anyangle.Mesh: convex cells,      once a version and body; then about
//	                                  carried over but for changed      0.3 µs a node opened, few nodes
//	                                  blocks of 128x128
//	can an old shortest be undercut   what was taken away, by ellipses  about 0.1 µs a run of cells or an edge
//	is the route right                check.Index: cells and features   cells along the route
//
// One-way zones are no part of the regions: a goal they shut off is found out by searching
// all that can be reached. A refusal's time goes into the widest way: it looks at what
// is shut in with the end that has fewer cells about it.
//
// Measured, CPU time of one plan in milliseconds, one run on a shared machine; the hall has 2400 by
// 1600 cells, the route 79 m and 270,000 to 320,000 cells opened:
//
//	balanced                          63, of which searching 33
//	shortest, any angle               6, of which searching 2
//	shortest, 8-connected grid        31, of which searching 29 (by A*)
//	shortest, quadtree                58
//	no passage, with its bottleneck   190
//
// # Reading the source
//
// plan.go is the way through; optimum.go answers shortest on meshes that meshes.go keeps,
// and keep.go knows when an old answer stands; ends.go joins ends to roadmaps,
// bottleneck.go explains refusals, describe.go makes legs and points, replan.go keeps or replaces old routes,
// session.go keeps a named grid's search for the next answer (package dstar),
// advise.go guides. Beneath: internal/judge decides exactly and says what a metre costs,
// internal/touch knows points, internal/mask holds free cells, internal/roadmap searches,
// internal/pull straightens, internal/rules knows the zones.
package planner
