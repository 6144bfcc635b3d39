package server

import (
	"errors"
	"fmt"
	"net"
	"os"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/spf13/pflag"
	"go.yaml.in/yaml/v3"
)

// envPrefix starts the name of every environment variable the daemon reads.
const envPrefix = "WIDEBERTH_"

// configKey names the file itself; it can be a flag or a variable, not a file key.
const configKey = "config"

// maxConfigFileBytes bounds a configuration file; the longest useful one has a few
// kilobytes.
const maxConfigFileBytes = 1 << 20

// neighbourVariables start with envPrefix and belong to other programs of the
// project: the operator's tool and the tests.
var neighbourVariables = []string{"WIDEBERTH_SERVER", "WIDEBERTH_AUTHOR", "WIDEBERTH_SLOW", "WIDEBERTH_GRID_BENCHMARK"}

// serviceLink matches the variables that container platforms put into every
// neighbour of a service named "wideberth": its address and ports, nothing to do
// with the configuration.
var serviceLink = regexp.MustCompile(`^WIDEBERTH_(SERVICE_HOST|SERVICE_PORT(_.+)?|PORT|PORT_\d+_(TCP|UDP|SCTP)(_(PROTO|PORT|ADDR))?)$`)

// knob is one thing that can be set. The flag is --key with dashes, the variable
// WIDEBERTH_KEY in capitals, the file key the key itself.
type knob struct {
	key   string
	usage string            // meaning and range, one line
	field func(*Config) any // pointer: *string, *int, *bool or *time.Duration
	wrong func(c *Config) string
}

// knobs is the one table that flags, variables, the file, the checks and
// --print-config are made from.
var knobs = []knob{
	{"listen", "Address for gRPC, host:port; port 0 lets the system choose.",
		func(c *Config) any { return &c.Listen }, wrongListen},
	{"data", "The journal's file. Empty keeps everything in a temporary file that goes with the process.",
		func(c *Config) any { return &c.Data }, nil},
	{"accept_lost_commit", "Serve a journal whose newest commit may be missing, since one of its two leading pages is damaged; without a backup only, for one start.",
		func(c *Config) any { return &c.AcceptLostCommit }, nil},
	{"plan_timeout", "How long a search may take when the request names no time_budget_s, 10ms to 30s.",
		func(c *Config) any { return &c.PlanTimeout }, within(func(c *Config) time.Duration { return c.PlanTimeout }, 10*time.Millisecond, 30*time.Second)},
	{"call_timeout", "Bound on every other unary call, 100ms to 10m.",
		func(c *Config) any { return &c.CallTimeout }, within(func(c *Config) time.Duration { return c.CallTimeout }, 100*time.Millisecond, 10*time.Minute)},
	{"drain_timeout", "How long calls under way may go on once the server is told to stop, 0s to 5m.",
		func(c *Config) any { return &c.DrainTimeout }, within(func(c *Config) time.Duration { return c.DrainTimeout }, 0, 5*time.Minute)},
	{"route_valid_for", "How long a controller may act on a route without word from the server, 1s to 10m.",
		func(c *Config) any { return &c.RouteValidFor }, within(func(c *Config) time.Duration { return c.RouteValidFor }, time.Second, 10*time.Minute)},
	{"heartbeat", "How often a quiet watch names the head, 50ms to 2s.",
		func(c *Config) any { return &c.Heartbeat }, within(func(c *Config) time.Duration { return c.Heartbeat }, 50*time.Millisecond, 2*time.Second)},
	{"planners", "Plans computed at once, 0 to 4096; 0 asks for two for each processor.",
		func(c *Config) any { return &c.Planners }, within(func(c *Config) int { return c.Planners }, 0, 4096)},
	{"plan_queue", "Plans that may wait for a free planner, 0 to 100000; more are refused.",
		func(c *Config) any { return &c.PlanQueue }, within(func(c *Config) int { return c.PlanQueue }, 0, 100_000)},
	{"plan_wait", "Longest wait for a free planner before a plan is refused, 0s to 30s.",
		func(c *Config) any { return &c.PlanWait }, within(func(c *Config) time.Duration { return c.PlanWait }, 0, 30*time.Second)},
	{"worlds", "Versions beside the heads that are kept ready to plan on, 1 to 10000.",
		func(c *Config) any { return &c.Worlds }, within(func(c *Config) int { return c.Worlds }, 1, 10_000)},
	{"hold_versions", "How long a version stays readable after a route was last planned on it, 10m to 24h.",
		func(c *Config) any { return &c.HoldVersions }, within(func(c *Config) time.Duration { return c.HoldVersions }, 10*time.Minute, 24*time.Hour)},
	{"keep_versions", "Versions of each floor that stay in memory, 1 to 1000000.",
		func(c *Config) any { return &c.KeepVersions }, within(func(c *Config) int { return c.KeepVersions }, 1, 1_000_000)},
	{"snapshot_every", "Versions between the journal's snapshots, 1 to 100000.",
		func(c *Config) any { return &c.SnapshotEvery }, within(func(c *Config) int { return c.SnapshotEvery }, 1, 100_000)},
	{"max_message_bytes", "Bound on a message in either direction, 2097152 to 268435456.",
		func(c *Config) any { return &c.MaxMessageBytes }, within(func(c *Config) int { return c.MaxMessageBytes }, 2<<20, 256<<20)},
	{"max_streams", "Calls under way on one connection, 1 to 100000.",
		func(c *Config) any { return &c.MaxStreams }, within(func(c *Config) int { return c.MaxStreams }, 1, 100_000)},
	{"max_connection_age", "Age at which a connection is closed gently, 0s (never) or 10s to 720h.",
		func(c *Config) any { return &c.MaxConnectionAge }, wrongAge},
	{"reflection", "Whether tools may list the services.",
		func(c *Config) any { return &c.Reflection }, nil},
	{"log_level", "Least severe level that is logged: debug, info, warn or error.",
		func(c *Config) any { return &c.LogLevel }, oneOf(func(c *Config) string { return c.LogLevel }, "debug", "info", "warn", "error")},
	{"log_format", "json, one object a line, or console, for people.",
		func(c *Config) any { return &c.LogFormat }, oneOf(func(c *Config) string { return c.LogFormat }, "json", "console")},
}

func within[T int | time.Duration](get func(*Config) T, lo, hi T) func(*Config) string {
	return func(c *Config) string {
		if v := get(c); v < lo || v > hi {
			return fmt.Sprintf("%v, wanted %v to %v", v, lo, hi)
		}
		return ""
	}
}

func oneOf(get func(*Config) string, wanted ...string) func(*Config) string {
	return func(c *Config) string {
		if v := get(c); !slices.Contains(wanted, v) {
			return fmt.Sprintf("%q, wanted one of %s", v, strings.Join(wanted, ", "))
		}
		return ""
	}
}

func wrongListen(c *Config) string {
	_, port, err := net.SplitHostPort(c.Listen)
	if err != nil {
		return fmt.Sprintf("%q, wanted host:port", c.Listen)
	}
	if n, err := strconv.Atoi(port); err != nil || n < 0 || n > 65535 {
		return fmt.Sprintf("%q, wanted a port from 0 to 65535", c.Listen)
	}
	return ""
}

func wrongAge(c *Config) string {
	if a := c.MaxConnectionAge; a != 0 && (a < 10*time.Second || a > 720*time.Hour) {
		return fmt.Sprintf("%v, wanted 0s or 10s to 720h", a)
	}
	return ""
}

func (k knob) problem(c *Config) string {
	if k.wrong == nil {
		return ""
	}
	return k.wrong(c)
}

func (k knob) flag() string     { return strings.ReplaceAll(k.key, "_", "-") }
func (k knob) variable() string { return envPrefix + strings.ToUpper(k.key) }

// set parses text into the knob's field.
func (k knob) set(c *Config, text string) error {
	var err error
	switch p := k.field(c).(type) {
	case *string:
		*p = text
	case *int:
		var n int
		if n, err = strconv.Atoi(text); err != nil {
			return fmt.Errorf("%q, wanted a whole number", text)
		}
		*p = n
	case *bool:
		var b bool
		if b, err = strconv.ParseBool(text); err != nil {
			return fmt.Errorf("%q, wanted true or false", text)
		}
		*p = b
	case *time.Duration:
		var d time.Duration
		if d, err = time.ParseDuration(text); err != nil {
			return fmt.Errorf("%q, wanted a duration such as 30s", text)
		}
		*p = d
	}
	return nil
}

// get is the knob's value as text that set understands.
func (k knob) get(c *Config) string {
	switch p := k.field(c).(type) {
	case *string:
		return *p
	case *int:
		return strconv.Itoa(*p)
	case *bool:
		return strconv.FormatBool(*p)
	case *time.Duration:
		return p.String()
	}
	return ""
}

// yaml is the knob's value as it stands in a file.
func (k knob) yaml(c *Config) string {
	if p, ok := k.field(c).(*string); ok {
		return strconv.Quote(*p)
	}
	return k.get(c)
}

func (k knob) typeName() string {
	switch k.field(&Config{}).(type) {
	case *int:
		return "int"
	case *bool:
		return "bool"
	case *time.Duration:
		return "duration"
	}
	return "string"
}

// flagValue holds what one flag was given, until LoadConfig lays it over the rest.
type flagValue struct {
	knob knob
	text string
}

func (v *flagValue) String() string     { return v.text }
func (v *flagValue) Type() string       { return v.knob.typeName() }
func (v *flagValue) Set(s string) error { v.text = s; return v.knob.set(&Config{}, s) }

// AddFlags defines a flag for every knob, and --config for the file, with def's
// values shown as the defaults.
func AddFlags(fs *pflag.FlagSet, def Config) {
	fs.String(configKey, "", "YAML file with any of the keys that --print-config shows ("+envPrefix+"CONFIG)")
	for _, k := range knobs {
		f := fs.VarPF(&flagValue{knob: k, text: k.get(&def)}, k.flag(), "", k.usage+" ("+k.variable()+")")
		if k.typeName() == "bool" {
			f.NoOptDefVal = "true"
		}
	}
}

// LoadConfig lays flags over environment variables over the file over def, and
// checks the outcome. Unknown file keys and unknown WIDEBERTH_ variables are
// errors. It returns every fault at once, as a *ConfigError. fs must have been
// given to AddFlags and parsed; environ is as os.Environ gives it.
func LoadConfig(def Config, fs *pflag.FlagSet, environ []string) (Config, error) {
	c := def
	c.from = map[string]string{}
	var faults []string
	env, unknown := wideberthVariables(environ)
	faults = append(faults, unknown...)

	file, source := env[envPrefix+"CONFIG"], envPrefix+"CONFIG"
	if f := fs.Lookup(configKey); f != nil && f.Changed {
		file, source = f.Value.String(), "--config"
	}
	if file != "" {
		faults = append(faults, readFile(&c, file, source)...)
	}
	lay := func(k knob, text, source string) {
		if err := k.set(&c, text); err != nil {
			faults = append(faults, fmt.Sprintf("%s (from %s): %v", k.key, source, err))
			return
		}
		c.from[k.key] = source
	}
	for _, k := range knobs {
		if text, ok := env[k.variable()]; ok {
			lay(k, text, k.variable())
		}
	}
	for _, k := range knobs {
		if f := fs.Lookup(k.flag()); f != nil && f.Changed {
			lay(k, f.Value.String(), "--"+k.flag())
		}
	}
	var wrong *ConfigError
	if errors.As(c.Validate(), &wrong) {
		faults = append(faults, wrong.Faults...)
	}
	if len(faults) > 0 {
		return c, &ConfigError{Faults: faults}
	}
	return c, nil
}

// wideberthVariables picks the daemon's variables out of an environment and
// faults those that nothing reads, with the nearest names.
func wideberthVariables(environ []string) (env map[string]string, faults []string) {
	env = map[string]string{}
	known := []string{envPrefix + "CONFIG"}
	for _, k := range knobs {
		known = append(known, k.variable())
	}
	for _, e := range environ {
		name, value, _ := strings.Cut(e, "=")
		switch {
		case !strings.HasPrefix(name, envPrefix) || slices.Contains(neighbourVariables, name) || serviceLink.MatchString(name):
		case slices.Contains(known, name):
			env[name] = value
		default:
			faults = append(faults, fmt.Sprintf("%s (from environment): no such variable; the known ones are %s", name, strings.Join(known, ", ")))
		}
	}
	slices.Sort(faults)
	return env, faults
}

// readFile lays a YAML file over c.
func readFile(c *Config, file, source string) (faults []string) {
	bad := func(format string, a ...any) {
		faults = append(faults, fmt.Sprintf("%s (from %s): ", file, source)+fmt.Sprintf(format, a...))
	}
	info, err := os.Stat(file)
	if err != nil {
		bad("%v", err)
		return faults
	}
	if info.Size() > maxConfigFileBytes {
		bad("%d bytes, wanted at most %d", info.Size(), maxConfigFileBytes)
		return faults
	}
	text, err := os.ReadFile(file)
	if err != nil {
		bad("%v", err)
		return faults
	}
	var doc yaml.Node
	if err := yaml.Unmarshal(text, &doc); err != nil {
		bad("%v", err)
		return faults
	}
	if len(doc.Content) == 0 {
		return nil // an empty file sets nothing
	}
	root := doc.Content[0]
	if root.Kind != yaml.MappingNode {
		bad("line %d: wanted a mapping of keys to values", root.Line)
		return faults
	}
	for i := 0; i+1 < len(root.Content); i += 2 {
		key, value := root.Content[i], root.Content[i+1]
		at := fmt.Sprintf("%s line %d", file, key.Line)
		n := slices.IndexFunc(knobs, func(k knob) bool { return k.key == key.Value })
		switch {
		case n < 0:
			bad("line %d: %s: no such key", key.Line, key.Value)
		case value.Kind != yaml.ScalarNode:
			bad("line %d: %s: wanted one value", key.Line, key.Value)
		case c.from[key.Value] != "":
			bad("line %d: %s: set twice", key.Line, key.Value)
		default:
			if err := knobs[n].set(c, value.Value); err != nil {
				bad("line %d: %s: %v", key.Line, key.Value, err)
				continue
			}
			c.from[key.Value] = at
		}
	}
	return faults
}
