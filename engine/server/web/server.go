package web

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"sync"
	"time"

	"connectrpc.com/connect/v2"
	"connectrpc.com/connect/v2/connecthttp"
	"connectrpc.com/connect/v2/connectproto"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// headBytes bounds the head of a request; net/http adds 4 KiB.
const headBytes = 16 << 10

// times bound how long a connection may take.
type times struct {
	head  time.Duration // for the head of a request
	body  time.Duration // for its body
	write time.Duration // for a reader to take a part of the answer
	idle  time.Duration // between two requests
}

var usual = times{head: 5 * time.Second, body: 20 * time.Second, write: 30 * time.Second, idle: time.Minute}

// Config is what a Server is made of.
type Config struct {
	// MessageBytes is the size of a request's body, as it comes and unpacked.
	MessageBytes int
	// Connections is the number of connections at once.
	Connections int
	// Origins are those whose pages may call the API from a browser, such as
	// https://map.example, beside pages of this server.
	Origins []string
	// Page answers what is no call; nil is 404.
	Page http.Handler
	// Unary and Stream run around every call, as in a grpc.Server.
	Unary  grpc.UnaryServerInterceptor
	Stream grpc.StreamServerInterceptor
	// Log takes what the operator should know.
	Log *slog.Logger

	times times // zero: the usual ones
}

// Server answers connections of HTTP/1.1. Register services before Serve.
type Server struct {
	cfg    Config
	mux    *http.ServeMux
	http   *http.Server
	guard  *guard
	errors *connecthttp.ErrorWriter

	handling sync.RWMutex // held for reading while a request is answered
	closed   bool         // guarded by it
}

var _ grpc.ServiceRegistrar = (*Server)(nil)

// New makes a server, or says what is wrong with the configuration.
func New(cfg Config) (*Server, error) {
	if cfg.MessageBytes <= 0 || cfg.Connections <= 0 {
		return nil, fmt.Errorf("web: %d message bytes and %d connections: both must be positive", cfg.MessageBytes, cfg.Connections)
	}
	if cfg.times == (times{}) {
		cfg.times = usual
	}
	g, err := newGuard(cfg.Origins)
	if err != nil {
		return nil, err
	}
	s := &Server{cfg: cfg, mux: http.NewServeMux(), guard: g, errors: connecthttp.NewErrorWriter()}
	page := cfg.Page
	if page == nil {
		page = http.HandlerFunc(nothing)
	}
	s.mux.Handle("/", page)
	// HTTP/2 is gRPC's.
	var protocols http.Protocols
	protocols.SetHTTP1(true)
	s.http = &http.Server{
		Handler: s, Protocols: &protocols,
		ReadHeaderTimeout: cfg.times.head, IdleTimeout: cfg.times.idle, MaxHeaderBytes: headBytes,
		ErrorLog:    slog.NewLogLogger(cfg.Log.Handler(), slog.LevelWarn),
		ConnContext: withEncryption,
	}
	return s, nil
}

func nothing(w http.ResponseWriter, r *http.Request) {
	http.Error(w, "nothing is here; calls are POST /"+leadlinev1.PositionService_ServiceDesc.ServiceName+"/METHOD", http.StatusNotFound)
}

// RegisterService offers the calls of a service that need no stream of the
// client's. The others say that they go over gRPC.
func (s *Server) RegisterService(d *grpc.ServiceDesc, impl any) {
	calls := connect.NewServer()
	calls.SetUnknownHandler(func(_ context.Context, spec connect.Spec, _ connect.ServerStream) error {
		return outward(notOffered("there is no call " + spec.Procedure + " here").Err())
	})
	add := func(method string, kind connect.StreamType, f connect.ServerFunc) {
		calls.Register(connect.Method{Spec: connect.Spec{Procedure: "/" + d.ServiceName + "/" + method, StreamType: kind}, Handler: f})
	}
	for _, m := range d.Methods {
		add(m.MethodName, connect.StreamTypeUnary, s.unary(impl, m))
	}
	for _, m := range d.Streams {
		if m.ClientStreams {
			s.mux.HandleFunc("POST /"+d.ServiceName+"/"+m.StreamName, func(w http.ResponseWriter, r *http.Request) {
				s.refuse(w, r, notOffered(m.StreamName+" is not offered over HTTP/1.1, since the client sends a stream: call it by gRPC, on the same port"))
			})
			continue
		}
		add(m.StreamName, connect.StreamTypeServer, s.stream(impl, m))
	}
	json := connectproto.NewJSONCodec()
	json.MarshalOptions.UseProtoNames, json.MarshalOptions.EmitUnpopulated = true, true
	json.UnmarshalOptions.DiscardUnknown = false // a misspelt field is an error
	connecthttp.Mount(s.mux, calls, connecthttp.WithCodecs(connectproto.NewBinaryCodec(), json), connecthttp.WithReadMaxBytes(s.cfg.MessageBytes))
}

func notOffered(message string) *status.Status {
	return because(status.New(codes.Unimplemented, message), leadlinev1.Reason_REASON_NOT_OFFERED)
}

// refuse answers a request that does not reach a handler.
func (s *Server) refuse(w http.ResponseWriter, r *http.Request, why *status.Status) {
	_ = s.errors.Write(w, r, outward(why.Err()))
}

// ServeHTTP answers one request.
func (s *Server) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	s.handling.RLock()
	defer s.handling.RUnlock()
	if s.closed {
		return
	}
	limited := s.limit(w, r)
	defer limited.extend()
	if err := s.guard.check(r); err != nil {
		s.refuse(limited, r, status.New(codes.PermissionDenied, err.Error()))
		return
	}
	if s.guard.cross(limited, r) {
		return
	}
	if s.unreadable(limited, r) {
		return
	}
	s.mux.ServeHTTP(limited, r)
}

// Serve answers on a listener, which it closes, until Shutdown or Close; then
// it returns nil.
func (s *Server) Serve(l net.Listener) error {
	if err := s.http.Serve(&bounded{Listener: l, free: make(chan struct{}, s.cfg.Connections), log: s.cfg.Log}); !errors.Is(err, http.ErrServerClosed) {
		return err
	}
	return nil
}

// Shutdown takes no more connections and waits until all requests are answered,
// or until ctx is done.
func (s *Server) Shutdown(ctx context.Context) error { return s.http.Shutdown(ctx) }

// Close breaks off the connections that are left and waits for their handlers.
func (s *Server) Close() {
	_ = s.http.Close()
	s.handling.Lock()
	s.closed = true
	s.handling.Unlock()
}
