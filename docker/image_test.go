// Package docker holds the image and the compose file of the service. Its tests
// carry out what the two files say, without a container engine: the build line,
// the command, the health check, and one real call.
package docker

import (
	"context"
	"encoding/json"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"

	"go.yaml.in/yaml/v3"

	"example.com/wideberth/client"
	"example.com/wideberth/proto/wideberth/v1"
)

// compose is the part of the compose file that the tests carry out.
type compose struct {
	Services map[string]struct {
		Command     []string          `yaml:"command"`
		Ports       []string          `yaml:"ports"`
		Environment map[string]string `yaml:"environment"`
		Healthcheck struct {
			Test []string `yaml:"test"`
		} `yaml:"healthcheck"`
	} `yaml:"services"`
}

// instructions gives the Dockerfile's lines that start with word, less that word.
func instructions(t *testing.T, word string) []string {
	t.Helper()
	text, err := os.ReadFile("Dockerfile")
	if err != nil {
		t.Fatal(err)
	}
	var found []string
	for line := range strings.Lines(string(text)) {
		if rest, ok := strings.CutPrefix(strings.TrimSpace(line), word+" "); ok {
			found = append(found, rest)
		}
	}
	return found
}

// execForm is the JSON array at the end of an instruction.
func execForm(t *testing.T, instruction string) []string {
	t.Helper()
	var words []string
	if err := json.Unmarshal([]byte(instruction[strings.Index(instruction, "["):]), &words); err != nil {
		t.Fatalf("%s: not in exec form, which an image without a shell needs: %v", instruction, err)
	}
	return words
}

// TestImageServes builds the binary by the Dockerfile's own line, starts it with the
// compose file's command, asks the health check for its verdict and plans nothing
// more than a list of floors.
func TestImageServes(t *testing.T) {
	text, err := os.ReadFile("compose.yaml")
	if err != nil {
		t.Fatal(err)
	}
	var c compose
	if err := yaml.Unmarshal(text, &c); err != nil {
		t.Fatal(err)
	}
	service, ok := c.Services["wideberth"]
	if !ok {
		t.Fatal("compose.yaml has no service wideberth")
	}

	if cmd := execForm(t, instructions(t, "CMD")[0]); !slices.Equal(cmd, service.Command) {
		t.Errorf("image runs %q, compose file %q", cmd, service.Command)
	}
	check := execForm(t, instructions(t, "HEALTHCHECK")[0])
	if !slices.Equal(append([]string{"CMD"}, check...), service.Healthcheck.Test) {
		t.Errorf("image checks %q, compose file %q", check, service.Healthcheck.Test)
	}
	for _, port := range service.Ports {
		if !strings.HasPrefix(port, "127.0.0.1:") {
			t.Errorf("port %s is published beyond this host, without transport security", port)
		}
	}

	dir := t.TempDir()
	binary := filepath.Join(dir, "wideberthd")
	build := regexp.MustCompile(`go build .*`).FindString(strings.Join(instructions(t, "RUN"), "\n"))
	args := strings.Fields(strings.ReplaceAll(build, "/out/wideberthd", binary))
	run := exec.Command(args[0], args[1:]...)
	run.Dir = ".."
	run.Env = append(os.Environ(), "CGO_ENABLED=0")
	if out, err := run.CombinedOutput(); err != nil {
		t.Fatalf("%s: %v\n%s", build, err, out)
	}

	addr := freeAddress(t)
	local := strings.NewReplacer("0.0.0.0:7443", addr, "127.0.0.1:7443", addr, "/data/", dir+"/")
	daemon := exec.Command(binary, translate(local, service.Command)...)
	for key, value := range service.Environment {
		daemon.Env = append(daemon.Env, key+"="+value)
	}
	var log strings.Builder
	daemon.Stderr = &log
	if err := daemon.Start(); err != nil {
		t.Fatal(err)
	}
	defer daemon.Process.Kill()

	healthy := false
	for deadline := time.Now().Add(20 * time.Second); !healthy && time.Now().Before(deadline); time.Sleep(50 * time.Millisecond) {
		healthy = exec.Command(binary, translate(local, check[1:])...).Run() == nil
	}
	if !healthy {
		t.Fatalf("the health check never passed; log:\n%s", log.String())
	}

	cl, err := client.Dial(addr)
	if err != nil {
		t.Fatal(err)
	}
	defer cl.Close()
	_, err = cl.CreateFloor(context.Background(), &wideberthv1.CreateFloorRequest{
		Floor: "image-test", Author: "image test",
		Settings: &wideberthv1.FloorSettings{Columns: 20, Rows: 20, InitialOccupancy: wideberthv1.Occupancy_OCCUPANCY_FREE},
	})
	if err != nil {
		t.Fatalf("first real call: %v", err)
	}
	if err := daemon.Process.Signal(syscall.SIGTERM); err != nil {
		t.Fatal(err)
	}
	if err := daemon.Wait(); err != nil {
		t.Errorf("stopping: %v; log:\n%s", err, log.String())
	}
	if _, err := os.Stat(filepath.Join(dir, "wideberth.db")); err != nil {
		t.Errorf("the journal is not in the volume: %v", err)
	}
}

func translate(r *strings.Replacer, words []string) []string {
	out := make([]string, len(words))
	for i, w := range words {
		out[i] = r.Replace(w)
	}
	return out
}

// freeAddress is a loopback address that nothing listens on.
func freeAddress(t *testing.T) string {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	return l.Addr().String()
}
