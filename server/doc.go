// Package server joins the map store and the planner to gRPC: it checks what
// comes in, calls the two, puts the outcome on the wire, and says in the log what
// happened. New opens a journal and makes every floor ready, Serve answers calls
// until its context ends:
//
//	s, err := server.New(ctx, server.DefaultConfig(), log) // in a temporary file
//	...
//	err = s.Serve(ctx, listener)
//
// A Server is safe for any number of connections. Plans run side by side on
// immutable worlds, one for each version in use; a new version's world is made in
// the background from the one before as soon as the version lands. At most
// Config.Planners plans run at once, and what cannot start soon is refused rather
// than queued; the pairs of PlanMany calls wait their turn, with half of the planners
// between them.
//
// # Reading the source
//
// A call goes through interceptors.go (request id, access line, panic, deadline) to
// validate*.go, where every message is checked whole, then to the handler in
// floor_service.go, floor_streams.go, route_service.go, route_many.go or
// guide_service.go.
// resolve.go finds the version meant, worlds.go its world, planning.go a lane for
// the search. convert*.go turns metres into micrometres and back. errors.go is the
// only place where failures become statuses. knobs.go is the one table of settings.
//
// # Failures
//
// Every failure that a handler answers carries google.rpc.ErrorInfo with domain
// "wideberth", one of the reasons below and metadata (floor, version and what the
// table names). A status has at most 4 KiB with all its details. A plan that finds
// no way is no failure: see RefusalReason.
//
//	reason              code                 when; further details
//	INVALID_FIELD       INVALID_ARGUMENT     a field is malformed or out of range; BadRequest names up to 20 fields and counts the rest
//	FLOOR_NOT_FOUND     NOT_FOUND            there is no such floor
//	FLOOR_EXISTS        ALREADY_EXISTS       the floor exists with other settings
//	FLOOR_LIMIT         FAILED_PRECONDITION  there are as many floors as one server keeps; PreconditionFailure FLOORS
//	VERSION_NOT_FOUND   NOT_FOUND            a version above the head was asked for; metadata head_version
//	VERSION_NOT_REACHED UNAVAILABLE          at_least was not reached within max_wait_s; metadata head_version; RetryInfo
//	VERSION_PREPARING   UNAVAILABLE          the version is still being made ready to plan on; RetryInfo
//	VERSION_GONE        OUT_OF_RANGE         the version is not held any more; metadata oldest_version
//	STATION_NOT_FOUND   NOT_FOUND            the planned version has no such station; metadata station, version
//	FEATURE_NOT_FOUND   FAILED_PRECONDITION  a patch removes a feature that is not there; PreconditionFailure FEATURE
//	STALE_BASE          ABORTED              the base is below the head; metadata base_version, head_version, head_digest, conflicts
//	BASE_ABOVE_HEAD     FAILED_PRECONDITION  the base is above the head; metadata head_version; PreconditionFailure HEAD
//	REQUEST_ID_REUSED   FAILED_PRECONDITION  the request id was used for another request; PreconditionFailure REQUEST_ID
//	ROADMAP_TOO_LARGE   FAILED_PRECONDITION  a roadmap, shown or planned over, or what of it is in the area, is larger than the server makes or shows; PreconditionFailure ROADMAP
//	OVERLOADED          RESOURCE_EXHAUSTED   all planners are busy, or PlanMany calls are as many as may be; RetryInfo
//	DEADLINE            DEADLINE_EXCEEDED    the caller's or the server's deadline passed first
//	CANCELLED           CANCELLED            the caller gave up
//	SHUTTING_DOWN       UNAVAILABLE          the server is draining; RetryInfo
//	JOURNAL_UNAVAILABLE UNAVAILABLE          the journal cannot be written; RetryInfo
//	JOURNAL_DAMAGED     DATA_LOSS            the floor's part of the journal is damaged, and the floor is not served; metadata damaged_version
//	ROUTE_CHECK_FAILED  INTERNAL             a route failed the check that is apart from the search, and is withheld; the log says how
//	INTERNAL            INTERNAL             a fault of the server's; its log has it under the call's x-request-id
//
// # The log
//
// One JSON object a line (or words, see Config.LogFormat), on these messages and
// fields, which stay:
//
//	message               level  fields
//	call                  info   grpc.service, grpc.method, grpc.code, grpc.time_ms, request_id, peer.address, floor, map_version, error; cause from warn on
//	serving, draining     info   address; within_s
//	store opened          info   floors, versions, replayed, refused
//	recovery note         warn   note: what opening the store found wrong and did about it
//	floor refused         error  floor, error: its records are damaged, its calls are DATA_LOSS, the others are served
//	lost commit accepted  error  file, error: Config.AcceptLostCommit let a damaged file pass
//	store trouble         warn   error: what failed no call, such as a journal snapshot that will be tried again
//	head cannot be made ready to plan on, floor cannot be followed
//	                      error  floor, error
//	handler panicked      error  request_id, panic, stack
//
// A call that fails by the server's own fault is logged at error, one that was shed
// or came too early at warn.
package server
