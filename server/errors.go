package server

import (
	"context"
	"errors"
	"fmt"
	"strconv"
	"strings"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/protoadapt"
	"google.golang.org/protobuf/types/known/durationpb"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/planner"
	"example.com/wideberth/planner/roadmap"
)

// errorDomain is ErrorInfo.domain of every failure.
const errorDomain = "wideberth"

// Bounds on what a failure carries. Clients built on gRPC's C core accept 8 KiB of
// headers, and a status travels there in base64 beside its message; a larger one
// reaches them as INTERNAL.
const (
	maxFaults       = 20       // violations named; the others are counted
	maxStatusBytes  = 4 << 10  // the whole google.rpc.Status
	maxMessageText  = 512      // bytes of the status message
	maxFaultText    = 240      // bytes of one violation's description
	maxFaultPath    = 200      // bytes of one violation's field path
	maxMetadataText = 1000     // bytes of one ErrorInfo metadata value
	moreField       = "(more)" // the field of the violation that counts the rest
)

// How long a client should wait before it asks again.
const (
	retryShed    = 500 * time.Millisecond // load was shed
	retrySoon    = time.Second            // a version has not appeared yet, or is being made ready
	retryRestart = 2 * time.Second        // this server is going away or its disk fails
)

// The failures of the server's own, told apart with errors.Is and errors.As.
var (
	errUnchecked  = errors.New("no validator for this message")
	errOverloaded = errors.New("all planners are busy")
	errDraining   = errors.New("the server is going away")
	errPreparing  = errors.New("the version is still being made ready")
	errNotReached = errors.New("the head has not reached the version")
	errNoVersion  = errors.New("no such version")
	errPanic      = errors.New("a handler panicked")
)

// inputError lists what is wrong with a request.
type inputError struct {
	list []fault
	more int
}

// Error names the first fault and counts the others.
func (e *inputError) Error() string {
	s := e.list[0].path + ": " + e.list[0].problem
	if e.list[0].path == "" {
		s = e.list[0].problem
	}
	if n := len(e.list) - 1 + e.more; n > 0 {
		s = cut(s, maxMessageText-32) + fmt.Sprintf("; and %d more", n)
	}
	return s
}

// stationError says that a version has no station of that name.
type stationError struct {
	field, station string
	at             mapstore.VersionInfo
	other          bool // there is a feature of that name that is no station
}

func (e *stationError) Error() string {
	what := "there is none"
	if e.other {
		what = "that feature is no station"
	}
	return fmt.Sprintf("%s: %s, wanted a station of version %d; %s", e.field, quote(e.station), e.at.Version, what)
}

// subject is what a failed call was about. It fills in ErrorInfo's metadata; zero
// fields are left out.
type subject struct {
	floor   string
	version int64
	oldest  int64
	head    mapstore.VersionInfo
	editsAt string // path of the edits in the request
}

// failure is a status in the making.
type failure struct {
	code    codes.Code
	reason  string
	message string
	meta    map[string]string
	fields  []fault // BadRequest
	more    int
	state   *errdetails.PreconditionFailure_Violation
	retry   time.Duration
}

// statusOf is the one place that turns a failure of the store, the planner or the
// server into a gRPC status with details. What is a status already is handed
// through as it is. An error that nothing here knows becomes INTERNAL and keeps
// its words to itself; the interceptor logs them.
func statusOf(ctx context.Context, err error, about subject) error {
	if err == nil {
		return nil
	}
	if _, ok := err.(interface{ GRPCStatus() *status.Status }); ok {
		return err
	}
	return &statusError{status: describe(ctx, err, about).status(), cause: err}
}

// statusError is a status that remembers, for the log alone, what it was made from.
type statusError struct {
	status *status.Status
	cause  error
}

func (e *statusError) Error() string              { return e.status.Err().Error() }
func (e *statusError) GRPCStatus() *status.Status { return e.status }
func (e *statusError) Unwrap() error              { return e.cause }

// describe says what a failure means to the caller.
func describe(ctx context.Context, err error, about subject) failure {
	meta := map[string]string{}
	if about.floor != "" {
		meta["floor"] = about.floor
	}
	if about.version != 0 {
		meta["version"] = strconv.FormatInt(about.version, 10)
	}
	fail := func(code codes.Code, reason, message string) failure {
		return failure{code: code, reason: reason, message: message, meta: meta}
	}
	unmet := func(f failure, kind, subject string) failure {
		f.state = &errdetails.PreconditionFailure_Violation{Type: kind, Subject: cut(subject, maxFaultPath), Description: cut(f.message, maxFaultText)}
		return f
	}
	later := func(f failure, d time.Duration) failure { f.retry = d; return f }

	var (
		input   *inputError
		station *stationError
		stale   *mapstore.StaleBaseError
		edit    *floor.EditError
		arg     *mapstore.ArgumentError
		setting floor.SettingsError
		request *planner.RequestError
		checked *planner.CheckError
		damage  *journal.CorruptError
	)
	switch {
	case errors.As(err, &input):
		f := fail(codes.InvalidArgument, "INVALID_FIELD", input.Error())
		f.fields, f.more = input.list, input.more
		return f
	case errors.As(err, &edit):
		return editFailure(edit, about, fail, unmet)
	case errors.As(err, &arg):
		f := fail(codes.InvalidArgument, "INVALID_FIELD", arg.Error())
		f.fields = []fault{{arg.Field, arg.Problem}}
		return f
	case errors.As(err, &setting):
		f := fail(codes.InvalidArgument, "INVALID_FIELD", setting.Error())
		for _, s := range setting {
			f.fields = append(f.fields, fault{"settings." + s.Field, s.Problem})
		}
		return f
	case errors.As(err, &request):
		f := fail(codes.InvalidArgument, "INVALID_FIELD", request.Error())
		f.fields = []fault{{request.Field, request.Problem}}
		return f
	case errors.As(err, &checked):
		return fail(codes.Internal, "ROUTE_CHECK_FAILED", "the route that was found failed its check and is withheld; the server's log says how")
	case errors.As(err, &station):
		meta["station"] = station.station
		meta["version"] = strconv.FormatInt(station.at.Version, 10)
		return fail(codes.NotFound, "STATION_NOT_FOUND", station.Error())
	case errors.As(err, &stale):
		meta["base_version"] = strconv.FormatInt(stale.Base, 10)
		meta["head_version"] = strconv.FormatInt(stale.Head.Version, 10)
		meta["head_digest"] = digestOut(stale.Head.Digest)
		meta["conflicts"] = strings.Join(stale.Conflicts, "; ")
		return fail(codes.Aborted, "STALE_BASE", fmt.Sprintf("base_version: %d, wanted the head %d; look at what changed and send it again on that base", stale.Base, stale.Head.Version))

	case errors.Is(err, mapstore.ErrNoFloor):
		return fail(codes.NotFound, "FLOOR_NOT_FOUND", fmt.Sprintf("floor: there is no floor %s", quote(about.floor)))
	case errors.Is(err, mapstore.ErrFloorExists):
		return fail(codes.AlreadyExists, "FLOOR_EXISTS", fmt.Sprintf("floor: %s exists with other settings", quote(about.floor)))
	case errors.Is(err, mapstore.ErrFloorLimit):
		// Not RESOURCE_EXHAUSTED: floors are never taken away, so waiting does not help.
		f := fail(codes.FailedPrecondition, "FLOOR_LIMIT", fmt.Sprintf("floor: there are %d floors already, as many as one server keeps", mapstore.MaxFloors))
		return unmet(f, "FLOORS", "floors/"+about.floor)
	case errors.Is(err, errNoVersion):
		meta["head_version"] = strconv.FormatInt(about.head.Version, 10)
		return fail(codes.NotFound, "VERSION_NOT_FOUND", fmt.Sprintf("there is no version %d, wanted at most the head %d", about.version, about.head.Version))
	case errors.Is(err, mapstore.ErrFutureVersion):
		meta["head_version"] = strconv.FormatInt(about.head.Version, 10)
		f := fail(codes.FailedPrecondition, "BASE_ABOVE_HEAD", fmt.Sprintf("base_version: %d, wanted at most the head %d", about.version, about.head.Version))
		return unmet(f, "HEAD", "floors/"+about.floor)
	case errors.Is(err, errNotReached):
		meta["head_version"] = strconv.FormatInt(about.head.Version, 10)
		return later(fail(codes.Unavailable, "VERSION_NOT_REACHED", fmt.Sprintf("the head is %d and has not reached %d", about.head.Version, about.version)), retrySoon)
	case errors.Is(err, mapstore.ErrGone):
		meta["oldest_version"] = strconv.FormatInt(about.oldest, 10)
		return fail(codes.OutOfRange, "VERSION_GONE", fmt.Sprintf("version %d is not held any more, wanted %d or later", about.version, about.oldest))
	case errors.Is(err, mapstore.ErrRequestReused):
		f := fail(codes.FailedPrecondition, "REQUEST_ID_REUSED", "request_id: was used for another request, wanted a new one")
		return unmet(f, "REQUEST_ID", "floors/"+about.floor)

	case errors.Is(err, roadmap.ErrTooLarge):
		return unmet(fail(codes.FailedPrecondition, "ROADMAP_TOO_LARGE", cut(err.Error(), maxMessageText-64)+"; ask for another roadmap, or to be shown a smaller area"), "ROADMAP", "floors/"+about.floor)
	case errors.Is(err, errOverloaded):
		return later(fail(codes.ResourceExhausted, "OVERLOADED", "all planners are busy"), retryShed)
	case errors.Is(err, errPreparing):
		return later(fail(codes.Unavailable, "VERSION_PREPARING", "the version is still being made ready to plan on"), retrySoon)
	case errors.Is(err, errDraining), errors.Is(err, mapstore.ErrClosed), errors.Is(err, journal.ErrClosed),
		errors.Is(context.Cause(ctx), errDraining) && errors.Is(err, context.Canceled):
		return later(fail(codes.Unavailable, "SHUTTING_DOWN", "the server is going away"), retryRestart)
	case errors.Is(err, context.DeadlineExceeded):
		return fail(codes.DeadlineExceeded, "DEADLINE", "the deadline passed first")
	case errors.Is(err, context.Canceled):
		return fail(codes.Canceled, "CANCELLED", "the call was cancelled")
	case errors.As(err, &damage):
		return damaged(damage, fail, meta)
	case errors.Is(err, journal.ErrCorrupt), errors.Is(err, journal.ErrFormat):
		return fail(codes.DataLoss, "JOURNAL_DAMAGED", "the journal cannot be read; see the server's log")
	case errors.Is(err, mapstore.ErrJournal):
		return later(fail(codes.Unavailable, "JOURNAL_UNAVAILABLE", "the journal cannot be written; nothing is lost that was acknowledged"), retryRestart)
	}
	return fail(codes.Internal, "INTERNAL", "internal error; the server's log has it under this request id")
}

// damaged says what of a floor is damaged and what to do; the file's name is the
// server's own business.
func damaged(e *journal.CorruptError, fail func(codes.Code, string, string) failure, meta map[string]string) failure {
	told := *e
	told.File = ""
	if e.Version != 0 {
		meta["damaged_version"] = strconv.FormatInt(e.Version, 10)
	}
	return fail(codes.DataLoss, "JOURNAL_DAMAGED", cut(told.Error(), maxMessageText-64)+"; the journal must be restored from a backup")
}

// editFailure tells edits that are wrong on any version from the one that depends
// on what the floor holds: removing what is not there.
func editFailure(e *floor.EditError, about subject, fail func(codes.Code, string, string) failure, unmet func(failure, string, string) failure) failure {
	path := fmt.Sprintf("%s[%d]", about.editsAt, e.Index)
	if e.Path != "" {
		path += "." + e.Path
	}
	message := path + ": " + e.Problem
	if strings.HasPrefix(e.Path, "remove_feature") {
		return unmet(fail(codes.FailedPrecondition, "FEATURE_NOT_FOUND", message), "FEATURE", path)
	}
	f := fail(codes.InvalidArgument, "INVALID_FIELD", message)
	f.fields = []fault{{path, e.Problem}}
	return f
}

// status puts a failure on the wire within maxStatusBytes.
func (f failure) status() *status.Status {
	st := status.New(f.code, cut(f.message, maxMessageText))
	info := &errdetails.ErrorInfo{Reason: f.reason, Domain: errorDomain, Metadata: map[string]string{}}
	for k, v := range f.meta {
		info.Metadata[k] = cut(v, maxMetadataText)
	}
	details := []protoadapt.MessageV1{info}
	if f.state != nil {
		details = append(details, &errdetails.PreconditionFailure{Violations: []*errdetails.PreconditionFailure_Violation{f.state}})
	}
	if f.retry > 0 {
		details = append(details, &errdetails.RetryInfo{RetryDelay: durationpb.New(f.retry)})
	}
	for kept := min(len(f.fields), maxFaults); ; kept-- {
		all := details
		if len(f.fields) > 0 {
			all = append(details[:len(details):len(details)], f.badRequest(kept))
		}
		full, err := st.WithDetails(all...)
		if err != nil {
			return st // cannot happen: the details are ours and the code is not OK
		}
		if kept <= 1 || proto.Size(full.Proto()) <= maxStatusBytes {
			return full
		}
	}
}

// badRequest names the first kept faults and counts the others.
func (f failure) badRequest(kept int) *errdetails.BadRequest {
	out := &errdetails.BadRequest{}
	for _, v := range f.fields[:kept] {
		out.FieldViolations = append(out.FieldViolations, &errdetails.BadRequest_FieldViolation{
			Field: cut(v.path, maxFaultPath), Description: cut(v.problem, maxFaultText), Reason: f.reason,
		})
	}
	if n := len(f.fields) - kept + f.more; n > 0 {
		out.FieldViolations = append(out.FieldViolations, &errdetails.BadRequest_FieldViolation{
			Field: moreField, Description: fmt.Sprintf("and %d more", n),
		})
	}
	return out
}
