package server

import (
	"context"
	"errors"
	"log/slog"
	"net"
	"sync"
	"sync/atomic"
	"time"

	"golang.org/x/time/rate"
	"google.golang.org/grpc"
	"google.golang.org/grpc/health"
	healthv1 "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/keepalive"
	"google.golang.org/grpc/reflection"

	"leadline/engine/journal"
	"leadline/engine/server/operate"
	"leadline/engine/server/web"
	"leadline/engine/session"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Server answers vehicles. Use New; its methods may be called from any
// goroutine.
type Server struct {
	leadlinev1.UnimplementedPositionServiceServer

	cfg         Config
	grpc        *grpc.Server
	web         *web.Server
	health      *health.Server
	openings    chan struct{} // holds a token a session being made
	predictions chan struct{} // and one a belief being carried on
	searching   chan struct{} // and one a search of a whole map
	// searchesWaiting counts those for which there is no token.
	searchesWaiting atomic.Int64
	load            load
	pace            *rate.Limiter // of all vehicles' measurements
	serving         atomic.Bool   // it has begun to listen
	streams         atomic.Int64
	roadFollowers   atomic.Int64
	drawing         chan struct{} // and one a map being drawn
	forecasting     chan struct{} // and one a forecast being made
	readingResults  chan struct{} // and one a result being read
	hub             *hub
	alarms          *alarmBook
	roads           *roadBook
	atlas           *atlas
	journal         *journal.Journal // nil: nothing is durable
	shared          *shared          // nil: with no other server
	// uploads is nil where none are taken; uploading holds a token each.
	uploads   *Uploads
	uploading chan struct{}
	desks     session.Desks // of all sessions

	draining chan struct{} // closed when streams should end
	drain    sync.Once

	mu     sync.Mutex
	closed bool // no owner may be added
	owners map[string]*owner
	kept   map[string]*kept // drives of the journal that cannot go on
	past   []*endedDrive    // that made room for others, in order
	parts  map[string]*partsUpload
	ended  sync.WaitGroup // counts owners

	// runs starts an owner's goroutine, awaits waits until it has ended; a rehearsal
	// has none.
	runs   func(*owner)
	awaits func(context.Context, *owner)
}

// New makes a server, or an error that lists what is wrong with the
// configuration.
func New(cfg Config) (*Server, error) {
	if err := cfg.Validate(); err != nil {
		return nil, err
	}
	cfg.Limits = cfg.Limits.withDefaults()
	if cfg.NewSession == nil {
		cfg.NewSession = func(c session.Config) (Session, error) { return session.New(c) }
		cfg.RestoreSession = func(c session.Config, b []byte) (Session, error) { return session.Restore(c, b) }
	}
	if cfg.Now == nil {
		cfg.Now = time.Now
	}
	if cfg.Metrics == nil {
		cfg.Metrics = operate.NewMetrics(cfg.Version)
	}
	if cfg.Log == nil {
		cfg.Log = slog.New(slog.DiscardHandler)
	}
	s := newServer(cfg)
	options := []grpc.ServerOption{
		grpc.Creds(web.Credentials()),
		grpc.ForceServerCodecV2(newFeedCodec()), grpc.MaxRecvMsgSize(cfg.Limits.MessageBytes),
		grpc.MaxHeaderListSize(16 << 10),
		// Of one connection: beyond, its calls wait unanswered, so that all
		// the streams there may be, and some calls, must go through one.
		grpc.MaxConcurrentStreams(uint32(cfg.Limits.Streams + 1000)),
		grpc.WaitForHandlers(true),
		grpc.ConnectionTimeout(10 * time.Second), // for HTTP/2's handshake
		grpc.UnaryInterceptor(s.meteredUnary), grpc.StreamInterceptor(s.meteredStream),
		grpc.UnknownServiceHandler(s.unknown),
		// A half-open connection is found within 40 s; clients may look as
		// often as every 10 s, also between streams.
		grpc.KeepaliveParams(keepalive.ServerParameters{Time: 30 * time.Second, Timeout: 10 * time.Second}),
		grpc.KeepaliveEnforcementPolicy(keepalive.EnforcementPolicy{MinTime: 10 * time.Second, PermitWithoutStream: true}),
	}
	if cfg.Traces != nil {
		options = append(options, grpc.StatsHandler(cfg.Traces))
	}
	s.grpc = grpc.NewServer(options...)
	leadlinev1.RegisterPositionServiceServer(s.grpc, s)
	healthv1.RegisterHealthServer(s.grpc, s.health)
	reflection.Register(s.grpc)
	var err error
	s.web, err = web.New(web.Config{
		MessageBytes: cfg.Limits.MessageBytes, Connections: cfg.Limits.HTTPConnections,
		Origins: cfg.Origins, Page: cfg.Page, Log: cfg.Log,
		Unary: s.meteredUnary, Stream: s.meteredStream,
	})
	if err != nil {
		return nil, err
	}
	leadlinev1.RegisterPositionServiceServer(s.web, s)
	healthv1.RegisterHealthServer(s.web, s.health)
	if cfg.Uploads != nil {
		if err := s.keepMaps(); err != nil {
			return nil, err
		}
	}
	if cfg.Share != nil {
		s.shared = &shared{peers: peers{dial: cfg.Share.Dial, of: map[string]*grpc.ClientConn{}}, maps: sharedMaps{open: cfg.Share.OpenMap}}
	}
	if cfg.Journal != nil {
		if err := s.openJournal(); err != nil {
			return nil, err
		}
		s.meterJournal()
	}
	if s.shared != nil {
		s.openShared()
	}
	_ = s.tellHealth()
	cfg.Metrics.Watch(s.fleet)
	return s, nil
}

// newServer is a server that answers nobody and has no journal.
func newServer(cfg Config) *Server {
	s := &Server{
		cfg:         cfg,
		health:      health.NewServer(),
		openings:    make(chan struct{}, cfg.Limits.Openings),
		predictions: make(chan struct{}, cfg.Limits.Predictions),
		searching:   make(chan struct{}, searchesAtOnce()),
		drawing:     make(chan struct{}, drawnAtOnce),
		forecasting: make(chan struct{}, forecastsAtOnce),
		draining:    make(chan struct{}),

		readingResults: make(chan struct{}, resultsAtOnce),
		owners:         map[string]*owner{},
		kept:           map[string]*kept{},
		parts:          map[string]*partsUpload{},
		pace:           newPace(cfg.Limits.RateInAll, cfg.Limits),
		alarms:         newAlarmBook(cfg.Now),
		roads:          newRoadBook(),
		atlas:          newAtlas(cfg.Maps),
	}
	s.load.limit, s.load.over = float64(cfg.Limits.Load), cfg.Limits.LoadOver
	s.hub = newHub(cfg.Limits, cfg.Now, s.load.thins)
	s.runs = func(o *owner) { go o.run() }
	s.awaits = func(ctx context.Context, o *owner) {
		select {
		case <-o.dead:
		case <-ctx.Done():
		}
	}
	return s
}

// Serve answers on a listener, which it closes, until Shutdown; then it
// returns nil. HTTP/2 is taken for gRPC, all else for HTTP/1.1.
func (s *Server) Serve(l net.Listener) error {
	if err := s.join(); err != nil {
		_ = l.Close()
		return err
	}
	s.serving.Store(true)
	_ = s.tellHealth()
	var watching sync.WaitGroup
	watching.Go(s.watchHealth)
	watching.Go(s.watchLoad)
	watching.Go(s.watchAge)
	watching.Go(s.watchDebt)
	watching.Go(s.watchLease)
	defer func() { // with the server's end, also where it fails
		s.drain.Do(func() { close(s.draining) })
		watching.Wait()
	}()
	http2, others := web.Split(l, s.cfg.Encryption)
	answered := make(chan error, 1)
	go func() { answered <- s.web.Serve(others) }()
	err := s.grpc.Serve(http2)
	_ = others.Close() // if gRPC's failed, the other ends, too
	err = errors.Join(err, <-answered)
	select {
	case <-s.draining: // they fell over one another
		return nil
	default:
		return err
	}
}

// Shutdown stops the server in order: it tells health checks, takes no more
// calls, answers what streams have already sent, ends them with UNAVAILABLE,
// and drops the sessions. What is not done when ctx is, is cut off, and
// Shutdown returns ctx's error.
func (s *Server) Shutdown(ctx context.Context) error {
	s.health.Shutdown()
	s.retire(ctx)
	s.drain.Do(func() { close(s.draining) })
	done := make(chan struct{})
	go func() {
		answered := make(chan struct{})
		go func() {
			_ = s.web.Shutdown(ctx) // fails with ctx alone
			close(answered)
		}()
		s.grpc.GracefulStop()
		<-answered
		close(done)
	}()
	select {
	case <-done:
	case <-ctx.Done():
		// The owners first: a handler may wait for one.
		s.stopOwners()
		s.grpc.Stop()
		<-done
	}
	err := ctx.Err()
	if err != nil {
		s.web.Close()
	}
	s.stopOwners()
	s.ended.Wait()
	s.settled()
	if s.journal != nil {
		if closed := s.journal.Close(); closed != nil {
			s.cfg.Log.Error("journal cannot be closed", "error", closed)
		}
	}
	s.part()
	if closed := s.atlas.close(); closed != nil {
		s.cfg.Log.Error("map cannot be closed", "error", closed)
	}
	return err
}

func (s *Server) stopOwners() {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.closed = true
	for _, o := range s.owners {
		o.stop(errStopping)
	}
	clear(s.owners)
}

// untilDraining is a context that ends when streams should, too.
func (s *Server) untilDraining(ctx context.Context) (context.Context, context.CancelFunc) {
	ctx, cancel := context.WithCancel(ctx)
	go func() {
		select {
		case <-s.draining:
			cancel()
		case <-ctx.Done():
		}
	}()
	return ctx, cancel
}
