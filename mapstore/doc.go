// Package mapstore keeps the versions of every floor: patches in, immutable
// snapshots out, a journal beneath.
//
// Nouns. A floor has versions 1, 2, 3, ... without a gap; the newest is its head. A
// Patch is a list of edits with the version its author looked at, its base; pushing
// it makes the next version, all of it or nothing. A Restore makes a version equal
// to an old one. History is never rewritten. A Snapshot is one version: its record
// (VersionInfo) and its content (floor.Map). A Watch gives versions as they appear.
//
// What holds, and is tested under these names:
//
//   - A version never changes. Whoever reads version v, whenever, from memory or
//     rebuilt from the journal, gets the same content and digest.
//   - Order decides. The same journal gives the same versions and digests on any
//     machine; the clock is only written into records, never read back for a decision.
//   - Acknowledged is durable. When Push, Restore or CreateFloor has returned
//     without error the version is in the journal. When one has failed with ErrJournal
//     or the context's error, nothing has changed in memory, and the version may or may
//     not be in the journal; the same call with the same request id tells which and
//     carries it out if it was not. Before a version is appended, its edits are read
//     back from their encoding and carried out a second time, so that a record that
//     could not be replayed is never acknowledged.
//
// Lifetimes. A Snapshot stays valid for as long as anyone holds it, also after
// newer versions and after Close; it is shared, and nobody may write to what it
// holds. The newest KeepVersions of a floor are held in memory, where versions
// share what did not change; an older one is rebuilt from the nearest journal
// snapshot below it, in time proportional to the distance, and a few of those are
// kept. Slices that the Store gives belong to the caller, save what hangs off a
// Snapshot or an Edit. Push reads the edits that it is given and keeps nothing of
// them.
//
// Concurrency. All methods are safe for concurrent use. Writers of one floor take
// turns; readers never wait for them, nor for the journal unless they ask for an
// old version. The Store may share the journal with other writers: when another one
// was faster it reads what it missed and judges the patch anew. Sync reads what
// others wrote without a push.
//
// A floor whose journal is damaged is refused, with the reason, while the others
// are served: see Recovery.
package mapstore
