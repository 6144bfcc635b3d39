package trial

import (
	"context"
	"errors"
	"net"

	"github.com/rs/zerolog"

	"example.com/wideberth/server"
)

// Embedded starts a server inside this process, on a free loopback port and with
// a store that goes with it. It gives its address, and stop, which ends it and
// gives what went wrong while it ran.
func Embedded(ctx context.Context) (addr string, stop func() error, err error) {
	ctx, cancel := context.WithCancel(ctx)
	cfg := server.DefaultConfig()
	cfg.Listen = "127.0.0.1:0"
	s, err := server.New(ctx, cfg, zerolog.Nop())
	if err != nil {
		cancel()
		return "", nil, err
	}
	lis, err := net.Listen("tcp", cfg.Listen)
	if err != nil {
		cancel()
		return "", nil, errors.Join(err, s.Close())
	}
	served := make(chan error, 1)
	go func() { served <- s.Serve(ctx, lis) }()
	return lis.Addr().String(), func() error { cancel(); return <-served }, nil
}
