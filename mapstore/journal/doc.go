// Package journal is where versions are made durable.
//
// Four nouns. A Record is one version of one floor as it was accepted: who, why,
// when, what, and the digest of the content that came of it. A floor's records
// are numbered from 1 without a gap, and each carries the hash of the one before,
// so that they form a chain: a record cannot be lost, swapped or altered without
// the chain showing it. A Snapshot is the whole content of one version; it is kept
// beside the records only to make recovery short, and losing one loses nothing.
// A Journal keeps both; a Reader is the half of it that cannot write.
//
// Order decides. The records of a floor, carried out in order, give the same
// versions and digests on any machine. Append is a compare-and-append: it takes
// version n+1 only on top of version n, so any number of writers may share a
// journal and exactly one of them makes each version. The others get ErrConflict
// and are to read what they missed. When Append has returned nil the record
// outlives a crash of the program and of the machine; when it has failed with an
// error of the medium or of the context the record may or may not be there, and a
// request id tells which (Reader.Find).
//
// Every read checks what it gives: the checksum of the stored bytes, the record's
// hash, its place in the chain. What does not check out is a *CorruptError
// (errors.Is ErrCorrupt) that names file, floor and version; it is never skipped,
// dropped or mended by guesswork. A format newer than this program's is a
// *FormatError (ErrFormat) that names both numbers.
//
// Slices in Records and Snapshots that a Reader gives belong to the caller. Slices
// that are passed to Append and PutSnapshot are only read, and not kept after the
// call has returned.
//
// Implementations: boltjournal keeps one file on disk, memjournal keeps memory for
// tests. Every implementation must pass package journaltest.
package journal
