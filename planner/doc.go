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
// clear and nothing can be cheaper, it is the route. Else, with no roadmap named:
//
//   - Shortest is the any-angle optimum over a mesh of convex cells (package anyangle;
//     optimum.go).
//   - Balanced joins any-angle ways where there is the preferred clearance with Voronoi edges
//     where there is less (package voronoi; roads.go, roomy.go).
//   - Clearest does so with the floor's cap for the preferred clearance, along edges of the
//     largest bottleneck there is.
//
// What comes of it goes to whole micrometres where every piece stays as clear as it was,
// by exact lines of sight, and where it was open stays that.
//
// What breaks it: a one-way zone that the way goes against; an end that touches a solid or, in
// a wedge, is within anyangle.DeltaUm of too near; a point body that prefers nothing; a
// passage exactly as wide as the body where a bent edge's chords would cut into it; a floor too
// large for a search, or clutter that is too much to keep mesh or edges of
// (anyangle.ErrTooLarge, voronoi.ErrTooLarge). Then, and where a roadmap is named, cells are
// searched that keep the required clearance as a whole (Auto: the 8-connected grid; for
// clearest at a few clearances in turn), balanced taking a cell for tight as a whole. Ends
// join them by straight pieces that are clear, and the path is straightened (package pull):
// bends are pulled to corners, and a corner is cut as often as that saves a fiftieth of a cell.
// Whole cells miss passages up to 2·sqrt 2 cells wider than the body needs
// (Bound.WidthBiasUm).
//
// When nothing is found and no roadmap is named, the widest way over Voronoi edges says
// why, exactly (gate.go): the gate, or the zone that closes what is wide enough; and when
// it is wide enough after all, it is the route. Where edges cannot tell (ends that touch
// solids, point bodies), and for named grids, a search over cells does (bottleneck.go): a named
// roadmap keeps its bias, and its Bottleneck is no narrower than needed.
//
// A plan whose time budget is spent gives the best it knows (stopgap.go). Structures in
// the making go on being made, two of each kind that nobody waits for; each ends after
// seconds (minutes, in clutter over many millions of cells), whether its World is still used
// or not.
//
// A required clearance of 0 means a point: it may touch solids, slide along them and turn at
// their corners, but not pass between two that touch (package touch).
//
// Before it is given, every route is gone over by package check, which shares
// nothing with any of this. Should they disagree, the answer is a *CheckError.
//
// # What a replan does anew
//
// An old route is trimmed to the pose, judged, and kept without a search when a certificate says
// that nothing is cheaper (keep.go); else it is compared with what a search finds. A Session
// records the route it answered last, piece by piece, with the distance that all that was
// found out about a piece depends on (record.go). What differs between two versions is
// found once for all robots (since.go). Pieces that nothing changed near are taken from the
// record (retell.go): they are as clear, as dear and described as they were, and were checked on
// a version that is the same there. The others, and the new first piece, are judged, described
// and checked. An answer in a session is the one without, to the last digit.
//
// Measured, for a body of 0.45 m half its way, after a change of 1 m² (means of the better of four;
// BenchmarkReplanVsPlan): in a hall of 1024 by 1024 cells a plan 30 µs, a kept route 9 to 12 µs;
// 4096 by 4096 cells, 150 to 250 µs and 11 to 25 µs; an office, 110 µs and 17 µs. Straight to the
// goal all of a route is new, and a replan costs what a plan does.
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
//	the same where edges cannot tell  best first over cells             about 1 µs a cell opened
//	the shortest way in any direction anyangle.Mesh: convex cells,      once a version and body; then about
//	                                  carried over but for changed      0.3 µs a node opened, few nodes
//	                                  blocks of 128x128
//	the middle between solids         voronoi.Graph: edges up to the    once a version and margin, carried
//	                                  floor's cap, by block of 64x64    over but for changed blocks
//	balanced, clearest                voronoi.Roads over a mesh and a   once a version, margin and preferred
//	                                  graph                             clearance; then a few ways over the
//	                                                                    mesh, and about 0.1 µs an edge opened
//	the gate of the widest way        a spanning tree of the roads      a few µs
//	can a kept route be undercut      what changed, by ellipses         about 0.1 µs a run of cells or an edge
//	what of a route still holds       a record, in a Session            about 10 ns a piece and a thing that changed
//	is the route right                check.Index: cells and features   cells along the route
//
// One-way zones are no part of meshes, edges or regions: a goal they shut off is found out by
// searching all cells that can be reached.
//
// Measured, milliseconds for one plan, the best of 100 on two processors; the
// hall has 2400 by 1600 cells, the route is 77 to 89 m, 400 nodes of the mesh or 255,000
// cells are opened. First is with nothing made yet for such a body on that version,
// which Advance spares the next one: 31 ms for all structures of this table together
// after a change of 1 m².
//
//	                                  again   first
//	shortest, any angle               0.27    110
//	balanced                          0.30    330
//	clearest                          5.0     420
//	no passage, with its gate         0.01    680
//	shortest, 8-connected grid        24      36
//	shortest, quadtree                39      50
//
// As halls grow, with the same 8 rows of racks crossed, a plan costs the same; making a version
// ready from scratch costs its area, a patch what it changes (BenchmarkPlanAsHallGrows, body
// of 0.45 m, medians of 60 plans, each the best of five; two processors):
//
//	cells          shortest   balanced   world built   first plan   push and first plan   heap
//	1 million      0.15 ms    0.12 ms    21 ms         8 ms         0.9 ms                6 MB
//	4 million      0.15 ms    0.14 ms    43 ms         24 ms        1.5 ms                22 MB
//	16 million     0.15 ms    0.13 ms    186 ms        100 ms       1.5 ms                87 MB
//	64 million     0.14 ms    0.13 ms    605 ms        472 ms       3.2 ms                349 MB
//
// Against A* over an array of the same cells, how many times as fast whole plans for shortest
// are (BenchmarkShortestVsGridAStar; body of 0.45 m, a point on maze and random):
//
//	                              each in its turn   taking turns   median plan
//	rack hall, 1024²              104 to 119         58 to 61       0.09 ms
//	the same turned by 7°         39                 30             0.26 ms
//	the same turned, as cells     25 to 30           20 to 23       0.35 ms
//	rack hall, 4096²              178 to 183         153 to 156     0.67 ms
//	office of rooms, 1024²        50                 37             0.33 ms
//	maze, 512²                    5.2                4.9            2.5 ms
//	one cell in five solid, 512²  1.1                1.0            1.7 ms
//
// The classical roadmaps (classic.go, package roadmap and those below it) are there to be
// seen, compared and named; they are kept apart, brought up to date in the background, and
// let go after a few versions without a question.
//
// # Reading the source
//
// plan.go is the way through; optimum.go answers shortest, roomy.go balanced and clearest, on
// structures that shelf.go keeps (meshes.go, roads.go); keep.go knows when an old answer
// stands; ends.go joins ends to cells, gate.go and bottleneck.go explain refusals, stopgap.go
// answers in time, describe.go makes legs and points, replan.go keeps or replaces old routes,
// session.go keeps what stands behind an answer for the next one: record.go the route, which
// recall.go looks things up in and retell.go takes up, and package dstar a named grid's search;
// advise.go guides, classic.go asks the classical roadmaps. Beneath: internal/judge decides exactly and says what a metre costs,
// internal/touch knows points, internal/mask holds free cells, internal/roadmap searches,
// internal/pull straightens, internal/rules knows the zones.
package planner
