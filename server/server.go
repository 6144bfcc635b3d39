// Package server joins the map store and the planner to gRPC.
package server

import (
	"context"
	"errors"
	"net"

	"github.com/rs/zerolog"
)

var errTodo = errors.New("server: not built yet")

// Server is a running service: its store, its planners, its gRPC listener.
type Server struct{}

// New opens the store named by cfg and makes every head ready to plan on.
func New(ctx context.Context, cfg Config, log zerolog.Logger) (*Server, error) { return nil, errTodo }

// Serve answers calls on lis until ctx ends, then drains within cfg.DrainTimeout
// and closes the store. It returns nil after a clean drain.
func (s *Server) Serve(ctx context.Context, lis net.Listener) error { return errTodo }

// Config is everything that can be set. DefaultConfig gives the defaults.
type Config struct {
	// Listen is the address for gRPC. Default "127.0.0.1:7443".
	Listen string
	// Data is the journal's file. Empty keeps everything in a temporary file that
	// goes with the process.
	Data string
}

// DefaultConfig is the configuration of a server that was told nothing.
func DefaultConfig() Config { return Config{Listen: "127.0.0.1:7443"} }
