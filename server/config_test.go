package server

import (
	"bytes"
	"errors"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
	"time"

	"github.com/spf13/pflag"
)

func load(t *testing.T, file string, env []string, args ...string) (Config, error) {
	t.Helper()
	fs := pflag.NewFlagSet("serve", pflag.ContinueOnError)
	AddFlags(fs, DefaultConfig())
	if file != "" {
		path := filepath.Join(t.TempDir(), "wideberth.yaml")
		if err := os.WriteFile(path, []byte(file), 0o600); err != nil {
			t.Fatal(err)
		}
		args = append(args, "--config", path)
	}
	if err := fs.Parse(args); err != nil {
		t.Fatal(err)
	}
	return LoadConfig(DefaultConfig(), fs, env)
}

func TestDefaultConfigIsValid(t *testing.T) {
	if err := DefaultConfig().Validate(); err != nil {
		t.Fatal(err)
	}
}

// A flag wins over a variable, a variable over the file, the file over the default.
func TestPrecedence(t *testing.T) {
	file := "worlds: 2\nplanners: 3\nplan_queue: 4\n"
	c, err := load(t, file, []string{"WIDEBERTH_WORLDS=5", "WIDEBERTH_PLANNERS=6", "HOME=/", "WIDEBERTH_SERVER=hall:7443", "WIDEBERTH_AUTHOR=shift"}, "--worlds", "7")
	if err != nil {
		t.Fatal(err)
	}
	if c.Worlds != 7 || c.Planners != 6 || c.PlanQueue != 4 || c.MaxStreams != 128 {
		t.Errorf("worlds %d, planners %d, plan_queue %d, max_streams %d; wanted 7 (flag), 6 (variable), 4 (file), 128 (default)", c.Worlds, c.Planners, c.PlanQueue, c.MaxStreams)
	}
}

// A container platform that runs a service named "wideberth" puts its address and
// ports into every environment beside it. They are no settings, and no mistakes.
func TestServiceLinksAreNoSettings(t *testing.T) {
	if _, err := load(t, "", []string{
		"WIDEBERTH_SERVICE_HOST=10.0.0.7", "WIDEBERTH_SERVICE_PORT=7443", "WIDEBERTH_SERVICE_PORT_GRPC=7443",
		"WIDEBERTH_PORT=tcp://10.0.0.7:7443", "WIDEBERTH_PORT_7443_TCP=tcp://10.0.0.7:7443", "WIDEBERTH_PORT_7443_TCP_PROTO=tcp",
		"WIDEBERTH_PORT_7443_TCP_PORT=7443", "WIDEBERTH_PORT_7443_TCP_ADDR=10.0.0.7",
	}); err != nil {
		t.Error(err)
	}
	for _, wrong := range []string{"WIDEBERTH_SERVICE=1", "WIDEBERTH_PORT_7443=1", "WIDEBERTH_PORTS=1"} {
		if _, err := load(t, "", []string{wrong}); err == nil {
			t.Errorf("%s was taken", wrong)
		}
	}
}

// All faults are told at once, each with its key and where it came from.
func TestAllConfigFaultsTogether(t *testing.T) {
	_, err := load(t, "nosuch: 1\nheartbeat: 5s\nworlds: [1]\ndata: a\ndata: b\n",
		[]string{"WIDEBERTH_PLANNERS=many", "WIDEBERTH_NO_SUCH=1"}, "--listen", "nowhere")
	var e *ConfigError
	if !errors.As(err, &e) {
		t.Fatalf("got %v, wanted a *ConfigError", err)
	}
	text := err.Error()
	for _, want := range []string{
		"line 1: nosuch: no such key",
		"heartbeat (from ", "wideberth.yaml line 2): 5s, wanted 50ms to 2s",
		"line 3: worlds: wanted one value",
		"line 5: data: set twice",
		"WIDEBERTH_NO_SUCH (from environment): no such variable",
		`planners (from WIDEBERTH_PLANNERS): "many", wanted a whole number`,
		`listen (from --listen): "nowhere", wanted host:port`,
	} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is not in:\n%s", want, text)
		}
	}
}

// What --print-config writes is a file that gives the same configuration again.
func TestPrintedConfigReadsBack(t *testing.T) {
	c := DefaultConfig()
	c.Listen, c.Data, c.Planners, c.PlanWait, c.Reflection = "[::1]:9", "a \"b\"\n", 3, 1500*time.Millisecond, false
	var b bytes.Buffer
	if err := c.WriteYAML(&b); err != nil {
		t.Fatal(err)
	}
	got, err := load(t, b.String(), nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, k := range knobs {
		if g, w := k.get(&got), k.get(&c); g != w {
			t.Errorf("%s: %q, wanted %q", k.key, g, w)
		}
	}
}

// Every field of Config is a knob: one that cannot be set from outside would be
// forgotten.
func TestEveryFieldIsAKnob(t *testing.T) {
	var c Config
	knobOf := map[any]string{}
	for _, k := range knobs {
		if other := knobOf[k.field(&c)]; other != "" {
			t.Errorf("%s and %s share a field", k.key, other)
		}
		knobOf[k.field(&c)] = k.key
	}
	v := reflect.ValueOf(&c).Elem()
	for i := range v.NumField() {
		if name := v.Type().Field(i); name.IsExported() && knobOf[v.Field(i).Addr().Interface()] == "" {
			t.Errorf("Config.%s has no knob", name.Name)
		}
	}
}

func TestMissingConfigFileIsAFault(t *testing.T) {
	fs := pflag.NewFlagSet("serve", pflag.ContinueOnError)
	AddFlags(fs, DefaultConfig())
	_, err := LoadConfig(DefaultConfig(), fs, []string{"WIDEBERTH_CONFIG=" + filepath.Join(t.TempDir(), "none.yaml")})
	if err == nil || !strings.Contains(err.Error(), "none.yaml (from WIDEBERTH_CONFIG)") {
		t.Errorf("got %v, wanted the file and the variable named", err)
	}
}

func TestLoopback(t *testing.T) {
	for addr, want := range map[string]bool{
		"127.0.0.1:7443": true, "[::1]:7443": true, "localhost:1": true,
		"0.0.0.0:7443": false, "[::]:7443": false, "192.168.4.2:7443": false, ":7443": false,
	} {
		if got := loopback(addr); got != want {
			t.Errorf("%s: %v, wanted %v", addr, got, want)
		}
	}
}

func FuzzConfigFile(f *testing.F) {
	f.Add([]byte("listen: \"127.0.0.1:1\"\nworlds: 3\n"))
	f.Add([]byte("a: &x [*x]\n"))
	f.Add([]byte("? [a, b]\n: c\n"))
	path := filepath.Join(f.TempDir(), "c.yaml")
	f.Fuzz(func(t *testing.T, text []byte) {
		if err := os.WriteFile(path, text, 0o600); err != nil {
			t.Fatal(err)
		}
		c := DefaultConfig()
		c.from = map[string]string{}
		readFile(&c, path, "--config")
		for key := range c.from {
			if !strings.Contains(string(text), key) {
				t.Errorf("%s was set from a file without it", key)
			}
		}
	})
}
