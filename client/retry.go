package client

import (
	"cmp"
	"context"
	"fmt"
	"math/rand/v2"
	"time"

	"github.com/google/uuid"
	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/reflect/protoreflect"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// requestIDHeader names the call in the server's log. A call sent again keeps it.
const requestIDHeader = "x-request-id"

// backoffRange is the first and the longest wait between tries.
type backoffRange struct{ first, most time.Duration }

// after draws the wait after the n-th failed try, n from 1: exponential, capped,
// uniform over the upper half so that robots that lost the same access point
// do not come back together.
func (b backoffRange) after(n int) time.Duration {
	d := b.first
	for ; n > 1 && d < b.most; n-- {
		d *= 2
	}
	d = min(d, b.most)
	return d/2 + rand.N(d/2+1)
}

// unary gives a call its deadline, its request id, and sends it again while that
// may help.
func (c *Client) unary(ctx context.Context, method string, req, reply any, cc *grpc.ClientConn, invoke grpc.UnaryInvoker, opts ...grpc.CallOption) error {
	if _, ok := ctx.Deadline(); !ok {
		var cancel context.CancelFunc
		ctx, cancel = context.WithTimeout(ctx, c.timeout(req))
		defer cancel()
	}
	id := uuid.NewString()
	if m, ok := req.(proto.Message); ok {
		req, id = withRequestID(m, id)
	}
	ctx = withHeader(ctx, id)
	err := c.again(ctx, method, func() error { return invoke(ctx, method, req, reply, cc, opts...) })
	if code := status.Code(err); code == codes.Internal || code == codes.Unknown {
		// The server's log has the cause, under this id.
		return fmt.Errorf("client: request id %s: %w", headerOf(ctx), err)
	}
	return err
}

// stream names a stream in the server's log.
func (c *Client) stream(ctx context.Context, desc *grpc.StreamDesc, cc *grpc.ClientConn, method string, open grpc.Streamer, opts ...grpc.CallOption) (grpc.ClientStream, error) {
	return open(withHeader(ctx, uuid.NewString()), desc, cc, method, opts...)
}

// again runs try until it succeeds, fails for good, or ctx ends. gRPC's own retries
// would stop at five and let the deadline pass in a wait, with the cause lost.
func (c *Client) again(ctx context.Context, what string, try func() error) error {
	var before error
	for n := 1; ; n++ {
		err := try()
		if err == nil {
			return nil
		}
		wait, ok := retryAfter(err)
		if !ok {
			// The server's clock may find the deadline over before this one's does.
			if over := cmp.Or(ctx.Err(), deadlineOf(err)); before != nil && over != nil {
				return givenUp(what, n, over, before)
			}
			return err
		}
		before = err
		if c.cfg.maxTries > 0 && n >= c.cfg.maxTries {
			return fmt.Errorf("client: %s: given up after %d tries: %w", what, n, err)
		}
		wait += c.cfg.backoff.after(n)
		if end, has := ctx.Deadline(); has && time.Until(end) < wait {
			return givenUp(what, n, context.DeadlineExceeded, err)
		}
		if ctxErr := sleep(ctx, wait); ctxErr != nil {
			return givenUp(what, n, ctxErr, err)
		}
	}
}

// givenUp is the error of a call whose context ended: errors.Is tells how, and the
// code and details are those of the last failure that the service or the
// connection had.
func givenUp(what string, tries int, ended, last error) error {
	return fmt.Errorf("client: %s: given up after %d tries (%w): %w", what, tries, ended, last)
}

// deadlineOf is context.DeadlineExceeded for an error with that code.
func deadlineOf(err error) error {
	if status.Code(err) == codes.DeadlineExceeded {
		return context.DeadlineExceeded
	}
	return nil
}

// retryAfter says whether a failed call may be sent again and how long the server
// asks to wait first. UNAVAILABLE may always be; RESOURCE_EXHAUSTED only when the
// server says when.
func retryAfter(err error) (time.Duration, bool) {
	st, ok := status.FromError(err)
	if !ok {
		return 0, false
	}
	for _, d := range st.Details() {
		if info, is := d.(*errdetails.RetryInfo); is {
			wait := max(info.GetRetryDelay().AsDuration(), 0)
			return wait, st.Code() == codes.Unavailable || st.Code() == codes.ResourceExhausted
		}
	}
	return 0, st.Code() == codes.Unavailable
}

// sleep waits, or gives ctx's error when that ends first.
func sleep(ctx context.Context, d time.Duration) error {
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-t.C:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}

// withHeader names the call, unless the caller has.
func withHeader(ctx context.Context, id string) context.Context {
	if headerOf(ctx) != "" {
		return ctx
	}
	return metadata.AppendToOutgoingContext(ctx, requestIDHeader, id)
}

// headerOf is the name of the call; empty when it has none yet.
func headerOf(ctx context.Context) string {
	md, _ := metadata.FromOutgoingContext(ctx)
	if ids := md.Get(requestIDHeader); len(ids) > 0 {
		return ids[0]
	}
	return ""
}

// withRequestID gives m its request id where its message has one and it is empty,
// on a shallow copy: the caller's message stays as it is. It gives back the id
// that the call goes by.
func withRequestID(m proto.Message, id string) (proto.Message, string) {
	r := m.ProtoReflect()
	field := r.Descriptor().Fields().ByName("request_id")
	if field == nil {
		return m, id
	}
	if have := r.Get(field).String(); have != "" {
		return m, have
	}
	c := r.New()
	r.Range(func(fd protoreflect.FieldDescriptor, v protoreflect.Value) bool {
		c.Set(fd, v)
		return true
	})
	c.Set(field, protoreflect.ValueOfString(id))
	return c.Interface(), id
}

// timeout is the deadline of a call whose context has none.
func (c *Client) timeout(req any) time.Duration {
	t := &c.cfg.timeouts
	seconds := func(s float64) time.Duration {
		if s > 0 && s <= 3600 {
			return time.Duration(s * float64(time.Second))
		}
		return 0
	}
	switch m := req.(type) {
	case *wideberthv1.PlanRequest:
		return t.Plan + seconds(m.GetOptions().GetTimeBudgetS()) + seconds(m.GetVersion().GetMaxWaitS())
	case *wideberthv1.ReplanRequest:
		return t.Plan + seconds(m.GetOptions().GetTimeBudgetS()) + seconds(m.GetVersion().GetMaxWaitS())
	case *wideberthv1.PlanManyRequest:
		budget := seconds(cmp.Or(m.GetTimeBudgetS(), defaultManyBudgetS))
		return t.Plan + budget + seconds(m.GetVersion().GetMaxWaitS())
	case *wideberthv1.CompareRoadmapsRequest:
		budget := seconds(cmp.Or(m.GetTimeBudgetS(), defaultManyBudgetS))
		return t.Plan + budget + seconds(m.GetVersion().GetMaxWaitS())
	case *wideberthv1.GetVersionRequest:
		return t.Read + seconds(m.GetVersion().GetMaxWaitS())
	case *wideberthv1.CreateFloorRequest, *wideberthv1.PushPatchRequest, *wideberthv1.RestoreVersionRequest:
		return t.Push
	}
	return t.Read
}
