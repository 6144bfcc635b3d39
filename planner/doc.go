// Package planner answers how a body gets from here to there on one version of a
// floor.
package planner
