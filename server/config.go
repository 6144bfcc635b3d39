package server

import (
	"fmt"
	"io"
	"net"
	"runtime"
	"strings"
	"time"
)

// Config is everything that can be set. DefaultConfig gives the defaults, the
// table of knobs (knobs.go) the flag, variable and file key of each field with
// its meaning and range. A Config is a plain value: copy it, change fields, and
// hand it to New.
type Config struct {
	// Listen is the address for gRPC, host:port; port 0 lets the system choose.
	// Default "127.0.0.1:7443".
	Listen string
	// Data is the journal's file. Empty keeps everything in a temporary file that
	// goes with the process: for trials, tests and embedding. It is the default
	// here; the daemon's own default is "wideberth.db" in its working directory.
	Data string
	// AcceptLostCommit serves a journal file whose newest commit may be missing. The
	// file names its state on two pages that are written in turn; when one of them
	// is damaged (which a crash cannot do, a failing disk or a wrong copy can), the
	// other names the state one commit earlier. Whether the damaged page was the
	// newer one cannot be told, so the file is refused: a version that was
	// acknowledged may be gone, and controllers may hold routes that name it. Restore
	// a backup if there is one. Set this for one start when there is none, compare
	// the heads with what was last known, push again what is missing, and take it
	// off. Default false.
	AcceptLostCommit bool

	// PlanTimeout is how long a search may take when the request names no
	// time_budget_s. Default 5 s.
	PlanTimeout time.Duration
	// CallTimeout bounds every other unary call, however late the caller's own
	// deadline is. Default 30 s.
	CallTimeout time.Duration
	// DrainTimeout is how long calls under way may go on after Serve's context
	// ended; then they are cut. Default 10 s.
	DrainTimeout time.Duration

	// RouteValidFor is every route's valid_for_s. Default 30 s.
	RouteValidFor time.Duration
	// Heartbeat is how often a quiet WatchVersions stream names the head; the
	// contract wants 2 s or less. Default 1 s.
	Heartbeat time.Duration

	// Planners is how many plans are computed at once. 0 asks for two for each
	// processor the program may use.
	Planners int
	// PlanQueue is how many plans may wait for a free planner; more are refused
	// with RESOURCE_EXHAUSTED. Default 256.
	PlanQueue int
	// PlanWait is the longest that a plan waits for a free planner before it is
	// refused. Default 1 s.
	PlanWait time.Duration
	// Worlds is how many versions beside the heads are kept ready to plan on.
	// Default 16.
	Worlds int
	// HoldVersions is how long a version stays readable after a route was last
	// planned on it; the contract wants ten minutes or more. Default 10 min.
	HoldVersions time.Duration
	// KeepVersions is how many versions of each floor stay in memory. Default 1,000.
	KeepVersions int
	// SnapshotEvery is how many versions lie between the journal's snapshots,
	// which bound recovery. Default 200.
	SnapshotEvery int

	// MaxMessageBytes bounds a message in either direction. Default 16 MiB.
	MaxMessageBytes int
	// MaxStreams bounds the calls under way on one connection. Default 128.
	MaxStreams int
	// MaxConnectionAge closes connections, gently, that are older, so that
	// clients spread over servers. Default 0: never.
	MaxConnectionAge time.Duration
	// Reflection lets tools list the services. Default true.
	Reflection bool

	// LogLevel is the least severe level that is logged: debug, info, warn, error.
	// Default "info".
	LogLevel string
	// LogFormat is json, one object a line, or console, for people. Default "json".
	LogFormat string

	from map[string]string // knob key -> where its value came from; absent: default
}

// DefaultConfig is the configuration of a server that was told nothing.
func DefaultConfig() Config {
	return Config{
		Listen:          "127.0.0.1:7443",
		PlanTimeout:     5 * time.Second,
		CallTimeout:     30 * time.Second,
		DrainTimeout:    10 * time.Second,
		RouteValidFor:   30 * time.Second,
		Heartbeat:       time.Second,
		PlanQueue:       256,
		PlanWait:        time.Second,
		Worlds:          16,
		HoldVersions:    10 * time.Minute,
		KeepVersions:    1000,
		SnapshotEvery:   200,
		MaxMessageBytes: 16 << 20,
		MaxStreams:      128,
		Reflection:      true,
		LogLevel:        "info",
		LogFormat:       "json",
	}
}

// planners is Planners with its default filled in.
func (c Config) planners() int {
	if c.Planners > 0 {
		return c.Planners
	}
	return 2 * runtime.GOMAXPROCS(0)
}

// ConfigError lists everything that is wrong with a configuration, each fault
// naming the key, where its value came from, the value and what is wanted.
type ConfigError struct{ Faults []string }

// Error puts the faults into one line each.
func (e *ConfigError) Error() string {
	return "configuration: " + strings.Join(e.Faults, "\nconfiguration: ")
}

// Validate reports every fault at once, as a *ConfigError, or nil.
func (c Config) Validate() error {
	var faults []string
	for _, k := range knobs {
		if problem := k.problem(&c); problem != "" {
			faults = append(faults, fmt.Sprintf("%s (from %s): %s", k.key, c.source(k.key), problem))
		}
	}
	if len(faults) > 0 {
		return &ConfigError{Faults: faults}
	}
	return nil
}

// source is where a key's value came from.
func (c Config) source(key string) string {
	if s, ok := c.from[key]; ok {
		return s
	}
	return "default"
}

// WriteYAML writes the configuration as a file that LoadConfig reads back to the
// same values, each key under a comment with its meaning and where its value came
// from.
func (c Config) WriteYAML(w io.Writer) error {
	for _, k := range knobs {
		_, err := fmt.Fprintf(w, "# %s\n# From %s.\n%s: %s\n", k.usage, c.source(k.key), k.key, k.yaml(&c))
		if err != nil {
			return err
		}
	}
	return nil
}

// loopback says whether an address is reachable from this machine alone.
func loopback(addr string) bool {
	host, _, err := net.SplitHostPort(addr)
	if err != nil {
		return false
	}
	if host == "localhost" {
		return true
	}
	ip := net.ParseIP(host)
	return ip != nil && ip.IsLoopback()
}
