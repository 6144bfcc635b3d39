package server

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"

	"github.com/rs/zerolog"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/boltjournal"
)

// journalFileName is the file of a temporary journal.
const journalFileName = "wideberth.db"

// open opens journal, store and worlds and makes the heads ready. A floor whose
// records are damaged is left out, and said to be in the log; calls for it are
// answered with DATA_LOSS and the reason.
func (s *Server) open(ctx context.Context) error {
	j, err := s.openJournal()
	if err != nil {
		return err
	}
	s.closers = append(s.closers, j.Close)
	store, recovery, err := mapstore.Open(ctx, j, mapstore.Options{
		KeepVersions: s.cfg.KeepVersions, SnapshotEvery: s.cfg.SnapshotEvery, Report: storeTrouble(s.log),
	})
	if err != nil {
		return fmt.Errorf("store: %w", err)
	}
	s.store = store
	s.closers = append(s.closers, store.Close)
	s.logRecovery(recovery)

	s.worlds = newWorlds(store, s.cfg.Worlds, s.log)
	s.closers = append(s.closers, func() error { s.worlds.close(); return nil })
	floors := store.Floors()
	for _, f := range floors {
		s.worlds.follow(f.ID)
	}
	for _, f := range floors {
		if err := s.worlds.prepare(ctx, f.ID); err != nil {
			return fmt.Errorf("floor %q: %w", f.ID, err)
		}
	}
	return nil
}

// openJournal opens the file named by the configuration, or a temporary one.
func (s *Server) openJournal() (journal.Journal, error) {
	path := s.cfg.Data
	if path == "" {
		dir, err := os.MkdirTemp("", "wideberth-")
		if err != nil {
			return nil, fmt.Errorf("data: %w", err)
		}
		s.closers = append(s.closers, func() error { return os.RemoveAll(dir) })
		path = filepath.Join(dir, journalFileName)
	}
	j, err := boltjournal.Open(path, boltjournal.Options{AcceptLostCommit: s.cfg.AcceptLostCommit})
	switch {
	case errors.Is(err, boltjournal.ErrLostCommit):
		return nil, fmt.Errorf("data: %w; restore the file from a backup, or serve it as it is with accept_lost_commit", err)
	case err != nil:
		return nil, fmt.Errorf("data: %w", err)
	}
	if err := j.Accepted(); err != nil {
		s.log.Error().Str("file", path).Err(err).Msg(msgLostCommit)
	}
	return j, nil
}

// The messages of the log's lines about the store, which a watcher of the log may go
// by; see the package documentation for their fields.
const (
	msgLostCommit   = "lost commit accepted"
	msgRecoveryNote = "recovery note"
	msgFloorRefused = "floor refused"
	msgStoreOpened  = "store opened"
	msgStoreTrouble = "store trouble"
)

// logRecovery says what opening the store found.
func (s *Server) logRecovery(r mapstore.Recovery) {
	for _, n := range r.Notes {
		s.log.Warn().Str("note", n).Msg(msgRecoveryNote)
	}
	for _, id := range r.Refused {
		_, err := s.store.Head(id)
		s.log.Error().Str("floor", id).Err(err).Msg(msgFloorRefused)
	}
	s.log.Info().Int("floors", r.Floors).Int("versions", r.Versions).Int("replayed", r.Replayed).Int("refused", len(r.Refused)).Msg(msgStoreOpened)
}

// storeTrouble logs what goes wrong in the store and fails no call.
func storeTrouble(log zerolog.Logger) func(error) {
	return func(err error) { log.Warn().Err(err).Msg(msgStoreTrouble) }
}
