// Package demo plays one night on a fictional cut-flower auction hall, from an
// empty server to a route planned anew: the service's own code on a loopback
// port, an operator and a robot's controller talking to it through the Go client.
// Nothing in it is staged: the figures it prints are the service's answers, and
// only the robot's driving is simulated, without waiting.
//
// What it prints are planning figures, checked against a version of the map. They
// are no safety function; people and loose loads are not on the map.
package demo

import (
	"context"
	"errors"
	"fmt"
	"io"
	"net"
	"os"
	"path/filepath"

	"github.com/rs/zerolog"
	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	"example.com/wideberth/server"
)

// Options say where the demonstration leaves its pictures and whether it stays.
type Options struct {
	// Out is the folder for the pictures; it is made if it is not there. Empty
	// makes a temporary folder, which is left behind for looking at.
	Out string
	// Stay keeps the service up after the story, until the context ends.
	Stay bool
}

// stayAddress is where a staying demonstration listens if nobody else does: the
// daemon's own default, so that the tools find it without being told.
const stayAddress = "127.0.0.1:7443"

// Run plays the demonstration and tells it on w. It returns nil when everything
// in the story happened, and when ctx ends a Stay.
func Run(ctx context.Context, o Options, w io.Writer) error {
	lis, err := listen(ctx, o.Stay)
	if err != nil {
		return err
	}
	_, err = play(ctx, o, lis, w)
	return err
}

// NewCommand is the command "demo", for the daemon's command tree.
func NewCommand() *cobra.Command {
	var o Options
	cmd := &cobra.Command{
		Use:   "demo",
		Short: "Play one night on a fictional auction hall and draw it",
		Long: `Play one night on a fictional cut-flower auction hall: start a server on a loopback
port, push the hall's layout, plan a route, change the floor at 02:00, plan anew,
be guided through the tight places, and be refused at a door that is too narrow.
Everything is kept in temporary files. Pictures of it are written as SVG.

The floor and the night are made up. The figures are the service's: planning
figures, checked against versions of that floor, and no safety function.`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error { return Run(cmd.Context(), o, cmd.OutOrStdout()) },
	}
	cmd.Flags().StringVar(&o.Out, "out", "", "folder for the pictures (default: a temporary one)")
	cmd.Flags().BoolVar(&o.Stay, "stay", false, "keep serving afterwards, until interrupted")
	return cmd
}

// play starts the service on lis, tells the story and says what happened. It closes
// lis.
func play(ctx context.Context, o Options, lis net.Listener, w io.Writer) (happened facts, err error) {
	out, err := folder(o.Out)
	if err != nil {
		return facts{}, errors.Join(err, lis.Close())
	}
	cfg := server.DefaultConfig()
	cfg.Listen = lis.Addr().String()
	srv, err := server.New(ctx, cfg, zerolog.Nop())
	if err != nil {
		return facts{}, errors.Join(err, lis.Close())
	}
	// The service outlives ctx by as long as it takes to drain.
	serving, stop := context.WithCancel(context.WithoutCancel(ctx))
	served := make(chan error, 1)
	go func() { served <- srv.Serve(serving, lis) }()
	defer func() {
		stop()
		err = errors.Join(err, <-served)
	}()

	c, err := client.Dial(cfg.Listen)
	if err != nil {
		return facts{}, err
	}
	defer func() { err = errors.Join(err, c.Close()) }()

	s := &story{client: c, say: teller{w: w}, out: out, address: cfg.Listen}
	if err := s.tell(ctx); err != nil {
		return s.facts, errors.Join(err, s.say.err)
	}
	if o.Stay {
		s.stay()
		<-ctx.Done()
	}
	return s.facts, s.say.err
}

func folder(path string) (string, error) {
	if path == "" {
		return os.MkdirTemp("", "wideberth-demo-")
	}
	if err := os.MkdirAll(path, 0o755); err != nil {
		return "", fmt.Errorf("out: %w", err)
	}
	return filepath.Abs(path)
}

func listen(ctx context.Context, stay bool) (net.Listener, error) {
	var lc net.ListenConfig
	if stay {
		if lis, err := lc.Listen(ctx, "tcp", stayAddress); err == nil {
			return lis, nil
		}
	}
	return lc.Listen(ctx, "tcp", "127.0.0.1:0")
}

// teller prints the story; the first failure to print is kept.
type teller struct {
	w   io.Writer
	err error
}

func (t *teller) line(format string, args ...any) {
	if t.err == nil {
		_, t.err = fmt.Fprintf(t.w, format+"\n", args...)
	}
}

// chapter begins a part of the story.
func (t *teller) chapter(format string, args ...any) { t.line("\n"+format, args...) }
