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
// than queued.
//
// # Reading the source
//
// A call goes through interceptors.go (request id, access line, panic, deadline) to
// validate*.go, where every message is checked whole, then to the handler in
// floor_service.go, floor_streams.go, route_service.go or guide_service.go.
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
//	VERSION_NOT_FOUND   NOT_FOUND            a version above the head was asked for; metadata head_version
//	VERSION_NOT_REACHED UNAVAILABLE          at_least was not reached within max_wait_s; metadata head_version; RetryInfo
//	VERSION_PREPARING   UNAVAILABLE          the version is still being made ready to plan on; RetryInfo
//	VERSION_GONE        OUT_OF_RANGE         the version is not held any more; metadata oldest_version
//	STATION_NOT_FOUND   NOT_FOUND            the planned version has no such station; metadata station, version
//	FEATURE_NOT_FOUND   FAILED_PRECONDITION  a patch removes a feature that is not there; PreconditionFailure FEATURE
//	STALE_BASE          ABORTED              the base is below the head; metadata base_version, head_version, head_digest, conflicts
//	BASE_ABOVE_HEAD     FAILED_PRECONDITION  the base is above the head; metadata head_version; PreconditionFailure HEAD
//	REQUEST_ID_REUSED   FAILED_PRECONDITION  the request id was used for another request; PreconditionFailure REQUEST_ID
//	OVERLOADED          RESOURCE_EXHAUSTED   all planners are busy; RetryInfo
//	DEADLINE            DEADLINE_EXCEEDED    the caller's or the server's deadline passed first
//	CANCELLED           CANCELLED            the caller gave up
//	SHUTTING_DOWN       UNAVAILABLE          the server is draining; RetryInfo
//	JOURNAL_UNAVAILABLE UNAVAILABLE          the journal cannot be written; RetryInfo
//	JOURNAL_DAMAGED     DATA_LOSS            the journal cannot be read
//	ROUTE_CHECK_FAILED  INTERNAL             a route failed the check that is apart from the search, and is withheld; the log says how
//	INTERNAL            INTERNAL             a fault of the server's; its log has it under the call's x-request-id
package server
