package server

import (
	"context"
	"errors"
	"time"

	"example.com/wideberth/mapstore"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// seconds turns a checked number of seconds into a duration.
func seconds(s float64) time.Duration { return time.Duration(s * float64(time.Second)) }

// resolve finds the version a selector asks for. The subject says what was asked
// and where the floor stands, for statusOf.
func (s *Server) resolve(ctx context.Context, floor string, sel *pb.VersionSelector) (*mapstore.Snapshot, subject, error) {
	about := subject{floor: floor}
	head, err := s.store.Head(floor)
	if err != nil {
		return nil, about, err
	}
	about.head = head.Info
	switch c := sel.GetChoice().(type) {
	case *pb.VersionSelector_Pinned:
		about.version = c.Pinned
		if c.Pinned > head.Info.Version {
			if head, err = s.await(ctx, floor, c.Pinned, sel.MaxWaitS); err != nil {
				return nil, about, or(err, errNotReached, errNoVersion)
			}
			about.head = head.Info
		}
		snap, err := s.at(ctx, floor, c.Pinned, &about)
		return snap, about, err
	case *pb.VersionSelector_AtLeast:
		about.version = c.AtLeast
		if c.AtLeast > head.Info.Version {
			if head, err = s.await(ctx, floor, c.AtLeast, sel.MaxWaitS); err != nil {
				return nil, about, err
			}
		}
		return head, about, nil
	default:
		return head, about, nil
	}
}

// or swaps one failure for another.
func or(err, from, to error) error {
	if errors.Is(err, from) {
		return to
	}
	return err
}

// await waits for the head to reach a version. The error is errNotReached when it
// did not within waitS seconds.
func (s *Server) await(ctx context.Context, floor string, version int64, waitS float64) (*mapstore.Snapshot, error) {
	if waitS == 0 {
		return nil, errNotReached
	}
	wait, cancel := context.WithTimeoutCause(ctx, seconds(waitS), errNotReached)
	defer cancel()
	snap, err := s.store.Await(wait, floor, version)
	if err != nil && errors.Is(context.Cause(wait), errNotReached) {
		return nil, errNotReached
	}
	return snap, err
}

// at is one version, held for a route or from the store. It completes the subject.
func (s *Server) at(ctx context.Context, floor string, version int64, about *subject) (*mapstore.Snapshot, error) {
	about.floor, about.version = floor, version
	if snap := s.holds.get(floor, version); snap != nil {
		return snap, nil
	}
	snap, err := s.store.At(ctx, floor, version)
	return snap, s.complete(err, about)
}

// complete adds to a failure to read a version what the caller needs to know: the
// oldest version, the head.
func (s *Server) complete(err error, about *subject) error {
	if errors.Is(err, mapstore.ErrGone) || errors.Is(err, mapstore.ErrFutureVersion) {
		if info, e := s.store.Floor(about.floor); e == nil {
			about.oldest, about.head = info.Oldest, info.Head
		}
	}
	return or(err, mapstore.ErrFutureVersion, errNoVersion)
}
