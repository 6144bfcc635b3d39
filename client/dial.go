package client

import (
	"errors"
	"fmt"
	"net"
	"strings"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/backoff"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/keepalive"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

const (
	// keepaliveTime is how long a connection may be quiet before it is pinged; the
	// server allows one ping every 10 s.
	keepaliveTime = 20 * time.Second
	// keepaliveTimeout is how long a ping may go unanswered. It also becomes TCP's
	// own bound on unacknowledged data, so that a dropped Wi-Fi shows in seconds.
	keepaliveTimeout = 5 * time.Second
	// maxConnectDelay bounds the wait between attempts to connect.
	maxConnectDelay = 5 * time.Second
	// minConnectTimeout is the least time an attempt to connect is given.
	minConnectTimeout = 5 * time.Second
	// MaxMessageBytes is the largest message a Client receives or sends. The
	// service's streams stay below 1 MiB a message; a route of the largest floor
	// stays well below this.
	MaxMessageBytes = 16 << 20
)

// ServiceConfig is what a gRPC channel to a wideberth service may be given in any
// language: what failed with UNAVAILABLE is sent again, for calls that are
// read-only or, being sent with a request_id, carried out once however often
// they arrive. Watch and Guide streams are left out: they must be taken up again
// with what is known by then. This client keeps to the same list, but sends
// again itself, for as long as the context lasts and as the service asks.
const ServiceConfig = `{
  "methodConfig": [{
    "name": [
      {"service": "wideberth.v1.FloorService", "method": "CreateFloor"},
      {"service": "wideberth.v1.FloorService", "method": "GetFloor"},
      {"service": "wideberth.v1.FloorService", "method": "ListFloors"},
      {"service": "wideberth.v1.FloorService", "method": "PushPatch"},
      {"service": "wideberth.v1.FloorService", "method": "ListVersions"},
      {"service": "wideberth.v1.FloorService", "method": "GetVersion"},
      {"service": "wideberth.v1.FloorService", "method": "CompareVersions"},
      {"service": "wideberth.v1.FloorService", "method": "RestoreVersion"},
      {"service": "wideberth.v1.FloorService", "method": "ReadFloor"},
      {"service": "wideberth.v1.RouteService", "method": "Plan"},
      {"service": "wideberth.v1.RouteService", "method": "Replan"},
      {"service": "wideberth.v1.RouteService", "method": "PlanMany"},
      {"service": "wideberth.v1.RoadmapService", "method": "ShowRoadmap"},
      {"service": "wideberth.v1.RoadmapService", "method": "CompareRoadmaps"},
      {"service": "wideberth.v1.RoadmapService", "method": "ShowGrownSolids"},
      {"service": "wideberth.v1.GuideService", "method": "GuideOnce"}
    ],
    "retryPolicy": {
      "maxAttempts": 5,
      "initialBackoff": "0.1s",
      "maxBackoff": "5s",
      "backoffMultiplier": 2,
      "retryableStatusCodes": ["UNAVAILABLE"]
    }
  }]
}`

// Client speaks to one wideberth service. It is safe for concurrent use.
type Client struct {
	conn     *grpc.ClientConn
	cfg      config
	floors   wideberthv1.FloorServiceClient
	routes   wideberthv1.RouteServiceClient
	guides   wideberthv1.GuideServiceClient
	roadmaps wideberthv1.RoadmapServiceClient
}

// Dial makes a Client for the service at addr, "host:port" or "unix:/path". It
// does not wait for a connection: the first call does. Close the Client when done.
func Dial(addr string, opts ...Option) (*Client, error) {
	cfg := defaultConfig()
	for _, o := range opts {
		o(&cfg)
	}
	if err := cfg.validate(); err != nil {
		return nil, err
	}
	loopback, err := isLoopback(addr)
	if err != nil {
		return nil, err
	}
	creds := cfg.creds
	if creds == nil {
		if !loopback && !cfg.plaintext {
			return nil, fmt.Errorf("client: address %q is not loopback: give transport credentials, or allow plaintext", addr)
		}
		creds = insecure.NewCredentials()
	}
	c := &Client{cfg: cfg}
	dial := append([]grpc.DialOption{
		grpc.WithTransportCredentials(creds),
		grpc.WithKeepaliveParams(keepalive.ClientParameters{
			Time: keepaliveTime, Timeout: keepaliveTimeout, PermitWithoutStream: true,
		}),
		grpc.WithConnectParams(grpc.ConnectParams{
			Backoff: backoff.Config{
				BaseDelay: cfg.backoff.first, Multiplier: 1.6, Jitter: 0.2, MaxDelay: min(cfg.backoff.most, maxConnectDelay),
			},
			MinConnectTimeout: minConnectTimeout,
		}),
		grpc.WithDefaultServiceConfig(ServiceConfig),
		grpc.WithDisableRetry(), // the channel's: see again
		grpc.WithDefaultCallOptions(
			grpc.MaxCallRecvMsgSize(MaxMessageBytes),
			grpc.MaxCallSendMsgSize(MaxMessageBytes),
		),
		grpc.WithUnaryInterceptor(c.unary),
		grpc.WithStreamInterceptor(c.stream),
	}, cfg.extra...)
	if c.conn, err = grpc.NewClient(addr, dial...); err != nil {
		return nil, fmt.Errorf("client: address %q: %w", addr, err)
	}
	c.floors = wideberthv1.NewFloorServiceClient(c.conn)
	c.routes = wideberthv1.NewRouteServiceClient(c.conn)
	c.guides = wideberthv1.NewGuideServiceClient(c.conn)
	c.roadmaps = wideberthv1.NewRoadmapServiceClient(c.conn)
	return c, nil
}

// Close ends the connection and everything in flight on it.
func (c *Client) Close() error { return c.conn.Close() }

// Conn is the connection, for other services of the same server (health,
// reflection). Calls on it get the client's deadlines and are sent again too.
func (c *Client) Conn() grpc.ClientConnInterface { return c.conn }

// Reconnect tries to connect now if it is waiting to: for a controller that has
// just been told that its network is up again.
func (c *Client) Reconnect() {
	c.conn.ResetConnectBackoff()
	c.conn.Connect()
}

// isLoopback says whether addr can only be this machine.
func isLoopback(addr string) (bool, error) {
	if addr == "" {
		return false, errors.New("client: address is empty, want host:port")
	}
	if strings.HasPrefix(addr, "unix:") {
		return true, nil
	}
	host, _, err := net.SplitHostPort(addr)
	if err != nil {
		return false, fmt.Errorf("client: address %q: want host:port: %w", addr, err)
	}
	if host == "localhost" {
		return true, nil
	}
	ip := net.ParseIP(host)
	return ip != nil && ip.IsLoopback(), nil
}
