package server

import (
	"context"
	"errors"
	"strings"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials"
	healthv1 "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/peer"

	"leadline/engine/server/identity"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Access is how a server knows its callers.
type Access struct {
	// Tokens checks bearer tokens; nil takes none.
	Tokens *identity.Tokens
	// Certificates takes who calls from client certificates, whose chain
	// Config.Encryption has verified.
	Certificates bool
}

// healthPrefix begins the calls of the health service, which are everybody's:
// whoever decides where to send vehicles has no identity of its own.
var healthPrefix = "/" + healthv1.Health_ServiceDesc.ServiceName + "/"

// callerKey is for a caller in a context.
type callerKey struct{}

// callerOf returns who makes a call, nil where the server asks nobody.
func callerOf(ctx context.Context) *identity.Caller {
	c, _ := ctx.Value(callerKey{}).(*identity.Caller)
	return c
}

// by is who says something: whom the server knows, or else who it is said to be.
func by(ctx context.Context, said string) string {
	if c := callerOf(ctx); c != nil {
		return c.Name
	}
	return said
}

// identify finds out who makes a call. The context that it returns ends when
// what the caller has shown does.
func (s *Server) identify(ctx context.Context) (context.Context, context.CancelFunc, error) {
	c, err := s.caller(ctx)
	switch {
	case errors.Is(err, identity.ErrExpired):
		return nil, nil, refuse(leadlinev1.Reason_REASON_IDENTITY_EXPIRED, nil, "%v", err)
	case errors.Is(err, identity.ErrUnchecked):
		return nil, nil, refuse(leadlinev1.Reason_REASON_IDENTITY_UNCHECKED, nil, "%v", err)
	case err != nil:
		return nil, nil, refuse(leadlinev1.Reason_REASON_BAD_IDENTITY, nil, "%v", err)
	case c == nil:
		return nil, nil, refuse(leadlinev1.Reason_REASON_NO_IDENTITY, nil, "who calls is not known: %s", s.cfg.Access.wants())
	}
	ctx, cancel := context.WithDeadlineCause(context.WithValue(ctx, callerKey{}, c), c.Until, identity.ErrExpired)
	return ctx, cancel, nil
}

func (a *Access) wants() string {
	switch {
	case a.Tokens == nil:
		return "give a client certificate"
	case !a.Certificates:
		return "give a token, as Authorization: Bearer"
	}
	return "give a token, as Authorization: Bearer, or a client certificate"
}

// caller is who a call's token names, or else its certificate. A token that
// does not count is not made good by a certificate.
func (s *Server) caller(ctx context.Context) (*identity.Caller, error) {
	if given := metadata.ValueFromIncomingContext(ctx, "authorization"); s.cfg.Access.Tokens != nil && len(given) > 0 {
		kind, token, _ := strings.Cut(given[0], " ")
		if len(given) > 1 || !strings.EqualFold(kind, "Bearer") {
			return nil, errors.New("the header Authorization must be there once and hold Bearer and a token")
		}
		return s.cfg.Access.Tokens.Check(ctx, strings.TrimSpace(token))
	}
	if p, ok := peer.FromContext(ctx); ok && s.cfg.Access.Certificates {
		if t, ok := p.AuthInfo.(credentials.TLSInfo); ok && len(t.State.VerifiedChains) > 0 {
			return identity.OfCertificate(t.State.PeerCertificates[0], time.Now())
		}
	}
	return nil, nil
}

// guarded reports whether a call needs to know who makes it.
func (s *Server) guarded(method string) bool {
	return s.cfg.Access != nil && !strings.HasPrefix(method, healthPrefix)
}

// expired says that a call ended because what its caller had shown did.
func expired(ctx context.Context, err error) error {
	if err != nil && errors.Is(context.Cause(ctx), identity.ErrExpired) {
		return refuse(leadlinev1.Reason_REASON_IDENTITY_EXPIRED, nil, "what the caller has shown: %v while the call went on: call again with a new one", identity.ErrExpired)
	}
	return err
}

// guardUnary answers a call if its caller may make it.
func (s *Server) guardUnary(ctx context.Context, req any, method string, handle grpc.UnaryHandler) (any, error) {
	if !s.guarded(method) {
		return handle(ctx, req)
	}
	ctx, cancel, err := s.identify(ctx)
	if err != nil {
		return nil, err
	}
	defer cancel()
	if err := allows(method, callerOf(ctx), req); err != nil {
		return nil, err
	}
	resp, err := handle(ctx, req)
	return resp, expired(ctx, err)
}

// guardStream answers a stream if its caller may open it, and takes from it
// what its caller may send.
func (s *Server) guardStream(srv any, stream grpc.ServerStream, method string, handle grpc.StreamHandler) error {
	if !s.guarded(method) {
		return handle(srv, stream)
	}
	ctx, cancel, err := s.identify(stream.Context())
	if err != nil {
		return err
	}
	defer cancel()
	c := callerOf(ctx)
	if r, known := rules[method]; strings.HasPrefix(method, "/"+leadlinev1.PositionService_ServiceDesc.ServiceName+"/") && (!known || r.scope(c) == none) {
		return allows(method, c, nil)
	}
	return expired(ctx, handle(srv, &guardedStream{ServerStream: stream, ctx: ctx, method: method}))
}

// guardedStream is a stream of somebody who is known.
type guardedStream struct {
	grpc.ServerStream
	ctx    context.Context
	method string
}

func (g *guardedStream) Context() context.Context { return g.ctx }

func (g *guardedStream) RecvMsg(m any) error {
	if err := g.ServerStream.RecvMsg(m); err != nil {
		return err
	}
	if _, ours := rules[g.method]; !ours {
		return nil // of reflection, which tells no more than the API's files
	}
	if a, ok := m.(*arrival); ok {
		m = a.message
	}
	return allows(g.method, callerOf(g.ctx), m)
}
