package server

import (
	"context"
	"errors"
	"fmt"
	"net"
	"time"

	"github.com/rs/zerolog"
	"google.golang.org/grpc"
	_ "google.golang.org/grpc/encoding/gzip" // clients may ask for compressed messages
	"google.golang.org/grpc/health"
	healthpb "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/keepalive"
	"google.golang.org/grpc/reflection"

	"example.com/wideberth/mapstore"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// What every server sets, whatever its configuration.
const (
	connectTimeout   = 5 * time.Second  // a peer that stays silent is closed
	keepaliveEvery   = 20 * time.Second // a quiet connection is probed
	keepaliveTimeout = 5 * time.Second  // and closed when the probe stays unanswered
	keepaliveLeast   = 10 * time.Second // clients that probe more often are sent away
	maxHeaderBytes   = 16 << 10
	ageGrace         = 30 * time.Second // calls may go on after MaxConnectionAge
)

// Server is a running service: its store, its planners, its gRPC server. Serve it
// once, or Close it.
type Server struct {
	cfg    Config
	log    zerolog.Logger
	store  *mapstore.Store
	worlds *worlds
	holds  *holds
	kept   *sessions
	lanes  *lanes
	grpc   *grpc.Server
	health *health.Server

	draining context.Context // ends streams when the server drains
	drain    context.CancelFunc
	closers  []func() error // last opened, first closed
}

// New opens the store named by cfg and makes every head ready to plan on. It
// returns a *ConfigError when cfg is not valid. Serve or Close lets go of what it
// opened.
func New(ctx context.Context, cfg Config, log zerolog.Logger) (*Server, error) {
	if err := cfg.Validate(); err != nil {
		return nil, err
	}
	s := &Server{
		cfg: cfg, log: log,
		holds: newHolds(time.Now),
		kept:  newSessions(time.Now),
		lanes: newLanes(cfg.planners(), cfg.PlanQueue, cfg.PlanWait),
	}
	s.draining, s.drain = context.WithCancel(context.Background())
	if err := s.open(ctx); err != nil {
		return nil, errors.Join(err, s.Close())
	}
	s.grpc = grpc.NewServer(s.options()...)
	pb.RegisterFloorServiceServer(s.grpc, floorService{s: s})
	pb.RegisterRouteServiceServer(s.grpc, routeService{s: s})
	pb.RegisterGuideServiceServer(s.grpc, guideService{s: s})
	pb.RegisterRoadmapServiceServer(s.grpc, roadmapService{s: s})
	s.health = health.NewServer()
	s.serving(healthpb.HealthCheckResponse_NOT_SERVING)
	healthpb.RegisterHealthServer(s.grpc, s.health)
	if cfg.Reflection {
		reflection.Register(s.grpc)
	}
	return s, nil
}

// options are the gRPC server's; what is marked experimental there is used nowhere
// else.
func (s *Server) options() []grpc.ServerOption {
	params := keepalive.ServerParameters{Time: keepaliveEvery, Timeout: keepaliveTimeout}
	if s.cfg.MaxConnectionAge > 0 {
		params.MaxConnectionAge, params.MaxConnectionAgeGrace = s.cfg.MaxConnectionAge, ageGrace
	}
	return []grpc.ServerOption{
		grpc.UnaryInterceptor(s.unary),
		grpc.StreamInterceptor(s.stream),
		grpc.MaxRecvMsgSize(s.cfg.MaxMessageBytes),
		grpc.MaxSendMsgSize(s.cfg.MaxMessageBytes),
		grpc.MaxConcurrentStreams(uint32(s.cfg.MaxStreams)),
		grpc.MaxHeaderListSize(maxHeaderBytes),
		grpc.ConnectionTimeout(connectTimeout),
		grpc.KeepaliveParams(params),
		grpc.KeepaliveEnforcementPolicy(keepalive.EnforcementPolicy{MinTime: keepaliveLeast, PermitWithoutStream: true}),
		grpc.WaitForHandlers(true),
	}
}

// serving sets the health of every service and of the server as a whole.
func (s *Server) serving(state healthpb.HealthCheckResponse_ServingStatus) {
	s.health.SetServingStatus("", state)
	for name := range s.grpc.GetServiceInfo() {
		s.health.SetServingStatus(name, state)
	}
}

// Serve answers calls on lis until ctx ends, then drains within cfg.DrainTimeout
// and closes the store. It returns nil after a clean drain. A drain says NOT_SERVING
// first, then ends the streams with UNAVAILABLE, then waits for the unary calls
// under way, and at last cuts what is left.
func (s *Server) Serve(ctx context.Context, lis net.Listener) error {
	if !loopback(lis.Addr().String()) && lis.Addr().Network() == "tcp" {
		s.log.Warn().Str("address", lis.Addr().String()).
			Msg("serving without TLS on an address that other machines reach: anyone there can read and change every floor; put it behind a proxy that authenticates, or listen on loopback")
	}
	ended := make(chan error, 1)
	go func() { ended <- s.grpc.Serve(lis) }()
	s.serving(healthpb.HealthCheckResponse_SERVING)
	s.log.Info().Str("address", lis.Addr().String()).Msg("serving")
	var err error
	select {
	case err = <-ended: // the listener failed
	case <-ctx.Done():
		s.log.Info().Float64("within_s", s.cfg.DrainTimeout.Seconds()).Msg("draining")
	}
	cut := s.stop()
	if err == nil {
		// Told to stop before it began, gRPC calls that an error.
		if err = <-ended; errors.Is(err, grpc.ErrServerStopped) {
			err = nil
		}
	}
	if cut {
		err = errors.Join(err, fmt.Errorf("calls under way were cut after %v", s.cfg.DrainTimeout))
	}
	return errors.Join(err, s.Close())
}

// stop drains the gRPC server and says whether calls had to be cut.
func (s *Server) stop() (cut bool) {
	s.health.Shutdown()
	s.drain()
	done := make(chan struct{})
	go func() {
		defer close(done)
		s.grpc.GracefulStop()
	}()
	timer := time.NewTimer(s.cfg.DrainTimeout)
	defer timer.Stop()
	select {
	case <-done:
		return false
	case <-timer.C:
		s.grpc.Stop()
		<-done
		return true
	}
}

// Close lets go of everything New opened. Serve does it by itself; Close is for a
// server that is never served. Closing twice does nothing more.
func (s *Server) Close() error {
	s.drain()
	if s.grpc != nil {
		s.grpc.Stop()
	}
	var errs []error
	for len(s.closers) > 0 {
		last := len(s.closers) - 1
		errs = append(errs, s.closers[last]())
		s.closers = s.closers[:last]
	}
	return errors.Join(errs...)
}
