package server

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"testing"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/planner"
)

// detail is the detail of type T that a status carries, or T's zero value.
func detail[T any](err error) (out T) {
	for _, d := range status.Convert(err).Details() {
		if t, ok := d.(T); ok {
			return t
		}
	}
	return out
}

func reason(err error) string { return detail[*errdetails.ErrorInfo](err).GetReason() }

// Each failure has its code, its reason and the domain; those that pass of
// themselves say when to try again.
func TestFailures(t *testing.T) {
	drained, cancel := context.WithCancelCause(context.Background())
	cancel(errDraining)
	for _, c := range []struct {
		err    error
		ctx    context.Context
		code   codes.Code
		reason string
		retry  bool
	}{
		{err: mapstore.ErrNoFloor, code: codes.NotFound, reason: "FLOOR_NOT_FOUND"},
		{err: mapstore.ErrFloorExists, code: codes.AlreadyExists, reason: "FLOOR_EXISTS"},
		{err: mapstore.ErrFutureVersion, code: codes.FailedPrecondition, reason: "BASE_ABOVE_HEAD"},
		{err: mapstore.ErrFloorLimit, code: codes.FailedPrecondition, reason: "FLOOR_LIMIT"},
		{err: &mapstore.ArgumentError{Field: "patch.edits", Problem: "too long"}, code: codes.InvalidArgument, reason: "INVALID_FIELD"},
		{err: errNoVersion, code: codes.NotFound, reason: "VERSION_NOT_FOUND"},
		{err: errNotReached, code: codes.Unavailable, reason: "VERSION_NOT_REACHED", retry: true},
		{err: errPreparing, code: codes.Unavailable, reason: "VERSION_PREPARING", retry: true},
		{err: mapstore.ErrGone, code: codes.OutOfRange, reason: "VERSION_GONE"},
		{err: &stationError{field: "goal.station", station: "dock"}, code: codes.NotFound, reason: "STATION_NOT_FOUND"},
		{err: &floor.EditError{Path: "remove_feature.name", Problem: "none"}, code: codes.FailedPrecondition, reason: "FEATURE_NOT_FOUND"},
		{err: &floor.EditError{Path: "put_feature.feature", Problem: "off"}, code: codes.InvalidArgument, reason: "INVALID_FIELD"},
		{err: &mapstore.StaleBaseError{Base: 1}, code: codes.Aborted, reason: "STALE_BASE"},
		{err: mapstore.ErrRequestReused, code: codes.FailedPrecondition, reason: "REQUEST_ID_REUSED"},
		{err: errOverloaded, code: codes.ResourceExhausted, reason: "OVERLOADED", retry: true},
		{err: errDraining, code: codes.Unavailable, reason: "SHUTTING_DOWN", retry: true},
		{err: context.Canceled, ctx: drained, code: codes.Unavailable, reason: "SHUTTING_DOWN", retry: true},
		{err: mapstore.ErrClosed, code: codes.Unavailable, reason: "SHUTTING_DOWN", retry: true},
		{err: context.DeadlineExceeded, code: codes.DeadlineExceeded, reason: "DEADLINE"},
		{err: context.Canceled, code: codes.Canceled, reason: "CANCELLED"},
		{err: mapstore.ErrJournal, code: codes.Unavailable, reason: "JOURNAL_UNAVAILABLE", retry: true},
		{err: &journal.CorruptError{What: "x"}, code: codes.DataLoss, reason: "JOURNAL_DAMAGED"},
		{err: errors.New("secret path"), code: codes.Internal, reason: "INTERNAL"},
		{err: &planner.RequestError{Field: "body.radius_m", Problem: "-1"}, code: codes.InvalidArgument, reason: "INVALID_FIELD"},
		{err: &planner.CheckError{Problem: "secret"}, code: codes.Internal, reason: "ROUTE_CHECK_FAILED"},
		{err: errPanic, code: codes.Internal, reason: "INTERNAL"},
	} {
		if c.ctx == nil {
			c.ctx = context.Background()
		}
		got := statusOf(c.ctx, fmt.Errorf("wrapped: %w", c.err), subject{floor: "hall", version: 3})
		if status.Code(got) != c.code || reason(got) != c.reason {
			t.Errorf("%v: %s %s, wanted %s %s", c.err, status.Code(got), reason(got), c.code, c.reason)
		}
		if d := detail[*errdetails.ErrorInfo](got).GetDomain(); d != errorDomain {
			t.Errorf("%v: domain %q", c.err, d)
		}
		if has := detail[*errdetails.RetryInfo](got) != nil; has != c.retry {
			t.Errorf("%v: RetryInfo %v, wanted %v", c.err, has, c.retry)
		}
		if strings.Contains(status.Convert(got).Message(), "secret") {
			t.Errorf("%v: leaks %q", c.err, status.Convert(got).Message())
		}
		if again := statusOf(c.ctx, got, subject{}); again != got {
			t.Errorf("%v: a status was wrapped again", c.err)
		}
	}
}

// What the store finds wrong with an argument is named as a field of the request.
func TestArgumentNamesItsField(t *testing.T) {
	err := statusOf(t.Context(), fmt.Errorf("push: %w", &mapstore.ArgumentError{Field: "patch.edits", Problem: "70000000 bytes encoded, wanted at most 67108800"}), subject{floor: "hall"})
	got := detail[*errdetails.BadRequest](err).GetFieldViolations()
	if len(got) != 1 || got[0].Field != "patch.edits" || !strings.Contains(got[0].Description, "70000000 bytes") {
		t.Errorf("violations %v", got)
	}
}

// Damage is told with its place and without the server's own paths.
func TestDamageNamesItsPlace(t *testing.T) {
	err := statusOf(t.Context(), fmt.Errorf("floor is refused: %w", &journal.CorruptError{
		File: "/srv/secret.db", Floor: "hall", Version: 12, Newest: 12, What: "record: checksum is wrong"}), subject{floor: "hall"})
	message := status.Convert(err).Message()
	for _, want := range []string{`floor "hall"`, "version 12, the newest", "checksum is wrong", "restored from a backup"} {
		if !strings.Contains(message, want) {
			t.Errorf("%q does not say %q", message, want)
		}
	}
	if strings.Contains(message, "secret") {
		t.Errorf("%q names the server's file", message)
	}
	if got := metaOf(err)["damaged_version"]; got != "12" {
		t.Errorf("damaged_version %q, wanted 12", got)
	}
}

// The worst failure of each kind fits 4 KiB and says how much it left out.
func TestFailuresFit(t *testing.T) {
	long := strings.Repeat("ö", 3000)
	in := &inputError{more: 77}
	for range maxFaults {
		in.list = append(in.list, fault{"patch." + long, long})
	}
	stale := &mapstore.StaleBaseError{Base: 1, Head: mapstore.VersionInfo{Version: 9}}
	for range 20 {
		stale.Conflicts = append(stale.Conflicts, long)
	}
	for _, err := range []error{in, stale, &stationError{station: long}, &floor.EditError{Path: "remove_feature." + long, Problem: long},
		&floor.EditError{Path: long, Problem: long}, mapstore.ErrNoFloor, &mapstore.ArgumentError{Field: long, Problem: long},
		&journal.CorruptError{Floor: long, What: long}} {
		got := status.Convert(statusOf(context.Background(), err, subject{floor: long, editsAt: "patch.edits"}))
		if n := proto.Size(got.Proto()); n > maxStatusBytes {
			t.Errorf("%T: %d bytes, wanted at most %d", err, n, maxStatusBytes)
		}
		if len(got.Message()) > maxMessageText {
			t.Errorf("%T: message of %d bytes", err, len(got.Message()))
		}
	}
	bad := detail[*errdetails.BadRequest](statusOf(context.Background(), in, subject{})).FieldViolations
	last := bad[len(bad)-1]
	if want := fmt.Sprintf("and %d more", maxFaults-(len(bad)-1)+77); last.Field != moreField || last.Description != want {
		t.Errorf("last violation %v, wanted %q", last, want)
	}
}
