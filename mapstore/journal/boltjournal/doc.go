// Package boltjournal keeps a journal in one bbolt file (go.etcd.io/bbolt).
//
// One process holds the file at a time; within it any number of goroutines may
// append. Append returns after the file has been synced. The file's layout, by
// bucket:
//
//	wideberth                what the file is: "format" -> mark, format, checksum
//	                         and "floors" -> the sum over their ids
//	floors/<id>              "head" -> newest version, its hash, the sum over requests
//	floors/<id>/records      version, 8 bytes big-endian -> journal.EncodeRecord
//	floors/<id>/requests     request id -> version, 8 bytes big-endian
//	floors/<id>/snapshots    version, 8 bytes big-endian -> journal.EncodeSnapshot
//
// bbolt commits whole transactions and falls back to the state before when one was
// torn by a crash, so a crash never leaves half a record and there is no tail to
// cut off. It does not checksum its data pages; records, snapshots, heads and
// request ids are therefore checked here on every read, and what is damaged is
// reported, never dropped. A page that cannot be read at all (cut off, or its
// pointers damaged) is a *journal.CorruptError too.
//
// A write that the medium refused (full disk, file size limit) fails the append and
// leaves the journal usable: a later append may succeed. A failed sync is
// different, since nobody can know then what reached the disk: the journal goes on
// reading but refuses every later write until it is opened again.
package boltjournal
