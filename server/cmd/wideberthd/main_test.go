package main

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"
)

// asDaemon makes the test's own binary behave as wideberthd in a child process.
const asDaemon = "TEST_AS_WIDEBERTHD"

func TestMain(m *testing.M) {
	if os.Getenv(asDaemon) != "" {
		os.Exit(run())
	}
	os.Exit(m.Run())
}

func daemon(t *testing.T, args ...string) *exec.Cmd {
	t.Helper()
	cmd := exec.CommandContext(t.Context(), os.Args[0], args...)
	cmd.Env = []string{asDaemon + "=1", "PATH=" + os.Getenv("PATH"), "TMPDIR=" + t.TempDir()}
	cmd.Dir = t.TempDir()
	return cmd
}

// exitOf runs the daemon's program to its end.
func exitOf(t *testing.T, args ...string) (code int, out, errOut string) {
	t.Helper()
	cmd := daemon(t, args...)
	var o, e bytes.Buffer
	cmd.Stdout, cmd.Stderr = &o, &e
	if err := cmd.Run(); err != nil && cmd.ProcessState == nil {
		t.Fatal(err)
	}
	return cmd.ProcessState.ExitCode(), o.String(), e.String()
}

// The whole life: serve on a free port, say which, answer the health check, drain on
// SIGTERM, exit 0, and leave the journal where the documentation says.
func TestServeUntilSIGTERM(t *testing.T) {
	cmd := daemon(t, "serve", "--listen", "127.0.0.1:0")
	var log bytes.Buffer
	cmd.Stderr = &log
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	line, err := bufio.NewReader(out).ReadString('\n')
	addr, ok := strings.CutPrefix(strings.TrimSpace(line), "listening on ")
	if err != nil || !ok {
		t.Fatalf("first line %q (%v), wanted the address", line, err)
	}
	if code, said, why := exitOf(t, "healthcheck", "--address", addr); code != 0 || said != "SERVING\n" {
		t.Errorf("healthcheck: exit %d, %q %q", code, said, why)
	}
	if code, _, _ := exitOf(t, "healthcheck", "--address", addr, "--service", "none"); code != exitUnreachable {
		t.Errorf("healthcheck of an unknown service: exit %d, wanted %d", code, exitUnreachable)
	}
	if code, _, why := exitOf(t, "serve", "--listen", addr, "--data", ""); code != exitFailure || !strings.Contains(why, "listen") {
		t.Errorf("a second server on the port: exit %d, %q", code, why)
	}
	if err := cmd.Process.Signal(syscall.SIGTERM); err != nil {
		t.Fatal(err)
	}
	if err := cmd.Wait(); err != nil {
		t.Errorf("after SIGTERM: %v\n%s", err, log.String())
	}
	if _, err := os.Stat(filepath.Join(cmd.Dir, defaultData)); err != nil {
		t.Error(err)
	}
}

func TestHealthcheckOfNobody(t *testing.T) {
	lis, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	addr := lis.Addr().String()
	lis.Close()
	start := time.Now()
	if code, _, why := exitOf(t, "healthcheck", "--address", addr, "--timeout", "200ms"); code != exitUnreachable || !strings.Contains(why, addr) {
		t.Errorf("exit %d, %q; wanted %d and the address", code, why, exitUnreachable)
	}
	if d := time.Since(start); d > 15*time.Second {
		t.Errorf("took %v with a timeout of 200 ms", d)
	}
}

func TestUsage(t *testing.T) {
	for _, c := range []struct {
		args []string
		says string
	}{
		{nil, "wideberthd: no command"},
		{[]string{"fly"}, `unknown command "fly"`},
		{[]string{"serve", "--no-such"}, "no-such"},
		{[]string{"serve", "extra"}, `"extra"`},
		{[]string{"serve", "--planners", "many"}, "planners"},
		{[]string{"serve", "--worlds", "0", "--listen", "nowhere"}, "wanted host:port"},
		{[]string{"version", "--output", "xml"}, "wanted text or json"},
		{[]string{"healthcheck", "--timeout", "0s"}, "wanted above 0s"},
	} {
		if code, _, why := exitOf(t, c.args...); code != exitUsage || !strings.Contains(why, c.says) {
			t.Errorf("%v: exit %d, %q; wanted %d and %q", c.args, code, why, exitUsage, c.says)
		}
	}
}

func TestVersionJSON(t *testing.T) {
	cmd := newRoot(nil)
	var out bytes.Buffer
	cmd.SetOut(&out)
	cmd.SetArgs([]string{"version", "--output", "json"})
	if err := cmd.ExecuteContext(context.Background()); err != nil {
		t.Fatal(err)
	}
	var b buildInfo
	if err := json.Unmarshal(out.Bytes(), &b); err != nil || b.Version == "" || b.Contract != "wideberth.v1" {
		t.Errorf("%s (%v)", out.String(), err)
	}
}

// What serve --print-config writes is a configuration file that serve takes.
func TestPrintConfig(t *testing.T) {
	_, text, _ := exitOf(t, "serve", "--print-config", "--worlds", "5")
	file := filepath.Join(t.TempDir(), "c.yaml")
	if err := os.WriteFile(file, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	code, again, why := exitOf(t, "serve", "--print-config", "--config", file)
	if code != 0 || !strings.Contains(again, "\nworlds: 5\n") || !strings.Contains(again, "data: \""+defaultData+"\"") {
		t.Errorf("exit %d, %q:\n%s", code, why, again)
	}
}
