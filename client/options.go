package client

import (
	"fmt"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials"
)

// Timeouts are the deadlines of calls whose context has none. A field that is 0
// keeps its default.
type Timeouts struct {
	// Read bounds GetFloor, ListFloors (each page), ListVersions (each page),
	// GetVersion, CompareVersions and GuideOnce. Default 10 s. What a
	// VersionSelector asks to wait comes on top.
	Read time.Duration
	// Plan bounds Plan, Replan, PlanMany and CompareRoadmaps. Default 15 s. The request's
	// time budget (the latter two: the one for all, 60 s where there is none) and what its
	// VersionSelector asks to wait come on top.
	Plan time.Duration
	// Push bounds CreateFloor, PushPatch and RestoreVersion. Default 30 s.
	Push time.Duration
	// Content bounds ReadFloor, Stations, ShowRoadmap and ShowGrownSolids, from the first
	// message to the last. Default 2 min.
	Content time.Duration
}

var defaultTimeouts = Timeouts{
	Read:    10 * time.Second,
	Plan:    15 * time.Second,
	Push:    30 * time.Second,
	Content: 2 * time.Minute,
}

// Option sets how a Client behaves. See the With functions.
type Option func(*config)

type config struct {
	creds     credentials.TransportCredentials
	plaintext bool
	timeouts  Timeouts
	backoff   backoffRange
	maxTries  int
	quiet     time.Duration
	extra     []grpc.DialOption
}

func defaultConfig() config {
	return config{
		timeouts: defaultTimeouts,
		backoff:  backoffRange{first: 100 * time.Millisecond, most: 5 * time.Second},
		quiet:    missedHeartbeats*heartbeatEvery + heartbeatGrace,
	}
}

// WithTransportCredentials speaks TLS, or whatever the credentials say. Without it
// Dial speaks plaintext to loopback addresses and refuses any other.
func WithTransportCredentials(c credentials.TransportCredentials) Option {
	return func(cfg *config) { cfg.creds = c }
}

// WithPlaintext allows plaintext to an address that is not loopback: anyone on
// the network can then read and change what is said. It has no effect together
// with WithTransportCredentials.
func WithPlaintext() Option { return func(cfg *config) { cfg.plaintext = true } }

// WithTimeouts sets the deadlines of calls whose context has none.
func WithTimeouts(t Timeouts) Option {
	return func(cfg *config) {
		set := func(dst *time.Duration, v time.Duration) {
			if v != 0 {
				*dst = v
			}
		}
		set(&cfg.timeouts.Read, t.Read)
		set(&cfg.timeouts.Plan, t.Plan)
		set(&cfg.timeouts.Push, t.Push)
		set(&cfg.timeouts.Content, t.Content)
	}
}

// WithBackoff sets how long to wait before a call is sent again or a stream taken
// up again: the first wait, doubled each time up to the most, each drawn
// uniformly from half of it to all of it. Default 100 ms to 5 s.
func WithBackoff(first, most time.Duration) Option {
	return func(cfg *config) { cfg.backoff = backoffRange{first: first, most: most} }
}

// WithMaxTries bounds how often one call is sent. Default 0: until its context ends.
// Streams that are taken up again are not bounded by it.
func WithMaxTries(n int) Option { return func(cfg *config) { cfg.maxTries = n } }

// WithDialOptions hands options to gRPC, after the client's own: interceptors,
// a dialer, per-call credentials.
func WithDialOptions(o ...grpc.DialOption) Option {
	return func(cfg *config) { cfg.extra = append(cfg.extra, o...) }
}

// validate reports every fault at once.
func (cfg *config) validate() error {
	var faults []string
	bad := func(name string, d time.Duration) {
		if d < 0 {
			faults = append(faults, fmt.Sprintf("%s is %v, want above 0", name, d))
		}
	}
	bad("Timeouts.Read", cfg.timeouts.Read)
	bad("Timeouts.Plan", cfg.timeouts.Plan)
	bad("Timeouts.Push", cfg.timeouts.Push)
	bad("Timeouts.Content", cfg.timeouts.Content)
	if cfg.backoff.first <= 0 || cfg.backoff.most < cfg.backoff.first {
		faults = append(faults, fmt.Sprintf("backoff is %v to %v, want above 0 and rising", cfg.backoff.first, cfg.backoff.most))
	}
	if cfg.maxTries < 0 {
		faults = append(faults, fmt.Sprintf("max tries is %d, want 0 or more", cfg.maxTries))
	}
	if len(faults) > 0 {
		return fmt.Errorf("client: %q", faults)
	}
	return nil
}
