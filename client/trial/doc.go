// Package trial runs the open grid path-planning benchmark through the service and
// compares every length with the listed optimum.
//
// The formats and the collection are those of N. Sturtevant, Benchmarks for
// Grid-Based Pathfinding, IEEE Transactions on Computational Intelligence and AI
// in Games 4(2), 2012. A map becomes a floor with cells of one metre, so that metres
// are the benchmark's cells, and an open border, beyond which nothing lies. The
// file's first row is the top: the floor's largest y. A query goes from the
// middle of one cell to the middle of another, for a body without extent; on
// the roadmap grid8 the service's rules are the benchmark's: straight moves cost 1,
// diagonal ones the root of 2, and a diagonal needs both its straight neighbours.
//
// Any-angle optima are published for the same problems from corner to corner (option
// Vertices; ReadOptima), for a point that may touch solids, as a body without extent may.
package trial
