package server

import (
	"context"
	"errors"
	"fmt"
	"runtime/debug"
	"strings"
	"sync"
	"time"

	"github.com/google/uuid"
	"github.com/rs/zerolog"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/peer"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// requestIDHeader names the metadata key under which a call's id is taken from
// the client and given back; it links the two sides' logs. It is another thing
// than a patch's request_id.
const requestIDHeader = "x-request-id"

// ourServices starts the full name of every service of the contract.
const ourServices = "/wideberth.v1."

// callRecord is what the access line says beside the call's outcome.
type callRecord struct {
	id      string
	mu      sync.Mutex
	floor   string
	version int64
}

type callKey struct{}

// note tells the access line which floor and version a call is about.
func note(ctx context.Context, floor string, version int64) {
	if r, ok := ctx.Value(callKey{}).(*callRecord); ok {
		r.mu.Lock()
		r.floor, r.version = floor, version
		r.mu.Unlock()
	}
}

// newCall makes a call's record, with the client's request id when it sent a fit
// one, and gives the id back in the header.
func newCall(ctx context.Context) (context.Context, *callRecord) {
	r := &callRecord{}
	if ids := metadata.ValueFromIncomingContext(ctx, requestIDHeader); len(ids) > 0 && ids[0] != "" && len(ids[0]) <= maxRequestID && printable(ids[0]) {
		r.id = ids[0]
	} else {
		r.id = uuid.NewString()
	}
	return context.WithValue(ctx, callKey{}, r), r
}

// finish writes the access line. A failure that is the server's own is logged with
// what caused it; the client is not told.
func (s *Server) finish(ctx context.Context, r *callRecord, method string, start time.Time, err error) {
	code := status.Code(err)
	level := zerolog.InfoLevel
	switch {
	case code == codes.Internal, code == codes.DataLoss, code == codes.Unknown, errors.Is(err, mapstore.ErrJournal):
		level = zerolog.ErrorLevel
	case code == codes.Unavailable, code == codes.ResourceExhausted:
		level = zerolog.WarnLevel
	}
	if !strings.HasPrefix(method, ourServices) {
		level = zerolog.DebugLevel // health probes and reflection
	}
	line := s.log.WithLevel(level)
	if line == nil {
		return
	}
	service, name, _ := strings.Cut(strings.TrimPrefix(method, "/"), "/")
	r.mu.Lock()
	floor, version := r.floor, r.version
	r.mu.Unlock()
	line.Str("grpc.service", service).Str("grpc.method", name).Str("grpc.code", code.String()).
		Float64("grpc.time_ms", float64(time.Since(start).Microseconds())/1000).Str("request_id", r.id)
	if p, ok := peer.FromContext(ctx); ok {
		line.Str("peer.address", p.Addr.String())
	}
	if floor != "" {
		line.Str("floor", floor)
	}
	if version != 0 {
		line.Int64("map_version", version)
	}
	if err != nil {
		line.Str("error", cut(status.Convert(err).Message(), maxMessageText))
		if cause := errors.Unwrap(err); cause != nil && level >= zerolog.WarnLevel {
			line.AnErr("cause", cause)
		}
	}
	line.Msg("call")
}

// recovered turns a panic into INTERNAL and logs where it happened.
func (s *Server) recovered(ctx context.Context, r *callRecord, err *error) {
	if p := recover(); p != nil {
		s.log.Error().Str("request_id", r.id).Str("panic", fmt.Sprint(p)).Bytes("stack", debug.Stack()).Msg("handler panicked")
		*err = statusOf(ctx, errPanic, subject{})
	}
}

// check validates a message of ours before a handler sees it.
func check(ctx context.Context, method string, m any) error {
	if !strings.HasPrefix(method, ourServices) {
		return nil
	}
	msg, ok := m.(proto.Message)
	if !ok {
		return statusOf(ctx, errUnchecked, subject{})
	}
	about := subject{}
	if f, ok := m.(interface{ GetFloor() string }); ok && len(f.GetFloor()) <= maxNameLength {
		about.floor = f.GetFloor()
		note(ctx, about.floor, 0)
	}
	return statusOf(ctx, validate(msg), about)
}

// bound is the most time a unary call may take, whatever its client says.
func (s *Server) bound(m any) time.Duration {
	d := s.cfg.CallTimeout
	switch r := m.(type) {
	case *pb.PlanRequest:
		d = prepareGrace + s.cfg.PlanWait + s.budget(r.Options).Duration
	case *pb.ReplanRequest:
		d = prepareGrace + s.cfg.PlanWait + s.budget(r.Previous.GetOptions()).Duration
		if r.Options != nil {
			d = prepareGrace + s.cfg.PlanWait + s.budget(r.Options).Duration
		}
	case *pb.CompareRoadmapsRequest:
		d = prepareGrace + s.cfg.PlanWait + compareBudget(r)
	}
	if r, ok := m.(interface{ GetVersion() *pb.VersionSelector }); ok {
		d += seconds(r.GetVersion().GetMaxWaitS())
	}
	return d
}

// unary is the one interceptor of unary calls.
func (s *Server) unary(ctx context.Context, req any, info *grpc.UnaryServerInfo, handler grpc.UnaryHandler) (resp any, err error) {
	start := time.Now()
	ctx, record := newCall(ctx)
	defer func() { s.finish(ctx, record, info.FullMethod, start, err) }()
	defer s.recovered(ctx, record, &err)
	if err := grpc.SetHeader(ctx, metadata.Pairs(requestIDHeader, record.id)); err != nil {
		return nil, err
	}
	if err := check(ctx, info.FullMethod, req); err != nil {
		return nil, err
	}
	if !strings.HasPrefix(info.FullMethod, ourServices) {
		return handler(ctx, req)
	}
	ctx, cancel := context.WithTimeout(ctx, s.bound(req))
	defer cancel()
	return handler(ctx, req)
}

// stream is the one interceptor of streams. A stream has no deadline of the
// server's, but it ends when the server drains.
func (s *Server) stream(srv any, ss grpc.ServerStream, info *grpc.StreamServerInfo, handler grpc.StreamHandler) (err error) {
	start := time.Now()
	ctx, record := newCall(ss.Context())
	defer func() { s.finish(ctx, record, info.FullMethod, start, err) }()
	defer s.recovered(ctx, record, &err)
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	defer context.AfterFunc(s.draining, func() { cancel(errDraining) })()
	if err := ss.SetHeader(metadata.Pairs(requestIDHeader, record.id)); err != nil {
		return err
	}
	return handler(srv, &checkedStream{ServerStream: ss, ctx: ctx, method: info.FullMethod})
}

// checkedStream checks every message it receives and ends with the server's drain.
type checkedStream struct {
	grpc.ServerStream
	ctx    context.Context
	method string
}

func (c *checkedStream) Context() context.Context { return c.ctx }

func (c *checkedStream) RecvMsg(m any) error {
	if strings.HasPrefix(c.method, ourServices) {
		if err := c.ServerStream.RecvMsg(m); err != nil {
			return err
		}
		return check(c.ctx, c.method, m)
	}
	// A foreign handler (reflection) may sit here for as long as its client likes;
	// the drain must not wait for it. The goroutine ends with the stream.
	got := make(chan error, 1)
	go func() { got <- c.ServerStream.RecvMsg(m) }()
	select {
	case err := <-got:
		return err
	case <-c.ctx.Done():
		return statusOf(c.ctx, c.ctx.Err(), subject{})
	}
}
