package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net"
	"runtime"
	"runtime/debug"
	"time"

	"github.com/rs/zerolog"
	"github.com/spf13/cobra"
	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"
	healthpb "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/status"

	"example.com/wideberth/server"
	"example.com/wideberth/server/demo"
)

// defaultData is where serve keeps the journal when nothing else is said: in the
// working directory, so that an unconfigured server does not forget.
const defaultData = "wideberth.db"

// version is the release, set by the linker (-X main.version=...); without it the
// module's own version stands in.
var version string

// usageError is a wrong command line.
type usageError struct{ error }

func (e *usageError) Unwrap() error { return e.error }

// unreachableError is a server that did not answer.
type unreachableError struct{ error }

func (e *unreachableError) Unwrap() error { return e.error }

// newRoot makes the command tree; environ is as os.Environ gives it.
func newRoot(environ []string) *cobra.Command {
	root := &cobra.Command{
		Use:           "wideberthd",
		Short:         "Plans paths for mobile robots on versioned floor maps",
		SilenceUsage:  true,
		SilenceErrors: true,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) > 0 {
				return &usageError{fmt.Errorf("unknown command %q; wideberthd --help lists them", args[0])}
			}
			return nil
		},
		RunE: func(*cobra.Command, []string) error {
			return &usageError{errors.New("no command; wideberthd --help lists them")}
		},
	}
	root.SetFlagErrorFunc(func(_ *cobra.Command, err error) error { return &usageError{err} })
	root.AddCommand(newServe(environ), newHealthcheck(), demo.NewCommand(), newVersion())
	for _, c := range root.Commands() {
		c.Args = func(_ *cobra.Command, args []string) error {
			if len(args) > 0 {
				return &usageError{fmt.Errorf("unexpected argument %q", args[0])}
			}
			return nil
		}
	}
	return root
}

// daemonDefaults are the library's defaults but for the data file.
func daemonDefaults() server.Config {
	cfg := server.DefaultConfig()
	cfg.Data = defaultData
	return cfg
}

func newServe(environ []string) *cobra.Command {
	var printConfig bool
	cmd := &cobra.Command{
		Use:   "serve",
		Short: "Answer calls until SIGTERM or SIGINT",
		Long: `Answer calls until SIGTERM or SIGINT, then drain and exit.

Every setting can be a flag, an environment variable (in brackets below) or a key
of the YAML file named by --config; a flag wins over a variable, a variable over
the file, the file over the default. Unknown keys and WIDEBERTH_ variables are
errors. All faults are reported at once, and nothing is served then.

The address actually bound is printed on standard output, the log on standard
error. There is no TLS in this release: listen on loopback, or put a proxy that
authenticates in front.`,
		Example: `  wideberthd serve --listen 127.0.0.1:0 --data ""    # a trial, forgotten at the end
  wideberthd serve --config wideberth.yaml --log-format console
  wideberthd serve --print-config > wideberth.yaml`,
	}
	server.AddFlags(cmd.Flags(), daemonDefaults())
	cmd.Flags().BoolVar(&printConfig, "print-config", false, "Print the configuration in force, as a file for --config, and exit")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		cfg, err := server.LoadConfig(daemonDefaults(), cmd.Flags(), environ)
		if err != nil {
			return err
		}
		if printConfig {
			return cfg.WriteYAML(cmd.OutOrStdout())
		}
		return serve(cmd.Context(), cfg, cmd.OutOrStdout(), cmd.ErrOrStderr())
	}
	return cmd
}

func serve(ctx context.Context, cfg server.Config, out, errOut io.Writer) error {
	log, err := newLog(cfg, errOut)
	if err != nil {
		return err
	}
	s, err := server.New(ctx, cfg, log)
	if err != nil {
		return err
	}
	lis, err := net.Listen("tcp", cfg.Listen)
	if err != nil {
		return errors.Join(fmt.Errorf("listen: %w", err), s.Close())
	}
	if _, err := fmt.Fprintf(out, "listening on %s\n", lis.Addr()); err != nil {
		return errors.Join(err, lis.Close(), s.Close())
	}
	return s.Serve(ctx, lis)
}

// newLog makes the log that a valid configuration asks for.
func newLog(cfg server.Config, w io.Writer) (zerolog.Logger, error) {
	level, err := zerolog.ParseLevel(cfg.LogLevel)
	if err != nil {
		return zerolog.Logger{}, err
	}
	if cfg.LogFormat == "console" {
		w = zerolog.ConsoleWriter{Out: w, NoColor: true, TimeFormat: time.RFC3339}
	}
	return zerolog.New(w).Level(level).With().Timestamp().Logger(), nil
}

func newHealthcheck() *cobra.Command {
	var addr, service string
	var timeout time.Duration
	cmd := &cobra.Command{
		Use:   "healthcheck",
		Short: "Ask a running server whether it is serving",
		Long: `Ask a running server whether it is serving. Exit code 0 when it is, 1 when it
says it is not, 5 when it does not answer in time. Made for container health
checks: no shell or other tool is needed.`,
	}
	cmd.Flags().StringVar(&addr, "address", server.DefaultConfig().Listen, "The server, host:port")
	cmd.Flags().StringVar(&service, "service", "", "One service, such as wideberth.v1.RouteService; empty means the server as a whole")
	cmd.Flags().DurationVar(&timeout, "timeout", 3*time.Second, "How long to wait for the answer, above 0s")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		if timeout <= 0 {
			return &usageError{fmt.Errorf("--timeout: %v, wanted above 0s", timeout)}
		}
		ctx, cancel := context.WithTimeout(cmd.Context(), timeout)
		defer cancel()
		return checkHealth(ctx, addr, service, cmd.OutOrStdout())
	}
	return cmd
}

func checkHealth(ctx context.Context, addr, service string, out io.Writer) (err error) {
	conn, err := grpc.NewClient(addr, grpc.WithTransportCredentials(insecure.NewCredentials()))
	if err != nil {
		return &usageError{fmt.Errorf("--address: %w", err)}
	}
	defer func() { err = errors.Join(err, conn.Close()) }()
	got, err := healthpb.NewHealthClient(conn).Check(ctx, &healthpb.HealthCheckRequest{Service: service}, grpc.WaitForReady(true))
	if err != nil {
		return &unreachableError{fmt.Errorf("%s: %s: %s", addr, status.Code(err), status.Convert(err).Message())}
	}
	if got.Status != healthpb.HealthCheckResponse_SERVING {
		return fmt.Errorf("%s: %s", addr, got.Status)
	}
	_, err = fmt.Fprintln(out, got.Status)
	return err
}

// buildInfo says what was built.
type buildInfo struct {
	Version  string `json:"version"`
	Revision string `json:"revision,omitempty"`
	Modified bool   `json:"modified,omitempty"`
	Time     string `json:"time,omitempty"`
	Go       string `json:"go"`
	Platform string `json:"platform"`
	Contract string `json:"contract"`
}

func readBuildInfo() buildInfo {
	b := buildInfo{Version: version, Go: runtime.Version(), Platform: runtime.GOOS + "/" + runtime.GOARCH, Contract: "wideberth.v1"}
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return b
	}
	if b.Version == "" {
		b.Version = info.Main.Version
	}
	for _, s := range info.Settings {
		switch s.Key {
		case "vcs.revision":
			b.Revision = s.Value
		case "vcs.time":
			b.Time = s.Value
		case "vcs.modified":
			b.Modified = s.Value == "true"
		}
	}
	return b
}

func newVersion() *cobra.Command {
	var output string
	cmd := &cobra.Command{Use: "version", Short: "Say what was built"}
	cmd.Flags().StringVar(&output, "output", "text", "text or json")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		b := readBuildInfo()
		switch output {
		case "json":
			e := json.NewEncoder(cmd.OutOrStdout())
			e.SetIndent("", "  ")
			return e.Encode(b)
		case "text":
			_, err := fmt.Fprintf(cmd.OutOrStdout(), "wideberthd %s (%s, %s, contract %s)\n", b.Version, b.Go, b.Platform, b.Contract)
			return err
		}
		return &usageError{fmt.Errorf("--output: %q, wanted text or json", output)}
	}
	return cmd
}
