// Package floor is the content of one version of a floor: settings, occupancy and
// named vector features.
//
// A Map is immutable. New makes the first one, Apply makes the next from a list of
// edits, all or none, and Diff says what differs between two. The raster is a
// persistent region quadtree over blocks of 64 by 64 cells, the features a
// persistent radix tree over their names; a new Map shares with the old one
// all that its edits did not touch, so keeping a thousand versions costs what
// their patches touched. Both trees carry hashes, and Digest is the same for
// equal content whatever its history.
//
// Lengths are whole micrometres, see package geom. Errors about input name the
// field in the words of the contract.
package floor
